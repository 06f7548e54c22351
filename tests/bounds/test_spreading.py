"""The spreading bound against exhaustive enumeration, linear programming and closed forms."""

from __future__ import annotations

import itertools
import os
import subprocess
from pathlib import Path

import numpy as np
import pytest
import scipy.optimize
import scipy.sparse
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from netpart.bounds.certificate import dump_certificates
from netpart.bounds.spreading import prepare_task, spreading_bound
from netpart.netlist import OBJECTIVES, Netlist, Rules
from tests.bounds.circuits import binary_tree, clustered, complete, grid, hypercube, path, random_netlist
from tests.strategies import enumerate_optimum, make_netlist, netlists

SWEEP = int(os.environ.get("NETPART_SWEEP", "150"))
"""How many random netlists the sweep looks at; 2,000 takes a minute or two."""


def _commit_seed() -> int:
    """A seed that changes with every commit, so that the sweep keeps looking elsewhere."""
    found = subprocess.run(
        ["git", "rev-list", "--count", "HEAD"], cwd=Path(__file__).parent, capture_output=True, text=True, check=False
    )
    return int(found.stdout) if found.returncode == 0 else 0


def test_never_above_the_optimum_of_random_netlists() -> None:
    rng = np.random.default_rng(_commit_seed())
    compared = 0
    for _ in range(SWEEP):
        blocks = int(rng.integers(2, 4))
        netlist = random_netlist(rng, int(rng.integers(3, 10 if blocks == 2 else 8)))
        shares = None if rng.random() < 0.6 else rng.integers(1, 4, blocks).tolist()
        rules = Rules.from_request(blocks, shares=shares, tolerance=f"{rng.integers(0, 31)}%")
        optimum = enumerate_optimum(netlist, rules)
        found = spreading_bound(netlist, rules, num_trees=int(rng.integers(10, 150)), seed=int(rng.integers(99)))
        if optimum is None or found is None:
            continue
        compared += 1
        assert found.bound.value <= optimum * (1 + 1e-12)
    assert compared > SWEEP // 5


@given(
    netlists(min_cells=3, max_cells=7),
    st.integers(2, 3),
    st.integers(0, 30),
    st.sampled_from(OBJECTIVES),
)
@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])
def test_never_above_the_optimum_of_any_objective(netlist: Netlist, blocks: int, tolerance: int, objective: str) -> None:
    rules = Rules.from_request(blocks, tolerance=f"{tolerance}%")
    optimum = enumerate_optimum(netlist, rules, objective)
    found = spreading_bound(netlist, rules, objective, num_trees=60)
    if optimum is not None and found is not None:
        assert found.bound.value <= optimum * (1 + 1e-12)


def linear_optimum(netlist: Netlist, rules: Rules) -> float:
    """The best spreading bound there is: the linear program over all flows, rates and θ, solved by HiGHS.

    Variables: per source the flow of each pin into and out of its net, what each cell takes in, the rate, the part of
    the rate above θ times the demand; then θ.
    """
    prepared = prepare_task(netlist, rules)
    assert prepared is not None
    _, _, task = prepared
    demands, low, high = task.demands, task.low, task.high
    n, m, p = netlist.num_cells, netlist.num_nets, netlist.num_pins
    pin_nets = np.repeat(np.arange(m), netlist.net_sizes)
    pin_cells = netlist.net_cells
    width = 2 * p + n + 2
    total = n * width + 1
    gain = np.zeros(total)
    equal, equal_values, most, most_values = [], [], [], []
    loads = scipy.sparse.lil_array((m, total))
    for s in range(n):
        into, out, taken = s * width, s * width + p, s * width + 2 * p
        rate, above = taken + n, taken + n + 1
        gain[taken : taken + n] = 1.0
        gain[rate] = (1.0 - low) - demands.sum()
        gain[above] = -(high - low)
        for i in range(p):
            loads[pin_nets[i], into + i] = 1.0
        keep = scipy.sparse.lil_array((m + n, total))
        for i in range(p):
            keep[pin_nets[i], into + i] += 1.0
            keep[pin_nets[i], out + i] -= 1.0
            if pin_cells[i] != s:
                keep[m + pin_cells[i], out + i] += 1.0
                keep[m + pin_cells[i], into + i] -= 1.0
        for v in range(n):
            if v != s:
                keep[m + v, taken + v] -= 1.0
        equal.append(keep)
        equal_values.append(np.zeros(m + n))
        limits = scipy.sparse.lil_array((n + 1, total))
        for v in range(n):
            limits[v, taken + v] = 1.0
            limits[v, rate] = -demands[v]
        limits[n, rate] = 1.0
        limits[n, above] = -1.0
        limits[n, total - 1] = -demands[s]
        most.append(limits)
        most_values.append(np.zeros(n + 1))
    gain[total - 1] = -high * (1.0 - task.num_blocks * low)
    found = scipy.optimize.linprog(
        -gain,
        A_ub=scipy.sparse.vstack([loads, *most]).tocsr(),
        b_ub=np.concatenate([netlist.net_weights, *most_values]),
        A_eq=scipy.sparse.vstack(equal).tocsr(),
        b_eq=np.concatenate(equal_values),
        method="highs",
    )
    assert found.status == 0
    return float(-found.fun)


