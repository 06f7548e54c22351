"""The semidefinite program behind the diagonal bound, solved with vectors in few dimensions.

Unit vectors v_i are to minimise Σ L_ij v_i·v_j under |Σ b_i v_i| ≤ r (S. Burer and R. D. C. Monteiro, Mathematical
Programming 95, 2003): an augmented Lagrangian for the one constraint, limited-memory BFGS for the vectors. Its multipliers
are the diagonal D and the weight α that the bound is made of. What is found here is only claimed; `diagonal` proves it.
"""

from __future__ import annotations

import math
from collections import deque
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from netpart.bounds.eigenproof import StarMatrix
from netpart.bounds.factor import Factors, factorize
from netpart.expand import CliqueGraph
from netpart.spectral import find_smallest

__all__ = ["find_shift", "optimize_diagonal", "start_vectors", "start_weight"]

_RANK = 12
_START = 3e-2
_CALLS = 250
_MEMORY = 10


def start_vectors(size: int) -> NDArray[np.float64]:
    """(n, r) random vectors, always the same ones."""
    return np.random.default_rng(0).normal(size=(size, _RANK))


def start_weight(graph: CliqueGraph, row: NDArray[np.float64]) -> float:
    """A small α in the right units: the penalty raises it from there."""
    return _START * float(graph.degrees.mean()) / float(np.abs(row).sum())


def optimize_diagonal(
    graph: CliqueGraph,
    row: NDArray[np.float64],
    radius: float,
    weight: float,
    vectors: NDArray[np.float64],
    max_products: int,
) -> tuple[NDArray[np.float64], float, NDArray[np.float64]]:
    """D and α from the low-rank semidefinite program, and its vectors; nothing about them is guaranteed.

    Parameters
    ----------
    graph : CliqueGraph
    row : (n,) float64
        b.
    radius : float
        r.
    weight : float
        Where to start with α.
    vectors : (n, r) float64
        Where to start with the vectors, of any length but zero.
    max_products : int
        Products with the Laplacian to spend.
    """
    total = float(np.abs(row).sum())
    reach = max(radius, 0.05 * total) ** 2
    penalty = 4 * weight / reach
    # Rows of different length are a diagonal preconditioner: a step in row i is divided by its length squared.
    lengths = np.sqrt(np.maximum(graph.degrees + 4 * weight * row**2, 1e-3 * float(graph.degrees.mean())))[:, None]
    vectors = vectors / _lengths(vectors)
    shape = vectors.shape

    def lagrangian(flat: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]:
        raw = flat.reshape(shape)
        sizes = _lengths(raw)
        unit = raw / sizes
        image = graph.degrees[:, None] * unit - graph.multiply(unit)
        pull = _combine(row, unit)
        multiplier = max(0.0, weight + penalty * (_dot(pull, pull) - radius**2))
        value = _dot(unit.ravel(), image.ravel()) + (multiplier**2 - weight**2) / (2 * penalty)
        image += (multiplier * row)[:, None] * pull
        image -= unit * np.einsum("ij,ij->i", unit, image)[:, None]
        image *= 2 / sizes
        return value, image.ravel()

    spent, last = 0, math.inf
    while spent < max_products:
        flat, calls, settled = _minimize(lagrangian, (vectors * lengths).ravel(), min(_CALLS, max_products - spent))
        spent += calls
        vectors = flat.reshape(shape)
        vectors = vectors / _lengths(vectors)
        pull = _combine(row, vectors)
        excess = _dot(pull, pull) - radius**2
        weight = max(0.0, weight + penalty * excess)
        if abs(excess) > 0.3 * last:
            penalty *= 3
        last = abs(excess)
        image = graph.degrees[:, None] * vectors - graph.multiply(vectors)
        primal = _dot(vectors.ravel(), image.ravel())
        diagonal = -np.einsum("ij,ij->i", vectors, image + (weight * row)[:, None] * pull)
        dual = -float(diagonal.sum()) - weight * radius**2
        if settled and abs(primal - dual) <= 1e-3 * abs(dual):
            break
    return diagonal, weight, vectors


