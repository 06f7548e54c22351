"""The audit against figures worked out by hand and against the first implementation."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from netpart.netlist import Netlist, Partition, Rules
from netpart.report import audit
from tests.strategies import make_netlist, netlists


def _pairs(netlist: Netlist, blocks: list[int], rules: Rules) -> list[tuple[str, str]]:
    return [(name, rules.block_names[block]) for name, block in zip(netlist.cell_names, blocks, strict=True)]


def _claims(netlist: Netlist, partition: Partition, rules: Rules, legal: bool) -> dict:
    return {
        "input": {
            "files": [],
            "cells": netlist.num_cells,
            "nets": netlist.num_nets,
            "pins": int(netlist.net_pins.sum()),
        },
        "request": {"objective": "cut-nets"},
        "result": {
            "cut_nets": partition.cut_nets,
            "connectivity": partition.connectivity,
            "terminals": partition.terminals,
            "num_cut": partition.num_cut,
            "legal": legal,
            "blocks": [
                {
                    "name": name,
                    "area": float(partition.block_areas[i]),
                    "cells": int(partition.block_cells[i]),
                    "terminals": int(partition.block_terminals[i]),
                }
                for i, name in enumerate(rules.block_names)
            ],
        },
        "bounds": [],
        "best_bound": None,
    }


@given(netlists(), st.data())
def test_audit_and_partition_agree(netlist: Netlist, data: st.DataObject) -> None:
    rules = Rules.from_request(3, tolerance=data.draw(st.sampled_from(["0%", "10%", "50%"])))
    blocks = data.draw(st.lists(st.integers(0, 2), min_size=netlist.num_cells, max_size=netlist.num_cells))
    partition = Partition.from_blocks(netlist, blocks, 3)
    legal = not partition.broken_rules(netlist, rules)
    report = audit(netlist, _pairs(netlist, blocks, rules), rules, record=_claims(netlist, partition, rules, legal))
    wrong = [finding for finding in report.findings if not finding.holds]
    assert all(finding.subject.startswith("area of block") for finding in wrong)
    assert report.success == legal


@pytest.mark.parametrize(
    ("path", "value", "subject"),
    [
        (("result", "cut_nets"), 0.0, "cut nets"),
        (("result", "connectivity"), 7.0, "connectivity"),
        (("result", "terminals"), 3.0, "terminals"),
        (("result", "num_cut"), 2, "num cut"),
        (("result", "legal"), False, "all rules met"),
        (("result", "blocks", 0, "area"), 1.0, "area of block B0"),
        (("result", "blocks", 1, "cells"), 3, "cells of block B1"),
        (("result", "blocks", 1, "terminals"), 0, "terminals of block B1"),
        (("input", "pins"), 5, "pins of the netlist"),
        (("best_bound",), 1.0, "best bound"),
    ],
)
def test_each_false_claim_is_found(path: tuple, value: object, subject: str) -> None:
    netlist = make_netlist([[0, 1], [1, 2], [2, 3]], 4)
    rules = Rules.from_request(2)
    record = _claims(netlist, Partition.from_blocks(netlist, [0, 0, 1, 1], 2), rules, legal=True)
    pairs = _pairs(netlist, [0, 0, 1, 1], rules)
    assert audit(netlist, pairs, rules, record=record).success
    place = record
    for key in path[:-1]:
        place = place[key]
    place[path[-1]] = value
    report = audit(netlist, pairs, rules, record=record)
    assert [finding.subject for finding in report.findings if not finding.holds] == [subject]


@pytest.mark.parametrize(
    ("pairs", "subject"),
    [
        ([("c0", "B0"), ("c1", "B0"), ("c2", "B1")], "every cell has a block"),
        ([("c0", "B0"), ("c1", "B0"), ("c2", "B1"), ("c3", "B1"), ("c9", "B1")], "every cell named exists"),
        ([("c0", "B0"), ("c1", "B0"), ("c2", "B1"), ("c3", "B1"), ("c3", "B0")], "no cell is named twice"),
        ([("c0", "B0"), ("c1", "B0"), ("c2", "B1"), ("c3", "B7")], "every block named exists"),
    ],
)
def test_assignments_that_do_not_fit(pairs: list[tuple[str, str]], subject: str) -> None:
    netlist = make_netlist([[0, 1], [1, 2], [2, 3]], 4)
    report = audit(netlist, pairs, Rules.from_request(2))
    assert [finding.subject for finding in report.findings if not finding.holds] == [subject]


def test_fixed_cells_and_areas_are_checked() -> None:
    netlist = make_netlist([[0, 1]], 4, areas=[3.0, 1.0, 1.0, 1.0])
    rules = Rules.from_request(2, fixed=np.array([1, -1, -1, -1], np.int32))
    report = audit(netlist, _pairs(netlist, [0, 0, 1, 1], rules), rules)
    assert [finding.subject for finding in report.findings if not finding.holds] == [
        "area of block B0",
        "area of block B1",
        "fixed cells lie in their blocks",
    ]


def test_a_bound_above_the_cost_is_refuted() -> None:
    netlist = make_netlist([[0, 1], [1, 2], [2, 3]], 4)
    rules = Rules.from_request(2)
    record = _claims(netlist, Partition.from_blocks(netlist, [0, 0, 1, 1], 2), rules, legal=True)
    record |= {"bounds": [{"kind": "oracle", "value": 2.0, "verified": True}], "best_bound": 2.0, "gap": -1.0}
    report = audit(netlist, _pairs(netlist, [0, 0, 1, 1], rules), rules, record=record)
    wrong = [finding.subject for finding in report.findings if not finding.holds]
    assert wrong == ["the bound is not above the cost", "oracle bound"]
