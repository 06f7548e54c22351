"""Sweep and Cheeger bracket, against networkx and the plain definitions."""

from __future__ import annotations

import math

import networkx as nx
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from netpart.expand import pair_weights
from netpart.netlist import FREE, Netlist, Rules
from netpart.spectral import find_components, find_spectrum, legal_seed, sweep_profile
from tests.expand.graphs import dense_clique, netlist_of
from tests.strategies import make_netlist, netlists, plain_costs


@given(netlists(min_cells=3, max_net_size=7), st.randoms(use_true_random=False))
def test_profiles_match_the_definitions(netlist: Netlist, random: object) -> None:
    order = np.arange(netlist.num_cells)
    random.shuffle(order)  # type: ignore[attr-defined]
    profile = sweep_profile(netlist, order, "two-over-size")
    weights = dense_clique(netlist, pair_weights(netlist, "two-over-size"))
    for i in range(netlist.num_cells - 1):
        side = np.zeros(netlist.num_cells, bool)
        side[order[: i + 1]] = True
        cut = weights[side][:, ~side].sum()
        smaller = min(weights[side].sum(), weights[~side].sum())
        assert profile.net_cut[i] == pytest.approx(plain_costs(netlist, side.astype(int))["cut-nets"], abs=1e-9)
        assert profile.graph_cut[i] == pytest.approx(cut, abs=1e-9)
        assert profile.conductance[i] == pytest.approx(cut / smaller if smaller > 0 else math.inf, abs=1e-9)
        assert profile.area[i] == pytest.approx(netlist.areas[side].sum())


def test_zacharys_club_against_networkx() -> None:
    """Cut and conductance of every threshold are networkx's; the sweep finds the split of the club but for few members."""
    club = nx.karate_club_graph()
    netlist = netlist_of(club)
    spectrum = find_spectrum(netlist)
    assert spectrum is not None
    for i in range(33):
        side = {int(v) for v in spectrum.order[: i + 1]}
        assert spectrum.profile.graph_cut[i] == pytest.approx(nx.cut_size(club, side, weight="weight"))
        assert spectrum.profile.conductance[i] == pytest.approx(nx.conductance(club, side, weight="weight"))
    best = int(np.argmin(spectrum.profile.conductance))
    first = {int(v) for v in spectrum.order[: best + 1]}
    officer = {v for v, data in club.nodes(data=True) if data["club"] == "Officer"}
    assert min(len(first ^ officer), 34 - len(first ^ officer)) <= 2
    assert spectrum.cheeger_low <= spectrum.profile.conductance[best] <= spectrum.cheeger_high


@pytest.mark.parametrize("seed", range(40))
def test_cheegers_inequality_on_random_graphs(seed: int) -> None:
    """λ1/2 ≤ φ of every cut tried, and the sweep's best ≤ √(2 λ1): F. R. K. Chung 1997, theorems 2.1 and 2.2."""
    rng = np.random.default_rng(seed)
    graph = nx.gnm_random_graph(int(rng.integers(8, 70)), int(rng.integers(60, 150)), seed=seed)
    graph = nx.compose(graph, nx.path_graph(len(graph)))
    for _, _, data in graph.edges(data=True):
        data["weight"] = float(rng.uniform(0.1, 3))
    spectrum = find_spectrum(netlist_of(graph))
    assert spectrum is not None
    best = spectrum.profile.best_conductance
    assert best is not None
    assert spectrum.cheeger_low * (1 - 1e-6) <= best <= spectrum.cheeger_high * (1 + 1e-6)
    nodes = np.array(graph.nodes)
    for _ in range(20):
        side = set(rng.choice(nodes, int(rng.integers(1, len(nodes))), replace=False).tolist())
        assert nx.conductance(graph, side, weight="weight") >= spectrum.cheeger_low * (1 - 1e-6)


def test_hypercube_attains_the_lower_side_of_cheeger() -> None:
    """Q_d: λ1 = 2/d, and half of it (one coordinate fixed) has φ = 1/d = λ1/2 (Chung 1997, section 2.1)."""
    cube = nx.hypercube_graph(4)
    spectrum = find_spectrum(netlist_of(cube))
    assert spectrum is not None
    assert spectrum.cheeger_low == pytest.approx(1 / 4)
    half = {v for v in cube if v[0] == 0}
    assert nx.conductance(cube, half) == pytest.approx(spectrum.cheeger_low)


