"""Proofs about eigenvalues: what is true is proved, what is false never is."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest
import scipy.linalg
from mpmath import mp

from netpart.bounds import StarMatrix, verify_eigenvalue
from netpart.expand import CliqueGraph, pair_weights
from netpart.netlist import Netlist
from tests.expand.graphs import dense_clique, netlist_of
from tests.strategies import make_netlist

CLOSED_FORMS = [
    # A. E. Brouwer and W. H. Haemers, Spectra of Graphs, 2012, sections 1.4 and 12.5: the λ_1 of L = D − A, and how many
    # eigenvalues lie at or below it
    ("complete K_9: 9", nx.complete_graph(9), 9.0, 9),
    ("complete bipartite K_4,7: 4", nx.complete_bipartite_graph(4, 7), 4.0, 7),
    ("path P_30: 2 − 2 cos(π/30)", nx.path_graph(30), 2 - 2 * np.cos(np.pi / 30), 2),
    ("cycle C_24: 2 − 2 cos(2π/24)", nx.cycle_graph(24), 2 - 2 * np.cos(2 * np.pi / 24), 3),
    ("hypercube Q_6: 2", nx.hypercube_graph(6), 2.0, 7),
    ("grid 5 × 8: 2 − 2 cos(π/8)", nx.grid_2d_graph(5, 8), 2 - 2 * np.cos(np.pi / 8), 2),
    ("Petersen graph: 2", nx.petersen_graph(), 2.0, 6),
]


@pytest.mark.parametrize(("name", "graph", "expected", "count"), CLOSED_FORMS, ids=[form[0] for form in CLOSED_FORMS])
def test_closed_forms_are_proved_from_below_and_never_from_above(
    name: str, graph: nx.Graph, expected: float, count: int
) -> None:
    netlist = netlist_of(graph)
    matrix = StarMatrix.from_graph(CliqueGraph.from_netlist(netlist))
    masses = np.ones(netlist.num_cells)
    for index in range(1, count):
        assert verify_eigenvalue(matrix, masses, expected * (1 - 1e-5), index)
        assert not verify_eigenvalue(matrix, masses, expected * (1 + 1e-7), index)


def random_case(seed: int) -> tuple[Netlist, np.ndarray]:
    rng = np.random.default_rng(seed)
    n = int(rng.integers(4, 40))
    nets = [[i, i + 1] for i in range(n - 1)]
    nets += [rng.choice(n, int(rng.integers(2, min(n, 14))), replace=False).tolist() for _ in range(int(rng.integers(0, n)))]
    weights = (10.0 ** rng.uniform(-2, 2, len(nets))).tolist()
    masses = np.where(rng.random(n) < 0.25, 0.0, 10.0 ** rng.uniform(-2, 2, n))
    masses[:3] = 1.0
    return make_netlist(nets, n, weights=weights), masses


@pytest.mark.parametrize("seed", range(150))
def test_random_pencils_with_massless_cells(seed: int) -> None:
    """Against dense eigenvalues of the pencil with the massless cells eliminated; claims from 10⁻⁷ below to above."""
    netlist, masses = random_case(seed)
    weights = pair_weights(netlist, "bounding")
    adjacency = dense_clique(netlist, weights)
    full = np.diag(adjacency.sum(axis=1)) - adjacency
    heavy, light = masses > 0, masses == 0
    reduced = full[np.ix_(heavy, heavy)]
    if light.any():
        reduced = reduced - full[np.ix_(heavy, light)] @ np.linalg.solve(
            full[np.ix_(light, light)], full[np.ix_(light, heavy)]
        )
    values = scipy.linalg.eigh((reduced + reduced.T) / 2, np.diag(masses[heavy]), eigvals_only=True)
    matrix = StarMatrix.from_graph(CliqueGraph.from_netlist(netlist, weights, paired_size=4))
    for index in range(1, min(3, len(values))):
        true = float(values[index])
        assert verify_eigenvalue(matrix, masses, true * (1 - 1e-5), index)
        for excess in (1e-6, 1e-3, 1.0, 1e3):
            if index + 1 == len(values) or true * (1 + excess) < values[index + 1]:
                assert not verify_eigenvalue(matrix, masses, true * (1 + excess), index)


def test_a_claim_just_above_the_truth_fails_in_high_precision() -> None:
    """The true eigenvalue to 50 digits (mpmath): claims above it by rounding errors only must fail as well."""
    netlist, _ = random_case(5)
    weights = pair_weights(netlist, "bounding")
    n = netlist.num_cells
    mp.dps = 50
    laplacian = mp.zeros(n, n)
    for net in range(netlist.num_nets):
        cells = netlist.cells_of(net).tolist()
        for u in cells:
            for v in cells:
                if u != v:
                    laplacian[u, u] += mp.mpf(float(weights[net]))
                    laplacian[u, v] -= mp.mpf(float(weights[net]))
    true = sorted(mp.eigsy(laplacian, eigvals_only=True))[1]
    matrix = StarMatrix.from_graph(CliqueGraph.from_netlist(netlist, weights, paired_size=4))
    ones = np.ones(n)
    assert verify_eigenvalue(matrix, ones, float(true) * (1 - 1e-8))
    claim = float(true)
    for _ in range(60):
        claim = float(np.nextafter(claim, np.inf))
        if mp.mpf(claim) > true:
            assert not verify_eigenvalue(matrix, ones, claim)


def test_nonsense_is_refused() -> None:
    matrix = StarMatrix.from_graph(CliqueGraph.from_netlist(netlist_of(nx.path_graph(4))))
    ones = np.ones(4)
    for claim in (0.0, -1.0, float("nan"), float("inf")):
        assert not verify_eigenvalue(matrix, ones, claim)
    assert not verify_eigenvalue(matrix, np.array([1, 1, 1, -1.0]), 0.1)
    assert not verify_eigenvalue(matrix, np.array([1, 1, 1, np.nan]), 0.1)


def test_two_pieces_have_no_positive_eigenvalue_to_prove() -> None:
    graph = nx.disjoint_union(nx.complete_graph(5), nx.complete_graph(5))
    matrix = StarMatrix.from_graph(CliqueGraph.from_netlist(netlist_of(graph)))
    assert not verify_eigenvalue(matrix, np.ones(10), 1e-6)
    assert verify_eigenvalue(matrix, np.ones(10), 4.999, index=2)
