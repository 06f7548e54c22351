"""Survey: what is in a netlist, in figures."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
import scipy.sparse as sparse
import scipy.sparse.csgraph
import scipy.stats
from numpy.typing import NDArray

from netpart.netlist.model import CellFlag, Direction, Netlist

__all__ = ["ModuleRow", "RentFit", "Survey", "TypeRow", "survey"]

_LARGE_NET = 100
_TOP_TYPES = 12
_RENT_SEEDS = 24


class TypeRow(NamedTuple):
    """A cell type: how many cells, and their area together."""

    type: str
    cells: int
    area: float


class ModuleRow(NamedTuple):
    """A module instance: cells and area in it and below it."""

    path: str
    depth: int
    cells: int
    area: float


class RentFit(NamedTuple):
    """T = t g^p fitted to regions of the netlist: exponent p, its standard error, t, and how many regions."""

    exponent: float
    standard_error: float
    terminals_per_cell: float
    num_regions: int


@dataclass(frozen=True, slots=True, eq=False)
class Survey:
    """Figures of a netlist; `fan_out` counts nets by their number of cells, in doubling bins."""

    cells: int
    nets: int
    pins: int
    ports: int
    macros: int
    sequential: int
    fixed: int
    area: float
    largest_cell: str
    largest_area: float
    types: tuple[TypeRow, ...]
    num_types: int
    fan_out: tuple[tuple[int, int, int], ...]
    components: tuple[int, ...]
    modules: tuple[ModuleRow, ...]
    num_modules: int
    rent: RentFit | None
    oddities: tuple[str, ...]

    def to_dict(self) -> dict[str, Any]:
        """For JSON."""
        return {
            "cells": self.cells,
            "nets": self.nets,
            "pins": self.pins,
            "ports": self.ports,
            "macros": self.macros,
            "sequential": self.sequential,
            "fixed": self.fixed,
            "area": self.area,
            "largest_cell": {"name": self.largest_cell, "area": self.largest_area},
            "types": [row._asdict() for row in self.types],
            "num_types": self.num_types,
            "fan_out": [{"from": low, "to": high, "nets": nets} for low, high, nets in self.fan_out],
            "components": list(self.components[:20]),
            "num_components": len(self.components),
            "modules": [row._asdict() for row in self.modules],
            "num_modules": self.num_modules,
            "rent": None if self.rent is None else self.rent._asdict(),
            "oddities": list(self.oddities),
        }


def survey(netlist: Netlist) -> Survey:
    """Count everything; O(n + p)."""
    areas = netlist.areas
    largest = int(np.argmax(areas))
    type_cells = np.bincount(netlist.cell_types, minlength=len(netlist.type_names))
    type_areas = np.bincount(netlist.cell_types, areas, len(netlist.type_names))
    named = [i for i in np.lexsort((-type_cells, -type_areas)).tolist() if netlist.type_names[i] and type_cells[i]]
    return Survey(
        cells=netlist.num_cells,
        nets=netlist.num_nets,
        pins=int(netlist.net_pins.sum()),
        ports=int(netlist.has_flag(CellFlag.PORT).sum()),
        macros=int(netlist.has_flag(CellFlag.MACRO).sum()),
        sequential=int(netlist.has_flag(CellFlag.SEQUENTIAL).sum()),
        fixed=int(netlist.has_flag(CellFlag.FIXED).sum()),
        area=netlist.total_area,
        largest_cell=netlist.cell_names[largest],
        largest_area=float(areas[largest]),
        types=tuple(TypeRow(netlist.type_names[i], int(type_cells[i]), float(type_areas[i])) for i in named[:_TOP_TYPES]),
        num_types=len(named),
        fan_out=_fan_out(netlist.net_sizes),
        components=_components(netlist),
        modules=_modules(netlist),
        num_modules=len(netlist.module_names),
        rent=fit_rent(netlist),
        oddities=tuple(_oddities(netlist)),
    )


def fit_rent(netlist: Netlist) -> RentFit | None:
    """Rent's rule T = t g^p (Landman & Russo, "On a pin versus block relationship", IEEE Trans. Computers C-20, 1971).

    Regions of g = 8, 16, 32, … cells up to a quarter of the netlist grow breadth-first from evenly spaced cells, over
    nets of up to 20 cells; T counts the nets between a region and the rest. The line is fitted by least squares to the
    mean log T of each size. A partitioner's blocks have fewer terminals than grown regions, so p is on the high side.
    """
    size = netlist.num_cells
    sizes = [2**power for power in range(3, 40) if 2**power <= size // 4]
    if len(sizes) < 3:
        return None
    walked = netlist.net_sizes <= 20
    points: dict[int, list[float]] = {region: [] for region in sizes}
    for seed in np.linspace(0, size - 1, _RENT_SEEDS).astype(np.int64).tolist():
        order = _grow(netlist, int(seed), min(sizes[-1], 1 << 14), walked)
        for region in sizes:
            if region <= len(order):
                inside = np.zeros(size, np.bool_)
                inside[order[:region]] = True
                touched = np.unique(np.concatenate([netlist.nets_of(cell) for cell in order[:region].tolist()]))
                lengths = netlist.net_sizes[touched]
                pins = _gather(netlist.net_offsets[touched], lengths)
                held = np.add.reduceat(inside[netlist.net_cells[pins]], np.cumsum(lengths) - lengths)
                terminals = int(np.sum(held < lengths))
                if terminals:
                    points[region].append(float(np.log(terminals)))
    fitted = [(np.log(region), np.mean(logs)) for region, logs in points.items() if len(logs) >= 3]
    if len(fitted) < 3:
        return None
    line = scipy.stats.linregress(*zip(*fitted, strict=True))
    return RentFit(float(line.slope), float(line.stderr), float(np.exp(line.intercept)), sum(map(len, points.values())))


def _grow(netlist: Netlist, seed: int, wanted: int, walked: NDArray[np.bool_]) -> NDArray[np.int64]:
    """Cells in breadth-first order from a seed, level by level, ascending within a level."""
    seen = np.zeros(netlist.num_cells, np.bool_)
    seen[seed] = True
    frontier = np.array([seed], np.int64)
    levels = [frontier]
    count = 1
    while len(frontier) and count < wanted:
        lengths = np.diff(netlist.cell_offsets)[frontier]
        nets = np.unique(netlist.cell_nets[_gather(netlist.cell_offsets[frontier], lengths)])
        nets = nets[walked[nets]]
        found = np.unique(netlist.net_cells[_gather(netlist.net_offsets[nets], netlist.net_sizes[nets])])
        frontier = found[~seen[found]].astype(np.int64)
        seen[frontier] = True
        levels.append(frontier)
        count += len(frontier)
    return np.concatenate(levels)


def _gather(starts: NDArray[np.int64], lengths: NDArray[np.int64]) -> NDArray[np.int64]:
    """The indices starts[i], …, starts[i] + lengths[i] − 1 for all i, one after the other."""
    ends = np.cumsum(lengths)
    return np.arange(int(ends[-1]) if len(ends) else 0) + np.repeat(starts - (ends - lengths), lengths)


def _fan_out(sizes: NDArray[np.int64]) -> tuple[tuple[int, int, int], ...]:
    rows = []
    low, high = 0, 1
    while low <= int(sizes.max(initial=0)):
        count = int(np.sum((sizes >= low) & (sizes <= high)))
        if count:
            rows.append((low, high, count))
        low, high = high + 1, max(2 * high, high + 1)
    return tuple(rows)


def _components(netlist: Netlist) -> tuple[int, ...]:
    """Cells of each connected part, the largest first."""
    shape = (netlist.num_nets, netlist.num_cells)
    holds = sparse.csr_array((np.ones(netlist.num_pins, np.int8), netlist.net_cells, netlist.net_offsets), shape=shape)
    joined = sparse.block_array([[None, holds.T], [holds, None]], format="csr")
    _, labels = scipy.sparse.csgraph.connected_components(joined, directed=False)
    sizes = np.bincount(labels[: netlist.num_cells])
    return tuple(sorted(sizes[sizes > 0].tolist(), reverse=True))


def _modules(netlist: Netlist) -> tuple[ModuleRow, ...]:
    """Module instances down to depth 2, each with all that lies below it."""
    count = len(netlist.module_names)
    cells = np.bincount(netlist.cell_modules, minlength=count).astype(np.float64)
    areas = np.bincount(netlist.cell_modules, netlist.areas, count)
    depths = np.zeros(count, np.int64)
    parents = netlist.module_parents.tolist()
    for module in range(1, count):
        depths[module] = depths[parents[module]] + 1
    for module in range(count - 1, 0, -1):
        cells[parents[module]] += cells[module]
        areas[parents[module]] += areas[module]
    shown = [module for module in range(count) if depths[module] <= 2]
    paths = {module: netlist.module_names[module] for module in shown}
    shown.sort(key=lambda module: paths[module].split("/"))
    return tuple(ModuleRow(paths[module], int(depths[module]), int(cells[module]), float(areas[module])) for module in shown)


def _oddities(netlist: Netlist) -> list[str]:
    sizes = netlist.net_sizes
    found = []

    def tell(count: int, what: str) -> None:
        if count:
            found.append(f"{count:,} {what}")

    tell(int(np.sum(sizes == 1)), "nets with a single cell")
    tell(int(np.sum(sizes == 0)), "nets without cells")
    tell(int(np.sum(np.diff(netlist.cell_offsets) == 0)), "cells without nets")
    tell(int(np.sum(sizes > _LARGE_NET)), f"nets with more than {_LARGE_NET} cells")
    known = netlist.pin_directions != Direction.UNKNOWN
    nets = np.repeat(np.arange(netlist.num_nets), sizes)
    fully_known = np.bincount(nets, ~known, netlist.num_nets) == 0
    drivers = np.bincount(nets, (netlist.pin_directions & Direction.OUTPUT) != 0, netlist.num_nets)
    only_outputs = np.bincount(nets, netlist.pin_directions == Direction.OUTPUT, netlist.num_nets)
    tell(int(np.sum(fully_known & (drivers == 0) & (sizes > 0))), "nets without a driver")
    tell(int(np.sum(fully_known & (only_outputs > 1))), "nets with several drivers")
    tell(int(np.sum((netlist.areas == 0) & ~netlist.has_flag(CellFlag.PORT))), "cells of area 0 that are no ports")
    return found
