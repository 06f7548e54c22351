"""Partition: the block of each cell, with every figure that anyone prints about it."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from netpart.netlist.errors import AssignmentError
from netpart.netlist.model import CellFlag, Netlist
from netpart.netlist.rules import FREE, Rules

__all__ = ["OBJECTIVES", "Partition", "spans"]

OBJECTIVES = ("cut-nets", "connectivity", "terminals")
"""What can be minimised; the definitions stand in `Partition`."""


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Partition:
    """A partition of a netlist into k blocks.

    With λ(e) the number of blocks that net e touches and w(e) its weight:

    Attributes
    ----------
    blocks : (n,) int32
        The block of each cell, 0 … k − 1; read-only.
    num_blocks : int
        k.
    cut_nets : float
        Σ w(e) [λ(e) > 1].
    connectivity : float
        Σ w(e) (λ(e) − 1).
    terminals : float
        Σ w(e) λ(e) over the cut nets.
    block_areas : (k,) float64
        a(block i), correctly rounded sums.
    block_cells : (k,) int64
        Cells in each block, ports included.
    block_terminals : (k,) int64
        Cut nets that touch the block, plus the ports it holds.
    num_cut : int
        Cut nets counted without weights.
    """

    blocks: NDArray[np.int32]
    num_blocks: int
    cut_nets: float
    connectivity: float
    terminals: float
    block_areas: NDArray[np.float64]
    block_cells: NDArray[np.int64]
    block_terminals: NDArray[np.int64]
    num_cut: int

    @classmethod
    def from_blocks(cls, netlist: Netlist, blocks: ArrayLike, num_blocks: int) -> Partition:
        """Count everything from the plain definitions, in O(n + p).

        Raises
        ------
        AssignmentError
            If `blocks` does not give every cell a block within 0 … k − 1.
        """
        assigned = np.array(blocks, dtype=np.int32)
        if assigned.shape != (netlist.num_cells,):
            raise AssignmentError(f"{len(assigned)} cells are assigned, expected {netlist.num_cells}")
        if len(assigned) and (assigned.min() < 0 or assigned.max() >= num_blocks):
            bad = int(np.flatnonzero((assigned < 0) | (assigned >= num_blocks))[0])
            raise AssignmentError(
                f"cell {netlist.cell_names[bad]!r} lies in block {assigned[bad]}, expected 0..{num_blocks - 1}"
            )
        assigned.flags.writeable = False
        nets, touched = _touched(netlist, assigned, num_blocks)
        lam = np.bincount(nets, minlength=netlist.num_nets)
        cut = lam > 1
        weights, lam_cut = netlist.net_weights[cut], lam[cut]
        terminals = np.bincount(touched[cut[nets]], minlength=num_blocks)
        ports = np.bincount(assigned[netlist.has_flag(CellFlag.PORT)], minlength=num_blocks)
        order = np.argsort(assigned, kind="stable")
        counts = np.bincount(assigned, minlength=num_blocks)
        pieces = np.split(netlist.areas[order], np.cumsum(counts)[:-1])
        return cls(
            blocks=assigned,
            num_blocks=num_blocks,
            cut_nets=math.fsum(weights.tolist()),
            connectivity=math.fsum((weights * (lam_cut - 1)).tolist()),
            terminals=math.fsum((weights * lam_cut).tolist()),
            block_areas=np.array([math.fsum(piece.tolist()) for piece in pieces]),
            block_cells=counts.astype(np.int64),
            block_terminals=(terminals + ports).astype(np.int64),
            num_cut=int(cut.sum()),
        )

    def cost(self, objective: str) -> float:
        """The value of one of `OBJECTIVES`."""
        return {"cut-nets": self.cut_nets, "connectivity": self.connectivity, "terminals": self.terminals}[objective]

    def imbalance(self, netlist: Netlist, rules: Rules) -> float:
        """The largest relative deviation max_i |a(block i) / (f_i A) − 1|; 0 for a netlist without area."""
        target = np.array([float(share) for share in rules.shares]) * netlist.total_area
        if not target.any():
            return 0.0
        return float(np.max(np.abs(self.block_areas / target - 1)))

    def broken_rules(self, netlist: Netlist, rules: Rules) -> list[str]:
        """One sentence for every rule that is broken, saying by how much; empty for a legal partition."""
        window = rules.window(netlist)
        faults = []
        for i in np.flatnonzero(window.violation(self.block_areas) > 0):
            area = self.block_areas[i]
            limit, side = (window.lower[i], "below") if area < window.lower[i] else (window.upper[i], "above")
            faults.append(
                f"block {rules.block_names[i]} has area {area:.6g}, {abs(area - limit):.6g} {side} its limit {limit:.6g}"
            )
        if rules.fixed is not None:
            for v in np.flatnonzero((rules.fixed != FREE) & (rules.fixed != self.blocks)).tolist():
                faults.append(
                    f"cell {netlist.cell_names[v]!r} is fixed to block {rules.block_names[rules.fixed[v]]}, "
                    f"but lies in {rules.block_names[self.blocks[v]]}"
                )
        return faults

    def __repr__(self) -> str:
        areas = ":".join(f"{area:.6g}" for area in self.block_areas[:8])
        return f"<Partition: {self.num_blocks} blocks, cut {self.cut_nets:g}, areas {areas}>"


def spans(netlist: Netlist, blocks: NDArray[np.int32], num_blocks: int) -> NDArray[np.int64]:
    """(m,) λ(e): the number of blocks that each net touches."""
    return np.bincount(_touched(netlist, blocks, num_blocks)[0], minlength=netlist.num_nets)


def _touched(netlist: Netlist, blocks: NDArray[np.int32], num_blocks: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """The different (net, block) pairs, as two arrays."""
    nets = np.repeat(np.arange(netlist.num_nets, dtype=np.int64), netlist.net_sizes)
    pairs = np.unique(nets * num_blocks + blocks[netlist.net_cells])
    return pairs // num_blocks, pairs % num_blocks
