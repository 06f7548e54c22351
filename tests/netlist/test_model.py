"""The netlist model: what is stored, what is refused."""

from __future__ import annotations

from typing import Any

import networkx as nx
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from netpart.netlist import (
    MAX_PINS,
    CellFlag,
    Direction,
    DuplicateNameError,
    EmptyNetlistError,
    IndexOverflowError,
    Names,
    Netlist,
    NetlistError,
    NetpartError,
    ValueRangeError,
)
from tests.strategies import make_netlist, netlists


@given(
    st.integers(1, 8).flatmap(
        lambda n: st.tuples(st.just(n), st.lists(st.lists(st.tuples(st.integers(0, n - 1), st.integers(0, 3)), max_size=8)))
    )
)
def test_pins_are_united_as_the_definition_says(drawn: tuple[int, list[list[tuple[int, int]]]]) -> None:
    num_cells, nets = drawn
    netlist = Netlist.from_arrays(
        np.cumsum([0, *map(len, nets)]),
        [cell for net in nets for cell, _ in net],
        num_cells=num_cells,
        pin_directions=[direction for net in nets for _, direction in net],
    )
    assert netlist.net_pins.tolist() == [len(net) for net in nets]
    assert netlist.num_pins == sum(len({cell for cell, _ in net}) for net in nets)
    for e, net in enumerate(nets):
        assert netlist.cells_of(e).tolist() == list(dict.fromkeys(cell for cell, _ in net)), "in the order of the file"
        for position, cell in enumerate(netlist.cells_of(e).tolist()):
            united = 0
            for other, direction in net:
                united |= direction if other == cell else 0
            assert netlist.pin_directions[netlist.net_offsets[e] + position] == united
    for v in range(num_cells):
        assert netlist.nets_of(v).tolist() == [e for e, net in enumerate(nets) if v in {cell for cell, _ in net}]


@given(netlists())
def test_both_lists_of_pins_are_the_incidence_of_one_bipartite_graph(netlist: Netlist) -> None:
    graph = nx.Graph()
    graph.add_nodes_from([("cell", v) for v in range(netlist.num_cells)], bipartite=0)
    graph.add_edges_from((("net", e), ("cell", v)) for e in range(netlist.num_nets) for v in netlist.cells_of(e).tolist())
    assert graph.number_of_edges() == netlist.num_pins
    for v in range(netlist.num_cells):
        assert sorted(e for _, e in graph[("cell", v)]) == netlist.nets_of(v).tolist()


def test_defaults() -> None:
    netlist = make_netlist([[0, 1], [2, 1]], 3)
    assert (netlist.num_cells, netlist.num_nets, netlist.num_pins) == (3, 2, 4)
    assert list(netlist.cell_names) == ["c0", "c1", "c2"]
    assert list(netlist.net_names) == ["n0", "n1"]
    assert netlist.areas.tolist() == [1, 1, 1]
    assert netlist.net_weights.tolist() == [1, 1]
    assert not netlist.has_flag(CellFlag.PORT).any()
    assert netlist.total_area == 3
    assert repr(netlist) == "<Netlist: 3 cells, 2 nets, 4 pins>"


def test_the_total_area_is_correctly_rounded() -> None:
    netlist = make_netlist([], 11, areas=[1e16] + [0.8] * 10)
    assert netlist.total_area == 1e16 + 8, "adding 0.8 ten times to 1e16 would lose every one"


def test_the_netlist_cannot_be_changed_and_leaves_its_arguments_alone() -> None:
    offsets, cells, areas = np.array([0, 2]), np.array([0, 1]), np.array([1.0, 2.0])
    netlist = Netlist.from_arrays(offsets, cells, num_cells=2, areas=areas)
    for array in (netlist.net_offsets, netlist.net_cells, netlist.areas, netlist.net_weights, netlist.cell_flags):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 0
    offsets[1], cells[0], areas[0] = 0, 1, 7
    assert netlist.areas.tolist() == [1, 2]
    assert netlist.cells_of(0).tolist() == [0, 1]


def build(**changes: Any) -> Netlist:
    arguments: dict[str, Any] = {"net_offsets": [0, 2, 4], "net_cells": [0, 1, 1, 2], "num_cells": 3, "name": "x"}
    arguments |= changes
    return Netlist.from_arrays(arguments.pop("net_offsets"), arguments.pop("net_cells"), **arguments)


