"""The diagonal bound: proofs hold, false claims fail, no bound exceeds the optimum, and it beats the eigenvalue bound."""

from __future__ import annotations

from fractions import Fraction

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from netpart.bounds import (
    Certificate,
    CertificateError,
    check_diagonal,
    diagonal_bound,
    dump_certificates,
    load_certificates,
    spectral_bound,
)
from netpart.bounds.diagonal import BORDER_SCALE, DiagonalProof, legal_band, verify_diagonal
from netpart.bounds.eigenproof import StarMatrix
from netpart.expand import CliqueGraph, laplacian
from netpart.netlist import OBJECTIVES, Netlist, Rules
from tests.bounds.test_spectral import optimum_of_two
from tests.expand.graphs import netlist_of
from tests.strategies import enumerate_optimum, make_netlist, netlists


@settings(max_examples=60)
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
    found = diagonal_bound(netlist, rules, objective, max_calls=120)
    optimum = enumerate_optimum(netlist, rules, objective)
    if found is not None and optimum is not None:
        assert found.bound.verified
        assert found.bound.value <= optimum * (1 + 1e-12)


@pytest.mark.parametrize("batch", range(10))
def test_random_netlists_with_all_kinds_of_areas(batch: int) -> None:
    """Ten times twenty little netlists, where the bound is often near the optimum."""
    rng = np.random.default_rng(1000 + batch)
    tight = 0
    for _ in range(20):
        n = int(rng.integers(3, 11))
        sizes = rng.integers(2, min(n, 5) + 1, int(rng.integers(n, 4 * n)))
        nets = [rng.choice(n, size, replace=False).tolist() for size in sizes]
        kind = int(rng.integers(4))
        areas = [
            None,
            rng.integers(0, 4, n).astype(float).tolist(),
            rng.uniform(0, 1, n).tolist(),
            (0.1 * rng.integers(0, 9, n)).tolist(),
        ][kind]
        weights = None if rng.random() < 0.6 else (10.0 ** rng.uniform(-1, 1, len(nets))).tolist()
        netlist = make_netlist(nets, n, areas=areas, weights=weights)
        share = [None, (3, 2), (1, 3)][int(rng.integers(3))]
        tolerance = [Fraction(0), Fraction(1, 20), Fraction(1, 5), Fraction(3, 10)][int(rng.integers(4))]
        rules = Rules.from_request(2, share, tolerance)
        found, optimum = diagonal_bound(netlist, rules, max_calls=150), optimum_of_two(netlist, rules)
        if found is not None and optimum is not None:
            assert found.bound.value <= optimum * (1 + 1e-12)
            tight += found.bound.value >= 0.8 * optimum
    assert tight >= 1


@pytest.mark.parametrize("seed", range(12))
def test_it_is_at_least_the_eigenvalue_bound(seed: int) -> None:
    """For equal halves D = −λ/A-multiples of the areas and α = λ/A are a feasible choice, so the best is no worse."""
    rng = np.random.default_rng(seed)
    graph = nx.compose(nx.gnm_random_graph(40, 80, seed=seed), nx.path_graph(40))
    netlist = netlist_of(graph)
    rules = Rules.from_request(2, tolerance=Fraction(int(rng.integers(0, 4)), 20))
    diagonal, spectral = diagonal_bound(netlist, rules), spectral_bound(netlist, rules)
    assert diagonal is not None
    assert spectral is not None
    assert diagonal.bound.value >= spectral.value


def test_regular_symmetric_graphs_gain_nothing() -> None:
    """On a vertex-transitive graph the best diagonal is constant (Poljak & Rendl 1995): Q_d keeps its width 2^(d−1)."""
    for dimension in (3, 5, 7):
        found = diagonal_bound(netlist_of(nx.hypercube_graph(dimension)), Rules.from_request(2, tolerance=0))
        assert found is not None
        assert found.bound.value == 2 ** (dimension - 1)


def test_complete_graph_in_three_blocks() -> None:
    """K_12 into 3 × 4 cuts 48 edges; each block against the rest cuts 32, and half of 3 · 32 is tight."""
    found = diagonal_bound(netlist_of(nx.complete_graph(12)), Rules.from_request(3, tolerance=0))
    assert found is not None
    assert found.bound.value == 48


def test_pieces_that_can_be_kept_whole_are_not_charged() -> None:
    """Two K_6 fit the halves, so there is nothing to prove; where they do not fit, they are."""
    netlist = netlist_of(nx.disjoint_union(nx.complete_graph(6), nx.complete_graph(6)))
    assert diagonal_bound(netlist, Rules.from_request(2, tolerance=0)) is None
    lopsided = netlist_of(nx.disjoint_union(nx.complete_graph(10), nx.complete_graph(2)))
    found, optimum = diagonal_bound(lopsided, Rules.from_request(2, tolerance=0)), 4 * 6
    assert found is not None
    assert 16 <= found.bound.value <= optimum


def exact_matrix(graph: CliqueGraph, row: np.ndarray, proof: DiagonalProof) -> np.ndarray:
    weight = float(Fraction(BORDER_SCALE) ** 2 / Fraction(proof.resistance))
    return laplacian(graph) @ np.eye(graph.num_vertices) + np.diag(proof.diagonal) + weight * np.outer(row, row)


