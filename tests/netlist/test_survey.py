"""The survey of netlists written by hand, and its counts against networkx and sets."""

from __future__ import annotations

import json

import networkx as nx
from hypothesis import given

from netpart.netlist import Builder, CellFlag, Direction, IgnoredNet, Netlist, survey
from tests.strategies import make_netlist, netlists


def small_design() -> Netlist:
    builder = Builder("chip")
    core = builder.add_module("core")
    alu = builder.add_module("core/alu", "core")
    deep = builder.add_module("core/alu/add", "core/alu")
    memory = builder.add_module("memory")
    builder.add_module("empty")
    builder.add_cell("in", area=0, flags=CellFlag.PORT)
    builder.add_cell("core/f", "FLOP", 4.0, CellFlag.SEQUENTIAL, core)
    builder.add_cell("core/alu/g", "NAND2", 1.0, module=alu)
    builder.add_cell("core/alu/add/h", "NAND2", 1.0, module=deep)
    builder.add_cell("memory/ram", "RAM", 90.0, CellFlag.MACRO | CellFlag.SEQUENTIAL | CellFlag.FIXED, memory)
    builder.add_cell("lone", "NAND2", 1.0)
    builder.add_cell("fill", "FILL", 0.0)
    into, out = Direction.INPUT, Direction.OUTPUT
    for net, pins in {
        "a": [("in", out), ("core/f", into)],
        "b": [("core/f", out), ("core/alu/g", into), ("core/alu/add/h", into), ("core/alu/g", into)],
        "contest": [("core/alu/g", out), ("core/alu/add/h", out), ("memory/ram", into)],
        "orphan": [("core/f", into), ("memory/ram", into)],
        "stub": [("memory/ram", out)],
        "bus": [("core/f", Direction.INOUT), ("memory/ram", Direction.INOUT)],
        "unknown": [("core/f", Direction.UNKNOWN), ("memory/ram", into)],
        "bare": [],
    }.items():
        builder.add_net(net)
        for cell, direction in pins:
            builder.add_pin(net, cell, direction)
    builder.ignored_nets.append(IgnoredNet("VDD", "supply", 7))
    builder.notes.append("a note")
    return builder.build()


def test_a_small_design() -> None:
    found = survey(small_design())
    assert (found.cells, found.nets, found.pins) == (7, 8, 16)
    assert (found.ports, found.macros, found.sequential, found.fixed) == (1, 1, 2, 1)
    assert (found.area, found.mean_area, found.median_area) == (97, 97 / 6, 1)
    assert (found.largest_cell, found.largest_area) == ("memory/ram", 90)
    assert found.types == (("RAM", 1, 90), ("FLOP", 1, 4), ("NAND2", 3, 3), ("FILL", 1, 0))
    assert found.common_types == (("NAND2", 3, 3), ("RAM", 1, 90), ("FLOP", 1, 4), ("FILL", 1, 0))
    assert found.num_types == 4
    assert found.fan_out == ((0, 0, 1), (1, 1, 1), (2, 2, 4), (3, 3, 2))
    assert found.components == (5, 1, 1)
    assert found.num_modules == 6
    assert found.modules == (
        ("", 0, 7, 97),
        ("memory", 1, 1, 90),
        ("core", 1, 3, 6),
        ("core/alu", 2, 2, 2),
        ("empty", 1, 0, 0),
    )
    assert found.rent is None
    assert found.ignored_nets == (("VDD", "supply", 7),)
    assert found.notes == ("a note",)
    assert [str(oddity) for oddity in found.oddities] == [
        "nets without pins: 1 (bare)",
        "nets on one cell only: 1 (stub)",
        "nets without a driver: 1 (orphan)",
        "nets with several drivers: 1 (contest)",
        "cells without nets: 2 (lone, fill)",
        "cells of area 0 that are no ports: 1 (fill)",
    ]


def test_plain_values_for_json() -> None:
    found = survey(small_design())
    values = json.loads(json.dumps(found.to_dict(), allow_nan=False))
    assert values["types"][0] == {"type": "RAM", "cells": 1, "area": 90}
    assert values["modules"][1] == {"path": "memory", "depth": 1, "cells": 1, "area": 90}
    assert values["oddities"][4] == {"what": "cells without nets", "number": 2, "examples": ["lone", "fill"]}
    assert values["ignored_nets"] == [{"name": "VDD", "reason": "supply", "num_pins": 7}]
    assert values["fan_out"][0] == {"low": 0, "high": 0, "nets": 1}
    assert values["components"] == [5, 1, 1]
    assert (values["num_components"], values["largest_share"], values["rent"]) == (3, 90 / 97, None)


def test_a_chain_has_a_rent_exponent_in_its_values() -> None:
    values = survey(make_netlist([[i, i + 1] for i in range(999)], 1000)).to_dict()
    assert abs(json.loads(json.dumps(values))["rent"]["exponent"]) < 0.05


def test_nets_on_many_cells_and_long_lists_are_shortened() -> None:
    found = survey(make_netlist([list(range(101)), list(range(100)), *([[0]] * 5)], 101))
    assert [str(oddity) for oddity in found.oddities] == [
        "nets on one cell only: 5 (n2, n3, n4, …)",
        "nets on more than 100 cells: 1 (n0)",
    ]
    assert found.fan_out == ((1, 1, 5), (65, 128, 2))


def test_no_more_than_a_hundred_module_instances_are_listed() -> None:
    builder = Builder()
    for i in range(150):
        builder.add_cell(f"m{i}/c", area=1 + i, module=builder.add_module(f"m{i}"))
    found = survey(builder.build())
    assert found.num_modules == 151
    assert [row.path for row in found.modules] == ["", *(f"m{i}" for i in range(149, 50, -1))]


def test_a_netlist_of_ports_alone() -> None:
    builder = Builder()
    builder.add_cell("p", area=0, flags=CellFlag.PORT)
    found = survey(builder.build())
    assert (found.cells, found.ports, found.area, found.mean_area, found.num_types) == (1, 1, 0, 0, 0)
    assert found.to_dict()["largest_share"] == 0
    assert found.fan_out == ()


@given(netlists(max_cells=9, max_nets=8))
def test_counts_match_networkx_and_sets(netlist: Netlist) -> None:
    found = survey(netlist)
    graph = nx.Graph()
    graph.add_nodes_from(range(netlist.num_cells))
    for net in range(netlist.num_nets):
        nx.add_star(graph, [("net", net), *netlist.cells_of(net).tolist()])
    sizes = [sum(not isinstance(node, tuple) for node in part) for part in nx.connected_components(graph)]
    assert list(found.components) == sorted((size for size in sizes if size), reverse=True)
    for low, high, nets in found.fan_out:
        assert nets == sum(low <= size <= high for size in netlist.net_sizes.tolist())
    assert sum(row.nets for row in found.fan_out) == netlist.num_nets
    oddities = {oddity.what: oddity.number for oddity in found.oddities}
    assert oddities.get("cells without nets", 0) == sum(netlist.nets_of(v).size == 0 for v in range(netlist.num_cells))
    assert oddities.get("nets without pins", 0) == sum(size == 0 for size in netlist.net_sizes.tolist())
    assert survey(netlist) == found
