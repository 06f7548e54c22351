"""Sparse L D Lᵀ factors whose own error is measured: the base of every proof about eigenvalues."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray
from scipy.sparse.linalg import SuperLU, spilu, splu

from netpart.bounds.factor_kernels import count_fill, find_supernodes, measure_residual

__all__ = ["Elimination", "Factors", "factorize", "plan_elimination"]

_UNIT = 2.0**-53
_WIDEST = 64


class Elimination(NamedTuple):
    """An order of elimination and what it will cost.

    Attributes
    ----------
    order : (n,) int64
        The row eliminated i-th.
    num_entries : int
        Entries of the factor L.
    num_operations : float
        Multiplications to compute it.
    longest_column : int
        Entries of its fullest column.
    """

    order: NDArray[np.int64]
    num_entries: int
    num_operations: float
    longest_column: int


class Factors(NamedTuple):
    """L D Lᵀ of a symmetric matrix F, with F's rows in the order of elimination.

    Attributes
    ----------
    solver : SuperLU
        Solves F x = b approximately.
    lower : (n, n) csc_array
        L, unit lower triangular.
    pivots : (n,) float64
        The diagonal of D.
    place : (n,) int64
        Row v of F is row place[v] of the factors.
    """

    solver: SuperLU
    lower: sp.csc_array
    pivots: NDArray[np.float64]
    place: NDArray[np.int64]

    @property
    def num_negative(self) -> int:
        """Negative pivots: by Sylvester's law of inertia, the negative eigenvalues of L D Lᵀ."""
        return int(np.count_nonzero(self.pivots < 0))

    def measure_error(self, matrix: sp.csc_array) -> NDArray[np.float64]:
        """(n,) upper bounds on the row sums of |F − L D Lᵀ|, for F exactly as stored, whatever produced the factors.

        Every entry of the residual is computed as a sum of t + 1 terms, t the columns that rows i and j of L share, with
        two roundings in each term; with G = |L||D||Lᵀ| its error is at most γ_(t+3) (G + |F|) (N. J. Higham, *Accuracy
        and Stability of Numerical Algorithms*, 2nd ed., 2002, sections 3.1 and 3.5). As t is at most the length of either
        row, Σ_j t_ij G_ij is at most the smaller of t_i (G 1)_i and (G t)_i.
        """
        size = len(self.pivots)
        inner = _permute(matrix, self.place)
        computed = np.zeros(size)
        offsets, rows = self.lower.indptr.astype(np.int64), self.lower.indices.astype(np.int32)
        closed = measure_residual(
            offsets,
            rows,
            self.lower.data,
            self.pivots,
            find_supernodes(offsets, rows, _WIDEST),
            inner.indptr.astype(np.int64),
            inner.indices.astype(np.int32),
            inner.data,
            computed,
        )
        if not closed:
            return np.full(size, np.inf)
        absolute, weights = abs(self.lower), np.abs(self.pivots)
        terms = np.bincount(self.lower.indices, minlength=size).astype(np.float64) + 4
        own = abs(inner)

        def spread(x: NDArray[np.float64]) -> NDArray[np.float64]:
            result: NDArray[np.float64] = absolute @ (weights * (absolute.T @ x)) + own @ x
            return result

        rounding = 1.01 * _UNIT * np.minimum(terms * spread(np.ones(size)), spread(terms))
        # The sums of nonnegative numbers above are themselves rounded; a relative 2(n + 8)u covers all of them, and the
        # last term whatever underflowed.
        total = (computed + rounding) * (1 + 2 * (size + 8) * _UNIT) + 1e-290
        return total[self.place]


def plan_elimination(matrix: sp.csc_array) -> Elimination:
    """A minimum-degree order for a symmetric pattern, with the exact size of the factor it leads to.

    SuperLU's ordering (multiple minimum degree: J. W. H. Liu, ACM Trans. Mathematical Software 11, 1985) is reached
    through an incomplete factorisation that drops everything, so that the cost is known before it is paid.
    """
    pattern = sp.csc_array((np.ones(matrix.nnz), matrix.indices, matrix.indptr), shape=matrix.shape)
    heavy = (pattern + sp.diags_array(4.0 * np.diff(matrix.indptr) + 1.0)).tocsc()
    plan = spilu(
        heavy,
        drop_tol=1.0,
        fill_factor=1.0,
        drop_rule="basic",
        permc_spec="MMD_AT_PLUS_A",
        diag_pivot_thresh=0.0,
        options={"SymmetricMode": True, "Equil": False},
    )
    place = plan.perm_c.astype(np.int64)
    order = np.argsort(place)
    counts = count_fill(heavy.indptr.astype(np.int64), heavy.indices.astype(np.int32), order, place)
    return Elimination(order, int(counts.sum()), float((counts.astype(np.float64) ** 2).sum()), int(counts.max()))


def factorize(matrix: sp.csc_array, elimination: Elimination) -> Factors | None:
    """L D Lᵀ without pivoting, or None where a pivot vanishes or the arithmetic overflows."""
    first = np.empty(len(elimination.order), np.int64)
    first[elimination.order] = np.arange(len(first))
    try:
        solver = splu(
            _permute(matrix, first),
            permc_spec="NATURAL",
            diag_pivot_thresh=0.0,
            options={"SymmetricMode": True, "Equil": False},
        )
    except RuntimeError:  # exactly singular
        return None
    lower, pivots = sp.csc_array(solver.L), solver.U.diagonal()
    lower.sort_indices()
    sound = (
        np.array_equal(solver.perm_r, solver.perm_c)
        and bool(np.all(np.isfinite(pivots) & (pivots != 0)))
        and bool(np.all(np.isfinite(lower.data)))
        and np.array_equal(lower.indices[lower.indptr[:-1]], np.arange(len(pivots)))
        and bool(np.all(lower.data[lower.indptr[:-1]] == 1.0))
    )
    return Factors(solver, lower, pivots, solver.perm_c[first].astype(np.int64)) if sound else None


def _permute(matrix: sp.csc_array, place: NDArray[np.int64]) -> sp.csc_array:
    """Row and column v of the matrix become row and column place[v]."""
    entries = matrix.tocoo()
    moved = sp.coo_array((entries.data, (place[entries.row], place[entries.col])), shape=matrix.shape)
    return moved.tocsc()
