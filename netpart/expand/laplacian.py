"""Laplacians of a weighted graph, as linear operators that never write out a clique."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.sparse.linalg import LinearOperator

from netpart.expand.clique import CliqueGraph
from netpart.netlist import ValueRangeError

__all__ = ["area_weighted_laplacian", "inverse_root", "laplacian", "normalized_laplacian"]


def laplacian(graph: CliqueGraph) -> LinearOperator:
    """L = D − W with D the degrees: xᵀ L x = Σ w(u, v) (x_u − x_v)² over the pairs."""
    return _scaled(graph, None)


def normalized_laplacian(graph: CliqueGraph) -> LinearOperator:
    """D^(−1/2) (D − W) D^(−1/2), whose eigenvalues lie within 0 … 2; rows of vertices without weight are zero.

    References
    ----------
    F. R. K. Chung, *Spectral Graph Theory*, AMS, 1997, section 1.2.
    """
    return _scaled(graph, inverse_root(graph.degrees))


def area_weighted_laplacian(graph: CliqueGraph, areas: NDArray[np.float64]) -> LinearOperator:
    """M^(−1/2) (D − W) M^(−1/2) with M = diag(areas): its eigenvalues are those of L x = λ M x.

    Raises
    ------
    ValueRangeError
        If an area is zero: the pencil then has infinite eigenvalues, and no such symmetric form.
    """
    if np.any(areas <= 0):
        raise ValueRangeError("the area-weighted Laplacian needs areas above zero")
    return _scaled(graph, inverse_root(areas))


def inverse_root(values: NDArray[np.float64]) -> NDArray[np.float64]:
    """1/√v, and 0 where v is 0."""
    positive = values > 0
    return np.where(positive, 1.0 / np.sqrt(np.where(positive, values, 1.0)), 0.0)


def _scaled(graph: CliqueGraph, scale: NDArray[np.float64] | None) -> LinearOperator:
    def multiply(x: NDArray[np.float64]) -> NDArray[np.float64]:
        column = x.ravel() if scale is None else scale * x.ravel()
        product = graph.degrees * column - graph.multiply(column)
        return product if scale is None else scale * product

    n = graph.num_vertices
    return LinearOperator((n, n), matvec=multiply, rmatvec=multiply, dtype=np.float64)
