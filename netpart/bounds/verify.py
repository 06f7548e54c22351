"""Independent check of certificates; it shares no code with the makers of bounds.

The spreading bound
-------------------
Let d(v) ≥ 0 be whole demands with q d(v) ≤ a(v) for a unit q > 0, D = Σ d(v), and let H_i and K_i be limits that every
legal partition keeps: K_i ≤ d(block i) ≤ H_i. They follow from the area window [l_i, u_i]:

- d(block i) ≤ a(block i)/q ≤ u_i/q, so H_i = ⌊u_i/q⌋;
- rounding the demands down loses F = A/q − D in all, so d(block i) ≥ l_i/q − F, and K_i = ⌈l_i/q − F⌉;
- the blocks share D: K_i ≥ D − Σ_{j≠i} H_j and H_i ≤ D − Σ_{j≠i} K_j.

A flow tree joins a set U of cells by nets, each with one entry cell. Source s sends δ d(u) to each u ∈ U along the
tree. If s and u lie in different blocks, the path between them crosses a cut net. With L(e) the load of net e over all
trees, δ_s the rate of source s over all its trees, and R = Σ δ (D − d(U)) what the trees leave out:

    Σ_{e cut} L(e) ≥ Σ_s δ_s (D − d(block of s)) − R.

Write d(block i) = K + (H − K) x_i with K = min K_i, H = max H_i, 0 ≤ x_i ≤ 1. Then Σ x_i = (D − kK)/(H − K) = X, and
the source masses y_s = x_(block of s) have Σ d(s) y_s = Σ x_i d(block i) ≤ H X. Hence, for any θ ≥ 0,

    Σ_s δ_s d(block of s) = K Δ + (H − K) Σ_s δ_s y_s ≤ K Δ + θ H (D − kK) + (H − K) Σ_s max(δ_s − θ d(s), 0),

as Σ δ_s y_s ≤ θ Σ d(s) y_s + Σ max(δ_s − θ d(s), 0). With f the resulting lower bound on the flow that crosses and
c = max L(e)/w(e), every legal partition has

    cut nets ≥ f / c,    f = (D − K) Δ − θ H (D − kK) − (H − K) Σ_s max(δ_s − θ d(s), 0) − R.

Connectivity is at least the cut, and terminals are at least twice the cut. Nothing is assumed of the trees: whatever
trees the stored lengths lead to, the loads that are added up here are theirs. Fixed cells only take partitions away.

References
----------
G. Even, J. Naor, S. Rao and B. Schieber, "Fast approximate graph partitioning algorithms", SIAM J. Computing 28, 1999
(spreading metrics, the linear-programming dual of packing flow trees).
"""

from __future__ import annotations

import math
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from netpart.bounds.certificate import Certificate, CertificateError
from netpart.netlist import Netlist, Rules

__all__ = ["SpreadingProof", "check_spreading"]

_SAFE = 2**62
_MAX_LENGTH = 2**20


@dataclass(frozen=True, slots=True, eq=False)
class SpreadingProof:
    """What the check of a spreading certificate found.

    Attributes
    ----------
    exact : Fraction
        f / c, or 0 where that is not positive.
    value : float
        `exact` rounded down: no legal partition has fewer cut nets (by weight).
    num_trees : int
    loads : (m,) float64
        L(e) / (c w(e)): how far each net is used; the nets at 1 are the bottleneck.
    """

    exact: Fraction
    num_trees: int
    loads: NDArray[np.float64]

    @property
    def value(self) -> float:
        nearest = float(self.exact)
        return nearest if Fraction(nearest) <= self.exact else math.nextafter(nearest, 0.0)


def check_spreading(netlist: Netlist, rules: Rules, certificate: Certificate, threads: int = 1) -> SpreadingProof:
    """Compute, in whole numbers, the bound that a spreading certificate proves.

    Parameters
    ----------
    netlist : Netlist
    rules : Rules
        Blocks and area window; fixed cells are not used.
    certificate : Certificate
        Of kind ``"spreading"``.
    threads : int
        The result does not depend on it.

    Raises
    ------
    CertificateError
        If the certificate is not well formed for this netlist.
    """
    proof = _Reader(netlist, certificate)
    low, high = _demand_window(netlist, rules, proof.demands, proof.unit_exponent)
    loads, cell_rates, left_out = _replay(netlist, proof, max(threads, 1))
    flow = _crossing_flow(proof.demands, cell_rates, left_out, low, high, rules.num_blocks)
    used = np.flatnonzero(loads)
    worst = _worst_ratio(loads[used], netlist.net_weights[used])
    exact = flow / worst if worst > 0 and flow > 0 else Fraction(0)
    scale = 1.0 / float(worst) if worst > 0 else 0.0
    return SpreadingProof(exact, len(proof.roots), loads / netlist.net_weights * scale)


