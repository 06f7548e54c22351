"""Two blocks: passes of single moves and of pair swaps, with tallies kept from pass to pass."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from netpart.netlist import FREE, AreaWindow, Netlist, UsageError
from netpart.refine import kernels

__all__ = ["TIE_RULES", "Bisection", "grow_bisection", "random_bisection"]

TIE_RULES = ("newest", "oldest", "random")
"""Which of the cells with equal gain moves first: the one that came to this gain last, first, or either."""

_MAX_REACH = 1 << 14
_WALKED_NET_SIZE = 50
_USUAL_CELL = 4.0


def spare_room(netlist: Netlist, window: AreaWindow) -> float:
    """By how much blocks may leave their windows during a pass: a window too narrow for a cell would end it at once."""
    width = float(np.min(window.upper - window.lower))
    usual = min(float(netlist.areas.max()), _USUAL_CELL * float(netlist.areas.mean()))
    return max(usual - width / 2, 0.0)


class Bisection:
    """A bisection while it is being improved: the side of each cell, with counts, gains and areas kept up to date.

    Parameters
    ----------
    netlist : Netlist
    blocks : (n,) int32
        0 or 1; copied.
    window : AreaWindow
        Limits of the two blocks.
    fixed : (n,) int32, optional
        The block of each fixed cell, `FREE` for the others. Fixed cells must lie where they are fixed.
    state : (1,) uint64, optional
        Random state for the tie rule ``"random"``; advanced in place, never zero.

    Attributes
    ----------
    blocks : (n,) int32
    cut : float
        Σ w(e) over nets with cells in both blocks.
    load : (2,) float64
        Block areas.

    Notes
    -----
    Counts and gains follow every move, so that a pass costs O(n + m + pins of the nets that it makes or leaves uncut).
    What a pass takes back is counted anew only if another pass follows.
    """

    def __init__(
        self,
        netlist: Netlist,
        blocks: NDArray[np.int32],
        window: AreaWindow,
        fixed: NDArray[np.int32] | None = None,
        state: NDArray[np.uint64] | None = None,
    ) -> None:
        num_cells = netlist.num_cells
        self.netlist = netlist
        self.window = window
        self.blocks = np.array(blocks, dtype=np.int32)
        self._movable = np.ones(num_cells, np.bool_) if fixed is None else fixed == FREE
        self._state = np.ones(1, np.uint64) if state is None else state
        self._counts = np.empty((netlist.num_nets, 2), np.int32)
        self._gains = np.empty(num_cells)
        nets = (netlist.net_offsets, netlist.net_cells)
        self._arrays = (*nets, netlist.cell_offsets, netlist.cell_nets, netlist.net_weights, netlist.areas)
        self.cut, degree = self._count()
        self.load = np.bincount(self.blocks, netlist.areas, 2).astype(np.float64)
        # Whole weights have a bucket for every gain; others, and very large ones, share buckets, and gains stay exact.
        whole = degree == 0 or (degree <= _MAX_REACH and bool(np.all(netlist.net_weights == np.floor(netlist.net_weights))))
        self._reach = max(int(degree), 1) if whole else _MAX_REACH
        self._scale = 1.0 if whole else _MAX_REACH / degree
        self._margin = spare_room(netlist, window)
        self._moved = np.empty(num_cells, np.int32)
        self._touched = np.empty(num_cells, np.int32)
        self._is_touched = np.zeros(num_cells, np.bool_)

    def _count(self) -> tuple[float, float]:
        """Counts and gains anew; returns the cut and the largest weighted degree of a cell."""
        nets = (self.netlist.net_offsets, self.netlist.net_cells, self.netlist.net_weights)
        cut = float(kernels.count_sides(*nets, self.blocks, self._counts))
        degree = float(kernels.compute_gains(*nets, self.blocks, self._counts, self._gains))
        self._exact = True
        return cut, degree

    @property
    def violation(self) -> float:
        """By how much the blocks leave their windows together, in area; 0 for a legal bisection."""
        return float(self.window.violation(self.load).sum())

    def move(self, passes: int, stall: int, tie_rule: str = "newest", *, boundary: bool = True) -> int:
        """Passes of single moves (Fiduccia & Mattheyses, DAC 1982) until one brings nothing; returns how many ran.

        In a pass every free cell moves at most once, the best gain first, as long as the move keeps both blocks in
        their windows, or brings an illegal bisection nearer to them. Then the best prefix by (violation, cut,
        imbalance) is kept and the rest is taken back.

        Parameters
        ----------
        passes : int
            At most so many.
        stall : int
            Moves without a better prefix after which a pass ends.
        tie_rule : str
            One of `TIE_RULES`.
        boundary : bool
            Begin with the cells of cut nets alone; others follow when a neighbour has moved.
        """
        num_lists = 2 * (2 * self._reach + 1)
        heads, tails = np.empty(num_lists, np.int32), np.empty(num_lists, np.int32)
        nexts, prevs = np.empty(len(self.blocks), np.int32), np.empty(len(self.blocks), np.int32)
        list_of = np.full(len(self.blocks), -1, np.int32)
        for done in range(1, passes + 1):
            if not self._exact:
                self._count()
            num_moved, best, self.cut = kernels.move_pass(
                *self._arrays,
                self._movable,
                self.window.lower,
                self.window.upper,
                self._margin,
                self.blocks,
                self._counts,
                self._gains,
                self.load,
                self.cut,
                stall,
                TIE_RULES.index(tie_rule),
                boundary,
                self._scale,
                self._reach,
                heads,
                tails,
                nexts,
                prevs,
                list_of,
                self._moved,
                self._touched,
                self._is_touched,
                self._state,
            )
            last = best == 0 or done == passes
            self._take_back(best, num_moved, stay_exact=not last)
            if best == 0:
                return done
        return passes

    def swap(self, passes: int, stall: int) -> int:
        """Passes of pair swaps (Kernighan & Lin 1970, on nets instead of edges) until one brings nothing.

        Needs a legal bisection, and keeps it legal. Much slower than `move`, but passes through windows in which no
        single cell can move.
        """
        shared = np.full(self.netlist.num_nets, -1, np.int32)
        for done in range(1, passes + 1):
            if not self._exact:
                self._count()
            num_moved, best, self.cut = kernels.swap_pass(
                *self._arrays,
                self._movable,
                self.window.lower,
                self.window.upper,
                self.blocks,
                self._counts,
                self._gains,
                self.load,
                self.cut,
                stall,
                self._moved,
                self._touched,
                self._is_touched,
                shared,
            )
            last = best == 0 or done == passes
            self._take_back(best, num_moved, stay_exact=not last)
            if best == 0:
                return done
        return passes

    def _take_back(self, first: int, last: int, *, stay_exact: bool) -> None:
        self._exact = kernels.take_back(
            self._moved,
            first,
            last,
            stay_exact or first == last,
            *self._arrays,
            self.blocks,
            self._counts,
            self._gains,
            self.load,
            self._touched,
            self._is_touched,
        )


def random_bisection(
    netlist: Netlist, window: AreaWindow, fixed: NDArray[np.int32] | None, rng: np.random.Generator
) -> NDArray[np.int32]:
    """Cells in random order fill block 0 up to the middle of its window, the rest is block 1; fixed cells stay."""
    blocks, free, wanted = _fixed_side(netlist, window, fixed)
    order = rng.permutation(np.flatnonzero(free))
    filled = np.cumsum(netlist.areas[order])
    blocks[order[filled - 0.5 * netlist.areas[order] <= wanted]] = 0
    return blocks


def grow_bisection(
    netlist: Netlist, window: AreaWindow, fixed: NDArray[np.int32] | None, rng: np.random.Generator
) -> NDArray[np.int32]:
    """Block 0 grows breadth-first from a random cell up to the middle of its window; fixed cells stay."""
    blocks, free, wanted = _fixed_side(netlist, window, fixed)
    kernels.grow_side(
        netlist.net_offsets,
        netlist.net_cells,
        netlist.cell_offsets,
        netlist.cell_nets,
        netlist.areas,
        free,
        rng.permutation(netlist.num_cells).astype(np.int32),
        _WALKED_NET_SIZE,
        wanted,
        blocks,
    )
    return blocks


def _fixed_side(
    netlist: Netlist, window: AreaWindow, fixed: NDArray[np.int32] | None
) -> tuple[NDArray[np.int32], NDArray[np.bool_], float]:
    """All free cells in block 1, which cells are free, and the area block 0 still wants."""
    blocks = np.ones(netlist.num_cells, np.int32)
    middle = 0.5 * float(window.lower[0] + window.upper[0])
    if fixed is None:
        return blocks, np.ones(netlist.num_cells, np.bool_), middle
    if fixed.max(initial=FREE) > 1:
        raise UsageError("a bisection has the blocks 0 and 1, but a cell is fixed to another")
    blocks[fixed == 0] = 0
    return blocks, fixed == FREE, middle - float(netlist.areas[fixed == 0].sum())
