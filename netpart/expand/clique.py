"""Clique expansion: every net becomes a clique of weighted pairs."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray
from scipy.sparse.linalg import LinearOperator

from netpart.netlist import Netlist, UsageError

__all__ = ["MAX_PAIRS", "WEIGHTINGS", "CliqueGraph", "Weighting", "incidence", "pair_weights"]

Weighting = Literal["standard", "two-over-size", "bounding"]

WEIGHTINGS: tuple[Weighting, ...] = ("standard", "two-over-size", "bounding")
"""The weights a net can give to its pairs; see `pair_weights`."""

MAX_PAIRS = 2**27
"""`CliqueGraph.adjacency` refuses to write out more pairs than this (each is stored twice)."""

_PAIRED_SIZE = 8
"""Nets up to this size are written out as pairs: beyond it, products with the members are faster and smaller."""


def pair_weights(netlist: Netlist, weighting: Weighting = "standard") -> NDArray[np.float64]:
    """(m,) the weight c(e) that net e gives to each pair of its cells; 0 for nets with fewer than two cells.

    ==============  =============================  ==========================================================
    weighting       c(e) / w(e)                    what it keeps
    ==============  =============================  ==========================================================
    standard        1/(|e| − 1)                    the net adds w(e) to the degree of each of its cells
    two-over-size   2/|e|                          cutting one cell off costs about twice w(e), whatever |e|
    bounding        1/(⌊|e|/2⌋ ⌈|e|/2⌉)            a cut net adds at most w(e) to the cut of the graph, which
                                                   therefore never exceeds that of the netlist
    ==============  =============================  ==========================================================

    References
    ----------
    A. Vannelli and S. W. Hadley, "A Gomory-Hu cut tree representation of a netlist partitioning problem", IEEE Trans.
    Circuits and Systems 37(9), 1990 (weights that bound the netlist's cut from below).
    """
    sizes = netlist.net_sizes.astype(np.float64)
    usable = np.maximum(sizes, 2.0)
    if weighting == "standard":
        divisor = usable - 1
    elif weighting == "two-over-size":
        divisor = usable / 2
    elif weighting == "bounding":
        divisor = np.floor(usable / 2) * np.ceil(usable / 2)
    else:
        raise UsageError(f"unknown clique weighting {weighting!r}; expected one of {', '.join(WEIGHTINGS)}")
    weights: NDArray[np.float64] = np.where(sizes >= 2, netlist.net_weights / divisor, 0.0)
    return weights


def incidence(netlist: Netlist, nets: NDArray[np.bool_] | None = None) -> sp.csr_array:
    """(m, n) 0/1 matrix of nets and cells, or its rows for some nets."""
    whole = sp.csr_array(
        (np.ones(netlist.num_pins), netlist.net_cells, netlist.net_offsets), shape=(netlist.num_nets, netlist.num_cells)
    )
    return whole.copy() if nets is None else whole[np.flatnonzero(nets)]


@dataclass(frozen=True, slots=True, eq=False)
class CliqueGraph:
    """A weighted graph held as single pairs plus whole cliques, so that a net of any size takes O(|e|) memory.

    The weight between u ≠ v is ``pairs[u, v]`` plus the sum of ``clique_weights[c]`` over the cliques c that hold both.

    Attributes
    ----------
    pairs : (n, n) csr_array
        Symmetric, zero diagonal.
    members : (q, n) csr_array of 0/1
        Row c marks the vertices of clique c.
    members_of : (n, q) csr_array
        Its transpose, kept because every product needs both.
    clique_weights : (q,) float64
        Weight per pair of each clique.
    degrees : (n,) float64
        Sum of the weights at each vertex.
    """

    pairs: sp.csr_array
    members: sp.csr_array
    members_of: sp.csr_array
    clique_weights: NDArray[np.float64]
    degrees: NDArray[np.float64]

    @classmethod
    def from_parts(cls, pairs: sp.csr_array, members: sp.csr_array, clique_weights: NDArray[np.float64]) -> CliqueGraph:
        """A graph from its pairs and cliques; the degrees are summed here."""
        members_of = members.T.tocsr()
        sizes = np.diff(members.indptr)
        degrees = np.asarray(pairs.sum(axis=1)).ravel() + members_of @ (clique_weights * (sizes - 1))
        return cls(pairs, members, members_of, clique_weights, degrees)

    @classmethod
    def from_netlist(
        cls,
        netlist: Netlist,
        weighting: Weighting | NDArray[np.float64] = "standard",
        paired_size: int = _PAIRED_SIZE,
    ) -> CliqueGraph:
        """The clique expansion of a netlist.

        Parameters
        ----------
        netlist : Netlist
        weighting : str or (m,) float64
            One of `WEIGHTINGS`, or the weight per pair of each net.
        paired_size : int
            Nets with at most this many cells are written out as pairs, the others stay cliques. It changes speed and
            memory, never the graph.
        """
        weights = weighting if isinstance(weighting, np.ndarray) else pair_weights(netlist, weighting)
        sizes = netlist.net_sizes
        counted = (sizes >= 2) & (weights > 0)
        small, large = counted & (sizes <= paired_size), counted & (sizes > paired_size)
        pairs = _write_out(incidence(netlist, small), weights[small])
        return cls.from_parts(pairs, incidence(netlist, large), weights[large])

    @property
    def num_vertices(self) -> int:
        """n."""
        return len(self.degrees)

    @property
    def clique_sizes(self) -> NDArray[np.int64]:
        """(q,) how many vertices each clique has."""
        return np.diff(self.members.indptr).astype(np.int64)

    def multiply(self, x: NDArray[np.float64]) -> NDArray[np.float64]:
        """W x for x of shape (n,) or (n, r), in time linear in the pairs and members.

        A clique of weight c contributes c (1 1ᵀ − I) on its vertices: a rank-one update and its diagonal.
        """
        columns = x if x.ndim == 2 else x[:, None]
        product: NDArray[np.float64] = self.pairs @ columns
        if len(self.clique_weights):
            product += self.members_of @ (self.clique_weights[:, None] * (self.members @ columns))
            product -= (self.members_of @ self.clique_weights)[:, None] * columns
        return product.reshape(x.shape)

    def adjacency(self) -> sp.csr_array:
        """W written out pair by pair, symmetric with zero diagonal.

        Raises
        ------
        UsageError
            If that would be more than `MAX_PAIRS` pairs; `operator` has no such limit.
        """
        sizes = self.clique_sizes.astype(np.float64)
        count = float((sizes * (sizes - 1) / 2).sum()) + self.pairs.nnz / 2
        if count > MAX_PAIRS:
            raise UsageError(f"writing out {count:,.0f} pairs is refused (limit {MAX_PAIRS:,}); use products instead")
        return (self.pairs + _write_out(self.members, self.clique_weights)).tocsr()

    def operator(self) -> LinearOperator:
        """W as a linear operator, never written out."""
        n = self.num_vertices
        return LinearOperator((n, n), matvec=self._matvec, rmatvec=self._matvec, matmat=self.multiply, dtype=np.float64)

    def _matvec(self, x: NDArray[np.float64]) -> NDArray[np.float64]:
        return self.multiply(x.ravel())

    def cut_weight(self, side: NDArray[np.bool_]) -> float:
        """w(∂S): the weight between S = `side` and the rest, counted clique by clique without cancellation."""
        inside = side.astype(np.float64)
        held = self.members @ inside
        in_cliques = float(np.sum(self.clique_weights * held * (self.clique_sizes - held)))
        return in_cliques + float(np.sum(inside * (self.pairs @ (1.0 - inside))))

    def restrict(self, vertices: NDArray[np.int64]) -> CliqueGraph:
        """The graph on some vertices alone, which must hold whole connected components."""
        members = self.members[:, vertices]
        kept = np.flatnonzero(np.diff(members.indptr) >= 2)
        return CliqueGraph.from_parts(
            self.pairs[vertices][:, vertices].tocsr(), members[kept].tocsr(), self.clique_weights[kept]
        )

    def widen(self, num_vertices: int) -> CliqueGraph:
        """The same graph with vertices without weight at the end, up to so many in all."""
        n, q = num_vertices, len(self.clique_weights)
        offsets = np.append(self.pairs.indptr, np.full(n - self.num_vertices, self.pairs.nnz, self.pairs.indptr.dtype))
        pairs = sp.csr_array((self.pairs.data, self.pairs.indices, offsets), shape=(n, n))
        members = sp.csr_array((self.members.data, self.members.indices, self.members.indptr), shape=(q, n))
        return CliqueGraph.from_parts(pairs, members, self.clique_weights)


def _write_out(members: sp.csr_array, weights: NDArray[np.float64]) -> sp.csr_array:
    """Σ c (1 1ᵀ − I) over the rows of `members`, by expanding each row into its ordered pairs."""
    sizes = np.diff(members.indptr).astype(np.int64)
    ends = np.repeat(members.indptr[1:].astype(np.int64), sizes)
    first = np.arange(len(members.indices), dtype=np.int64)
    later = ends - first - 1
    left = np.repeat(first, later)
    start = np.cumsum(later) - later
    right = left + 1 + np.arange(len(left), dtype=np.int64) - np.repeat(start, later)
    u, v = members.indices[left], members.indices[right]
    values = np.repeat(np.repeat(weights, sizes), later)
    n = members.shape[1]
    half = sp.coo_array((values, (np.minimum(u, v), np.maximum(u, v))), shape=(n, n)).tocsr()
    return (half + half.T).tocsr()