class _Reader:
    """The arrays of a spreading certificate, each checked against the netlist and the others."""

    def __init__(self, netlist: Netlist, certificate: Certificate) -> None:
        if certificate.kind != "spreading":
            raise CertificateError(f"expected a spreading certificate, found {certificate.kind!r}")
        num_cells, num_nets = netlist.num_cells, netlist.num_nets

        def read(name: str, length: int | None, low: int, high: int) -> NDArray[np.int64]:
            array = certificate.array(name, "i", (length,))
            if len(array) and (int(array.min()) < low or int(array.max()) > high):
                raise CertificateError(f"spreading certificate: array {name!r} leaves {low}..{high}")
            return array.astype(np.int64)

        self.unit_exponent = int(read("unit_exponent", 1, -2000, 2000)[0])
        self.demands = read("demands", num_cells, 0, 2**40)
        self.shares = read("shares", num_cells, 0, 2**40)
        self.groups = read("groups", num_cells, 0, num_cells - 1)
        self.table = read("lengths", None, 1, _MAX_LENGTH).astype(np.int32)
        self.marks = read("first_marks", num_nets, 0, len(self.table) - 1).astype(np.int32)
        self.limits = read("limits", None, 0, 2**62)
        self.tree_counts = read("tree_counts", len(self.limits), 0, 2**40)
        self.roots = read("roots", None, 0, num_cells - 1).astype(np.int32)
        self.rates = read("rates", len(self.roots), 0, 2**40)
        self.change_counts = read("change_counts", len(self.limits), 0, 2**40)
        gaps = read("change_gaps", None, 0, num_nets - 1)
        self.change_marks = read("change_marks", len(gaps), 0, len(self.table) - 1)
        self.tree_offsets = _offsets(self.tree_counts)
        self.change_offsets = _offsets(self.change_counts)
        if self.tree_offsets[-1] != len(self.roots) or self.change_offsets[-1] != len(gaps):
            raise CertificateError("spreading certificate: the counts do not add up")
        self.change_nets = _sum_gaps(gaps, self.change_offsets)
        if len(gaps) and int(self.change_nets.max()) >= num_nets:
            raise CertificateError("spreading certificate: a length is changed on a net that does not exist")

        total = sum(self.demands.tolist())
        if total >= _SAFE or np.any(self._exceeds_area(netlist)):
            raise CertificateError("spreading certificate: the demands exceed the areas")
        share_sums = np.zeros(num_cells, dtype=object)
        np.add.at(share_sums, self.groups, self.shares.astype(object))
        rate_sum = int(np.dot(self.rates.astype(object), share_sums[self.groups[self.roots]])) if len(self.roots) else 0
        if rate_sum * max(total, 1) >= _SAFE:
            raise CertificateError("spreading certificate: the rates are too large to be added up exactly")

    def _exceeds_area(self, netlist: Netlist) -> NDArray[np.bool_]:
        """Whether d(v) q > a(v), exactly: q is a power of two and d(v) < 2^53, so nothing is rounded."""
        with np.errstate(over="ignore"):
            scaled = np.ldexp(self.demands.astype(np.float64), self.unit_exponent)
        exact = np.ldexp(scaled, -self.unit_exponent) == self.demands
        return ~exact | (scaled > netlist.areas)


def _offsets(counts: NDArray[np.int64]) -> NDArray[np.int64]:
    if sum(counts.tolist()) >= _SAFE:
        raise CertificateError("spreading certificate: the counts do not add up")
    return np.concatenate((np.zeros(1, np.int64), np.cumsum(counts)))


def _sum_gaps(gaps: NDArray[np.int64], offsets: NDArray[np.int64]) -> NDArray[np.int64]:
    """The nets of each stage, which are stored as the first one and the distances between them."""
    running = np.concatenate((np.zeros(1, np.int64), np.cumsum(gaps)))
    starts = np.repeat(running[offsets[:-1]], np.diff(offsets))
    return running[1:] - starts