@pytest.mark.parametrize("seed", range(6))
def test_close_to_the_optimum_of_the_linear_program(seed: int) -> None:
    rng = np.random.default_rng(seed)
    nets = [rng.choice(9, int(rng.integers(2, 4)), replace=False).tolist() for _ in range(16)]
    nets += [[v, v + 1] for v in range(8)]
    netlist = make_netlist(nets, 9, areas=None if seed % 2 else rng.integers(1, 3, 9).astype(float).tolist())
    rules = Rules.from_request(2 + seed % 3 // 2, tolerance="25%")
    best = linear_optimum(netlist, rules)
    found = spreading_bound(netlist, rules, num_trees=3000)
    assert found is not None
    assert found.exact <= best * (1 + 1e-7)
    assert found.exact >= 0.95 * best


@pytest.mark.parametrize(
    ("netlist", "tolerance", "width"),
    [
        (hypercube(4), 0, 8),
        (hypercube(6), 0, 32),
        (grid(6, 6), 0, 6),
        (grid(4, 12), 0, 4),
        (complete(10), 0, 25),
        (path(20), 0, 1),
        (binary_tree(4), "5%", 1),
    ],
    ids=["hypercube-16", "hypercube-64", "grid-6x6", "grid-4x12", "complete-10", "path-20", "tree-31"],
)
def test_bisection_widths(netlist: Netlist, tolerance: int | str, width: int) -> None:
    """Widths in closed form: F. T. Leighton, Introduction to Parallel Algorithms and Architectures, 1992, sections 1.2,
    1.9 and 3.1 (from memory): hypercube 2^(d−1), r × c grid with even c ≥ r: r, complete graph n²/4, tree 1."""
    found = spreading_bound(netlist, Rules.from_request(2, tolerance=tolerance), num_trees=6000)
    assert found is not None
    assert 0.93 * width <= found.exact <= width
    assert found.bound.value == width


def test_threads_and_repetition_leave_every_byte() -> None:
    netlist = clustered(4, 40, 5)
    rules = Rules.from_request(2)
    contents = []
    for threads in (1, 2, 3, 1):
        found = spreading_bound(netlist, rules, num_trees=700, threads=threads, seed=5)
        assert found is not None
        contents.append(dump_certificates(netlist, rules, [found.certificate]))
    assert len(set(contents)) == 1


def test_a_small_part_beside_the_netlist_only_shifts_the_window() -> None:
    """Two cells without nets can go anywhere, so that ten cells joined pairwise split 5 : 5 or 4 : 6, which cuts 24."""
    pairs = [list(pair) for pair in itertools.combinations(range(10), 2)]
    rules = Rules.from_request(2, tolerance=0)
    beside = spreading_bound(make_netlist(pairs, 12), rules, num_trees=1500)
    alone = spreading_bound(make_netlist(pairs, 10), rules, num_trees=1500)
    assert alone is not None
    assert beside is not None
    assert alone.bound.value == 25
    assert beside.bound.value == 24


def test_a_small_budget_groups_the_sources() -> None:
    netlist = clustered(6, 60, 4)
    rules = Rules.from_request(2)
    small = spreading_bound(netlist, rules, num_trees=320)
    large = spreading_bound(netlist, rules, num_trees=4000)
    assert small is not None
    assert large is not None
    assert small.num_trees < 320
    assert 0 < small.exact <= large.exact * 1.02


def test_time_limit_and_listener() -> None:
    heard: list[tuple[float, float]] = []
    found = spreading_bound(
        clustered(4, 60, 3), Rules.from_request(2), time_limit=1.0, listener=lambda *entry: heard.append(entry)
    )
    assert found is not None
    assert found.history == heard
    assert found.bound.verified
    assert [seconds for seconds, _ in heard] == sorted(seconds for seconds, _ in heard)


def test_no_bound_where_one_block_may_hold_all() -> None:
    assert spreading_bound(path(6), Rules.from_request(2, tolerance="100%")) is None
    assert spreading_bound(path(6), Rules.from_request(1)) is None


def test_lengths_and_usage_point_at_the_bottleneck() -> None:
    """Two dense halves joined by three nets: these are the longest and the fullest nets."""
    netlist = clustered(2, 30, 2)
    found = spreading_bound(netlist, Rules.from_request(2), num_trees=2000)
    assert found is not None
    joining = [e for e in range(netlist.num_nets) if len({int(v) // 30 for v in netlist.cells_of(e)}) == 2]
    assert set(np.argsort(-found.lengths)[: len(joining)].tolist()) == set(joining)
    assert found.bound.value == len(joining)
    assert found.usage.max() == pytest.approx(1.0)
    assert np.all(found.usage[joining] > 0.8)