@pytest.mark.parametrize("seed", range(30))
def test_only_semidefinite_claims_are_accepted(seed: int) -> None:
    """Random diagonals around the border of definiteness, against a dense eigensolver."""
    rng = np.random.default_rng(seed)
    n = int(rng.integers(5, 25))
    nets = [[i, i + 1] for i in range(n - 1)]
    nets += [rng.choice(n, int(rng.integers(2, min(n, 8))), replace=False).tolist() for _ in range(n)]
    netlist = make_netlist(nets, n, areas=rng.integers(0, 5, n).astype(float).tolist())
    graph = CliqueGraph.from_netlist(netlist, "bounding", 4)
    band = legal_band(netlist, Rules.from_request(2, tolerance="0.2"), 0)
    assert band is not None
    matrix = StarMatrix.from_graph(graph).with_border(band.row * BORDER_SCALE)
    rough = rng.normal(size=n) * 0.5
    resistance = float(10.0 ** rng.uniform(-2, 1))
    lowest = float(np.linalg.eigvalsh(exact_matrix(graph, band.row, DiagonalProof(rough, resistance)))[0])
    for offset in (1e-6, 1e-3, 0.1):
        proof = DiagonalProof(rough - lowest + offset, resistance)
        value = verify_diagonal(matrix, band, proof)
        assert value is not None
        weight = BORDER_SCALE**2 / resistance
        assert float(value) == pytest.approx(-(proof.diagonal.sum() + weight * float(band.radius) ** 2) / 4)
        assert verify_diagonal(matrix, band, DiagonalProof(rough - lowest - offset, resistance)) is None
    assert verify_diagonal(matrix, band, DiagonalProof(rough - lowest + 1, -1.0)) is None
    assert verify_diagonal(matrix, band, DiagonalProof(rough + np.nan, 1.0)) is None


@given(netlists(max_cells=9), st.sampled_from([None, (1, 2), (5, 3)]), st.sampled_from(["0", "0.1", "0.4"]))
def test_band_holds_every_legal_partition(netlist: Netlist, shares: tuple[int, int] | None, tolerance: str) -> None:
    rules = Rules.from_request(2, shares, tolerance)
    window = rules.window(netlist)
    bands = [legal_band(netlist, rules, block) for block in (0, 1)]
    for mask in range(2**netlist.num_cells):
        side = (mask >> np.arange(netlist.num_cells)) & 1
        if np.any(window.violation(np.bincount(side, netlist.areas, 2)) > 0) or not netlist.areas.any():
            continue
        for block, band in enumerate(bands):
            assert band is not None
            x = [1 if s == block else -1 for s in side.tolist()] + [1]
            row = [Fraction(value) for value in band.row.tolist()]
            assert abs(sum((s * value for s, value in zip(x, row, strict=False)), Fraction(0))) <= band.radius


def test_a_graph_of_the_caller_is_taken_as_it_is() -> None:
    """Half the clique expansion bounds half as much."""
    netlist = netlist_of(nx.hypercube_graph(5))
    rules = Rules.from_request(2, tolerance=0)
    found = diagonal_bound(netlist, rules, graph=CliqueGraph.from_netlist(netlist, np.full(netlist.num_nets, 0.5)))
    assert found is not None
    assert found.bound.value == 8


def test_nothing_to_bound() -> None:
    assert diagonal_bound(make_netlist([], 4), Rules.from_request(2)) is None
    assert diagonal_bound(make_netlist([[0, 1]], 2, areas=[0, 0]), Rules.from_request(2)) is None
    cube = netlist_of(nx.hypercube_graph(6))
    assert diagonal_bound(cube, Rules.from_request(2), max_operations=10) is None


def small_case() -> tuple[Netlist, Rules]:
    rng = np.random.default_rng(7)
    nets = [[i, i + 1] for i in range(29)] + [rng.choice(30, 3, replace=False).tolist() for _ in range(40)]
    return make_netlist(nets, 30, weights=rng.integers(1, 4, 69).astype(float).tolist()), Rules.from_request(3, (2, 1, 1))


@pytest.mark.parametrize("objective", OBJECTIVES)
def test_certificate_leads_to_the_same_bound(objective: str) -> None:
    netlist, rules = small_case()
    found = diagonal_bound(netlist, rules, objective)
    assert found is not None
    assert found.certificate is not None
    stored = dump_certificates(netlist, rules, [found.certificate])
    (again,) = load_certificates(stored, netlist, rules)
    assert check_diagonal(netlist, rules, again) == (objective, found.bound.value)


def test_spoilt_certificates_are_refused() -> None:
    netlist, rules = small_case()
    found = diagonal_bound(netlist, rules)
    assert found is not None
    assert found.certificate is not None
    arrays = found.certificate.arrays
    diagonals, resistances = arrays["diagonals"], arrays["resistances"]
    spoilt = diagonals.copy()
    spoilt[0, :30] -= 0.05
    heavier = np.append(diagonals[:, :29], diagonals[:, 29:] - 30, axis=1)
    for change in (
        {"diagonals": spoilt},
        {"diagonals": heavier},
        {"diagonals": diagonals + np.nan},
        {"diagonals": diagonals[:, :-1]},
        {"shares": arrays["shares"][:, :-1]},
        {"shares": np.zeros_like(arrays["shares"])},
        {"resistances": -resistances},
        {"resistances": resistances * 1e6},
        {"objective": np.array([7])},
    ):
        certificate = Certificate("diagonal", {**arrays, **change})
        with pytest.raises(CertificateError, match="diagonal certificate"):
            check_diagonal(netlist, rules, certificate)
    missing = Certificate(
        "diagonal",
        {
            **arrays,
            "blocks": arrays["blocks"][:1],
            "diagonals": diagonals[:1],
            "resistances": resistances[:1],
            "shares": arrays["shares"][:1],
        },
    )
    assert check_diagonal(netlist, rules, missing)[1] <= found.bound.value
