"""One multilevel run: coarsen, divide the coarsest netlist, improve level by level on the way back."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from netpart.coarsen import Hierarchy, Level, build_hierarchy
from netpart.netlist import AreaWindow, Netlist, UsageError
from netpart.refine import Bisection, grow_bisection, random_bisection, refine_by_flow
from netpart.solve.settings import Settings

__all__ = ["Problem", "Solution", "improve", "recombine", "solve_once"]

Blocks = NDArray[np.int32]

_SMALL_LEVEL = 1500


@dataclass(frozen=True, slots=True, eq=False)
class Problem:
    """A bisection to be found.

    Attributes
    ----------
    netlist : Netlist
    window : AreaWindow
        Of the two blocks.
    fixed : (n,) int32
        0, 1 or `FREE`.
    settings : Settings
    sweep : callable
        Gives the blocks of the spectral sweep on a level, or None where it has none.
    """

    netlist: Netlist
    window: AreaWindow
    fixed: NDArray[np.int32]
    settings: Settings
    sweep: Callable[[Netlist, AreaWindow, NDArray[np.int32]], Blocks | None]


@dataclass(frozen=True, slots=True, eq=False)
class Solution:
    """A bisection that was found, ordered by (violation, cut, imbalance)."""

    blocks: Blocks
    violation: float
    cut: float
    imbalance: float

    @property
    def key(self) -> tuple[float, float, float]:
        """Smaller is better."""
        return self.violation, self.cut, self.imbalance


def solve_once(problem: Problem, index: int, rng: np.random.Generator) -> Solution:
    """Start number `index`: a hierarchy of its own, seeds on the coarsest level, improvement down to the netlist."""
    settings = problem.settings
    if settings.levels == "many":
        hierarchy = _hierarchy(problem, rng, None)
    else:
        hierarchy = Hierarchy((Level(problem.netlist, problem.fixed),))
    seeds = settings.seed_tries if settings.levels == "many" else 1
    last = len(hierarchy.levels) - 1
    tries = [
        _refine(problem, hierarchy, last, _seed(problem, hierarchy.coarsest, index + attempt, rng), rng, boundary=False)
        for attempt in range(seeds)
    ]
    found = _descend(problem, hierarchy, tries, rng)
    return _polish(problem, found, rng) if settings.flow_starts else found


def improve(problem: Problem, solution: Solution, rng: np.random.Generator) -> Solution:
    """A cycle: coarsen within the blocks of a solution, and improve it again level by level; never worse."""
    return _cycle(problem, solution, solution.blocks, rng)


def recombine(problem: Problem, better: Solution, other: Solution, rng: np.random.Generator) -> Solution:
    """Unite what two solutions agree on into clusters, and search between them, from the better one; never worse."""
    return _cycle(problem, better, 2 * better.blocks + other.blocks, rng)


def _cycle(problem: Problem, solution: Solution, keep: Blocks, rng: np.random.Generator) -> Solution:
    hierarchy = _hierarchy(problem, rng, keep)
    blocks = solution.blocks
    for level in hierarchy.levels[1:]:
        assert level.cluster is not None
        coarse = np.empty(level.netlist.num_cells, np.int32)
        coarse[level.cluster] = blocks
        blocks = coarse
    start = _refine(problem, hierarchy, len(hierarchy.levels) - 1, blocks, rng)
    found = _polish(problem, _descend(problem, hierarchy, [start], rng), rng)
    return min(found, solution, key=lambda entry: entry.key)


def _polish(problem: Problem, solution: Solution, rng: np.random.Generator) -> Solution:
    """Minimum cuts through a corridor around the cut, then passes of moves again; never worse."""
    settings = problem.settings
    if not settings.flow or solution.violation > 0:
        return solution
    blocks, gained = refine_by_flow(
        problem.netlist,
        solution.blocks,
        problem.window,
        fixed=problem.fixed,
        corridor_share=settings.flow_share,
        max_cells=settings.flow_cells,
    )
    if gained <= 0:
        return solution
    whole = Hierarchy((Level(problem.netlist, problem.fixed),))
    return min(_finish(problem, _refine(problem, whole, 0, blocks, rng)), solution, key=lambda entry: entry.key)


def _hierarchy(problem: Problem, rng: np.random.Generator, keep: Blocks | None) -> Hierarchy:
    settings = problem.settings
    return build_hierarchy(
        problem.netlist,
        rng,
        fixed=problem.fixed,
        keep=keep,
        coarsest=settings.coarsest,
        ratio=settings.coarsen_ratio,
        net_power=settings.coarsen_net_power,
        area_power=settings.coarsen_area_power,
        area_cap=settings.coarsen_area_cap,
        max_net_size=settings.coarsen_net_size,
    )


def _seed(problem: Problem, level: Level, turn: int, rng: np.random.Generator) -> Blocks:
    kind = problem.settings.seed_from
    if kind == "each":
        kind = ("sweep", "grown", "random")[turn % 3]
    if kind == "sweep":
        blocks = problem.sweep(level.netlist, problem.window, level.fixed) if turn == 0 else None
        if blocks is not None:
            return blocks
        kind = "grown" if turn % 2 else "random"
    make = grow_bisection if kind == "grown" else random_bisection
    return make(level.netlist, problem.window, level.fixed, rng)


def _descend(problem: Problem, hierarchy: Hierarchy, tries: list[Bisection], rng: np.random.Generator) -> Solution:
    """Improve on every level from the one above the coarsest to the netlist itself.

    The better half of the tries goes down from each level, and one alone where levels are no longer small: a coarse
    netlist does not yet tell which try is the best, and there another one costs little.
    """
    for number in range(len(hierarchy.levels) - 1, 0, -1):
        tries.sort(key=lambda work: (work.violation, work.cut))
        small = hierarchy.levels[number - 1].netlist.num_cells <= _SMALL_LEVEL
        kept = tries[: (len(tries) + 1) // 2 if small else 1]
        tries = [_refine(problem, hierarchy, number - 1, hierarchy.project(work.blocks, number), rng) for work in kept]
    return _finish(problem, min(tries, key=lambda work: (work.violation, work.cut)))


def _finish(problem: Problem, work: Bisection) -> Solution:
    middle = 0.5 * float(problem.window.lower[0] + problem.window.upper[0])
    return Solution(work.blocks, work.violation, work.cut, abs(float(work.load[0]) - middle))


def _refine(
    problem: Problem,
    hierarchy: Hierarchy,
    number: int,
    blocks: Blocks,
    rng: np.random.Generator,
    *,
    boundary: bool = True,
) -> Bisection:
    """Passes on one level; above the finest the window is wider by half the largest cluster, as clusters are coarse."""
    settings = problem.settings
    level = hierarchy.levels[number]
    window = problem.window
    if number:
        extra = 0.5 * float(level.netlist.areas.max())
        window = AreaWindow(window.lower - extra, window.upper + extra, window.slack)
    state = rng.integers(1, 2**63, size=1, dtype=np.uint64)
    work = Bisection(level.netlist, blocks, window, level.fixed, state)
    if len(hierarchy.levels) > 1:
        work.move(settings.passes, settings.stall, settings.tie_rule, boundary=boundary)
    else:
        work.move(
            max(settings.passes, 20), max(settings.stall, level.netlist.num_cells // 4), settings.tie_rule, boundary=False
        )
    if settings.method == "swaps" and work.violation == 0:
        work.swap(settings.passes, settings.stall)
    elif settings.method not in ("moves", "swaps"):
        raise UsageError(f"unknown method {settings.method!r}")
    return work
