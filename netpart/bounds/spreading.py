"""The spreading bound: flow that must cross every legal cut, against what the nets can carry."""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from netpart.bounds.bound import Bound, next_attainable
from netpart.bounds.certificate import Certificate
from netpart.bounds.packing import Batch, Packing, PackingTask, length_table, pack_trees
from netpart.bounds.verify import check_spreading
from netpart.netlist import Netlist, Rules
from netpart.spectral.spectrum import find_components

__all__ = ["SpreadingResult", "spreading_bound"]

_LEFT_OUT = 0.03
"""The smallest trees of each group that carry up to this part of its flow hand it to the others."""


@dataclass(frozen=True, slots=True, eq=False)
class SpreadingResult:
    """A spreading bound with its certificate.

    Attributes
    ----------
    bound : Bound
        Verified; for the objective that was asked for.
    certificate : Certificate
        Proves a bound on the cut nets, from which that of the other objectives follows.
    history : list of (seconds, value)
        How the estimate of the bound on the cut nets rose.
    lengths : (m,) float64
        A spreading metric: the length of each net, the largest 1. Cells of one dense region lie close together.
    usage : (m,) float64
        How far the flow uses each net; the nets at 1 are the bottleneck that the bound comes from.
    exact : float
        The bound on the cut nets as it was proved, before it is rounded up to a value that a cut can take.
    num_trees : int
        Trees in the certificate.
    """

    bound: Bound
    certificate: Certificate
    history: list[tuple[float, float]]
    lengths: NDArray[np.float64]
    usage: NDArray[np.float64]
    exact: float
    num_trees: int


def spreading_bound(
    netlist: Netlist,
    rules: Rules,
    objective: str = "cut-nets",
    *,
    num_trees: int = 20_000,
    time_limit: float | None = None,
    threads: int = 1,
    seed: int = 0,
    listener: Callable[[float, float], None] | None = None,
) -> SpreadingResult | None:
    """A verified spreading bound, or None where the area window allows no such bound.

    The bound is the optimum of a linear program, approached from below: its dual is the spreading metric of Even,
    Naor, Rao and Schieber (SIAM J. Computing 28, 1999). How it is proved stands in `netpart.bounds.verify`, how trees
    are packed in `netpart.bounds.packing`. Fixed cells are not looked at; they only make the optimum larger.

    Parameters
    ----------
    netlist : Netlist
    rules : Rules
    objective : str
        One of `netlist.OBJECTIVES`.
    num_trees : int
        The work: how many trees to grow. Same netlist, rules, work and seed give the same certificate.
    time_limit : float, optional
        Seconds, the check included; `num_trees` is then not looked at, and the result is not reproducible.
    threads : int
        The result does not depend on it.
    seed : int
    listener : callable, optional
        Told (seconds, estimate) now and then.
    """
    started = time.monotonic()
    task = prepare_task(netlist, rules)
    if task is None:
        return None
    demands, unit_exponent, packing_task = task
    packing = pack_trees(
        packing_task,
        num_trees if time_limit is None else 2**40,
        time_limit=None if time_limit is None else 0.7 * time_limit,
        threads=threads,
        seed=seed,
        listener=listener,
    )
    certificate = certify(netlist, demands, unit_exponent, packing)
    proof = check_spreading(netlist, rules, certificate, threads)
    value = next_attainable(proof.value, netlist) * (2.0 if objective == "terminals" else 1.0)
    bound = Bound("spreading", value, True, time.monotonic() - started, f"{proof.num_trees} flow trees")
    return SpreadingResult(bound, certificate, packing.history, packing.prices, proof.loads, proof.value, proof.num_trees)


def prepare_task(netlist: Netlist, rules: Rules) -> tuple[NDArray[np.int64], int, PackingTask] | None:
    """Whole demands of the largest connected part in units of a power of two, and the block limits as shares."""
    part = find_components(netlist)[0]
    areas = np.zeros(netlist.num_cells)
    areas[part] = netlist.areas[part]
    total = float(areas.sum())
    if total <= 0 or len(part) < 2:
        return None
    whole = bool(np.all(areas == np.floor(areas)))
    target = min(max(256 * len(part), 2**20), 2**26)
    unit_exponent = 0 if whole and total <= target else math.ceil(math.log2(total / target))
    demands = np.floor(np.ldexp(areas, -unit_exponent)).astype(np.int64)
    unit = 2.0**unit_exponent
    size = float(demands.sum())
    window = rules.window(netlist)
    lost = netlist.total_area / unit - size
    highs = np.floor(window.upper / unit)
    lows = np.maximum(np.ceil(window.lower / unit - lost), 0.0)
    lows = np.maximum(lows, size - (highs.sum() - highs))
    highs = np.minimum(highs, size - (lows.sum() - lows))
    low, high = float(lows.min()) / size, float(highs.max()) / size
    if size <= 0 or high >= 1.0 or low > high:
        return None
    return demands, unit_exponent, PackingTask(netlist, demands / size, low, high, rules.num_blocks)


