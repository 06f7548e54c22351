"""The spectral bound never exceeds the optimum, and reaches known values where it should."""

from __future__ import annotations

import itertools
from fractions import Fraction

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from netpart.bounds import spectral_bound
from netpart.bounds.netgraph import bounding_weights
from netpart.bounds.spectral import SpectralProblem, most_uneven_areas, verify_spectral
from netpart.expand import pair_weights
from netpart.netlist import OBJECTIVES, Netlist, Rules
from tests.expand.graphs import netlist_of
from tests.strategies import enumerate_optimum, make_netlist, netlists, plain_costs


@given(netlists(max_net_size=9))
def test_two_blocks_take_the_bounding_weights(netlist: Netlist) -> None:
    ours, known = bounding_weights(netlist), pair_weights(netlist, "bounding")
    assert np.all(ours <= known)
    assert np.allclose(ours, known, rtol=1e-12)


@pytest.mark.parametrize("objective", OBJECTIVES)
@pytest.mark.parametrize("num_blocks", [2, 3, 4, 5])
@pytest.mark.parametrize("size", range(2, 10))
def test_weights_keep_the_graph_below_the_cost(objective: str, num_blocks: int, size: int) -> None:
    """All ways to spread one net over the blocks, in exact arithmetic; the largest one is tight."""
    weight = Fraction(float(bounding_weights(make_netlist([list(range(size))], size), num_blocks, objective)[0]))
    ratios = []
    for counts in itertools.product(range(size + 1), repeat=num_blocks):
        if sum(counts) != size:
            continue
        touched = sum(count > 0 for count in counts)
        cost = {"cut-nets": int(touched > 1), "connectivity": touched - 1, "terminals": touched * (touched > 1)}[objective]
        pairs = Fraction(size * size - sum(count * count for count in counts), 2)
        assert weight * pairs <= cost
        ratios.append(float(weight * pairs / cost) if cost else 0.0)
    assert max(ratios) == pytest.approx(1.0, rel=1e-10)


@given(
    netlists(max_cells=7, max_nets=3),
    st.integers(2, 3),
    st.sampled_from(["0", "0.1", "0.3", "0.7"]),
    st.data(),
)
def test_uneven_areas_majorise_every_legal_partition(
    netlist: Netlist, num_blocks: int, tolerance: str, data: st.DataObject
) -> None:
    shares = data.draw(st.sampled_from([None, list(range(1, num_blocks + 1))]))
    rules = Rules.from_request(num_blocks, shares, tolerance)
    cells = np.array(sorted(data.draw(st.sets(st.integers(0, netlist.num_cells - 1), min_size=1))))
    uneven = most_uneven_areas(netlist, netlist.areas[cells], rules)
    window = rules.window(netlist)
    inside = np.zeros(netlist.num_cells, bool)
    inside[cells] = True
    for blocks in itertools.product(range(num_blocks), repeat=netlist.num_cells):
        assigned = np.array(blocks)
        if np.any(window.violation(np.bincount(assigned, netlist.areas, num_blocks)) > 0):
            continue
        assert uneven is not None
        held = [
            sum((Fraction(float(a)) for a in netlist.areas[inside & (assigned == i)]), Fraction(0))
            for i in range(num_blocks)
        ]
        held.sort(reverse=True)
        for j in range(1, num_blocks + 1):
            assert sum(held[:j]) <= sum(uneven[:j])
        assert sum(held) == sum(uneven)
    if uneven is not None:
        assert list(uneven) == sorted(uneven, reverse=True)


@settings(max_examples=150)
@given(
    netlists(min_cells=2, max_cells=8, max_nets=14, max_net_size=6),
    st.sampled_from([(2, None), (2, (3, 2)), (3, None), (3, (2, 1, 1))]),
    st.sampled_from(["0.02", "0.1", "0.3"]),
    st.sampled_from(OBJECTIVES),
)
def test_bound_is_never_above_the_optimum(
    netlist: Netlist, shape: tuple[int, tuple[int, ...] | None], tolerance: str, objective: str
) -> None:
    rules = Rules.from_request(shape[0], shape[1], tolerance)
    found = spectral_bound(netlist, rules, objective)
    optimum = enumerate_optimum(netlist, rules, objective)
    if found is not None and optimum is not None:
        assert found.verified
        assert found.value <= optimum * (1 + 1e-12)


def optimum_of_two(netlist: Netlist, rules: Rules) -> float | None:
    """The smallest legal cut of two blocks by trying all subsets, with bit masks."""
    n = netlist.num_cells
    masks = np.arange(2**n)
    sides = (masks[:, None] >> np.arange(n)) & 1
    window = rules.window(netlist)
    areas = np.stack([(1 - sides) @ netlist.areas, sides @ netlist.areas], axis=1)
    legal = np.all((areas >= window.lower - window.slack) & (areas <= window.upper + window.slack), axis=1)
    cut = np.zeros(len(masks))
    for net in range(netlist.num_nets):
        held = sides[:, netlist.cells_of(net)].sum(axis=1)
        cut += netlist.net_weights[net] * ((held > 0) & (held < len(netlist.cells_of(net))))
    return float(cut[legal].min()) if legal.any() else None


