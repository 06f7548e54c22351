"""The whole engine on small netlists: legal, never below the exact optimum, and nearly always at it."""

from __future__ import annotations

import math

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import Bounds, LinearConstraint, milp
from scipy.sparse import csr_array

from netpart.netlist import FREE, InfeasibleError, Netlist, Rules, UsageError
from netpart.solve import Settings, bound, split
from netpart.solve.windows import half_window, split_blocks
from tests.strategies import enumerate_optimum, make_netlist, netlists

QUICK = Settings.from_mapping({"starts": 4, "recombinations": 2, "cycles": 1})


def exact_optimum(netlist: Netlist, rules: Rules, objective: str) -> float | None:
    """The optimum by HiGHS (scipy.optimize.milp): x[v, i] cell v in block i, y[e, i] net e touches block i, z[e] cut."""
    n, m, k = netlist.num_cells, netlist.num_nets, rules.num_blocks
    window = rules.window(netlist)
    num_x, num_y = n * k, m * k
    costs = np.zeros(num_x + num_y + m)
    weights = netlist.net_weights
    if objective == "cut-nets":
        costs[num_x + num_y :] = weights
    else:
        costs[num_x : num_x + num_y] = np.repeat(weights, k)
        if objective == "connectivity":
            costs[num_x + num_y :] = 0.0
    rows, low, high = [], [], []

    def add(entries: list[tuple[int, float]], least: float, most: float) -> None:
        rows.append(entries)
        low.append(least)
        high.append(most)

    for v in range(n):
        add([(v * k + i, 1) for i in range(k)], 1, 1)
    for i in range(k):
        areas = [(v * k + i, float(netlist.areas[v])) for v in range(n)]
        add(areas, window.lower[i] - window.slack, window.upper[i] + window.slack)
    sizes = netlist.net_sizes
    for e in range(m):
        for v in netlist.cells_of(e).tolist():
            for i in range(k):
                add([(num_x + e * k + i, 1), (v * k + i, -1)], 0, np.inf)
        touched = [(num_x + e * k + i, 1.0) for i in range(k)]
        if sizes[e]:
            add([*touched, (num_x + num_y + e, -(k - 1.0))], -np.inf, 1)
    if objective == "terminals":  # a net costs w λ when λ > 1 and nothing when it lies in one block
        costs[num_x + num_y :] = weights
        constant = -math.fsum(weights[sizes > 0].tolist())
    elif objective == "connectivity":
        constant = -math.fsum(weights[sizes > 0].tolist())
    else:
        constant = 0.0
    data = [(r, c, value) for r, entries in enumerate(rows) for c, value in entries]
    r, c, values = zip(*data, strict=True)
    matrix = csr_array((values, (r, c)), shape=(len(rows), len(costs)))
    upper = np.ones(len(costs))
    lower = np.zeros(len(costs))
    if rules.fixed is not None:
        for v in np.flatnonzero(rules.fixed != FREE).tolist():
            lower[v * k + rules.fixed[v]] = 1
    solved = milp(
        costs, constraints=LinearConstraint(matrix, low, high), bounds=Bounds(lower, upper), integrality=np.ones(len(costs))
    )
    return None if solved.x is None else float(solved.fun) + constant


def random_netlist(rng: np.random.Generator, num_cells: int, num_nets: int) -> Netlist:
    nets = [rng.choice(num_cells, rng.integers(2, 5), replace=False).tolist() for _ in range(num_nets)]
    areas = rng.integers(1, 4, num_cells).astype(float).tolist() if rng.random() < 0.5 else None
    weights = rng.integers(1, 4, num_nets).astype(float).tolist() if rng.random() < 0.5 else None
    return make_netlist(nets, num_cells, areas, weights)


@pytest.mark.parametrize("objective", ["cut-nets", "connectivity", "terminals"])
def test_exact_models_agree(objective: str) -> None:
    """Enumeration and HiGHS give the same optimum, so either may judge the engine."""
    rng = np.random.default_rng(11)
    for _ in range(6):
        netlist = random_netlist(rng, 6, 7)
        rules = Rules.from_request(3, tolerance="50%")
        enumerated = enumerate_optimum(netlist, rules, objective)
        solved = exact_optimum(netlist, rules, objective)
        assert (enumerated is None) == (solved is None)
        assert enumerated is None or solved == pytest.approx(enumerated, abs=1e-6)


@pytest.mark.parametrize("seed", range(20))
def test_two_blocks_against_highs(seed: int) -> None:
    netlist = random_netlist(np.random.default_rng(seed), 14, 20)
    rules = Rules.from_request(2, tolerance="20%")
    optimum = exact_optimum(netlist, rules, "cut-nets")
    if optimum is None:
        pytest.fail("the instance has no legal partition; choose another")
    result = split(netlist, rules=rules, settings=QUICK, jobs=1)
    assert result.success
    assert result.cost == pytest.approx(optimum, abs=1e-6)
    assert result.best_bound is None or result.best_bound <= optimum + 1e-9


