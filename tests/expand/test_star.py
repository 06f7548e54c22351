"""The star expansion: eliminating the centres gives the clique with weight s/|e|."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from netpart.expand import WEIGHTINGS, CliqueGraph, StarGraph, laplacian, pair_weights
from netpart.netlist import Netlist
from tests.expand.graphs import dense_clique
from tests.strategies import make_netlist, netlists


def eliminate(matrix: np.ndarray, num_kept: int) -> np.ndarray:
    """The Schur complement with dense algebra."""
    kept, crossing, gone = matrix[:num_kept, :num_kept], matrix[:num_kept, num_kept:], matrix[num_kept:, num_kept:]
    return kept - crossing @ np.linalg.solve(gone, crossing.T) if len(gone) else kept


def test_one_net_of_three_by_hand() -> None:
    """Spokes of weight 3 around a centre: eliminating it leaves the triangle with weight 3/3 = 1."""
    star = StarGraph.from_netlist(make_netlist([[0, 1, 2]], 3, weights=[3.0]))
    whole = star.laplacian().toarray()
    assert whole.tolist() == [[3, 0, 0, -3], [0, 3, 0, -3], [0, 0, 3, -3], [-3, -3, -3, 9]]
    triangle = [[2, -1, -1], [-1, 2, -1], [-1, -1, 2]]
    assert np.allclose(eliminate(whole, 3), triangle)
    assert np.allclose(star.schur_complement() @ np.eye(3), triangle)


@given(netlists(max_net_size=7))
def test_schur_complement_is_the_clique_of_weight_s_over_size(netlist: Netlist) -> None:
    star = StarGraph.from_netlist(netlist)
    sizes = np.maximum(netlist.net_sizes, 1)
    adjacency = dense_clique(netlist, netlist.net_weights / sizes)
    expected = np.diag(adjacency.sum(axis=1)) - adjacency
    n = netlist.num_cells
    assert np.allclose(eliminate(star.laplacian().toarray(), n), expected, rtol=1e-10, atol=1e-10)
    assert np.allclose(star.schur_complement() @ np.eye(n), expected, rtol=1e-10, atol=1e-10)
    assert np.allclose(laplacian(star.to_cliques()) @ np.eye(n), expected, rtol=1e-10, atol=1e-10)


@given(netlists(max_net_size=8), st.sampled_from(WEIGHTINGS), st.integers(1, 8))
def test_stars_of_a_clique_graph_give_it_back(netlist: Netlist, weighting: str, paired_size: int) -> None:
    graph = CliqueGraph.from_netlist(netlist, pair_weights(netlist, weighting), paired_size)  # type: ignore[arg-type]
    star = StarGraph.from_cliques(graph)
    dense = star.laplacian().toarray()
    assert np.allclose(dense, dense.T)
    assert np.allclose(dense.sum(axis=1), 0, atol=1e-12)
    n = netlist.num_cells
    assert star.num_cells == n
    assert star.num_centres == len(graph.clique_weights)
    assert np.allclose(eliminate(dense, n), laplacian(graph) @ np.eye(n), rtol=1e-10, atol=1e-10)
