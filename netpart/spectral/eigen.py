"""The second eigenpair of a netlist's graph, by nested iteration over ever finer netlists."""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
import scipy.linalg
import scipy.sparse as sparse
from numpy.typing import NDArray
from scipy.sparse.linalg import LinearOperator, eigsh, lobpcg, splu

from netpart.expand import CliqueGraph, StarGraph, Weighting, area_weighted_laplacian, pair_weights
from netpart.netlist import Netlist

__all__ = ["MASSES", "Eigenpair", "second_eigenpair"]

MASSES = ("degree", "area")
"""What a cell weighs: its degree in the graph (normalised Laplacian), or its area."""

_DENSE = 400
_DIRECT = 64_000
_STEPS = 12
_FINAL_STEPS = 20
_TINY_AREA = 1e-3
_SHIFT = 1e-6


class Eigenpair(NamedTuple):
    """A Rayleigh quotient and its vector.

    Attributes
    ----------
    value : float
        xᵀ L x / xᵀ M x, never below the true λ1.
    vector : (n,) float64
        x, with 1ᵀ M x = 0 and xᵀ M x = 1; of the two signs, the one whose largest entry is positive.
    residual : float
        ‖M^(−1/2) (L − value M) x‖: some eigenvalue lies so near to `value`.
    """

    value: float
    vector: NDArray[np.float64]
    residual: float


def second_eigenpair(
    levels: Sequence[tuple[Netlist, NDArray[np.int32] | None]],
    *,
    mass: str = "degree",
    weighting: Weighting = "standard",
    tolerance: float = 1e-7,
) -> Eigenpair:
    """The smallest nonzero eigenvalue of L x = λ M x on the clique expansion of a connected netlist, and its vector.

    Parameters
    ----------
    levels : sequence of (netlist, clusters)
        From the netlist down to a coarse one, each with the cluster of every cell of the netlist before it (None for the
        first). One level alone will do, and takes longer.
    mass : str
        One of `MASSES`. Cells without mass get a thousandth of the mean one.
    weighting : str
        As in `expand.pair_weights`.
    tolerance : float
        Of the residual, relative to the largest eigenvalue's scale of 1.

    Notes
    -----
    Up to some 64,000 cells and nets: Lanczos on the inverse of the shifted star expansion, whose elimination of the net
    vertices is the clique expansion and whose factors stay sparse. Above: dense on the coarsest level, and on each finer
    one LOBPCG (Knyazev, SIAM J. Sci. Comput. 23, 2001) with a Jacobi preconditioner from the coarser vector. All starts
    are fixed vectors, so equal input gives equal output.
    """
    netlist, _ = levels[0]
    if netlist.num_cells <= _DENSE:
        return _solve_nested(netlist, None, mass, weighting, tolerance, _FINAL_STEPS)
    if netlist.num_cells + netlist.num_nets <= _DIRECT:
        return _solve_direct(netlist, mass, weighting)
    vector: NDArray[np.float64] | None = None
    pair = Eigenpair(0.0, np.zeros(0), 0.0)
    for number in range(len(levels) - 1, -1, -1):
        netlist, _ = levels[number]
        if vector is not None:
            cluster = levels[number + 1][1]
            assert cluster is not None
            vector = vector[cluster]
        steps = _STEPS if number else _FINAL_STEPS
        pair = _solve_nested(netlist, vector, mass, weighting, tolerance if number == 0 else 1e-4, steps)
        vector = pair.vector
    return pair


class _Scaled:
    """M^(-1/2) L M^(-1/2) of a netlist: the operator, its kernel, and the way back to x."""

    def __init__(self, netlist: Netlist, mass: str, weighting: Weighting) -> None:
        graph = CliqueGraph.from_netlist(netlist, weighting)
        masses = graph.degrees if mass == "degree" else netlist.areas
        mean = float(masses.mean()) or 1.0
        self.masses = np.where(masses > 0, masses, _TINY_AREA * mean)
        self.scale = 1 / np.sqrt(self.masses)
        self.kernel = np.sqrt(self.masses / self.masses.sum())
        self.operator = area_weighted_laplacian(graph, self.masses)
        self.diagonal = graph.degrees * self.scale * self.scale

    def finish(self, y: NDArray[np.float64]) -> Eigenpair:
        """Project, normalise, and measure what was found."""
        y = y - self.kernel * (self.kernel @ y)
        y /= np.linalg.norm(y)
        product = self.operator @ y
        value = float(y @ product)
        x = y * self.scale
        if x[np.argmax(np.abs(x))] < 0:
            x = -x
        return Eigenpair(max(value, 0.0), x, float(np.linalg.norm(product - value * y)))


def _solve_direct(netlist: Netlist, mass: str, weighting: Weighting) -> Eigenpair:
    problem = _Scaled(netlist, mass, weighting)
    size = netlist.num_cells
    shift = _SHIFT * float(problem.diagonal.mean())
    star = StarGraph.from_netlist(netlist, netlist.net_sizes * pair_weights(netlist, weighting))
    loads = np.concatenate([shift * problem.masses, np.where(star.spokes > 0, 0.0, 1.0)])
    factors = splu(
        (star.laplacian() + sparse.diags_array(loads)).tocsc(),
        permc_spec="MMD_AT_PLUS_A",
        diag_pivot_thresh=0.0,
        options={"SymmetricMode": True, "Equil": False},
    )
    padded = np.zeros(len(loads))

    def invert(y: NDArray[np.float64]) -> NDArray[np.float64]:
        y = y.ravel()
        padded[:size] = (y - problem.kernel * (problem.kernel @ y)) / problem.scale
        solved = factors.solve(padded)[:size] / problem.scale
        projected: NDArray[np.float64] = solved - problem.kernel * (problem.kernel @ solved)
        return projected

    start = np.cos(np.arange(size) * (np.pi / size)) + np.sin(np.arange(size) * 1.618)
    operator = LinearOperator((size, size), matvec=invert, dtype=np.float64)
    _, vectors = eigsh(operator, k=1, which="LA", v0=start, tol=1e-9)
    return problem.finish(vectors[:, 0])


def _solve_nested(
    netlist: Netlist, guess: NDArray[np.float64] | None, mass: str, weighting: Weighting, tolerance: float, steps: int
) -> Eigenpair:
    problem = _Scaled(netlist, mass, weighting)
    size = netlist.num_cells
    if size <= _DENSE:
        matrix = problem.operator @ np.eye(size)
        shift = 2 * float(problem.diagonal.max(initial=1.0)) + 1
        shifted = (matrix + matrix.T) / 2 + shift * np.outer(problem.kernel, problem.kernel)
        _, vectors = scipy.linalg.eigh(shifted, subset_by_index=[0, 0])
        return problem.finish(vectors[:, 0])
    start = np.cos(np.arange(size) * (np.pi / size)) if guess is None else guess
    block = np.column_stack([start / problem.scale, np.sin(np.arange(size) * 1.618)])
    jacobi = 1 / np.maximum(problem.diagonal, 1e-3 * (float(problem.diagonal.mean()) or 1.0))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", UserWarning)  # the residual tells how near it came
        values, vectors = lobpcg(
            problem.operator,
            block,
            M=sparse.diags_array(jacobi, format="csr"),
            Y=problem.kernel[:, None],
            tol=tolerance,
            maxiter=steps,
            largest=False,
        )
    return problem.finish(vectors[:, int(np.argmin(values))])
