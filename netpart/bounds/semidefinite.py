"""The semidefinite program behind the diagonal bound, solved with vectors in few dimensions.

Unit vectors v_i are to minimise Σ L_ij v_i·v_j under |Σ b_i v_i| ≤ r (S. Burer and R. D. C. Monteiro, Mathematical
Programming 95, 2003): an augmented Lagrangian for the one constraint, limited-memory BFGS for the vectors. Its multipliers
are the diagonal D and the weight α that the bound is made of. What is found here is only claimed; `diagonal` proves it.

The graph may be chosen with them. Of all safe mixtures of a net's parts (`netgraph`) the best for the bound is the one that
the vectors strain most; so each net costs the largest of its parts, a power mean makes that smooth, and its derivatives by
the parts are the mixture. The energy stays convex in the products v_i·v_j.
"""

from __future__ import annotations

import math
from collections import deque
from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from netpart.bounds.eigenproof import StarMatrix
from netpart.bounds.factor import Factors, factorize
from netpart.bounds.netgraph import NetParts
from netpart.expand import CliqueGraph
from netpart.spectral import find_smallest

__all__ = ["Energy", "GraphEnergy", "NetEnergy", "Vectors", "find_shift", "minimize_energy"]

_RANK = 12
_START = 3e-2
_CALLS = 250
_MEMORY = 10


class Energy(Protocol):
    """What is minimised: a convex function of the products v_i·v_j of unit vectors.

    Called with vectors (n, r) it gives the value and half the gradient; `degrees` are the diagonal of its Laplacian, about.
    """

    degrees: NDArray[np.float64]

    def __call__(self, vectors: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]: ...


class GraphEnergy:
    """Σ L_ij v_i·v_j of a graph."""

    def __init__(self, graph: CliqueGraph) -> None:
        self.graph = graph
        self.degrees = graph.degrees

    def __call__(self, vectors: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]:
        """The value, and L V."""
        image = self.degrees[:, None] * vectors - self.graph.multiply(vectors)
        return _dot(vectors.ravel(), image.ravel()), image


class NetEnergy:
    """What the nets cost where each takes the costliest of its parts, as a power mean; `shares` are the mixture found."""

    def __init__(self, parts: NetParts, power: float, degrees: NDArray[np.float64]) -> None:
        self.parts = parts
        self.power = power
        self.degrees = degrees
        self.large = GraphEnergy(parts.large_nets().widen(len(degrees)))
        self.shares = np.zeros(parts.num_shares)

    def __call__(self, vectors: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]:
        """The value and half its gradient."""
        value, gradient = self.large(vectors)
        return value + self.parts.evaluate(vectors, self.power, gradient, self.shares), gradient


@dataclass(slots=True, eq=False)
class Vectors:
    """The state of a search: the vectors and the multipliers that belong to them.

    Attributes
    ----------
    units : (n, r) float64
        Unit vectors.
    weight : float
        α.
    penalty : float
        By how much |Σ b_i v_i|² above r² raises α.
    diagonal : (n,) float64
        D.
    spent : int
        How often an energy was evaluated.
    """

    units: NDArray[np.float64]
    weight: float
    penalty: float
    diagonal: NDArray[np.float64]
    spent: int = 0

    @classmethod
    def start(cls, degrees: NDArray[np.float64], row: NDArray[np.float64], radius: float) -> Vectors:
        """Random vectors, always the same, and a small α in the right units: the penalty raises it from there."""
        raw = np.random.default_rng(0).normal(size=(len(row), _RANK))
        total = float(np.abs(row).sum())
        weight = _START * float(degrees.mean()) / total
        penalty = 4 * weight / max(radius, 0.05 * total) ** 2
        return cls(raw / _lengths(raw), weight, penalty, np.zeros(len(row)))

    def turn(self, direction: NDArray[np.float64]) -> None:
        """Add a dimension along which the energy falls."""
        raw = np.column_stack([self.units, direction * (0.1 / np.max(np.abs(direction)))])
        self.units = raw / _lengths(raw)


def minimize_energy(
    energy: Energy, row: NDArray[np.float64], radius: float, state: Vectors, max_calls: int, precision: float = 1e-3
) -> None:
    """Improve a state under |Σ b_i v_i| ≤ r; nothing about the result is guaranteed.

    Parameters
    ----------
    energy : Energy
    row : (n,) float64
        b.
    radius : float
        r.
    state : Vectors
        Changed in place.
    max_calls : int
        Evaluations to spend.
    precision : float
        Relative distance between primal and dual value at which to stop.
    """
    # Rows of different length are a diagonal preconditioner: a step in row i is divided by its length squared.
    floor = 1e-3 * float(energy.degrees.mean())
    lengths = np.sqrt(np.maximum(energy.degrees + 4 * state.weight * row**2, floor))[:, None]
    shape = state.units.shape

    def lagrangian(flat: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]:
        raw = flat.reshape(shape)
        sizes = _lengths(raw)
        unit = raw / sizes
        value, image = energy(unit)
        pull = _combine(row, unit)
        multiplier = max(0.0, state.weight + state.penalty * (_dot(pull, pull) - radius**2))
        value += (multiplier**2 - state.weight**2) / (2 * state.penalty)
        image += (multiplier * row)[:, None] * pull
        image -= unit * np.einsum("ij,ij->i", unit, image)[:, None]
        image *= 2 / sizes
        return value, image.ravel()

    last, limit = math.inf, state.spent + max_calls
    while state.spent < limit:
        flat, calls, settled = _minimize(lagrangian, (state.units * lengths).ravel(), min(_CALLS, limit - state.spent))
        raw = flat.reshape(shape)
        state.spent += calls
        state.units = raw / _lengths(raw)
        pull = _combine(row, state.units)
        excess = _dot(pull, pull) - radius**2
        state.weight = max(0.0, state.weight + state.penalty * excess)
        if abs(excess) > 0.3 * last:
            state.penalty *= 3
        last = abs(excess)
        value, image = energy(state.units)
        state.diagonal = -np.einsum("ij,ij->i", state.units, image + (state.weight * row)[:, None] * pull)
        if settled and abs(state.weight * excess) <= precision * abs(value):
            break


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