def _demand_window(netlist: Netlist, rules: Rules, demands: NDArray[np.int64], unit_exponent: int) -> tuple[int, int]:
    """K and H: every block of every legal partition has a demand of at least K and at most H."""
    window = rules.window(netlist)
    unit = Fraction(2) ** unit_exponent
    slack = 2 * Fraction(window.slack)  # twice: block areas are themselves rounded sums
    total = sum(demands.tolist())
    lost = sum(map(Fraction, netlist.areas.tolist()), Fraction(0)) / unit - total
    highs = [math.floor((Fraction(upper) + slack) / unit) for upper in window.upper.tolist()]
    lows = [max(0, math.ceil((Fraction(lower) - slack) / unit - lost)) for lower in window.lower.tolist()]
    lows = [max(low, total - (sum(highs) - high)) for low, high in zip(lows, highs, strict=True)]
    highs = [min(high, total - (sum(lows) - low)) for low, high in zip(lows, highs, strict=True)]
    return min(lows), max(highs)


def _replay(netlist: Netlist, proof: _Reader, threads: int) -> tuple[NDArray[np.int64], NDArray[np.int64], int]:
    """The load of every net, the rate of every cell, and the flow left out; whole sums, so in any order."""
    from netpart.bounds.verify_kernels import replay_trees

    members = np.argsort(proof.groups, kind="stable")
    member_offsets = np.searchsorted(proof.groups[members], np.arange(netlist.num_cells + 1))
    ring_mask = (1 << int(proof.table.max()).bit_length()) - 1
    num_stages = len(proof.limits)
    cuts = np.searchsorted(proof.tree_offsets, np.linspace(0, len(proof.roots), threads + 1)[1:-1])
    bounds = [0, *np.minimum(cuts, num_stages).tolist(), num_stages]

    def run(part: int) -> tuple[NDArray[np.int64], NDArray[np.int64], int]:
        first, last = bounds[part], bounds[part + 1]
        marks = proof.marks.copy()
        earlier = int(proof.change_offsets[first])
        marks[proof.change_nets[:earlier]] = proof.change_marks[:earlier]
        loads, rates = np.zeros(netlist.num_nets, np.int64), np.zeros(netlist.num_cells, np.int64)
        left_out = replay_trees(
            netlist.cell_offsets,
            netlist.cell_nets,
            netlist.net_offsets,
            netlist.net_cells,
            proof.demands,
            proof.shares,
            member_offsets,
            members,
            proof.groups,
            proof.table,
            ring_mask,
            marks,
            proof.change_offsets,
            proof.change_nets,
            proof.change_marks,
            proof.limits,
            proof.tree_offsets,
            proof.roots,
            proof.rates,
            first,
            last,
            loads,
            rates,
        )
        return loads, rates, int(left_out)

    with ThreadPoolExecutor(threads) as pool:
        parts = list(pool.map(run, range(threads)))
    if min(part[2] for part in parts) < 0:
        raise CertificateError("spreading certificate: a tree does not hold together")
    return (
        np.sum([part[0] for part in parts], axis=0),
        np.sum([part[1] for part in parts], axis=0),
        sum(part[2] for part in parts),
    )


def _crossing_flow(
    demands: NDArray[np.int64], rates: NDArray[np.int64], left_out: int, low: int, high: int, num_blocks: int
) -> Fraction:
    """f of the module docstring, with the θ that makes it large; any θ is right."""
    if low > high:
        return Fraction(0)  # no partition is legal; that is for others to prove
    total = sum(demands.tolist())
    rate = sum(rates.tolist())
    mass = high * (total - num_blocks * low)
    flow = Fraction((total - low) * rate - left_out)
    if high == low:
        return flow
    with np.errstate(divide="ignore", invalid="ignore"):
        ratios = np.where(rates > 0, rates / demands, 0.0)
    order = np.argsort(-ratios, kind="stable")
    reached = np.searchsorted(np.cumsum(demands[order].astype(np.float64)), mass / (high - low))
    pivot = int(order[min(int(reached), len(order) - 1)])
    theta = Fraction(int(rates[pivot]), int(demands[pivot])) if demands[pivot] > 0 else Fraction(0)
    top, bottom = theta.numerator, theta.denominator
    above = sum(max(rate * bottom - top * demand, 0) for rate, demand in zip(rates.tolist(), demands.tolist(), strict=True))
    return flow - theta * mass - (high - low) * Fraction(above, bottom)


def _worst_ratio(loads: NDArray[np.int64], weights: NDArray[np.float64]) -> Fraction:
    """The largest L(e)/w(e), exactly."""
    if not len(loads):
        return Fraction(0)
    order = np.lexsort((loads, weights))
    last_of_weight = np.append(np.flatnonzero(np.diff(weights[order])), len(order) - 1)
    picks = order[last_of_weight]
    return max(Fraction(int(loads[i])) / Fraction(float(weights[i])) for i in picks.tolist())