@pytest.mark.parametrize("batch", range(20))
def test_connected_random_netlists_with_all_kinds_of_areas(batch: int) -> None:
    """Twenty times fifty dense little netlists, where the bound is seldom trivial."""
    rng = np.random.default_rng(batch)
    positive = 0
    for _ in range(50):
        n = int(rng.integers(3, 11))
        nets = [
            rng.choice(n, int(rng.integers(2, min(n, 6) + 1)), replace=False).tolist()
            for _ in range(int(rng.integers(n, 4 * n)))
        ]
        kind = int(rng.integers(4))
        areas = [
            None,
            rng.integers(0, 4, n).astype(float).tolist(),
            rng.uniform(0, 1, n).tolist(),
            (0.1 * rng.integers(0, 9, n)).tolist(),
        ][kind]
        weights = None if rng.random() < 0.5 else (10.0 ** rng.uniform(-1, 1, len(nets))).tolist()
        netlist = make_netlist(nets, n, areas=areas, weights=weights)
        share = [None, (3, 2), (1, 3)][int(rng.integers(3))]
        rules = Rules.from_request(
            2, share, [Fraction(0), Fraction(1, 20), Fraction(1, 5), Fraction(3, 10)][int(rng.integers(4))]
        )
        found, optimum = spectral_bound(netlist, rules), optimum_of_two(netlist, rules)
        if found is not None and optimum is not None:
            assert found.value <= optimum * (1 + 1e-12)
            positive += 1
    assert positive >= 10


def test_bisecting_a_hypercube() -> None:
    """Q_d has λ_1 = 2 and bisection width 2^(d−1), which λ_1 n/4 = 2^(d−1) reaches (Leighton, Introduction to Parallel
    Algorithms and Architectures, 1992, section 3.1); the bound is rounded up to whole nets."""
    for dimension in (3, 5, 8):
        netlist = netlist_of(nx.hypercube_graph(dimension))
        found = spectral_bound(netlist, Rules.from_request(2, tolerance=0))
        assert found is not None
        assert found.value == 2 ** (dimension - 1)
        doubled = spectral_bound(netlist, Rules.from_request(2, tolerance=0), "terminals")
        assert doubled is not None
        assert doubled.value == 2**dimension


def test_complete_graphs_into_k_blocks() -> None:
    """K_n into k equal blocks cuts n²/2 (1 − 1/k) edges: all eigenvalues are n, and the bound is tight."""
    for n, k in ((8, 2), (12, 3), (12, 4), (30, 5)):
        found = spectral_bound(netlist_of(nx.complete_graph(n)), Rules.from_request(k, tolerance=0))
        assert found is not None
        assert found.value == n * n * (k - 1) // (2 * k)


def test_unequal_shares_on_a_complete_bipartite_graph() -> None:
    """K_n,n: λ_1 = n; a side of s cells cuts at least s n − ⌊s²/2⌋ edges, above λ_1 s (2n − s)/(2n)."""
    netlist = netlist_of(nx.complete_bipartite_graph(10, 10))
    found = spectral_bound(netlist, Rules.from_request(2, shares=(1, 4), tolerance=0))
    assert found is not None
    assert found.value == 32  # 10 · 4 · 16/20
    assert found.value == 4 * 10 - 8  # and that is the optimum: two cells of each side


def test_donath_and_hoffman_with_several_eigenvalues() -> None:
    """Four cliques in a ring: λ_1 and λ_2 are small, λ_3 too, and no single one of them gives what the sum does."""
    nets = [[6 * c + i, 6 * c + j] for c in range(4) for i in range(6) for j in range(i)]
    nets += [[6 * c + 1, (6 * c + 8) % 24] for c in range(4)]
    netlist, rules = make_netlist(nets, 24), Rules.from_request(4, tolerance=0)
    found = spectral_bound(netlist, rules)
    assert found is not None
    adjacency = nx.laplacian_spectrum(nx.Graph(tuple(net) for net in nets))
    assert found.value == np.ceil(0.5 * 6 * adjacency[:4].sum() - 1e-6)
    blocks = np.repeat(np.arange(4), 6)
    assert found.value <= plain_costs(netlist, blocks)["cut-nets"] == 4


def test_nothing_to_cut_gives_no_bound() -> None:
    loose = make_netlist([[0, 1], [2, 3]], 4)
    assert spectral_bound(loose, Rules.from_request(2)) is None
    without_area = make_netlist([[0, 1], [1, 2]], 3, areas=[0, 0, 0])
    assert spectral_bound(without_area, Rules.from_request(2)) is None
    assert spectral_bound(make_netlist([], 3), Rules.from_request(2)) is None
    wide = make_netlist([[0, 1], [1, 2]], 3)
    assert spectral_bound(wide, Rules.from_request(2, tolerance=1)) is None


def test_a_giant_part_beside_loose_cells_is_still_bounded() -> None:
    """30 cells in a clique and 4 loose ones: any 13:21 split leaves at least 9 and at most 25 of the clique on a side."""
    nets = [[i, j] for i in range(30) for j in range(i)]
    netlist = make_netlist(nets, 34)
    found = spectral_bound(netlist, Rules.from_request(2, tolerance="0.25"))
    assert found is not None
    assert found.value == 9 * 21  # K_30 split 9:21; block limits are 13..21 of 34


def test_budget_is_kept() -> None:
    assert spectral_bound(netlist_of(nx.hypercube_graph(6)), Rules.from_request(2, tolerance=0), max_operations=10) is None


def test_claims_are_verified_as_they_stand() -> None:
    netlist = netlist_of(nx.hypercube_graph(5))
    problem = SpectralProblem.from_netlist(netlist, Rules.from_request(2), "cut-nets")
    assert problem is not None
    assert verify_spectral(problem, [1.999])
    assert not verify_spectral(problem, [2.001])
