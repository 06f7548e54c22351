"""Netlists written by hand."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given

from netpart.netlist import (
    Builder,
    CellFlag,
    Direction,
    DuplicateNameError,
    EmptyNetlistError,
    Netlist,
    NetlistError,
    UnknownNameError,
    ValueRangeError,
)
from tests.strategies import netlists


def test_a_netlist_by_hand() -> None:
    builder = Builder("pair")
    core = builder.add_module("core")
    deep = builder.add_module("core/deep", "core")
    port = builder.add_cell("in", area=0, flags=CellFlag.PORT)
    first = builder.add_cell("core/f", "FLOP", 2.5, CellFlag.SEQUENTIAL, core)
    builder.add_cell("core/deep/g", "NAND2", 1.0, module=deep)
    builder.add_net("a", [port, "core/f"], weight=3)
    net = builder.add_net("b")
    builder.add_pin(net, first, Direction.OUTPUT)
    builder.add_pin("b", "core/deep/g", Direction.INPUT)
    builder.add_pin("a", "core/deep/g")
    netlist = builder.build()
    assert list(netlist.cell_names) == ["in", "core/f", "core/deep/g"]
    assert [netlist.type_names[i] for i in netlist.cell_types.tolist()] == ["", "FLOP", "NAND2"]
    assert [netlist.cells_of(e).tolist() for e in range(2)] == [[0, 1, 2], [1, 2]]
    assert netlist.net_weights.tolist() == [3, 1]
    assert netlist.pin_directions.tolist() == [0, 0, 0, Direction.OUTPUT, Direction.INPUT]
    assert list(netlist.module_names) == ["", "core", "core/deep"]
    assert netlist.module_parents.tolist() == [-1, 0, 1]
    assert netlist.cell_modules.tolist() == [0, 1, 2]
    assert netlist.has_flag(CellFlag.PORT).tolist() == [True, False, False]
    assert netlist.total_area == 3.5


@given(netlists())
def test_it_builds_what_arrays_build(netlist: Netlist) -> None:
    builder = Builder(netlist.name)
    for name, area in zip(netlist.cell_names, netlist.areas.tolist(), strict=True):
        builder.add_cell(name, area=area)
    for net, name in enumerate(netlist.net_names):
        builder.add_net(name, netlist.cells_of(net).tolist(), float(netlist.net_weights[net]))
    built = builder.build()
    for field in ("areas", "net_weights", "net_offsets", "net_cells", "cell_offsets", "cell_nets"):
        np.testing.assert_array_equal(getattr(built, field), getattr(netlist, field))
    assert built.cell_names == netlist.cell_names
    assert built.net_names == netlist.net_names


def test_what_is_refused() -> None:
    builder = Builder("x")
    with pytest.raises(EmptyNetlistError, match="netlist 'x' has no cells"):
        builder.build()
    builder.add_cell("a")
    builder.add_net("n")
    with pytest.raises(DuplicateNameError, match="cell 'a' is defined twice"):
        builder.add_cell("a")
    with pytest.raises(DuplicateNameError, match="net 'n' is defined twice"):
        builder.add_net("n")
    with pytest.raises(DuplicateNameError, match="module instance '' is defined twice"):
        builder.add_module("")
    with pytest.raises(UnknownNameError, match="unknown module instance 'm'"):
        builder.add_module("m/k", "m")
    with pytest.raises(NetlistError, match="cell 'b' stands in module 1, but there are 1"):
        builder.add_cell("b", module=1)


def test_unknown_names_and_values_out_of_range() -> None:
    builder = Builder("x")
    builder.add_cell("a")
    builder.add_net("n")
    for cell in ("b", 1, -1):
        with pytest.raises(UnknownNameError, match="unknown cell"):
            builder.add_pin("n", cell)
    for net in ("m", 1, -1):
        with pytest.raises(UnknownNameError, match="unknown net"):
            builder.add_pin(net, "a")
    builder.add_net("heavy", weight=0)
    with pytest.raises(ValueRangeError, match="net 'heavy' has weight"):
        builder.build()
