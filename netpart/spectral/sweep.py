"""Sweep: cut a netlist at every threshold of an ordering, and keep the best."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from netpart.expand import Weighting, pair_weights
from netpart.netlist import FREE, AreaWindow, Netlist

__all__ = ["Profile", "legal_seed", "sweep_profile"]

_CANDIDATES = 200


@dataclass(frozen=True, slots=True, eq=False)
class Profile:
    """Every threshold of an ordering; entry i cuts between the first i + 1 cells and the rest.

    Attributes
    ----------
    net_cut : (n − 1,) float64
        Weight of the cut nets.
    graph_cut : (n − 1,) float64
        Weight of the cut edges of the clique expansion.
    conductance : (n − 1,) float64
        graph_cut / min(volume before, volume behind), with volumes in degrees of the clique expansion; infinite where
        one side has no volume.
    area : (n − 1,) float64
        Of the cells before the threshold.
    """

    net_cut: NDArray[np.float64]
    graph_cut: NDArray[np.float64]
    conductance: NDArray[np.float64]
    area: NDArray[np.float64]

    @property
    def best_conductance(self) -> float | None:
        """The smallest conductance of any threshold, balance aside."""
        return float(self.conductance.min()) if len(self.conductance) and np.isfinite(self.conductance).any() else None


def sweep_profile(netlist: Netlist, order: NDArray[np.int64], weighting: Weighting = "standard") -> Profile:
    """All thresholds of an ordering of the cells, in O(p log p).

    When the order is that of D^(−1/2) times the second eigenvector of the normalised Laplacian, the best conductance φ
    obeys λ1/2 ≤ φ ≤ √(2 λ1) (Cheeger's inequality; Chung, Spectral Graph Theory, 1997, ch. 2).
    """
    size = netlist.num_cells
    pairs = pair_weights(netlist, weighting)
    position = np.empty(size, np.int64)
    position[order] = np.arange(size)
    nets = np.repeat(np.arange(netlist.num_nets), netlist.net_sizes)
    pins = position[netlist.net_cells]
    sorting = np.lexsort((pins, nets))
    pins = pins[sorting]
    rank = np.arange(len(pins)) - np.repeat(netlist.net_offsets[:-1], netlist.net_sizes)
    step = pairs[nets] * (netlist.net_sizes[nets] - 1 - 2 * rank)
    graph_cut = np.cumsum(np.bincount(pins, step, size).astype(np.float64))[:-1]

    joined = netlist.net_sizes >= 2
    first = pins[netlist.net_offsets[:-1][joined]]
    last = pins[netlist.net_offsets[1:][joined] - 1]
    change = np.bincount(first, netlist.net_weights[joined], size) - np.bincount(last, netlist.net_weights[joined], size)
    degrees = np.bincount(pins, pairs[nets] * (netlist.net_sizes[nets] - 1), size)
    volume = np.cumsum(degrees)
    smaller = np.minimum(volume[:-1], volume[-1] - volume[:-1])
    with np.errstate(divide="ignore", invalid="ignore"):
        conductance = np.where(smaller > 1e-12 * volume[-1], np.maximum(graph_cut, 0.0) / smaller, np.inf)
    return Profile(np.cumsum(change.astype(np.float64))[:-1], graph_cut, conductance, np.cumsum(netlist.areas[order])[:-1])


def legal_seed(
    netlist: Netlist,
    order: NDArray[np.int64],
    window: AreaWindow,
    fixed: NDArray[np.int32] | None = None,
    loose: tuple[NDArray[np.int32], ...] = (),
) -> NDArray[np.int32]:
    """The bisection at the best legal threshold of an ordering: fewest cut nets, then best balance, then first.

    Parameters
    ----------
    order : (c,) int
        Cells in order; all of them, or all but those in `loose`.
    fixed : (n,) int32, optional
        Fixed cells go to their blocks before the sweep; they bound the thresholds from both ends.
    loose : tuple of (c_i,) int32
        Parts that no net joins to the rest or to each other. They are packed around the cut, largest first, each into
        the block that lacks most.

    Returns
    -------
    (n,) int32
        0 or 1. Where no threshold is legal, the one nearest to the window.
    """
    best: tuple[tuple[float, float, float, int], NDArray[np.int32]] | None = None
    for prefix_block in (0, 1):
        if fixed is None:
            sequence, low, high = order, 0, len(order)
        else:
            own, others = order[fixed[order] == prefix_block], order[fixed[order] == 1 - prefix_block]
            free = order[fixed[order] == FREE]
            sequence, low, high = np.concatenate([own, free, others]), len(own), len(own) + len(free)
        cut = _threshold_cuts(netlist, sequence)
        area = np.concatenate([[0.0], np.cumsum(netlist.areas[sequence])])
        rest = sum(float(netlist.areas[part].sum()) for part in loose)
        counts = np.arange(low, high + 1)
        before, behind = area[counts], area[-1] - area[counts]
        excess = np.maximum(before - window.upper[prefix_block], 0) + np.maximum(behind - window.upper[1 - prefix_block], 0)
        excess += np.maximum(window.lower[prefix_block] - before - rest, 0)
        excess += np.maximum(window.lower[1 - prefix_block] - behind - rest, 0)
        excess[excess <= window.slack] = 0.0
        middle = 0.5 * (window.lower[prefix_block] + window.upper[prefix_block])
        ranking = np.lexsort((counts, np.abs(before - middle), cut[counts], excess))
        for i in ranking[: _CANDIDATES if loose else 1].tolist():
            blocks = np.full(netlist.num_cells, 1 - prefix_block, np.int32)
            blocks[sequence[: counts[i]]] = prefix_block
            load = np.array([before[i], behind[i]]) if prefix_block == 0 else np.array([behind[i], before[i]])
            _pack(netlist, blocks, load, window, loose)
            violation = float(window.violation(load).sum())
            target = 0.5 * float(window.lower[0] + window.upper[0])
            key = (violation, float(cut[counts[i]]), abs(float(load[0]) - target), prefix_block)
            if best is None or key < best[0]:
                best = key, blocks
            if violation == 0:
                break
    assert best is not None
    return best[1]


def _threshold_cuts(netlist: Netlist, sequence: NDArray[np.int64]) -> NDArray[np.float64]:
    """(c + 1,) cut nets when the first i cells of a sequence lie on one side."""
    size = len(sequence)
    place = np.full(netlist.num_cells, -1, np.int64)
    place[sequence] = np.arange(size)
    used = netlist.net_sizes >= 1
    if not used.any():
        return np.zeros(size + 1)
    places, starts = place[netlist.net_cells], netlist.net_offsets[:-1][used]
    first, last = np.minimum.reduceat(places, starts), np.maximum.reduceat(places, starts)
    inside = first >= 0  # a net lies in the sequence as a whole or not at all
    weights = netlist.net_weights[used][inside]
    change = np.bincount(first[inside] + 1, weights, size + 1) - np.bincount(last[inside] + 1, weights, size + 1)
    return np.cumsum(change)


def _pack(
    netlist: Netlist,
    blocks: NDArray[np.int32],
    load: NDArray[np.float64],
    window: AreaWindow,
    loose: tuple[NDArray[np.int32], ...],
) -> None:
    middle = 0.5 * (window.lower + window.upper)
    sizes = [float(netlist.areas[part].sum()) for part in loose]
    for i in sorted(range(len(loose)), key=lambda number: -sizes[number]):
        block = int(np.argmax(middle - load))
        blocks[loose[i]] = block
        load[block] += sizes[i]
