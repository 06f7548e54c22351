"""One extreme eigenpair of a symmetric operator by the Lanczos process."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

__all__ = ["find_smallest"]

_CHECK_EVERY = 20
_FLOOR = 1e-13


def find_smallest(
    multiply: Callable[[NDArray[np.float64]], NDArray[np.float64]],
    known: NDArray[np.float64],
    start: NDArray[np.float64],
    tolerance: float = 1e-4,
    max_steps: int = 3000,
) -> tuple[float, NDArray[np.float64], float, bool]:
    """The smallest eigenpair of a symmetric A on the complement of eigenvectors that are known.

    Parameters
    ----------
    multiply : callable
        x ↦ A x.
    known : (n,) or (r, n) float64
        Known eigenvectors, of any length but orthogonal to each other; every step is kept orthogonal to them.
    start : (n,) float64
        Where to start; the result depends on it only through rounding.
    tolerance : float
        The residual to reach, relative to the eigenvalue.
    max_steps : int
        Products per pass.

    Returns
    -------
    value : float
        The Rayleigh quotient of the vector.
    vector : (n,) float64
        Of length 1.
    residual : float
        ‖A x − value x‖: some eigenvalue lies so near to `value`.
    converged : bool
        Whether the residual met the tolerance, but for a factor 4.

    Notes
    -----
    Lanczos without reorthogonalisation, in two passes: the first finds the tridiagonal matrix, the second repeats the
    same products and adds up the eigenvector, so that memory is a handful of vectors however many steps it takes.
    Orthogonality is lost only as an eigenvalue converges [1]_, and this stops at the first one that does. On circuits
    it needs a fraction of the time of a restarted method, whose cost is in orthogonalising. Sums are NumPy's own, not
    BLAS: the vector is the same to the last bit whatever the number of threads.

    References
    ----------
    .. [1] C. C. Paige, "Error analysis of the Lanczos algorithm for tridiagonalizing a symmetric matrix", IMA Journal
       of Applied Mathematics 18(3), 1976.
    """
    basis = [vector / np.sqrt(_dot(vector, vector)) for vector in np.atleast_2d(known)]
    first = _project(basis, start.copy())
    first /= np.sqrt(_dot(first, first))
    coefficients, goal = _tridiagonal_vector(multiply, basis, first, tolerance, max_steps)
    vector = np.zeros_like(first)
    current, previous, beta = first, np.zeros_like(first), 0.0
    for coefficient in coefficients:
        vector += coefficient * current
        current, previous, _, beta = _step(multiply, basis, current, previous, beta)
    vector = _project(basis, vector)
    vector /= np.sqrt(_dot(vector, vector))
    image = multiply(vector)
    value = _dot(vector, image)
    rest = image - value * vector
    residual = float(np.sqrt(_dot(rest, rest)))
    return value, vector, residual, residual <= 4 * goal


def _tridiagonal_vector(
    multiply: Callable[[NDArray[np.float64]], NDArray[np.float64]],
    basis: list[NDArray[np.float64]],
    first: NDArray[np.float64],
    tolerance: float,
    max_steps: int,
) -> tuple[NDArray[np.float64], float]:
    """Coefficients of the wanted vector in the Lanczos vectors, as many as the steps it took, and the residual aimed at."""
    diagonal: list[float] = []
    beside: list[float] = []
    current, previous, beta = first, np.zeros_like(first), 0.0
    steps = min(max_steps, 4 * len(first))
    for step in range(1, steps + 1):
        current, previous, alpha, beta = _step(multiply, basis, current, previous, beta)
        diagonal.append(alpha)
        beside.append(beta)
        exhausted = beta <= 1e-14 * max(abs(alpha), beside[0])
        if exhausted or step == steps or step % _CHECK_EVERY == 0:
            values, vectors = scipy.linalg.eigh_tridiagonal(diagonal, beside[:-1], select="i", select_range=(0, 0))
            value, vector = float(values[0]), vectors[:, 0]
            goal = max(tolerance * abs(value), _FLOOR * max(map(abs, diagonal)))
            if exhausted or beta * abs(vector[-1]) <= goal:
                break
    return np.asarray(vector), goal


def _step(
    multiply: Callable[[NDArray[np.float64]], NDArray[np.float64]],
    basis: list[NDArray[np.float64]],
    current: NDArray[np.float64],
    previous: NDArray[np.float64],
    beta: float,
) -> tuple[NDArray[np.float64], NDArray[np.float64], float, float]:
    """One Lanczos step: the next vector, the present one, and the new diagonal and neighbouring entries."""
    image = multiply(current) - beta * previous
    alpha = _dot(image, current)
    image -= alpha * current
    image = _project(basis, image)
    beta = float(np.sqrt(_dot(image, image)))
    return image / (beta if beta > 0 else 1.0), current, alpha, beta


def _project(basis: list[NDArray[np.float64]], x: NDArray[np.float64]) -> NDArray[np.float64]:
    for vector in basis:
        x -= vector * _dot(vector, x)
    return x


def _dot(x: NDArray[np.float64], y: NDArray[np.float64]) -> float:
    return float(np.add.reduce(x * y))
