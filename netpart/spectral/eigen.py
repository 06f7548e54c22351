"""The second eigenpair of a netlist's graph: λ1 and the vector that orders the cells."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from netpart.expand import CliqueGraph, Weighting, laplacian
from netpart.netlist import Netlist, UsageError
from netpart.spectral.lanczos import find_smallest

__all__ = ["MASSES", "Eigenpair", "second_eigenpair"]

MASSES = ("degree", "area")
"""What a cell weighs: its degree in the graph (normalised Laplacian), or its area."""

_DENSE = 60
_LIGHTEST = 1e-2


class Eigenpair(NamedTuple):
    """A Rayleigh quotient and its vector.

    Attributes
    ----------
    value : float
        xᵀ L x / xᵀ M x; never below the true λ1 but for rounding.
    vector : (n,) float64
        x, with 1ᵀ M x = 0 and xᵀ M x = 1; of the two signs, the one whose largest entry is positive.
    residual : float
        ‖M^(−1/2) (L − value M) x‖: some eigenvalue lies so near to `value`.
    converged : bool
        Whether the residual met the tolerance.
    """

    value: float
    vector: NDArray[np.float64]
    residual: float
    converged: bool


def second_eigenpair(
    netlist: Netlist,
    *,
    mass: str = "degree",
    weighting: Weighting = "standard",
    tolerance: float = 1e-4,
    max_steps: int = 3000,
) -> Eigenpair:
    """The smallest nonzero eigenvalue of L x = λ M x on the clique expansion of a connected netlist, and its vector.

    Parameters
    ----------
    netlist : Netlist
        Connected, with at least two cells; otherwise λ = 0 is what is found.
    mass : str
        One of `MASSES`. By area, cells lighter than 1 % of the mean count as that much (ports have area 0, and an
        eigenvector needs a positive mass everywhere): all of them together change the total by less than 1 %.
    weighting : str
        As in `expand.pair_weights`.
    tolerance, max_steps
        See `find_smallest`.

    Notes
    -----
    Time is linear in the pins for each product, and a circuit takes one hundred to a few hundred of them. The start is
    a fixed quasi-random sequence, so equal input gives equal output.

    References
    ----------
    M. Fiedler, "Algebraic connectivity of graphs", Czechoslovak Mathematical Journal 23, 1973.
    A. Pothen, H. D. Simon and K.-P. Liou, "Partitioning sparse matrices with eigenvectors of graphs", SIAM Journal on
    Matrix Analysis and Applications 11(3), 1990.
    """
    if mass not in MASSES:
        raise UsageError(f"mass: expected one of {', '.join(MASSES)}, found {mass!r}")
    graph = CliqueGraph.from_netlist(netlist, weighting)
    masses = graph.degrees if mass == "degree" else netlist.areas
    mean = float(masses.mean())
    masses = np.maximum(masses, _LIGHTEST * mean if mass == "area" else 0.0)
    masses = np.where(masses > 0, masses, mean or 1.0)
    scale, product = 1.0 / np.sqrt(masses), laplacian(graph).matvec
    n = graph.num_vertices

    def multiply(x: NDArray[np.float64]) -> NDArray[np.float64]:
        image: NDArray[np.float64] = scale * product(scale * x)
        return image

    if n <= _DENSE:
        kernel = np.sqrt(masses / masses.sum())
        matrix = np.stack([multiply(unit) for unit in np.eye(n)])
        shift = 2 * float(np.max(graph.degrees / masses)) + 1
        _, vectors = np.linalg.eigh((matrix + matrix.T) / 2 + shift * np.outer(kernel, kernel))
        y = vectors[:, 0]
        image = multiply(y)
        value = float(y @ image)
        residual, converged = float(np.linalg.norm(image - value * y)), True
    else:
        golden: NDArray[np.float64] = np.arange(1.0, n + 1.0) * ((5**0.5 - 1) / 2)
        value, y, residual, converged = find_smallest(multiply, np.sqrt(masses), golden % 1.0 - 0.5, tolerance, max_steps)
    x = y * scale
    if x[np.argmax(np.abs(x))] < 0:
        x = -x
    return Eigenpair(max(value, 0.0), x, residual, converged)
