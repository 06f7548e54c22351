"""Proofs about eigenvalues of a netlist's graph: a factorisation whose error is measured, not an eigensolver's word.

What is to be proved is that an exact matrix K has at most r negative eigenvalues. K itself cannot be stored: its sums and
products round. Instead a matrix F is stored whose diagonal is smaller than that of K by more than all that rounding plus a
margin g, so that K ⪰ F + diag(g); then factors L D Lᵀ are computed, and upper bounds s on the row sums of |F − L D Lᵀ|
(`factor.Factors.measure_error`). If s ≤ g in every row, diag(g) + F − L D Lᵀ is diagonally dominant, hence

    K ⪰ F + diag(g) ⪰ L D Lᵀ,

and by Weyl's monotonicity theorem K has no more negative eigenvalues than L D Lᵀ, which by Sylvester's law of inertia has
as many as D has negative entries. Nothing depends on how the factors were found. That a floating-point factorisation can
verify definiteness is due to S. M. Rump, "Verification of positive definiteness", BIT Numerical Mathematics 46, 2006.

The factors are those of the star expansion, which is sparse where the clique expansion is not. Its centre rows form a
positive diagonal block, and eliminating it leaves the clique expansion; so, by Haynsworth's inertia additivity (Linear
Algebra and its Applications 1, 1968), both have the same number of negative eigenvalues.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from netpart.bounds.factor import Elimination, factorize, plan_elimination
from netpart.expand import CliqueGraph, StarGraph

__all__ = ["StarMatrix", "verify_eigenvalue"]

_UNIT = 2.0**-53


@dataclass(frozen=True, slots=True, eq=False)
class StarMatrix:
    """The Laplacian of a star expansion with a variable diagonal, ready to be factored again and again.

    Attributes
    ----------
    laplacian : (n + q, n + q) or (n + q + 1, n + q + 1) csc_array
        Cells first, centres after them, then the border if there is one. Off-diagonal entries and spoke weights are
        exact by definition: the graph is the one that these floating-point numbers describe. The diagonal is the rounded
        sum of each row.
    num_cells : int
        n.
    longest : int
        Entries of the longest row.
    elimination : Elimination
        In which order to eliminate, and what that costs.
    """

    laplacian: sp.csc_array
    num_cells: int
    longest: int
    elimination: Elimination

    @classmethod
    def from_graph(cls, graph: CliqueGraph) -> StarMatrix:
        """Expand the cliques of a graph, and plan the elimination."""
        laplacian = StarGraph.from_cliques(graph).laplacian()
        laplacian.sort_indices()
        longest = int(np.max(np.diff(laplacian.indptr), initial=0))
        return cls(laplacian, graph.num_vertices, longest, plan_elimination(laplacian))

    def with_border(self, column: NDArray[np.float64]) -> StarMatrix:
        """One more row and column, with the (n,) entries of `column` at the cells and a diagonal of zero.

        Subtracting h > 0 from that diagonal and eliminating the border adds column columnᵀ/h to the cells, at the price of
        one negative eigenvalue (Haynsworth): a dense term of rank one for n entries.
        """
        size = self.laplacian.shape[0]
        padded = sp.csc_array(np.concatenate([column, np.zeros(size - len(column))])[:, None])
        zero = sp.csc_array((1, 1), dtype=np.float64)
        bordered = sp.block_array([[self.laplacian, padded], [padded.T, zero]], format="csc")
        plan = self.elimination
        elimination = plan._replace(order=np.append(plan.order, size), num_entries=plan.num_entries + size + 1)
        return StarMatrix(bordered, self.num_cells, self.longest + 1, elimination)

    def subtract(self, diagonal: NDArray[np.float64]) -> sp.csc_array:
        """Laplacian − diag(diagonal), rounded; entries missing at the end of `diagonal` are zero."""
        size = self.laplacian.shape[0]
        padded = np.concatenate([diagonal, np.zeros(size - len(diagonal))])
        return (self.laplacian - sp.diags_array(padded)).tocsc()

    @property
    def usual_margin(self) -> float:
        """A margin that the rounding of a factorisation rarely exceeds: it grows with the longest column of the factor."""
        return 2e-12 * max(self.elimination.longest_column, 8)

    def prove_at_most(self, num_negative: int, load: NDArray[np.float64]) -> bool:
        """Prove that laplacian − diag(load) has at most so many negative eigenvalues; False says nothing.

        Parameters
        ----------
        num_negative : int
        load : (n,) float64, or as many more as there are rows
            Each entry may be rounded: by up to 8 units in the last place of |load|.

        Notes
        -----
        The margin g costs about as much in the load that can be proved. So it is set as small as rounding usually allows,
        and once more, to what was needed, where that turned out too small.
        """
        degrees = self.laplacian.diagonal()
        padded = np.concatenate([load, np.zeros(len(degrees) - len(load))])
        # Each row sum is off by at most `longest` roundings, the load by 8, and forming the entry by a few more.
        margin = max(self.usual_margin, 4 * (self.longest + 16) * _UNIT)
        for _ in range(2):
            allowed = margin * (degrees + np.abs(padded))
            matrix = self.subtract(padded + 2 * allowed)
            factors = factorize(matrix, self.elimination)
            if factors is None or factors.num_negative > num_negative:
                return False
            error = factors.measure_error(matrix)
            if np.all(error <= allowed):
                return True
            excess = float(np.max(error / np.maximum(allowed, 1e-300)))
            if not excess < 1e6:
                return False
            margin *= 2 * excess
        return False


def verify_eigenvalue(matrix: StarMatrix, masses: NDArray[np.float64], eigenvalue: float, index: int = 1) -> bool:
    """Prove that λ_index of L x = λ M x is at least `eigenvalue`, where M = diag(masses) and λ_0 = 0.

    Parameters
    ----------
    matrix : StarMatrix
        Of a graph with Laplacian L.
    masses : (n,) float64
        a(v) ≥ 0, exact as given, not all zero. Where some are zero, the pencil has infinite eigenvalues.
    eigenvalue : float
        λ > 0.
    index : int
        Which eigenvalue, counted from 0 with multiplicity.

    Returns
    -------
    bool
        True is a proof; False says nothing.

    Notes
    -----
    If K = L − λ M has at most `index` negative eigenvalues then λ ≤ λ_index: otherwise L x = μ M x would have
    `index` + 1 eigenvalues μ < λ with M-orthonormal vectors, and xᵀ K x = Σ c_i² (μ_i − λ) < 0 on all their combinations.

    In particular, for index 1, xᵀ L x ≥ λ xᵀ M x for every x with 1ᵀ M x = 0: an x that breaks it would make K negative
    on the plane of 1 and x, since 1ᵀ K 1 = −λ A < 0 and 1ᵀ K x = −λ 1ᵀ M x = 0. Zero masses do no harm to either.
    """
    if not (np.isfinite(eigenvalue) and eigenvalue > 0 and np.all(np.isfinite(masses) & (masses >= 0))):
        return False
    return matrix.prove_at_most(index, eigenvalue * masses)