@settings(max_examples=40, deadline=None)
@given(netlists(min_cells=4, max_cells=8), st.sampled_from(["10%", "30%"]), st.integers(2, 3))
def test_results_are_legal_or_say_what_is_broken(netlist: Netlist, tolerance: str, blocks: int) -> None:
    rules = Rules.from_request(blocks, tolerance=tolerance)
    optimum = enumerate_optimum(netlist, rules)
    try:
        result = split(netlist, rules=rules, settings=QUICK, jobs=1)
    except InfeasibleError:
        assert optimum is None
        return
    assert result.success == (not result.broken_rules)
    assert result.status in ("legal", "violated")
    if result.success:
        assert optimum is not None
        assert result.cost >= optimum - 1e-9
        assert result.best_bound is None or result.best_bound <= optimum + 1e-9
        assert result.gap is None or 0 <= result.gap <= 1


def test_fixed_cells_stay_and_shares_are_met() -> None:
    netlist = make_netlist([[i, i + 1] for i in range(59)], 60)
    fixed = np.full(60, FREE, np.int32)
    fixed[0], fixed[30] = 1, 0
    rules = Rules.from_request(2, shares=[30, 70], tolerance="10%", fixed=fixed)
    result = split(netlist, rules=rules, jobs=1)
    assert result.success
    assert result.partition.blocks[0] == 1
    assert result.partition.blocks[30] == 0
    assert result.cost == 2


def test_recursive_bisection_of_a_grid() -> None:
    """Four blocks of an 8 x 8 grid: two straight cuts of 8 nets each are best (quadrants; perimeter argument)."""
    graph = nx.grid_2d_graph(8, 8)
    index = {node: i for i, node in enumerate(graph)}
    netlist = make_netlist([[index[a], index[b]] for a, b in graph.edges], 64)
    result = split(netlist, blocks=4, tolerance="0%", jobs=1)
    assert result.success
    assert result.partition.block_areas.tolist() == [16, 16, 16, 16]
    assert result.cost == 16


@pytest.mark.parametrize("method", ["moves", "swaps"])
@pytest.mark.parametrize("levels", ["one", "many"])
@pytest.mark.parametrize("seed_from", ["sweep", "random", "grown", "each"])
def test_every_setting_reaches_the_karate_club_optimum(method: str, levels: str, seed_from: str) -> None:
    """Zachary's club (J. Anthropological Research 33, 1977; networkx's copy): the balanced cut of 10 edges."""
    graph = nx.karate_club_graph()
    netlist = make_netlist([list(edge) for edge in graph.edges], 34)
    rules = Rules.from_request(2, tolerance="0%")
    optimum = exact_optimum(netlist, rules, "cut-nets")
    choice = Settings.from_mapping({"method": method, "levels": levels, "seed_from": seed_from, "starts": 12})
    result = split(netlist, rules=rules, settings=choice, jobs=1)
    assert result.success
    assert result.cost == optimum
    assert nx.cut_size(graph, np.flatnonzero(result.partition.blocks == 0).tolist()) == result.cost


def test_odd_netlists() -> None:
    lonely = make_netlist([], 10)
    assert split(lonely, jobs=1).cost == 0
    everything_fixed = Rules.from_request(2, fixed=np.arange(10, dtype=np.int32) % 2)
    assert split(make_netlist([[0, 1]], 10), rules=everything_fixed, jobs=1).cost == 1
    parts = make_netlist([[2 * i, 2 * i + 1] for i in range(1000)], 2000)
    result = split(parts, jobs=1)
    assert result.success
    assert result.cost == 0
    assert result.gap == 0
    one = make_netlist([[0, 1], [1, 2]], 3)
    assert split(one, blocks=1, jobs=1).cost == 0
    with pytest.raises(UsageError):
        split(one, objective="beauty")
    assert bound(lonely).value == 0


def test_windows_of_halves_leave_every_block_reachable() -> None:
    rng = np.random.default_rng(2)
    for _ in range(200):
        blocks = int(rng.integers(2, 9))
        shares = rng.integers(1, 6, blocks).tolist()
        netlist = make_netlist([], int(rng.integers(40, 400)))
        window = Rules.from_request(blocks, shares, tolerance=float(rng.choice([0.05, 0.1, 0.3]))).window(netlist)
        if np.any(window.lower > window.upper):
            continue
        first = split_blocks(((window.lower + window.upper) / 2).tolist())
        half = half_window(window, first, netlist.total_area)
        assert np.all(half.lower <= half.upper)
        assert half.lower[0] >= window.lower[:first].sum() - 1e-6
        assert half.upper[0] <= window.upper[:first].sum() + 1e-6
        assert half.lower[1] >= window.lower[first:].sum() - 1e-6
        assert half.upper[1] <= window.upper[first:].sum() + 1e-6