def certify(netlist: Netlist, demands: NDArray[np.int64], unit_exponent: int, packing: Packing) -> Certificate:
    """Write the trees that carry the flow, with whole rates, and the lengths from which they can be grown again."""
    weights = _final_weights(packing)
    spread = min(max(64 * netlist.num_cells, 2**20), 2**24)
    shift = max(0, int(demands.sum()).bit_length() - spread.bit_length())
    shares = np.where((demands > 0) & (packing.groups >= 0), np.maximum(1, (demands + (1 << shift >> 1)) >> shift), 0)
    group_shares = np.bincount(packing.groups[packing.groups >= 0], shares[packing.groups >= 0])
    mass = sum(float(group_shares[batch.groups] @ weight) for batch, weight in zip(packing.batches, weights, strict=True))
    heaviest = max(float(weight.max(initial=0.0)) for weight in weights)
    scale = min(2.0**61 / (float(demands.sum()) * mass * 1.001 + 1.0), 2.0**39 / max(heaviest, 1e-300))
    writer = _StageWriter(packing.first_marks)
    for batch, weight in zip(packing.batches, weights, strict=True):
        writer.add(batch, packing.roots, np.floor(weight * scale).astype(np.int64))
    groups = np.maximum(packing.groups, 0)
    arrays: dict[str, NDArray[Any]] = {
        "unit_exponent": np.array([unit_exponent], np.int32),
        "demands": _narrow(demands),
        "shares": _narrow(shares),
        "groups": _narrow(groups),
        "lengths": length_table(),
        **writer.arrays(),
    }
    return Certificate("spreading", arrays)


def _final_weights(packing: Packing) -> list[NDArray[np.float64]]:
    """Per batch, the rate at which each tree ends up, after all later steps have thinned it out."""
    remaining = np.ones(len(packing.roots))
    thinned: list[NDArray[np.float64]] = []
    for batch in reversed(packing.batches):
        thinned.append(batch.targets * batch.steps * remaining[batch.groups])
        remaining[batch.groups] *= 1.0 - batch.steps
    thinned.reverse()
    groups = np.concatenate([batch.groups for batch in packing.batches])
    weights = np.concatenate(thinned)
    totals = np.bincount(groups, weights, len(packing.roots))
    order = np.lexsort((weights, groups))
    running = np.cumsum(weights[order])
    before = np.concatenate((np.zeros(1), np.cumsum(totals)))[groups[order]]
    small = running - before <= _LEFT_OUT * totals[groups[order]]
    weights[order[small]] = 0.0
    kept = np.bincount(groups, weights, len(packing.roots))
    weights *= (totals / np.where(kept > 0, kept, 1.0))[groups]
    return np.split(weights, np.cumsum([len(batch.groups) for batch in packing.batches])[:-1])


class _StageWriter:
    """Collects the stages of a certificate: length changes, then the trees grown on these lengths."""

    def __init__(self, marks: NDArray[np.int16]) -> None:
        self.marks = marks.copy()  # as the producer left them
        self.written = marks  # as a reader of the stages so far has them
        self.pending: list[NDArray[np.int32]] = []
        self.first_marks: NDArray[np.int16] | None = None
        self.limits: list[int] = []
        self.tree_counts: list[int] = []
        self.roots: list[NDArray[np.int32]] = []
        self.rates: list[NDArray[np.int64]] = []
        self.gaps: list[NDArray[np.int32]] = [np.empty(0, np.int32)]
        self.change_marks: list[NDArray[np.int16]] = [np.empty(0, np.int16)]
        self.change_counts: list[int] = []

    def add(self, batch: Batch, roots: NDArray[np.int32], rates: NDArray[np.int64]) -> None:
        self.marks[batch.changed_nets] = batch.changed_marks
        self.pending.append(batch.changed_nets)
        kept = rates > 0
        if not kept.any():
            return
        if self.first_marks is None:
            self.first_marks = self.marks.copy()
            self.written = self.marks.copy()
        nets = np.unique(np.concatenate(self.pending))
        nets = nets[self.written[nets] != self.marks[nets]]
        self.written[nets] = self.marks[nets]
        self.pending = []
        self.gaps.append(np.diff(nets, prepend=0).astype(np.int32))
        self.change_marks.append(self.marks[nets])
        self.change_counts.append(len(nets))
        self.limits.append(batch.limit)
        self.tree_counts.append(int(kept.sum()))
        self.roots.append(roots[batch.groups[kept]])
        self.rates.append(rates[kept])

    def arrays(self) -> dict[str, NDArray[Any]]:
        first = self.marks if self.first_marks is None else self.first_marks
        return {
            "first_marks": first,
            "limits": np.array(self.limits, np.int64),
            "tree_counts": _narrow(np.array(self.tree_counts, np.int64)),
            "roots": np.concatenate([np.empty(0, np.int32), *self.roots]),
            "rates": _narrow(np.concatenate([np.empty(0, np.int64), *self.rates])),
            "change_counts": _narrow(np.array(self.change_counts, np.int64)),
            "change_gaps": _narrow(np.concatenate(self.gaps).astype(np.int64)),
            "change_marks": np.concatenate(self.change_marks),
        }


def _narrow(values: NDArray[np.int64]) -> NDArray[Any]:
    """The smallest signed dtype that holds all values."""
    top = int(values.max(initial=0))
    return values.astype(next(dtype for dtype in (np.int8, np.int16, np.int32, np.int64) if top <= np.iinfo(dtype).max))
