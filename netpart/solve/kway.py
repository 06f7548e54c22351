"""Two blocks or more: bisection, and recursive bisection with windows that leave room for the later cuts."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from netpart.netlist import FREE, AreaWindow, Netlist, restrict
from netpart.solve.journal import Budget, Journal
from netpart.solve.multilevel import Problem
from netpart.solve.search import search_bisection
from netpart.solve.settings import Settings
from netpart.solve.spectrum import sweep_seed
from netpart.solve.windows import half_window, split_blocks

__all__ = ["partition_blocks"]


def partition_blocks(
    netlist: Netlist,
    window: AreaWindow,
    fixed: NDArray[np.int32] | None,
    objective: str,
    settings: Settings,
    seed: int,
    *,
    jobs: int,
    budget: Budget,
    journal: Journal,
) -> NDArray[np.int32]:
    """(n,) the block of each cell.

    Blocks are halved until each part is one block. Nets cut by an earlier bisection are left out of later ones where
    only cut nets count, and kept with what remains of them otherwise.
    """
    blocks = np.zeros(netlist.num_cells, np.int32)
    everything = np.arange(netlist.num_cells, dtype=np.int32)
    pinned = np.full(netlist.num_cells, FREE, np.int32) if fixed is None else fixed.astype(np.int32)
    pending: list[tuple[NDArray[np.int32], int, AreaWindow, tuple[int, ...]]] = [(everything, 0, window, ())]
    while pending:
        cells, first_block, part_window, path = pending.pop()
        count = len(part_window.lower)
        if count == 1 or not len(cells):
            blocks[cells] = first_block
            continue
        half = split_blocks(((part_window.lower + part_window.upper) / 2).tolist())
        part = netlist if not path else restrict(netlist, cells, whole_nets_only=objective == "cut-nets")
        sides = pinned[cells]
        sides = np.where(sides == FREE, FREE, np.where(sides < first_block + half, 0, 1)).astype(np.int32)
        problem = Problem(part, half_window(part_window, half, float(part.areas.sum())), sides, settings, sweep_seed)
        found = search_bisection(problem, seed, path, jobs=jobs, budget=budget, journal=journal)
        for side, low, high in ((1, half, count), (0, 0, half)):
            window_of_side = AreaWindow(part_window.lower[low:high], part_window.upper[low:high], part_window.slack)
            pending.append((cells[found.blocks == side], first_block + low, window_of_side, (*path, side)))
        if not path and count > 2:
            journal.say("halve", f"first bisection cuts {found.cut:g}")
    return blocks