@pytest.mark.parametrize(
    ("changes", "kind", "message"),
    [
        ({"num_cells": 0, "net_offsets": [0], "net_cells": []}, EmptyNetlistError, "netlist 'x' has no cells"),
        ({"net_offsets": []}, NetlistError, "net_offsets must start at 0"),
        ({"net_offsets": [1, 2, 4]}, NetlistError, "net_offsets must start at 0"),
        ({"net_offsets": [0, 3, 2, 4]}, NetlistError, "never fall"),
        ({"net_offsets": [0, 2, 3]}, NetlistError, "end at the number of pins"),
        ({"net_cells": [0, 1, 1, 3]}, NetlistError, "an index outside 0..2"),
        ({"net_cells": [0, 1, -1, 2]}, NetlistError, "an index outside 0..2"),
        ({"areas": [1, -0.5, 1]}, ValueRangeError, "cell 'c1' has area -0.5"),
        ({"areas": [1, 1, float("nan")]}, ValueRangeError, "cell 'c2' has area nan"),
        ({"areas": [float("inf"), 1, 1]}, ValueRangeError, "cell 'c0' has area inf"),
        ({"areas": [1, 1]}, NetlistError, "areas has 2 entries, expected 3"),
        ({"net_weights": [1, 0]}, ValueRangeError, "net 'n1' has weight 0.0"),
        ({"net_weights": [-1, 1]}, ValueRangeError, "net 'n0' has weight -1.0"),
        ({"net_weights": [1, float("nan")]}, ValueRangeError, "net 'n1' has weight nan"),
        ({"net_weights": [1, float("inf")]}, ValueRangeError, "net 'n1' has weight inf"),
        ({"net_weights": [1]}, NetlistError, "net_weights has 1 entries, expected 2"),
        ({"cell_names": Names.from_strings(["a", "b", "a"])}, DuplicateNameError, "cell 'a' is defined twice"),
        ({"net_names": Names.from_strings(["n", "n"])}, DuplicateNameError, "net 'n' is defined twice"),
        ({"cell_names": Names.from_strings(["a", "b"])}, NetlistError, "cell_names has 2 entries, expected 3"),
        ({"net_names": Names.from_strings(["a"])}, NetlistError, "net_names has 1 entries, expected 2"),
        ({"cell_types": [0, 1, 0]}, NetlistError, "cell_types needs 3 indices within 0..0"),
        ({"cell_modules": [0, -1, 0]}, NetlistError, "cell_modules needs 3 indices within 0..0"),
        ({"cell_flags": [0]}, NetlistError, "cell_flags has 1 entries, expected 3"),
        ({"pin_directions": [0, 0]}, NetlistError, "pin_directions has 2 entries, expected 4"),
        ({"module_parents": [-1, 0]}, NetlistError, "module_parents has 2 entries, expected 1"),
        ({"module_parents": [0]}, NetlistError, "module_parents must be -1 for the top"),
        (
            {"module_names": Names.from_strings(["", "a", "b"]), "module_parents": [-1, 2, 0]},
            NetlistError,
            "name an earlier module",
        ),
        ({"net_offsets": [0, MAX_PINS + 1]}, IndexOverflowError, "2,147,483,648 pins; at most 2,147,483,647"),
        ({"num_cells": MAX_PINS + 1}, IndexOverflowError, "2,147,483,648 cells; at most 2,147,483,647"),
    ],
)
def test_what_is_refused(changes: dict[str, Any], kind: type[NetpartError], message: str) -> None:
    with pytest.raises(kind) as caught:
        build(**changes)
    assert type(caught.value) is kind
    assert message in str(caught.value)
    assert caught.value.exit_code == 2


def test_more_nets_than_can_be_counted(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("netpart.netlist.model.MAX_PINS", 3)
    with pytest.raises(IndexOverflowError, match="4 pins; at most 3"):
        build()
    with pytest.raises(IndexOverflowError, match="4 nets; at most 3"):
        build(net_offsets=[0, 0, 0, 0, 1], net_cells=[0])
    assert build(net_offsets=[0, 2, 3], net_cells=[0, 1, 1]).num_pins == 3


def test_direction_bits_unite() -> None:
    assert Direction.INPUT | Direction.OUTPUT == Direction.INOUT
    assert Direction.UNKNOWN | Direction.OUTPUT == Direction.OUTPUT
