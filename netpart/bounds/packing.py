"""Packing flow trees into a netlist, so that much flow must cross any legal cut and no net is loaded too much."""

from __future__ import annotations

import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from netpart.netlist import Netlist

__all__ = ["Batch", "Packing", "PackingTask", "pack_trees"]

BATCH = 8
"""Trees that are grown on the same lengths: few, as stale lengths cost more than idle threads."""
MARKS_PER_OCTAVE = 8
OCTAVES = 14
TOP_MARK = OCTAVES * MARKS_PER_OCTAVE - 1
_WARM_SHARPNESS = 10.0
_FIRST_SHARPNESS, _SHARPNESS_PER_SWEEP, _MOST_SHARPNESS = 10.0, 8.0, 1000.0
_SWEEPS = 4
"""Each source group is visited at least about so often, or sources are put together into fewer groups."""


class PackingTask(NamedTuple):
    """What is to be packed.

    Attributes
    ----------
    netlist : Netlist
    demands : (n,) float64
        Share of the total demand that each cell takes in, Σ = 1; 0 leaves a cell out.
    low, high : float
        The least and the largest share that a block of a legal partition can hold.
    num_blocks : int
    """

    netlist: Netlist
    demands: NDArray[np.float64]
    low: float
    high: float
    num_blocks: int


class Batch(NamedTuple):
    """The trees grown on one set of lengths, and how much of each group's flow they took over."""

    changed_nets: NDArray[np.int32]
    changed_marks: NDArray[np.int16]
    limit: int
    groups: NDArray[np.int32]
    targets: NDArray[np.float64]
    steps: NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Packing:
    """A packing of trees.

    Attributes
    ----------
    roots : (g,) int32
        The root cell of each source group.
    groups : (n,) int32
        The group of each cell, −1 for a cell that sends nothing.
    first_marks : (m,) int16
        The mark of each net before the first batch.
    batches : list of Batch
        All trees, in the order in which they were grown.
    estimate : float
        The bound, as far as rounded sums tell; the certificate's check has the last word.
    history : list of (seconds, estimate)
    prices : (m,) float64
        The length of each net at the end, the largest 1: where it is large, cuts are dear.
    """

    roots: NDArray[np.int32]
    groups: NDArray[np.int32]
    first_marks: NDArray[np.int16]
    batches: list[Batch]
    estimate: float
    history: list[tuple[float, float]]
    prices: NDArray[np.float64]


def length_table() -> NDArray[np.int32]:
    """The whole length that each mark stands for: 1 … 2^14, eight marks per octave."""
    return np.maximum(1, np.round(2.0 ** (np.arange(TOP_MARK + 1) / MARKS_PER_OCTAVE))).astype(np.int32)


def pack_trees(
    task: PackingTask,
    num_trees: int,
    *,
    time_limit: float | None = None,
    threads: int = 1,
    seed: int = 0,
    memory: int = 400_000_000,
    listener: Callable[[float, float], None] | None = None,
) -> Packing:
    """Pack flow trees by block-coordinate steps on an exponential potential.

    Each source group (a cell, or a few cells near each other where the budget is too small for one tree per cell)
    keeps its flow as a mixture of trees. It is visited again and again: a new tree is grown along the cheapest nets,
    and the mixture moves towards it as far as the potential falls, or towards no flow at all where the group's flow
    costs more than it is worth. Lengths follow the loads, y(e) = exp(α (L(e)/w(e) − c)) / w(e), and α grows.

    Parameters
    ----------
    task : PackingTask
    num_trees : int
        How many trees to grow; with a time limit the most.
    time_limit : float, optional
        Seconds; results with it are not reproducible.
    threads : int
        The result does not depend on it.
    seed : int
    memory : int
        Bytes that the loads per group may take; the nets that matter least share a rough estimate.
    listener : callable, optional
        Told (seconds, estimate) now and then.

    References
    ----------
    N. Garg and J. Könemann, "Faster and simpler algorithms for multicommodity flow and other fractional packing
    problems", FOCS 1998. L. Fleischer, "Approximating fractional multicommodity flow independent of the number of
    commodities", SIAM J. Discrete Mathematics 13, 2000. The steps between old and new flow of one commodity go back to
    A. V. Goldberg, J. D. Oldham, S. Plotkin and C. Stein, "An implementation of a combinatorial approximation
    algorithm for minimum-cost multicommodity flow", IPCO 1998.
    """
    with ThreadPoolExecutor(max(threads, 1)) as pool:
        return _Run(task, num_trees, time_limit, max(threads, 1), seed, memory, listener, pool).run()