def test_two_cliques_joined_by_one_net_are_told_apart() -> None:
    nets = [[i, j] for i in range(10) for j in range(i)] + [[10 + i, 10 + j] for i in range(10) for j in range(i)]
    netlist = make_netlist([*nets, [3, 14]], 20)
    spectrum = find_spectrum(netlist)
    assert spectrum is not None
    blocks = spectrum.seed(Rules.from_request(2).window(netlist))
    assert plain_costs(netlist, blocks)["cut-nets"] == 1
    assert {frozenset(np.flatnonzero(blocks == i).tolist()) for i in (0, 1)} == {
        frozenset(range(10)),
        frozenset(range(10, 20)),
    }


def test_components_are_found_and_the_largest_by_area_comes_first() -> None:
    netlist = make_netlist([[0, 1], [2, 3, 4], [6]], 7, areas=[1, 1, 5, 0, 0, 1, 2])
    assert [part.tolist() for part in find_components(netlist)] == [[2, 3, 4], [0, 1], [6], [5]]


@given(netlists(min_cells=2, max_cells=12, max_nets=8))
def test_components_match_networkx(netlist: Netlist) -> None:
    graph = nx.Graph()
    graph.add_nodes_from(range(netlist.num_cells))
    for net in range(netlist.num_nets):
        nx.add_path(graph, netlist.cells_of(net).tolist())
    expected = {frozenset(part) for part in nx.connected_components(graph)}
    assert {frozenset(part.tolist()) for part in find_components(netlist)} == expected


@given(
    netlists(min_cells=2, max_cells=12, max_nets=16),
    st.sampled_from(["0.05", "0.1", "0.3"]),
    st.sampled_from([(1, 1), (3, 2), (1, 3)]),
    st.data(),
)
def test_seed_is_the_best_threshold(netlist: Netlist, tolerance: str, shares: tuple[int, int], data: st.DataObject) -> None:
    """Against all thresholds tried one by one, both ways round, with fixed cells moved to their ends."""
    n = netlist.num_cells
    order = np.array(data.draw(st.permutations(range(n))))
    fixed = np.array(data.draw(st.lists(st.sampled_from([FREE, FREE, FREE, 0, 1]), min_size=n, max_size=n)), np.int32)
    window = Rules.from_request(2, shares, tolerance).window(netlist)
    blocks = legal_seed(netlist, order, window, fixed)
    assert np.all((fixed == FREE) | (fixed == blocks))

    def judge(candidate: np.ndarray) -> tuple[bool, float]:
        areas = np.bincount(candidate, netlist.areas, 2)
        return bool(window.violation(areas).max() > 1e-12), plain_costs(netlist, candidate)["cut-nets"]

    best = (True, math.inf)
    for prefix in (0, 1):
        sequence = [v for v in order if fixed[v] == prefix] + [v for v in order if fixed[v] == FREE]
        for count in range(int(np.sum(fixed == prefix)), len(sequence) + 1):
            candidate = np.full(n, 1 - prefix, np.int32)
            candidate[sequence[:count]] = prefix
            best = min(best, judge(candidate))
    illegal, cut = judge(blocks)
    assert illegal == best[0]
    if not illegal:
        assert cut == pytest.approx(best[1], abs=1e-9)


@given(netlists(min_cells=6, max_cells=14, max_nets=7, areas="unit"))
def test_loose_parts_are_packed_whole(netlist: Netlist) -> None:
    """Apart from the largest part, no component is cut, and whole components balance the blocks."""
    spectrum = find_spectrum(netlist)
    if spectrum is None:
        return
    blocks = spectrum.seed(Rules.from_request(2, tolerance="0.4").window(netlist))
    for part in spectrum.parts:
        assert len(set(blocks[part].tolist())) == 1
    areas = np.bincount(blocks, netlist.areas, 2)
    assert areas.sum() == netlist.num_cells
    assert abs(areas[0] - areas[1]) <= 0.4 * netlist.num_cells + 1e-9


def test_a_path_is_ordered_end_to_end() -> None:
    """The eigenvector of a path is strictly monotone (Fiedler 1973)."""
    spectrum = find_spectrum(netlist_of(nx.path_graph(9)))
    assert spectrum is not None
    assert spectrum.order.tolist() in (list(range(9)), list(range(8, -1, -1)))
