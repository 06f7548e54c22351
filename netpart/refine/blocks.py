"""Many blocks: passes of single moves between any two of them, for every objective."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from netpart.netlist import FREE, OBJECTIVES, AreaWindow, Netlist
from netpart.refine import blocks_kernels
from netpart.refine.bisection import spare_room

__all__ = ["RefinedBlocks", "refine_blocks"]

_VALUED_NET_SIZE = 60


class RefinedBlocks(NamedTuple):
    """Blocks after refinement, their cost, and by how much they leave their windows together."""

    blocks: NDArray[np.int32]
    cost: float
    violation: float


def refine_blocks(
    netlist: Netlist,
    blocks: NDArray[np.int32],
    window: AreaWindow,
    *,
    objective: str = "cut-nets",
    passes: int = 4,
    stall: int = 200,
    fixed: NDArray[np.int32] | None = None,
) -> RefinedBlocks:
    """Improve a partition into k blocks by single moves with exact gains, until a pass brings nothing.

    A generalisation of Fiduccia & Mattheyses (1982) to k blocks after Sanchis, "Multiple-way network partitioning", IEEE
    Trans. Computers 38 (1989), with a heap in place of buckets. Every pass keeps its best prefix by (violation, cost), so
    an illegal partition is brought towards its windows first, and a legal one stays legal.

    Parameters
    ----------
    netlist : Netlist
    blocks : (n,) int32
        Not changed.
    window : AreaWindow
    objective : str
        One of `netlist.OBJECTIVES`.
    passes, stall : int
        At most so many passes; a pass ends after `stall` moves without a better prefix.
    fixed : (n,) int32, optional

    Notes
    -----
    O(k p) memory for the counts; a move costs O(k) for each net of the cells whose gain changes.
    """
    assigned = np.array(blocks, dtype=np.int32)
    num_blocks = len(window.lower)
    movable = np.ones(netlist.num_cells, np.bool_) if fixed is None else fixed == FREE
    counts = np.empty((netlist.num_nets, num_blocks), np.int32)
    spans = np.empty(netlist.num_nets, np.int32)
    goal = OBJECTIVES.index(objective)
    nets = (netlist.net_offsets, netlist.net_cells)
    cost = float(blocks_kernels.count_blocks(*nets, netlist.net_weights, assigned, goal, counts, spans))
    load = np.bincount(assigned, netlist.areas, num_blocks).astype(np.float64)
    for _ in range(passes):
        kept, cost = blocks_kernels.block_pass(
            *nets,
            netlist.cell_offsets,
            netlist.cell_nets,
            netlist.net_weights,
            netlist.areas,
            movable,
            window.lower,
            window.upper,
            spare_room(netlist, window),
            goal,
            assigned,
            counts,
            spans,
            load,
            cost,
            stall,
            _VALUED_NET_SIZE,
        )
        if kept == 0:
            break
    return RefinedBlocks(assigned, float(cost), float(window.violation(load).sum()))