class _Run:
    """The state of one run; nets stand in order of `places`, the most loaded of the warm-up first."""

    def __init__(
        self,
        task: PackingTask,
        num_trees: int,
        time_limit: float | None,
        threads: int,
        seed: int,
        memory: int,
        listener: Callable[[float, float], None] | None,
        pool: ThreadPoolExecutor,
    ) -> None:
        netlist = task.netlist
        num_nets = netlist.num_nets
        self.task, self.num_trees, self.time_limit, self.memory = task, num_trees, time_limit, memory
        self.threads, self.pool, self.listener = threads, pool, listener
        self.rng = np.random.default_rng(seed)
        self.started = time.monotonic()
        self.done = 0
        self.history: list[tuple[float, float]] = []
        self.batches: list[Batch] = []
        self.demands = task.demands
        self.worth = 1.0 - task.low
        self.base = task.high * (1.0 - task.num_blocks * task.low)

        self.table = length_table()
        self.marks = np.zeros(num_nets, np.int16)
        self.places = np.arange(num_nets, dtype=np.int32)
        self.weights = netlist.net_weights.copy()
        self.load = np.zeros(num_nets)
        self.prices = np.ones(num_nets)
        ring = 1 << int(self.table[-1]).bit_length()
        self.spaces = [_Workspace.for_netlist(netlist, ring) for _ in range(threads)]
        self.loads = np.zeros((BATCH, num_nets), np.float32)
        self.covered, self.rated, self.costs = np.zeros(BATCH), np.zeros(BATCH), np.zeros(BATCH)
        senders = np.flatnonzero(self.demands > 0).astype(np.int32)
        self._set_groups(senders, senders, np.arange(len(senders), dtype=np.int32))

    def run(self) -> Packing:
        self._warm_up()
        first_marks = self.marks.copy()
        num_groups = len(self.roots)
        width = max(1, min(len(self.load), self.memory // (4 * num_groups)))
        self.rows = np.zeros((num_groups, width), np.float32)
        self.levels, self.uncovered = np.zeros(num_groups), np.zeros(num_groups)
        self.load[:] = 0.0
        order = np.empty(0, np.int32)
        visited = 0.0
        position = 0
        first_sweep = True
        report_at = 0.0
        while (progress := self._progress()) < 1.0:
            if position >= len(order):
                first_sweep = not self.batches
                order = self.rng.permutation(num_groups).astype(np.int32)
                position = 0
            groups = order[position : position + BATCH]
            position += len(groups)
            sweeps = self.done / num_groups / max(progress, 0.01)
            last = min(max(_SHARPNESS_PER_SWEEP * sweeps, 2 * _FIRST_SHARPNESS), _MOST_SHARPNESS)
            sharpness = _FIRST_SHARPNESS * (last / _FIRST_SHARPNESS) ** progress
            self._add_batch(groups, sharpness, 1.0 - visited if first_sweep else 0.0)
            if first_sweep:
                visited += float(self.group_demands[groups].sum())
            if progress >= report_at:
                report_at = progress + 0.02
                self._report()
        self._report()
        prices = self.prices[self.places]
        return Packing(
            roots=self.roots,
            groups=self.groups,
            first_marks=first_marks,
            batches=self.batches,
            estimate=self.history[-1][1],
            history=self.history,
            prices=prices / prices.max(),
        )

    def _progress(self) -> float:
        """How much of the budget is spent."""
        spent = self.done / self.num_trees
        if self.time_limit is not None:
            spent = max(spent, (time.monotonic() - self.started) / self.time_limit)
        return spent

    def _estimate(self) -> float:
        congestion = float(np.max(self.load / self.weights))
        return max(self._value(), 0.0) / congestion if congestion > 0 else 0.0

    def _report(self) -> None:
        entry = (time.monotonic() - self.started, self._estimate())
        self.history.append(entry)
        if self.listener is not None:
            self.listener(*entry)

    def _value(self) -> float:
        """f of the check's docstring with θ = 1, for rates `levels` times the demands, which stay at or below 1."""
        return self.worth * float(self.group_demands @ self.levels) - float(self.uncovered.sum()) - self.base

    def _warm_up(self) -> None:
        """Grow a few trees to see which nets get loaded, then put sources together if the budget asks for it."""
        num_groups = len(self.roots)
        num_warm = min(self.num_trees // 8, num_groups // 16, 512) // BATCH * BATCH
        begun = time.monotonic()
        picks = self.rng.permutation(num_groups)[:num_warm].astype(np.int32)
        for first in range(0, num_warm, BATCH):
            self._set_lengths(_WARM_SHARPNESS)
            self._route(picks[first : first + BATCH], 2**62)
            self.load += self.loads.sum(axis=0, dtype=np.float64)
            if self._progress() > 0.1:
                num_warm = first + BATCH
        self.done += num_warm
        budget = self.num_trees
        if self.time_limit is not None and num_warm:
            speed = num_warm / max(time.monotonic() - begun, 1e-9)
            budget = int(min(budget, speed * self.time_limit))
        if num_warm == 0:
            return
        if num_groups * _SWEEPS > budget:
            chosen = np.sort(self.rng.choice(num_groups, max(1, budget // _SWEEPS), replace=False))
            self._gather_groups(self.roots[chosen])
        order = np.argsort(-self.load / self.weights, kind="stable")
        self.places[order] = np.arange(len(order), dtype=np.int32)
        self.load, self.weights, self.prices = self.load[order], self.weights[order], self.prices[order]

    def _gather_groups(self, roots: NDArray[np.int32]) -> None:
        """Join every sender to the nearest of the roots."""
        from netpart.bounds.kernels import grow_tree

        space = self.spaces[0]
        space.order[: len(roots)] = roots
        netlist = self.task.netlist
        num_nets = grow_tree(
            netlist.cell_offsets,
            netlist.cell_nets,
            netlist.net_offsets,
            netlist.net_cells,
            self.table[self.marks],
            2**62,
            len(roots),
            *space[:7],
        )
        nearest = np.full(netlist.num_cells, -1, np.int32)
        nearest[roots] = np.arange(len(roots), dtype=np.int32)
        for j in range(num_nets):
            brought = space.order[space.firsts[j] : space.firsts[j + 1]]
            nearest[brought] = nearest[space.entries[space.nets[j]]]
        cells = np.flatnonzero((nearest >= 0) & (self.demands > 0)).astype(np.int32)
        self._set_groups(roots, cells, nearest[cells])

    def _set_groups(self, roots: NDArray[np.int32], cells: NDArray[np.int32], labels: NDArray[np.int32]) -> None:
        self.roots = roots
        self.groups = np.full(len(self.demands), -1, np.int32)
        self.groups[cells] = labels
        self.group_cells = cells[np.argsort(labels, kind="stable")]
        counts = np.bincount(labels, minlength=len(roots))
        self.group_offsets = np.concatenate((np.zeros(1, np.int64), np.cumsum(counts)))
        self.group_demands = np.bincount(labels, self.demands[cells], len(roots))

    def _set_lengths(self, sharpness: float) -> float:
        """Prices from the loads, marks from the prices where they have moved; returns what a length of 1 costs."""
        use = self.load / self.weights
        self.congestion = float(use.max())
        self.sharpness = sharpness / self.congestion if self.congestion > 0 else 0.0
        self.prices = np.exp(self.sharpness * (use - self.congestion)) / self.weights
        dearest = float(self.prices.max())
        wanted = TOP_MARK + MARKS_PER_OCTAVE * np.log2(np.maximum(self.prices[self.places] / dearest, 1e-9))
        wanted = np.maximum(wanted, 0.0)
        moved = np.flatnonzero(np.abs(wanted - self.marks) > 0.75).astype(np.int32)
        self.marks[moved] = np.round(wanted[moved]).astype(np.int16)
        self.moved = moved
        return dearest / float(self.table[-1])

    def _route(self, groups: NDArray[np.int32], limit: int) -> None:
        """Grow the trees of a batch; the threads share them out."""
        from netpart.bounds.kernels import route_trees

        netlist = self.task.netlist
        lengths = self.table[self.marks]

        def work(part: int) -> None:
            first, last = len(groups) * part // self.threads, len(groups) * (part + 1) // self.threads
            route_trees(
                netlist.cell_offsets,
                netlist.cell_nets,
                netlist.net_offsets,
                netlist.net_cells,
                lengths,
                limit,
                self.roots[groups[first:last]],
                groups[first:last],
                self.group_offsets,
                self.group_cells,
                self.demands,
                self.places,
                self.prices,
                *self.spaces[part],
                self.loads[first:last],
                self.covered[first:last],
                self.rated[first:last],
                self.costs[first:last],
            )

        if self.threads == 1:
            work(0)
        else:
            list(self.pool.map(work, range(self.threads)))

    def _add_batch(self, groups: NDArray[np.int32], sharpness: float, unvisited: float) -> None:
        """Grow a tree for each group on the same lengths and mix it in; `unvisited` is the demand of the groups that
        have no flow yet."""
        from netpart.bounds.kernels import mix_trees

        unit = self._set_lengths(sharpness)
        value = self._value() + self.base * unvisited
        price = float(self.prices @ self.load) / value if value > 0 else np.inf
        limit = int(min(price / unit, 2.0**62)) if self.load.any() else 2**62
        self._route(groups, limit)
        count = len(groups)
        targets, steps = np.ones(count), np.ones(count)
        if unvisited > 0:
            loads = self.loads[:count]
            self.rows[groups] = loads[:, : self.rows.shape[1]]
            self.load += loads.sum(axis=0, dtype=np.float64)
            self.levels[groups] = self.rated[:count] / self.group_demands[groups]
            self.uncovered[groups] = self.rated[:count] * (1.0 - self.covered[:count])
        else:
            mix_trees(
                groups,
                self.loads,
                self.covered,
                self.rated,
                self.costs,
                self.rows,
                self.group_demands,
                self.levels,
                self.uncovered,
                targets,
                steps,
                self.load,
                self.weights,
                self.prices,
                self.sharpness,
                self.congestion,
                self.worth,
                value,
                price,
                float(self.levels @ self.group_demands),
            )
        self.batches.append(Batch(self.moved, self.marks[self.moved], limit, groups, targets, steps))
        self.done += count


class _Workspace(NamedTuple):
    """The arrays that one thread grows trees in, as `route_trees` takes them."""

    heads: NDArray[np.int32]
    links: NDArray[np.int32]
    entries: NDArray[np.int32]
    seen: NDArray[np.uint8]
    order: NDArray[np.int32]
    nets: NDArray[np.int32]
    firsts: NDArray[np.int32]
    rates: NDArray[np.float64]
    below: NDArray[np.float64]
    sources: NDArray[np.float64]

    @classmethod
    def for_netlist(cls, netlist: Netlist, ring: int) -> _Workspace:
        num_cells, num_nets = netlist.num_cells, netlist.num_nets
        return cls(
            heads=np.empty(ring, np.int32),
            links=np.empty(num_nets, np.int32),
            entries=np.empty(num_nets, np.int32),
            seen=np.empty(num_cells, np.uint8),
            order=np.empty(num_cells, np.int32),
            nets=np.empty(num_nets + 1, np.int32),
            firsts=np.empty(num_nets + 2, np.int32),
            rates=np.zeros(num_cells),
            below=np.empty(num_cells),
            sources=np.empty(num_cells),
        )
