"""Graphs below a netlist: every way to spread the weight of a net over pairs of its cells that no partition can overdraw.

A graph on the cells of net e is safe if no partition cuts more of it than the net costs. With c_j the cost of a net of
weight one that touches j blocks, and κ(s) = min_j c_j/t_j(s) over 2 ≤ j ≤ min(k, s), where t_j(s) counts the edges of
Turán's graph, κ(s) on all pairs of s cells of e is safe, and so is any mixture of such cliques whose shares add up to at
most one. The pairs of e and e as a whole are the parts that are used here: pairs bind where few cells of a net are cut
off from many, the whole where it is cut in the middle.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from netpart.bounds.net_kernels import evaluate_nets
from netpart.expand import CliqueGraph, incidence
from netpart.netlist import Netlist

__all__ = ["NetParts", "bounding_ratio", "bounding_weights"]

_LARGEST_NET = 16
_DROPPED = 1e-5


def bounding_ratio(size: int, num_blocks: int, objective: str) -> Fraction:
    """κ(size), exact; 0 for fewer than two cells."""
    ratios = []
    for j in range(2, min(num_blocks, size) + 1):
        short, long = size // j, size % j
        pairs = (size * size - (j - long) * short**2 - long * (short + 1) ** 2) // 2
        ratios.append(Fraction({"cut-nets": 1, "connectivity": j - 1, "terminals": j}[objective], pairs))
    return min(ratios, default=Fraction(0))


def bounding_weights(netlist: Netlist, num_blocks: int = 2, objective: str = "cut-nets") -> NDArray[np.float64]:
    """(m,) weights per pair with which the graph's cut is at most the netlist's cost, for every partition into k blocks.

    w(e) κ(|e|), for two blocks and cut nets the "bounding" weight of `expand.pair_weights`. The result is rounded down far
    enough that sums of such weights, in any order, stay below their exact value.
    """
    distinct, which = np.unique(netlist.net_sizes, return_inverse=True)
    ratio = np.array([float(bounding_ratio(size, num_blocks, objective)) for size in distinct.tolist()])
    weights: NDArray[np.float64] = netlist.net_weights * ratio[which] * _rounded_down(netlist.num_nets)
    return weights


def _rounded_down(num_nets: int) -> float:
    return 1 - (num_nets + 16) * 2.0**-52


@dataclass(frozen=True, slots=True, eq=False)
class NetParts:
    """The parts of the nets of up to 16 cells, and what is fixed about the others.

    Attributes
    ----------
    netlist : Netlist
    offsets : (m + 1,) int64
        The shares of net e are ``shares[offsets[e]:offsets[e + 1]]``: its pairs in the order (0, 1), (0, 2) … of its
        cells, then, for three cells or more, the net as a whole. Larger nets have none and stay whole.
    pair_costs, whole_costs : (m,) float64
        w(e) κ(2) and w(e) κ(|e|), rounded down.
    """

    netlist: Netlist
    offsets: NDArray[np.int64]
    pair_costs: NDArray[np.float64]
    whole_costs: NDArray[np.float64]

    @classmethod
    def from_netlist(cls, netlist: Netlist, num_blocks: int, objective: str) -> NetParts:
        """For k blocks and one of `netlist.OBJECTIVES`."""
        sizes = netlist.net_sizes
        counts = np.where(sizes == 2, 1, sizes * (sizes - 1) // 2 + 1)
        counts[(sizes < 2) | (sizes > _LARGEST_NET)] = 0
        pair = float(bounding_ratio(2, num_blocks, objective)) * _rounded_down(netlist.num_nets)
        return cls(
            netlist,
            np.concatenate(([0], np.cumsum(counts))).astype(np.int64),
            netlist.net_weights * pair,
            bounding_weights(netlist, num_blocks, objective),
        )

    @property
    def num_shares(self) -> int:
        """Parts of all nets together."""
        return int(self.offsets[-1])

    def large_nets(self) -> CliqueGraph:
        """The nets without shares, as cliques."""
        return CliqueGraph.from_netlist(self.netlist, np.where(np.diff(self.offsets) == 0, self.whole_costs, 0.0))

    def evaluate(
        self, vectors: NDArray[np.float64], power: float, gradient: NDArray[np.float64], shares: NDArray[np.float64]
    ) -> float:
        """See `evaluate_nets`; the power mean tends to the costliest part of each net as the power grows."""
        return float(
            evaluate_nets(
                self.netlist.net_offsets,
                self.netlist.net_cells,
                self.offsets,
                self.pair_costs,
                self.whole_costs,
                vectors,
                power,
                gradient,
                shares,
            )
        )

    def build_graph(self, shares: NDArray[np.float64]) -> CliqueGraph:
        """The safe graph of some shares; those of each net are scaled to add up to one.

        What is negative or no number counts as zero, so that no shares lead to a graph that is not safe. Shares below 10⁻⁵
        of the largest are left out, as they would make the matrix denser than they are worth.
        """
        netlist, sizes = self.netlist, self.netlist.net_sizes
        rows: list[NDArray[np.int32]] = []
        columns: list[NDArray[np.int32]] = []
        values: list[NDArray[np.float64]] = []
        for size in range(2, _LARGEST_NET + 1):
            nets = np.flatnonzero((sizes == size) & (np.diff(self.offsets) > 0))
            if not len(nets):
                continue
            num_pairs = size * (size - 1) // 2
            num_parts = num_pairs + (size > 2)
            taken = shares[self.offsets[nets][:, None] + np.arange(num_parts)]
            taken[~(np.isfinite(taken) & (taken > 0))] = 0.0
            taken[taken < _DROPPED * taken.max(axis=1, keepdims=True)] = 0.0
            total = taken.sum(axis=1)
            # At most 121 shares are added up: 1e-12 covers the rounding here and of the two products below.
            taken *= np.divide(1 - 1e-12, total, out=np.zeros_like(total), where=total > 0)[:, None]
            weights = taken[:, :num_pairs] * self.pair_costs[nets][:, None]
            if size > 2:
                weights = weights + (taken[:, num_pairs] * self.whole_costs[nets])[:, None]
            cells = netlist.net_cells[netlist.net_offsets[nets][:, None] + np.arange(size)]
            first, second = np.triu_indices(size, 1)
            rows.append(cells[:, first].ravel())
            columns.append(cells[:, second].ravel())
            values.append(weights.ravel())
        n = netlist.num_cells
        large = np.diff(self.offsets) == 0
        pairs = sp.csr_array((n, n), dtype=np.float64)
        if rows:
            u, v, weight = np.concatenate(rows), np.concatenate(columns), np.concatenate(values)
            kept = weight > 0
            u, v = u[kept], v[kept]
            half = sp.coo_array((weight[kept], (np.minimum(u, v), np.maximum(u, v))), shape=(n, n)).tocsr()
            pairs = (half + half.T).tocsr()
        whole = large & (sizes >= 2)
        return CliqueGraph.from_parts(pairs, incidence(netlist, whole), self.whole_costs[whole])
