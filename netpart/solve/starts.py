"""Independent starts: random states that depend on nothing but the seed, threads that don't change the result."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from netpart.solve.journal import Budget

__all__ = ["random_state", "run_in_order", "seed_number"]

_T = TypeVar("_T")


def seed_number(rng: int | np.random.Generator | None) -> int:
    """The whole number that a run is reproduced with: as given, drawn from a generator, or 1."""
    if rng is None:
        return 1
    if isinstance(rng, np.random.Generator):
        return int(rng.integers(2**31))
    return int(rng)


def random_state(seed: int, *path: int) -> NDArray[np.uint64]:
    """(4,) uint64 state for the kernels' random numbers; different for every path below a seed."""
    return np.random.SeedSequence(seed, spawn_key=path).generate_state(4, np.uint64).astype(np.uint64)


def run_in_order(tasks: Sequence[Callable[[], _T]], jobs: int, budget: Budget, done: Callable[[int, _T], None]) -> list[_T]:
    """Run tasks on up to `jobs` threads and return their results in task order.

    The first task always runs. When the budget is exhausted no further task begins, and the list ends before the first
    task that did not run, so that a prefix of the same results comes back whatever the number of threads.

    Parameters
    ----------
    done : callable
        Called with (index, result) in task order, on the calling thread.
    """
    results: list[_T] = []
    if jobs == 1 or len(tasks) == 1:
        for i, task in enumerate(tasks):
            if i and budget.exhausted:
                break
            results.append(task())
            done(i, results[-1])
        return results

    def guarded(i: int) -> _T | None:
        return None if i and budget.exhausted else tasks[i]()

    with ThreadPoolExecutor(max_workers=min(jobs, len(tasks))) as pool:
        futures = [pool.submit(guarded, i) for i in range(len(tasks))]
        for i, future in enumerate(futures):
            result = future.result()
            if result is None:
                break
            results.append(result)
            done(i, result)
    return results
