"""Search for a bisection: many cheap starts, cycles on the best, recombination, all inside a work budget."""

from __future__ import annotations

from collections.abc import Callable
from functools import partial

import numpy as np

from netpart.netlist import Netlist
from netpart.solve.journal import Budget, Journal
from netpart.solve.multilevel import Problem, Solution, improve, recombine, solve_once
from netpart.solve.settings import Settings
from netpart.solve.starts import run_in_order

__all__ = ["affordable", "search_bisection"]

_START, _CYCLE, _MATE, _CHOICE = range(4)
_BATCH = 4
_LEAST_TASKS = 4


def search_bisection(
    problem: Problem, seed: int, path: tuple[int, ...], *, jobs: int, budget: Budget, journal: Journal
) -> Solution:
    """The best bisection found with the work that the settings allow.

    Every task draws from a random stream of its own, named by (seed, path, phase, number), and batches have a fixed
    size, so the result does not depend on `jobs`. The recombination of solutions by keeping together what they agree on
    is an evolutionary search in the sense of Soper, Walshaw & Cross, Journal of Global Optimization 29 (2004).
    """
    settings = problem.settings

    def stream(phase: int, number: int) -> np.random.Generator:
        return np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(*path, phase, number)))

    def run(stage: str, tasks: list[Callable[[], Solution]]) -> list[Solution]:
        def done(_: int, solution: Solution) -> None:
            if not path:
                journal.note_cut(stage, 0, solution.cut, legal=solution.violation == 0)

        return run_in_order(tasks, jobs, budget, done)

    starts: list[Callable[[], Solution]] = [
        partial(solve_once, problem, i, stream(_START, i))
        for i in range(affordable(problem.netlist, settings, settings.starts))
    ]
    pool = _distinct(run("start", starts))[: affordable(problem.netlist, settings, settings.pool)]

    if settings.levels == "one":
        return pool[0]

    for cycle in range(settings.cycles):
        if budget.exhausted:
            break
        tasks: list[Callable[[], Solution]] = [
            partial(improve, problem, solution, stream(_CYCLE, cycle * settings.pool + i)) for i, solution in enumerate(pool)
        ]
        improved = run("cycle", tasks)
        pool = _distinct([*improved, *pool[len(improved) :]])

    recombinations = affordable(problem.netlist, settings, settings.recombinations)
    for first in range(0, recombinations, _BATCH):
        if budget.exhausted or len(pool) < 2:
            break
        choice = stream(_CHOICE, first)
        tasks = []
        for number in range(first, min(first + _BATCH, recombinations)):
            i, j = sorted(choice.choice(len(pool), 2, replace=False).tolist())
            tasks.append(partial(recombine, problem, pool[i], pool[j], stream(_MATE, number)))
        pool = _distinct([*pool, *run("recombine", tasks)])[: max(len(pool), 2)]
    return pool[0]


def affordable(netlist: Netlist, settings: Settings, tasks: int) -> int:
    """How many tasks of a phase run within the work budget, which counts every pin of the netlist once a task."""
    return min(tasks, max(_LEAST_TASKS, int(settings.work * 1e6 / max(netlist.num_pins, 1))))


def _distinct(solutions: list[Solution]) -> list[Solution]:
    """Best first; of solutions that are the same up to the names of the blocks, one."""
    kept: list[Solution] = []
    for solution in sorted(solutions, key=lambda entry: entry.key):
        for other in kept:
            if other.key == solution.key:
                different = int(np.count_nonzero(other.blocks != solution.blocks))
                if different in (0, len(solution.blocks)):
                    break
        else:
            kept.append(solution)
    return kept
