"""Rent's rule: how the nets that leave a region of the netlist grow with the cells in it."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.stats import linregress

from netpart.netlist.model import CellFlag, Netlist

__all__ = ["RegionMean", "RentFit", "fit_rent"]

_NUM_SEEDS = 64
_SMALLEST, _LARGEST = 4, 1 << 14
_WIDE_NET = 100
_MAX_LEVELS = 200


@dataclass(frozen=True, slots=True)
class RegionMean:
    """Regions of one size: `cells` in each, `terminals` on average, `regions` that were grown."""

    cells: int
    terminals: float
    regions: int


@dataclass(frozen=True, slots=True)
class RentFit:
    """T = t · C^p for the terminals T of a region with C cells.

    Attributes
    ----------
    exponent : float
        p.
    standard_error : float
        Of p, as the fit gives it.
    terminals_per_cell : float
        t.
    points : tuple of RegionMean
        What was fitted.
    """

    exponent: float
    standard_error: float
    terminals_per_cell: float
    points: tuple[RegionMean, ...]

    def to_dict(self) -> dict[str, Any]:
        """Plain values for JSON."""
        return asdict(self)


def fit_rent(netlist: Netlist) -> RentFit | None:
    """Estimate Rent's exponent from regions grown breadth first; None where fewer than three sizes can be measured.

    Notes
    -----
    From 64 cells that lie evenly spaced in the order of the file, a region is grown breadth first over nets of at most
    100 cells, and no further than 200 nets from its first cell. It is measured at 4, 8, 16, … cells, up to an eighth of
    the netlist and no more than 16384: its terminals T are the nets with cells inside and outside, where ports of the
    top module lie outside always. The means of T over the regions of one size are fitted as log T = log t + p log C by
    least squares [1]_. Small regions and an eighth at most keep the fit away from the bend at the upper end of Rent's
    rule. The blocks of a good partition have fewer terminals, so p is on the high side.

    References
    ----------
    .. [1] B. S. Landman, R. L. Russo, "On a pin versus block relationship for partitions of logic graphs", IEEE
       Trans. Computers C-20 (1971) 1469-1479.
    """
    inside_cells = np.flatnonzero(~netlist.has_flag(CellFlag.PORT))
    limit = min(len(inside_cells) // 8, _LARGEST)
    sizes = [1 << i for i in range(_LARGEST.bit_length()) if _SMALLEST <= 1 << i <= limit]
    if len(sizes) < 3:
        return None
    seeds = inside_cells[np.arange(_NUM_SEEDS) * len(inside_cells) // _NUM_SEEDS]
    counts: list[list[int]] = [[] for _ in sizes]
    position = np.full(netlist.num_cells, -1, np.int64)
    for seed in dict.fromkeys(seeds.tolist()):
        region = _grow(netlist, seed, sizes[-1], position)
        for i, terminals in enumerate(_terminals(netlist, region, sizes, position)):
            counts[i].append(terminals)
        position[region] = -1
    points = tuple(
        RegionMean(size, float(np.mean(found)), len(found))
        for size, found in zip(sizes, counts, strict=True)
        if found and any(found)
    )
    if len(points) < 3:
        return None
    fit = linregress(np.log([point.cells for point in points]), np.log([point.terminals for point in points]))
    return RentFit(float(fit.slope), float(fit.stderr), float(np.exp(fit.intercept)), points)


def _grow(netlist: Netlist, seed: int, size: int, position: NDArray[np.int64]) -> NDArray[np.int64]:
    """The first `size` cells that are reached from the seed; `position` gets their rank, ports stay out."""
    is_port = netlist.cell_flags & int(CellFlag.PORT)
    widths = netlist.net_sizes
    region = np.array([seed])
    position[seed] = 0
    frontier = region
    for _ in range(_MAX_LEVELS):
        if not len(frontier) or len(region) == size:
            break
        nets = _first_of_each(_gather(netlist.cell_offsets, netlist.cell_nets, frontier))
        cells = _gather(netlist.net_offsets, netlist.net_cells, nets[widths[nets] <= _WIDE_NET])
        cells = _first_of_each(cells[(position[cells] < 0) & (is_port[cells] == 0)])[: size - len(region)]
        position[cells] = np.arange(len(region), len(region) + len(cells))
        region = np.concatenate((region, cells))
        frontier = cells
    return region


def _terminals(netlist: Netlist, region: NDArray[np.int64], sizes: list[int], position: NDArray[np.int64]) -> list[int]:
    """The nets that leave the first C cells of a region, for each size C that it reaches."""
    nets = np.unique(_gather(netlist.cell_offsets, netlist.cell_nets, region))
    bounds = np.concatenate(([0], np.cumsum(netlist.net_sizes[nets])))[:-1]
    ranks = position[_gather(netlist.net_offsets, netlist.net_cells, nets)]
    ranks[ranks < 0] = len(region)
    first, last = np.minimum.reduceat(ranks, bounds), np.maximum.reduceat(ranks, bounds)
    return [int(np.sum((first < size) & (last >= size))) for size in sizes if size <= len(region)]


def _gather(offsets: NDArray[np.int64], values: NDArray[np.int32], rows: NDArray[np.int64]) -> NDArray[np.int64]:
    """The entries of some rows, one after the other."""
    counts = offsets[rows + 1] - offsets[rows]
    ends = np.cumsum(counts)
    if not len(ends):
        return np.zeros(0, np.int64)
    index = np.arange(ends[-1]) + np.repeat(offsets[rows] - ends + counts, counts)
    return values[index].astype(np.int64)


def _first_of_each(values: NDArray[np.int64]) -> NDArray[np.int64]:
    """The different values in the order in which they first stand."""
    return values[np.sort(np.unique(values, return_index=True)[1])]
