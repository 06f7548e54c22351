"""Proof of an eigenvalue bound: a factorisation whose own error is measured, instead of an eigensolver's word.

Claim: with the clique expansion of bounding weights, G, areas a and total area A, every set S of cells has

    cut_G(S) ≥ λ a(S) a(V∖S)/A − ρ (n + m).                                                       (1)

Let E(λ) be the symmetric matrix over cells, nets and one border vertex

    cells × cells:    diag(Σ_{e ∋ v} t_e) − λ diag(a)      nets × nets: diag(|e| t_e)
    cells × nets:     −t_e where v ∈ e                     cells × border: σ a,  border × border: −σ² A/(2λ)

with star weights t_e = |e| c_e. Suppose E + ρI has at most one negative eigenvalue. Its border entry is negative (if
ρ < σ² A/(2λ), which is checked), so by Haynsworth's inertia theorem the Schur complement without the border has none: for
all x on cells and z on nets

    Σ_e t_e Σ_{v∈e} (x_v − z_e)² − λ Σ a_v x_v² + ρ (|x|² + |z|²) + κ (a·x)² ≥ 0     with some κ > 0.

Put x = 1_S − (a(S)/A) 1, so a·x = 0 and |x_v| ≤ 1, and z_e the mean of x over e, so |z_e| ≤ 1. The first sum is then the
clique form Σ_e c_e j_e (|e| − j_e) = cut_G(S), the second is λ a(S) a(V∖S)/A, and (1) follows.

That E + ρI has at most one negative eigenvalue is shown by L D Lᵀ = E + R with L unit lower triangular and exactly one
negative entry in the diagonal D: the second smallest eigenvalue of L D Lᵀ is positive (Sylvester), and by Weyl's
inequality that of E is above −‖R‖₂ ≥ −‖R‖_∞ =: −ρ. R is computed from the factors, and the rounding of that computation
is bounded by γ_k |L||D||Lᵀ| (Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed. 2002, section 3.5), so
nothing depends on how the factors were found. The idea of verifying definiteness by a floating-point factorisation is
that of Rump, "Verification of positive definiteness", BIT 46 (2006).
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray
from scipy.sparse.linalg import splu

from netpart.netlist import Netlist

__all__ = ["EigenProof", "prove_eigenvalue"]

_UNIT = 2.0**-53
_MAX_FILL = 40_000_000


class EigenProof(NamedTuple):
    """A proved instance of (1): for every S, cut_G(S) ≥ eigenvalue · a(S) a(V∖S)/A − loss."""

    eigenvalue: float
    loss: float


def prove_eigenvalue(
    netlist: Netlist, pairs: NDArray[np.float64], areas: NDArray[np.float64], eigenvalue: float
) -> EigenProof | None:
    """Try to prove (1) for a claimed eigenvalue; None where the factorisation does not show it.

    Parameters
    ----------
    netlist : Netlist
        Connected.
    pairs : (m,) float64
        Weight per pair c_e ≥ 0, exact as given.
    areas : (n,) float64
        Exact as given.
    eigenvalue : float
        λ > 0.
    """
    if not (eigenvalue > 0 and math.isfinite(eigenvalue)):
        return None
    matrix, entry_error, border = _border_matrix(netlist, pairs, areas, eigenvalue)
    try:
        factors = splu(
            matrix, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options={"SymmetricMode": True, "Equil": False}
        )
    except (RuntimeError, MemoryError):
        return None
    lower, pivots = factors.L.tocsc(), factors.U.diagonal()
    if not np.array_equal(factors.perm_r, factors.perm_c) or lower.nnz > _MAX_FILL:
        return None
    if int(np.sum(pivots < 0)) != 1 or not np.all(np.isfinite(pivots)) or np.any(pivots == 0):
        return None
    if np.any(lower.diagonal() != 1.0) or sparse.triu(lower, k=1).nnz:
        return None
    rho = _residual_norm(matrix, lower, pivots, factors.perm_c) + entry_error
    if not rho < border:
        return None
    size = netlist.num_cells + netlist.num_nets
    return EigenProof(eigenvalue, rho * size * (1 + 8 * _UNIT))


def _border_matrix(
    netlist: Netlist, pairs: NDArray[np.float64], areas: NDArray[np.float64], eigenvalue: float
) -> tuple[sparse.csc_array, float, float]:
    """E(λ) in floating point, a bound on the norm of its rounding errors, and |border entry| rounded down."""
    num_cells, num_nets = netlist.num_cells, netlist.num_nets
    sizes = netlist.net_sizes
    star = sizes * pairs
    nets = np.repeat(np.arange(num_nets), sizes)
    pin_weights = star[nets]
    degree = np.bincount(netlist.net_cells, pin_weights, num_cells)
    total = math.fsum(areas.tolist())
    scale = math.sqrt(eigenvalue / total)
    # The factor 2 lifts the constant vector, which would be in the kernel without it. Where λ a, σ a and the sums are
    # rounded, E differs from the exact matrix by at most (longest sum + 4) units of its entries; the border is exact
    # for a slightly different A, which the same term covers.
    corner = scale * scale * (total / (2 * eigenvalue))
    center = np.where(sizes * star > 0, sizes * star, 1.0)
    diagonal = np.concatenate([degree - eigenvalue * areas, center, [-corner]])
    rows = np.concatenate([netlist.net_cells, np.full(num_cells, num_cells + num_nets)])
    columns = np.concatenate([num_cells + nets, np.arange(num_cells)])
    values = np.concatenate([-pin_weights, scale * areas])
    size = num_cells + num_nets + 1
    upper = sparse.coo_array((values, (rows, columns)), shape=(size, size))
    matrix = sparse.csc_array(upper + upper.T + sparse.diags_array(diagonal))
    longest = int(np.max(np.diff(netlist.cell_offsets), initial=0)) + 8
    magnitude = np.concatenate([degree + eigenvalue * areas, center, [corner]])
    row_sums = np.asarray(abs(matrix).sum(axis=1)).ravel() + magnitude
    entry_error = float(row_sums.max()) * longest * _UNIT * 2
    return matrix, entry_error, corner * (1 - 1e-12)


def _residual_norm(
    matrix: sparse.csc_array, lower: sparse.csc_array, pivots: NDArray[np.float64], order: NDArray[np.int32]
) -> float:
    """An upper bound on ‖P E Pᵀ − L D Lᵀ‖_∞."""
    size = len(pivots)
    place = np.empty(size, np.int64)
    place[np.arange(size)] = order
    coordinates = matrix.tocoo()
    permuted = sparse.csc_array((coordinates.data, (place[coordinates.row], place[coordinates.col])), shape=matrix.shape)
    product = lower.multiply(pivots[None, :]).tocsc() @ lower.T
    residual = float(abs(permuted - product).sum(axis=1).max())
    absolute = abs(lower)
    spread = absolute @ (np.abs(pivots) * (absolute.T @ np.ones(size)))
    terms = int(np.diff(lower.tocsr().indptr).max()) + 8
    rounding = 2 * terms * _UNIT * (float(spread.max()) + float(abs(permuted).sum(axis=1).max()))
    return (residual + rounding) * (1 + (size + 8) * _UNIT)
