"""Passes over many blocks: cost by the plain definition, legality, optimum by enumeration."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from netpart.netlist import FREE, OBJECTIVES, Netlist, Rules
from netpart.refine import refine_blocks
from tests.strategies import enumerate_optimum, make_netlist, netlists, plain_costs


@settings(max_examples=200)
@given(netlists(max_cells=10, max_nets=16), st.data())
def test_cost_legality_and_fixed_cells(netlist: Netlist, data: st.DataObject) -> None:
    k = data.draw(st.integers(2, 5))
    objective = data.draw(st.sampled_from(OBJECTIVES))
    size = netlist.num_cells
    blocks = np.array(data.draw(st.lists(st.integers(0, k - 1), min_size=size, max_size=size)), np.int32)
    pinned = np.array(data.draw(st.lists(st.booleans(), min_size=size, max_size=size)))
    fixed = np.where(pinned, blocks, FREE).astype(np.int32)
    window = Rules.from_request(k, tolerance=data.draw(st.sampled_from(["0%", "30%", "80%"]))).window(netlist)
    before = plain_costs(netlist, blocks)[objective]
    start = float(window.violation(np.bincount(blocks, netlist.areas, k)).sum())
    found = refine_blocks(netlist, blocks, window, objective=objective, fixed=fixed, passes=data.draw(st.integers(0, 4)))
    assert found.cost == pytest.approx(plain_costs(netlist, found.blocks)[objective], abs=1e-9)
    assert found.violation == pytest.approx(
        float(window.violation(np.bincount(found.blocks, netlist.areas, k)).sum()), abs=1e-9
    )
    assert found.violation <= start + 1e-9
    if start == 0:
        assert found.violation == 0
        assert found.cost <= before + 1e-9
    assert np.array_equal(found.blocks[pinned], blocks[pinned])


@pytest.mark.parametrize("objective", OBJECTIVES)
def test_many_starts_reach_the_optimum(objective: str) -> None:
    rng = np.random.default_rng(5)
    for _ in range(6):
        nets = [rng.choice(8, rng.integers(2, 5), replace=False).tolist() for _ in range(10)]
        netlist = make_netlist(nets, 8, weights=rng.integers(1, 4, 10).astype(float).tolist())
        rules = Rules.from_request(3, tolerance="40%")
        window = rules.window(netlist)
        optimum = enumerate_optimum(netlist, rules, objective)
        reached = []
        for _ in range(40):
            found = refine_blocks(netlist, rng.integers(0, 3, 8).astype(np.int32), window, objective=objective, passes=20)
            if found.violation == 0:
                reached.append(found.cost)
        assert min(reached) == pytest.approx(optimum)


def test_overfull_blocks_are_emptied() -> None:
    netlist = make_netlist([[i, i + 1] for i in range(63)], 64)
    window = Rules.from_request(4, shares=[10, 20, 30, 40], tolerance="10%").window(netlist)
    found = refine_blocks(netlist, np.zeros(64, np.int32), window, stall=1000)
    assert found.violation == 0


def test_equal_blocks_without_any_tolerance_are_still_improved() -> None:
    side = 12
    grid = np.arange(side * side).reshape(side, side)
    nets = [*np.stack((grid[:, :-1], grid[:, 1:]), -1).reshape(-1, 2), *np.stack((grid[:-1], grid[1:]), -1).reshape(-1, 2)]
    netlist = make_netlist([net.tolist() for net in nets], side * side)
    window = Rules.from_request(4, tolerance=0).window(netlist)
    stripes = (np.arange(side * side) // (side * side // 4)).astype(np.int32)
    stirred = stripes.copy()
    stirred[::7] = np.random.default_rng(0).permutation(stirred[::7])
    found = refine_blocks(netlist, stirred, window, passes=20)
    assert found.violation == 0
    assert found.cost < 0.5 * plain_costs(netlist, stirred)["cut-nets"]
    assert found.cost >= 2 * side  # the cheapest four quarters of a square mesh: counted
