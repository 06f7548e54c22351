"""Two blocks or more: recursive bisection with windows that leave room for the later cuts, then all blocks together."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from netpart.coarsen import build_hierarchy
from netpart.netlist import FREE, AreaWindow, Netlist, restrict
from netpart.refine import RefinedBlocks, refine_blocks, refine_pairs
from netpart.solve.journal import Budget, Journal
from netpart.solve.multilevel import Problem
from netpart.solve.search import affordable, search_bisection
from netpart.solve.settings import Settings
from netpart.solve.spectrum import sweep_seed
from netpart.solve.windows import half_window, split_blocks

__all__ = ["partition_blocks"]


_BLOCK_CYCLE, _SHAKE = 4, 5  # phases 0 to 3 of the random streams belong to the search of a bisection
_SMALL = 300
_SHAKES_PER_TRY = 60


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

    Two blocks are one search for a bisection: cut nets, connectivity and terminals then differ by constant factors. More
    blocks are found by recursive bisection, with a part of the work for each, and then improved together for the
    objective, level by level on hierarchies that keep them; the best of `block_tries` such attempts is taken.
    """
    pinned = np.full(netlist.num_cells, FREE, np.int32) if fixed is None else fixed.astype(np.int32)
    if len(window.lower) <= 2:
        return _bisect_recursively(
            netlist, window, pinned, objective, settings, seed, (), jobs=jobs, budget=budget, journal=journal
        )
    part = replace(
        settings,
        starts=max(2, settings.starts // 3),
        pool=max(2, settings.pool // 2),
        cycles=min(1, settings.cycles),
        recombinations=settings.recombinations // 3,
    )
    best: RefinedBlocks | None = None
    for attempt in range(affordable(netlist, settings, settings.block_tries)):
        if best is not None and budget.exhausted:
            break
        blocks = _bisect_recursively(
            netlist, window, pinned, objective, part, seed, (attempt,), jobs=jobs, budget=budget, journal=journal
        )
        found = _improve_together(netlist, window, pinned, blocks, objective, settings, seed, attempt, budget)
        journal.note_cut("blocks", 0, found.cost, legal=found.violation == 0)
        if best is None or (found.violation, found.cost) < (best.violation, best.cost):
            best = found
    assert best is not None
    if settings.flow and best.violation == 0 and not budget.exhausted:
        blocks, gained = refine_pairs(
            netlist,
            best.blocks,
            window,
            objective,
            fixed=pinned,
            corridor_share=settings.flow_share,
            max_cells=settings.flow_cells,
        )
        if gained > 0:
            best = refine_blocks(netlist, blocks, window, objective=objective, stall=settings.stall, fixed=pinned)
            journal.note_cut("blocks", 0, best.cost, legal=best.violation == 0)
    if netlist.num_cells <= _SMALL:
        best = _shake(netlist, window, pinned, best, objective, settings, seed, budget)
    return best.blocks


def _shake(
    netlist: Netlist,
    window: AreaWindow,
    pinned: NDArray[np.int32],
    best: RefinedBlocks,
    objective: str,
    settings: Settings,
    seed: int,
    budget: Budget,
) -> RefinedBlocks:
    """Small netlists: refine again after moving a random part of the cells to random blocks; the best is kept."""
    stream = np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(_SHAKE,)))
    free = np.flatnonzero(pinned == FREE)
    for turn in range(settings.block_tries * _SHAKES_PER_TRY):
        if budget.exhausted or not len(free):
            break
        blocks = best.blocks.copy()
        chosen = free[stream.random(len(free)) < (0.2, 0.4, 1.0)[turn % 3]]
        blocks[chosen] = stream.integers(0, len(window.lower), len(chosen))
        found = refine_blocks(netlist, blocks, window, objective=objective, passes=20, stall=netlist.num_cells, fixed=pinned)
        if (found.violation, found.cost) < (best.violation, best.cost):
            best = found
    return best


def _improve_together(
    netlist: Netlist,
    window: AreaWindow,
    pinned: NDArray[np.int32],
    blocks: NDArray[np.int32],
    objective: str,
    settings: Settings,
    seed: int,
    attempt: int,
    budget: Budget,
) -> RefinedBlocks:
    """Passes over all blocks, from the clusters of a hierarchy that keeps the blocks down to the cells; never worse."""
    passes = max(settings.passes, 1)
    best = refine_blocks(netlist, blocks, window, objective=objective, passes=passes, stall=settings.stall, fixed=pinned)
    for cycle in range(settings.block_cycles):
        if budget.exhausted:
            break
        stream = np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(attempt, _BLOCK_CYCLE, cycle)))
        hierarchy = build_hierarchy(
            netlist,
            stream,
            fixed=pinned,
            keep=best.blocks,
            coarsest=settings.coarsest * len(window.lower) // 2,
            ratio=settings.coarsen_ratio,
            net_power=settings.coarsen_net_power,
            area_power=settings.coarsen_area_power,
            area_cap=settings.coarsen_area_cap,
            max_net_size=settings.coarsen_net_size,
        )
        keep = hierarchy.coarsest.keep
        assert keep is not None
        current = keep
        for number in range(len(hierarchy.levels) - 1, -1, -1):
            level = hierarchy.levels[number]
            extra = 0.5 * float(level.netlist.areas.max()) if number else 0.0
            wider = AreaWindow(window.lower - extra, window.upper + extra, window.slack)
            found = refine_blocks(
                level.netlist,
                current,
                wider,
                objective=objective,
                passes=passes,
                stall=settings.stall,
                fixed=level.fixed,
            )
            current = hierarchy.project(found.blocks, number) if number else found.blocks
        if (found.violation, found.cost) < (best.violation, best.cost):
            best = found
    return best


def _bisect_recursively(
    netlist: Netlist,
    window: AreaWindow,
    pinned: NDArray[np.int32],
    objective: str,
    settings: Settings,
    seed: int,
    root: tuple[int, ...],
    *,
    jobs: int,
    budget: Budget,
    journal: Journal,
) -> NDArray[np.int32]:
    """Blocks are halved until each part is one block.

    Nets cut by an earlier bisection are left out of later ones where only cut nets count, and kept with what remains of
    them otherwise. `root` begins the names of the random streams.
    """
    blocks = np.zeros(netlist.num_cells, np.int32)
    everything = np.arange(netlist.num_cells, dtype=np.int32)
    pending: list[tuple[NDArray[np.int32], int, AreaWindow, tuple[int, ...]]] = [(everything, 0, window, root)]
    while pending:
        cells, first_block, part_window, path = pending.pop()
        count = len(part_window.lower)
        if count == 1 or not len(cells):
            blocks[cells] = first_block
            continue
        half = split_blocks(((part_window.lower + part_window.upper) / 2).tolist())
        part = netlist if path == root else restrict(netlist, cells, whole_nets_only=objective == "cut-nets")
        sides = pinned[cells]
        sides = np.where(sides == FREE, FREE, np.where(sides < first_block + half, 0, 1)).astype(np.int32)
        problem = Problem(part, half_window(part_window, half, float(part.areas.sum())), sides, settings, sweep_seed)
        found = search_bisection(problem, seed, path, jobs=jobs, budget=budget, journal=journal)
        for side, low, high in ((1, half, count), (0, 0, half)):
            window_of_side = AreaWindow(part_window.lower[low:high], part_window.upper[low:high], part_window.slack)
            pending.append((cells[found.blocks == side], first_block + low, window_of_side, (*path, side)))
    return blocks
