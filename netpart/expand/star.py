"""Star expansion: every net becomes a centre with one spoke to each of its cells."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray
from scipy.sparse.linalg import LinearOperator

from netpart.expand.clique import CliqueGraph, incidence
from netpart.netlist import Netlist

__all__ = ["StarGraph"]


@dataclass(frozen=True, slots=True, eq=False)
class StarGraph:
    """A graph with an auxiliary vertex, the centre, for each net, and pairs between cells besides.

    Eliminating a centre with |e| spokes of weight s leaves the clique with weight s/|e| per pair: its row of the
    Laplacian reads |e| s in the diagonal and −s at each cell, so the Schur complement adds s I − s²/(|e| s) 1 1ᵀ =
    s I − (s/|e|) 1 1ᵀ on the cells, the Laplacian of that clique. A clique of weight c is hence a star of spoke weight
    c |e|, with |e| entries in the matrix instead of |e|²; that is what keeps a factorisation sparse.

    Attributes
    ----------
    pairs : (n, n) csr_array
        Symmetric, zero diagonal.
    members : (q, n) csr_array of 0/1
        Row c marks the cells around centre c.
    spokes : (q,) float64
        Weight of each spoke of a centre.
    """

    pairs: sp.csr_array
    members: sp.csr_array
    spokes: NDArray[np.float64]

    @classmethod
    def from_netlist(cls, netlist: Netlist, spokes: NDArray[np.float64] | None = None) -> StarGraph:
        """One star per net with at least one cell, spoke weight w(e) unless `spokes` (m,) says otherwise."""
        kept = netlist.net_sizes >= 1
        weights = netlist.net_weights if spokes is None else spokes
        n = netlist.num_cells
        return cls(sp.csr_array((n, n), dtype=np.float64), incidence(netlist, kept), weights[kept])

    @classmethod
    def from_cliques(cls, graph: CliqueGraph) -> StarGraph:
        """The graph whose Schur complement is `graph`: its cliques as stars, its pairs as they are."""
        return cls(graph.pairs, graph.members, graph.clique_weights * graph.clique_sizes)

    def to_cliques(self) -> CliqueGraph:
        """What remains when every centre is eliminated."""
        return CliqueGraph.from_parts(self.pairs, self.members, self.spokes / np.diff(self.members.indptr))

    @property
    def num_cells(self) -> int:
        """n: vertices that are no centres."""
        return int(self.members.shape[1])

    @property
    def num_centres(self) -> int:
        """q."""
        return int(self.members.shape[0])

    def laplacian(self) -> sp.csc_array:
        """(n + q, n + q) the graph Laplacian, cells first, centres after them."""
        spokes = (sp.diags_array(self.spokes) @ self.members).tocsr()
        cell_degrees = np.asarray(self.pairs.sum(axis=1)).ravel() + np.asarray(spokes.sum(axis=0)).ravel()
        centre_degrees = self.spokes * np.diff(self.members.indptr)
        return sp.block_array(
            [[sp.diags_array(cell_degrees) - self.pairs, -spokes.T], [-spokes, sp.diags_array(centre_degrees)]],
            format="csc",
        )

    def schur_complement(self) -> LinearOperator:
        """(n, n) the Laplacian after eliminating the centres, as products: x ↦ L_cc x − L_cs L_ss⁻¹ L_sc x."""
        spokes = (sp.diags_array(self.spokes) @ self.members).tocsr()
        to_cells = spokes.T.tocsr()
        degrees = np.asarray(self.pairs.sum(axis=1)).ravel() + np.asarray(spokes.sum(axis=0)).ravel()
        centre_degrees = self.spokes * np.diff(self.members.indptr)

        def multiply(x: NDArray[np.float64]) -> NDArray[np.float64]:
            column = x.ravel()
            product: NDArray[np.float64] = degrees * column - self.pairs @ column
            return product - to_cells @ ((spokes @ column) / centre_degrees)

        n = self.num_cells
        return LinearOperator((n, n), matvec=multiply, rmatvec=multiply, dtype=np.float64)
