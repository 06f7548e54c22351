"""Starts come back in order, whatever the number of threads, and end where the budget ends."""

from __future__ import annotations

import time

import numpy as np
import pytest

from netpart.solve.journal import Budget
from netpart.solve.starts import random_state, run_in_order, seed_number


@pytest.mark.parametrize("jobs", [1, 2, 5])
def test_results_keep_the_order_of_tasks(jobs: int) -> None:
    def task(i: int) -> int:
        time.sleep(0.01 * (5 - i))
        return i

    seen: list[tuple[int, int]] = []
    tasks = [lambda i=i: task(i) for i in range(5)]
    results = run_in_order(tasks, jobs, Budget(), lambda i, value: seen.append((i, value)))
    assert results == list(range(5))
    assert seen == [(i, i) for i in range(5)]


@pytest.mark.parametrize("jobs", [1, 2])
def test_an_exhausted_budget_still_runs_the_first(jobs: int) -> None:
    budget = Budget()
    budget.request_stop()
    assert run_in_order([lambda: 7, lambda: 8], jobs, budget, lambda i, value: None) == [7]


def test_a_deadline_ends_the_list() -> None:
    budget = Budget(time_limit=0.05)

    def task() -> int:
        time.sleep(0.06)
        return 1

    assert len(run_in_order([task] * 100, 1, budget, lambda i, value: None)) == 1
    assert budget.exhausted
    assert not budget.stop_requested


def test_states_differ_by_path_and_repeat_by_seed() -> None:
    states = {tuple(random_state(1, *path)) for path in [(), (0,), (1,), (0, 0), (0, 1)]}
    assert len(states) == 5
    assert np.array_equal(random_state(1, 0, 1), random_state(1, 0, 1))
    assert not np.array_equal(random_state(1, 0), random_state(2, 0))


def test_seed_numbers() -> None:
    assert seed_number(None) == 1
    assert seed_number(7) == 7
    assert seed_number(np.random.default_rng(5)) == seed_number(np.random.default_rng(5))
