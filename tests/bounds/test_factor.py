"""Sparse factors, their predicted size, and the bound on their error, against exact arithmetic."""

from __future__ import annotations

from fractions import Fraction

import networkx as nx
import numpy as np
import pytest
import scipy.sparse as sp

from netpart.bounds.factor import Factors, factorize, plan_elimination
from netpart.bounds.factor_kernels import find_supernodes


def random_symmetric(rng: np.random.Generator, size: int, density: float) -> sp.csc_array:
    half = sp.random_array((size, size), density=density, rng=rng, data_sampler=lambda size: rng.normal(size=size))
    dense = sp.triu(half, 1)
    return sp.csc_array(dense + dense.T + sp.diags_array(rng.uniform(1, 4, size)))


def exact_row_sums(matrix: sp.csc_array, factors: Factors) -> list[Fraction]:
    """Row sums of |F − L D Lᵀ| in rational arithmetic, with the numbers that are stored."""
    size = matrix.shape[0]
    lower = [[Fraction(x) for x in row] for row in factors.lower.toarray().tolist()]
    pivots = [Fraction(x) for x in factors.pivots.tolist()]
    inner = [[Fraction(x) for x in row] for row in matrix.toarray().tolist()]
    sums = []
    for u in range(size):
        i, total = int(factors.place[u]), Fraction(0)
        for v in range(size):
            j = int(factors.place[v])
            product = sum((lower[i][k] * pivots[k] * lower[j][k] for k in range(min(i, j) + 1)), Fraction(0))
            total += abs(inner[u][v] - product)
        sums.append(total)
    return sums


@pytest.mark.parametrize("seed", range(25))
def test_measured_error_covers_the_exact_one(seed: int) -> None:
    rng = np.random.default_rng(seed)
    size = int(rng.integers(2, 26))
    matrix = random_symmetric(rng, size, float(rng.uniform(0.05, 0.6)))
    factors = factorize(matrix, plan_elimination(matrix))
    assert factors is not None
    exact, measured = exact_row_sums(matrix, factors), factors.measure_error(matrix)
    assert all(Fraction(bound) >= true for bound, true in zip(measured.tolist(), exact, strict=True))
    scale = float(np.max(np.abs(factors.lower.toarray()) @ np.abs(factors.pivots)[:, None])) + 10
    assert measured.max() < 1e-12 * scale * size


@pytest.mark.parametrize("seed", range(10))
def test_a_false_factor_is_measured_as_false(seed: int) -> None:
    """The error does not rest on where the factors come from: a spoilt entry shows in full."""
    rng = np.random.default_rng(seed)
    matrix = random_symmetric(rng, 12, 0.3)
    factors = factorize(matrix, plan_elimination(matrix))
    assert factors is not None
    factors.lower.data[int(rng.integers(len(factors.lower.data)))] += 0.01
    factors.pivots[3] *= 1.001
    exact, measured = exact_row_sums(matrix, factors), factors.measure_error(matrix)
    assert all(Fraction(bound) >= true for bound, true in zip(measured.tolist(), exact, strict=True))
    assert measured.max() > 1e-4


@pytest.mark.parametrize("seed", range(10))
def test_pivots_carry_the_inertia(seed: int) -> None:
    """Sylvester's law, against a dense eigensolver."""
    rng = np.random.default_rng(100 + seed)
    matrix = random_symmetric(rng, 40, 0.2) - sp.diags_array(np.full(40, 2.0))
    factors = factorize(sp.csc_array(matrix), plan_elimination(sp.csc_array(matrix)))
    assert factors is not None
    assert factors.num_negative == int(np.sum(np.linalg.eigvalsh(matrix.toarray()) < 0))


def test_supernodes_and_dense_blocks_change_nothing() -> None:
    """A larger matrix, where dense products are used: the computed residual is as small as arithmetic allows."""
    graph = nx.random_regular_graph(8, 900, seed=1)
    matrix = sp.csc_array(nx.laplacian_matrix(graph).astype(float) + 0.5 * sp.eye_array(900))
    factors = factorize(matrix, plan_elimination(matrix))
    assert factors is not None
    starts = find_supernodes(factors.lower.indptr.astype(np.int64), factors.lower.indices.astype(np.int32), 64)
    assert starts[0] == 0
    assert starts[-1] == 900
    assert np.max(np.diff(starts)) == 64
    product = factors.lower @ sp.diags_array(factors.pivots) @ factors.lower.T
    shuffled = matrix.toarray()[np.ix_(np.argsort(factors.place), np.argsort(factors.place))]
    plain = np.abs(shuffled - product.toarray()).sum(axis=1)[factors.place]
    measured = factors.measure_error(matrix)
    assert np.all(measured > plain)
    assert measured.max() < 1e-10


@pytest.mark.parametrize("seed", range(8))
def test_predicted_fill_is_that_of_elimination(seed: int) -> None:
    """Against the elimination game: removing a vertex joins its neighbours (Rose, Tarjan & Lueker 1976)."""
    graph = nx.gnm_random_graph(30, 60, seed=seed)
    matrix = sp.csc_array(nx.laplacian_matrix(graph).astype(float) + sp.eye_array(30))
    plan = plan_elimination(matrix)
    assert sorted(plan.order.tolist()) == list(range(30))
    counts = []
    for v in plan.order.tolist():
        neighbours = list(graph.neighbors(v))
        counts.append(1 + len(neighbours))
        graph.add_edges_from((a, b) for a in neighbours for b in neighbours if a != b)
        graph.remove_node(v)
    assert plan.num_entries == sum(counts)
    assert plan.num_operations == sum(count**2 for count in counts)
    assert plan.longest_column == max(counts)


def test_a_singular_matrix_has_no_factors() -> None:
    matrix = sp.csc_array(np.array([[1.0, 1.0, 0.0], [1.0, 1.0, 0.0], [0.0, 0.0, 1.0]]))
    assert factorize(matrix, plan_elimination(matrix)) is None
