"""The clique expansion, against its definition, networkx and the inequality that the bounding weights are for."""

from __future__ import annotations

import itertools
from fractions import Fraction

import networkx as nx
import numpy as np
import pytest
import scipy.linalg
from hypothesis import given
from hypothesis import strategies as st

from netpart.expand import WEIGHTINGS, CliqueGraph, area_weighted_laplacian, laplacian, normalized_laplacian, pair_weights
from netpart.netlist import Netlist, UsageError, ValueRangeError
from tests.expand.graphs import dense_clique, netlist_of
from tests.strategies import make_netlist, netlists, plain_costs


def test_weights_of_one_net_of_five() -> None:
    """1/(5 − 1), 2/5 and 1/(2 · 3), times the net weight 2."""
    net = make_netlist([[0, 1, 2, 3, 4]], 5, weights=[2.0])
    assert [pair_weights(net, name)[0] for name in WEIGHTINGS] == pytest.approx([2 / 4, 4 / 5, 2 / 6], rel=1e-15)


def test_nets_without_pairs_weigh_nothing() -> None:
    net = make_netlist([[0], [], [0, 1]], 2)
    for name in WEIGHTINGS:
        assert pair_weights(net, name).tolist()[:2] == [0.0, 0.0]
        assert CliqueGraph.from_netlist(net, name).adjacency().nnz == 2


def test_unknown_weighting_is_refused() -> None:
    with pytest.raises(UsageError, match="unknown clique weighting"):
        pair_weights(make_netlist([[0, 1]], 2), "other")  # type: ignore[arg-type]


@given(netlists(max_net_size=9), st.sampled_from(WEIGHTINGS), st.integers(1, 9))
def test_adjacency_and_products_match_the_definition(netlist: Netlist, weighting: str, paired_size: int) -> None:
    weights = pair_weights(netlist, weighting)  # type: ignore[arg-type]
    graph = CliqueGraph.from_netlist(netlist, weights, paired_size)
    expected = dense_clique(netlist, weights)
    written = graph.adjacency()
    assert np.allclose(written.toarray(), expected, rtol=1e-14, atol=0)
    assert (written != written.T).nnz == 0
    assert not written.diagonal().any()
    assert np.allclose(graph.operator() @ np.eye(netlist.num_cells), expected, rtol=1e-13, atol=1e-13)
    assert np.allclose(graph.degrees, expected.sum(axis=1), rtol=1e-14)
    degree_matrix = np.diag(expected.sum(axis=1))
    assert np.allclose(laplacian(graph) @ np.eye(netlist.num_cells), degree_matrix - expected, rtol=1e-12, atol=1e-12)


@given(netlists(max_cells=8, max_net_size=7), st.integers(2, 8))
def test_bounding_weights_never_exceed_the_netlist_cut(netlist: Netlist, paired_size: int) -> None:
    """Vannelli & Hadley 1990: with these weights the graph's cut is at most the netlist's, for every bipartition."""
    graph = CliqueGraph.from_netlist(netlist, "bounding", paired_size)
    for bits in itertools.product((False, True), repeat=netlist.num_cells):
        side = np.array(bits)
        assert graph.cut_weight(side) <= plain_costs(netlist, side.astype(int))["cut-nets"] * (1 + 1e-14)


@pytest.mark.parametrize("size", range(2, 12))
def test_bounding_weight_is_the_largest_possible(size: int) -> None:
    """A balanced cut of a single net reaches its weight exactly; in exact arithmetic no split exceeds it."""
    share = Fraction(1, (size // 2) * (size - size // 2))
    assert max(share * j * (size - j) for j in range(1, size)) == 1
    graph = CliqueGraph.from_netlist(make_netlist([list(range(size))], size), "bounding")
    assert graph.cut_weight(np.arange(size) < size // 2) == pytest.approx(1.0, rel=1e-15)


def test_laplacians_match_networkx_on_zacharys_club() -> None:
    """Zachary, Journal of Anthropological Research 33, 1977; the reference matrices are networkx's."""
    club = nx.karate_club_graph()
    graph = CliqueGraph.from_netlist(netlist_of(club))
    unit = np.eye(club.number_of_nodes())
    assert np.allclose(graph.adjacency().toarray(), nx.to_numpy_array(club))
    assert np.allclose(laplacian(graph) @ unit, nx.laplacian_matrix(club).toarray())
    assert np.allclose(normalized_laplacian(graph) @ unit, nx.normalized_laplacian_matrix(club).toarray())


@given(netlists(min_cells=3, max_net_size=6, areas="whole"))
def test_area_weighted_form_has_the_eigenvalues_of_the_pencil(netlist: Netlist) -> None:
    """M^(−1/2) L M^(−1/2) against scipy.linalg.eigh(L, M)."""
    areas = netlist.areas + 0.5
    graph = CliqueGraph.from_netlist(netlist, "bounding")
    adjacency = graph.adjacency().toarray()
    pencil = scipy.linalg.eigh(np.diag(adjacency.sum(axis=1)) - adjacency, np.diag(areas), eigvals_only=True)
    ours = np.linalg.eigvalsh(area_weighted_laplacian(graph, areas) @ np.eye(netlist.num_cells))
    assert np.allclose(ours, pencil, rtol=1e-9, atol=1e-9 * (1 + abs(pencil).max()))


def test_area_weighted_form_refuses_zero_areas() -> None:
    graph = CliqueGraph.from_netlist(make_netlist([[0, 1]], 2))
    with pytest.raises(ValueRangeError):
        area_weighted_laplacian(graph, np.array([1.0, 0.0]))


def test_a_net_of_a_hundred_thousand_cells_takes_linear_memory() -> None:
    """Its clique has five thousand million pairs; products must not care, writing it out must be refused."""
    size = 100_000
    netlist = make_netlist([list(range(size)), [0, 1]], size)
    graph = CliqueGraph.from_netlist(netlist, "standard")
    x = np.zeros(size)
    x[0] = 1.0
    product = graph.operator() @ x
    assert product[0] == pytest.approx(0.0, abs=1e-15)
    assert product[1] == pytest.approx(1.0 + 1 / (size - 1), rel=1e-12)
    assert product[2] == pytest.approx(1 / (size - 1), rel=1e-12)
    assert graph.cut_weight(np.arange(size) < size // 2) == pytest.approx((size / 2) ** 2 / (size - 1), rel=1e-12)
    with pytest.raises(UsageError, match="refused"):
        graph.adjacency()