def _minimize(
    function: Callable[[NDArray[np.float64]], tuple[float, NDArray[np.float64]]], x: NDArray[np.float64], max_calls: int
) -> tuple[NDArray[np.float64], int, bool]:
    """Limited-memory BFGS with backtracking (J. Nocedal, Mathematics of Computation 35, 1980); the calls used, and whether
    the value has settled.

    SciPy's solves systems of the memory's size with a LAPACK that starts threads for them, which costs more than all the
    rest of a step where other threads are at work. The vectors are scaled so that a step of one half is a fair first try.
    """
    value, gradient = function(x)
    calls, memory = 1, deque[tuple[NDArray[np.float64], NDArray[np.float64], float]](maxlen=_MEMORY)
    while calls < max_calls:
        direction = -_apply_inverse(memory, gradient)
        slope = _dot(direction, gradient)
        if not slope < 0:
            memory.clear()
            direction, slope = -0.5 * gradient, -0.5 * _dot(gradient, gradient)
            if slope == 0:
                return x, calls, True
        step = 1.0
        while True:
            trial = x + step * direction
            new_value, new_gradient = function(trial)
            calls += 1
            if new_value <= value + 1e-4 * step * slope or calls >= max_calls or step < 1e-10:
                break
            # The minimum of the parabola through both values and the slope, kept within reach.
            step *= min(max(-slope * step / (2 * (new_value - value - slope * step)), 0.1), 0.5)
        if new_value > value:
            return x, calls, step < 1e-10
        change, turn = trial - x, new_gradient - gradient
        curvature = _dot(change, turn)
        if curvature > 1e-12 * _dot(turn, turn):
            memory.append((change, turn, curvature))
        settled = value - new_value <= 1e-10 * abs(value)
        x, value, gradient = trial, new_value, new_gradient
        if settled:
            return x, calls, True
    return x, calls, False


def _apply_inverse(
    memory: deque[tuple[NDArray[np.float64], NDArray[np.float64], float]], gradient: NDArray[np.float64]
) -> NDArray[np.float64]:
    """The inverse Hessian that the last steps suggest, times the gradient: the two loops of Nocedal."""
    result = gradient.copy()
    factors = []
    for change, turn, curvature in reversed(memory):
        factors.append(_dot(change, result) / curvature)
        result -= factors[-1] * turn
    if memory:
        _, turn, curvature = memory[-1]
        result *= curvature / _dot(turn, turn)
    else:
        result *= 0.5
    for (change, turn, curvature), factor in zip(memory, reversed(factors), strict=True):
        result += (factor - _dot(turn, result) / curvature) * change
    return result


def find_shift(
    matrix: StarMatrix, diagonal: NDArray[np.float64], resistance: float
) -> tuple[float, NDArray[np.float64] | None]:
    """The smallest τ, about, with which L + D + τ I + α b bᵀ is definite, and the direction in which it fails first.

    Powers of ten until the inertia is right; from there Lanczos on the inverse, whose top is −1/λ_min.
    """
    size = len(diagonal)
    load = np.zeros(matrix.laplacian.shape[0])
    load[-1] = resistance
    unit = 1e-9 * float(matrix.laplacian.diagonal()[:size].mean())
    for power in range(9):
        shift = unit * 10.0**power
        load[:size] = -(diagonal + shift)
        factors = factorize(matrix.subtract(load), matrix.elimination)
        if factors is None or factors.num_negative > 1:
            continue
        if power == 0:
            return shift, None
        value, vector = _find_lowest(factors, size)
        return min(shift, shift - value * 0.99 + unit), vector
    return math.inf, None


def _find_lowest(factors: Factors, size: int) -> tuple[float, NDArray[np.float64]]:
    """The smallest eigenvalue, and its vector, of a bordered definite matrix with border and centres eliminated."""
    padded = np.zeros(len(factors.pivots))
    place = factors.place[:size]

    def invert(x: NDArray[np.float64]) -> NDArray[np.float64]:
        padded[:] = 0.0
        padded[place] = x
        return -factors.solver.solve(padded)[place]

    start = np.cos(np.arange(size) * 1.618)
    value, vector, _, _ = find_smallest(invert, np.zeros((0, size)), start, tolerance=1e-3, max_steps=100)
    return -1.0 / value, vector


def _lengths(vectors: NDArray[np.float64]) -> NDArray[np.float64]:
    sizes: NDArray[np.float64] = np.sqrt(np.einsum("ij,ij->i", vectors, vectors))[:, None]
    return sizes


def _dot(x: NDArray[np.float64], y: NDArray[np.float64]) -> float:
    return float(np.einsum("i,i->", x, y))


def _combine(row: NDArray[np.float64], vectors: NDArray[np.float64]) -> NDArray[np.float64]:
    """Σ b_i v_i. Like all sums here it is NumPy's own: BLAS starts threads, and its last bits depend on how many."""
    total: NDArray[np.float64] = np.einsum("i,ij->j", row, vectors)
    return total
