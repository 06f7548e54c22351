"""Survey: what is in a netlist, in figures that can be checked before anything is divided."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, fields
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components

from netpart.netlist.model import CellFlag, Direction, IgnoredNet, Netlist
from netpart.netlist.names import Names
from netpart.netlist.rent import RentFit, fit_rent

__all__ = ["FanOutRow", "ModuleRow", "Oddity", "Survey", "TypeRow", "survey"]

_WIDE_NET = 100
_MAX_TYPES = 12
_MAX_MODULES = 100
_MAX_DEPTH = 2
_MAX_COMPONENTS = 20


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


class FanOutRow(NamedTuple):
    """How many nets touch `low` to `high` cells."""

    low: int
    high: int
    nets: int


class Oddity(NamedTuple):
    """Something that is legal but worth a look: how often it occurs, and the first few names."""

    what: str
    number: int
    examples: tuple[str, ...]

    def __str__(self) -> str:
        more = ", …" if self.number > len(self.examples) else ""
        return f"{self.what}: {self.number:,} ({', '.join(self.examples)}{more})"


@dataclass(frozen=True, slots=True)
class Survey:
    """What is in a netlist.

    Attributes
    ----------
    cells, nets, pins : int
        n with ports, m, and the pins as they stand in the file.
    ports, macros, sequential, fixed : int
        Cells with the flag.
    area, mean_area, median_area : float
        All cells together; mean and median over the cells that are no ports.
    largest_cell : str
    largest_area : float
    types : tuple of TypeRow
        The types that take the most area, falling; ports have none.
    common_types : tuple of TypeRow
        The types with the most cells, falling.
    num_types : int
    fan_out : tuple of FanOutRow
        Nets by the number of cells they touch: 0, 1, 2, 3, 4, then 5 to 8, 9 to 16 and so on; empty rows left out.
    components : tuple of int
        Cells of each connected component, falling; a cell without nets is one.
    modules : tuple of ModuleRow
        Module instances down to depth two, each before what lies in it, larger areas first; the hundred largest where
        there are more.
    num_modules : int
        All module instances, the top included.
    rent : RentFit or None
    ignored_nets : tuple of IgnoredNet
    notes : tuple of str
        What the reader noted.
    oddities : tuple of Oddity
        Only what does occur.
    """

    cells: int
    nets: int
    pins: int
    ports: int
    macros: int
    sequential: int
    fixed: int
    area: float
    mean_area: float
    median_area: float
    largest_cell: str
    largest_area: float
    types: tuple[TypeRow, ...]
    common_types: tuple[TypeRow, ...]
    num_types: int
    fan_out: tuple[FanOutRow, ...]
    components: tuple[int, ...]
    modules: tuple[ModuleRow, ...]
    num_modules: int
    rent: RentFit | None
    ignored_nets: tuple[IgnoredNet, ...]
    notes: tuple[str, ...]
    oddities: tuple[Oddity, ...]

    def to_dict(self) -> dict[str, Any]:
        """Plain values for JSON; of the components, the sizes of the 20 largest and the number of all."""
        values: dict[str, Any] = {entry.name: getattr(self, entry.name) for entry in fields(self)}
        for name in ("types", "common_types", "fan_out", "modules", "ignored_nets", "oddities"):
            values[name] = [row._asdict() for row in values[name]]
        return values | {
            "components": list(self.components[:_MAX_COMPONENTS]),
            "num_components": len(self.components),
            "largest_share": self.largest_area / self.area if self.area else 0.0,
            "rent": None if self.rent is None else self.rent.to_dict(),
            "notes": list(self.notes),
        }


def survey(netlist: Netlist) -> Survey:
    """Count what is in a netlist, in O(n + p) and a few sorts."""
    is_cell = ~netlist.has_flag(CellFlag.PORT)
    areas = netlist.areas[is_cell]
    largest = int(np.argmax(netlist.areas))
    types = _types(netlist, is_cell)
    return Survey(
        cells=netlist.num_cells,
        nets=netlist.num_nets,
        pins=int(netlist.net_pins.sum(dtype=np.int64)),
        ports=int(netlist.has_flag(CellFlag.PORT).sum()),
        macros=int(netlist.has_flag(CellFlag.MACRO).sum()),
        sequential=int(netlist.has_flag(CellFlag.SEQUENTIAL).sum()),
        fixed=int(netlist.has_flag(CellFlag.FIXED).sum()),
        area=netlist.total_area,
        mean_area=float(areas.mean()) if len(areas) else 0.0,
        median_area=float(np.median(areas)) if len(areas) else 0.0,
        largest_cell=netlist.cell_names[largest],
        largest_area=float(netlist.areas[largest]),
        types=tuple(sorted(types, key=lambda row: (-row.area, -row.cells, row.type))[:_MAX_TYPES]),
        common_types=tuple(sorted(types, key=lambda row: (-row.cells, -row.area, row.type))[:_MAX_TYPES]),
        num_types=len(types),
        fan_out=_fan_out(netlist.net_sizes),
        components=_components(netlist),
        modules=_modules(netlist),
        num_modules=len(netlist.module_parents),
        rent=fit_rent(netlist),
        ignored_nets=netlist.ignored_nets,
        notes=netlist.notes,
        oddities=tuple(_oddities(netlist)),
    )


def _types(netlist: Netlist, is_cell: NDArray[np.bool_]) -> list[TypeRow]:
    kinds, num_types = netlist.cell_types[is_cell], len(netlist.type_names)
    counts = np.bincount(kinds, minlength=num_types).tolist()
    areas = np.bincount(kinds, netlist.areas[is_cell], num_types).tolist()
    rows = map(TypeRow, netlist.type_names, counts, areas)
    return [row for row in rows if row.type and row.cells]


def _fan_out(sizes: NDArray[np.int64]) -> tuple[FanOutRow, ...]:
    bounds = [(i, i) for i in range(5)]
    while bounds[-1][1] < sizes.max(initial=0):
        bounds.append((bounds[-1][1] + 1, 2 * bounds[-1][1]))
    counts = np.histogram(sizes, [low for low, _ in bounds] + [bounds[-1][1] + 1])[0].tolist()
    return tuple(FanOutRow(low, high, count) for (low, high), count in zip(bounds, counts, strict=True) if count)


def _components(netlist: Netlist) -> tuple[int, ...]:
    """Cells per connected component, falling: cells and nets are the vertices of one graph."""
    num_cells, size = netlist.num_cells, netlist.num_cells + netlist.num_nets
    ends = np.concatenate((netlist.cell_offsets, np.full(netlist.num_nets, netlist.num_pins)))
    graph = csr_array((np.ones(netlist.num_pins, np.int8), netlist.cell_nets + np.int32(num_cells), ends), (size, size))
    labels = connected_components(graph, directed=False)[1]
    sizes = np.bincount(labels[:num_cells])
    return tuple(sorted(sizes[sizes > 0].tolist(), reverse=True))


def _modules(netlist: Netlist) -> tuple[ModuleRow, ...]:
    parents = netlist.module_parents.tolist()
    depths, shown_as = [0] * len(parents), list(range(len(parents)))
    for module in range(1, len(parents)):
        depths[module] = depths[parents[module]] + 1
        if depths[module] > _MAX_DEPTH:
            shown_as[module] = shown_as[parents[module]]
    place = np.array(shown_as)[netlist.cell_modules]
    cells = np.bincount(place, minlength=len(parents)).tolist()
    areas = np.bincount(place, netlist.areas, len(parents)).tolist()
    children: dict[int, list[int]] = {}
    for module in range(len(parents) - 1, 0, -1):
        if shown_as[module] == module:
            cells[parents[module]] += cells[module]
            areas[parents[module]] += areas[module]
            children.setdefault(parents[module], []).append(module)

    def rank(module: int) -> tuple[float, int, int]:
        return -areas[module], depths[module], module

    kept = set(sorted((module for module, shown in enumerate(shown_as) if shown == module), key=rank)[:_MAX_MODULES])
    rows: list[ModuleRow] = []
    stack = [0]
    while stack:
        module = stack.pop()
        if module in kept:
            rows.append(ModuleRow(netlist.module_names[module], depths[module], cells[module], areas[module]))
            stack += sorted(children.get(module, ()), key=rank, reverse=True)
    return tuple(rows)


def _oddities(netlist: Netlist) -> Iterable[Oddity]:
    sizes = netlist.net_sizes
    nets = np.repeat(np.arange(netlist.num_nets), sizes)

    def count_pins(chosen: NDArray[np.bool_]) -> NDArray[np.int64]:
        return np.bincount(nets[chosen], minlength=netlist.num_nets)

    directions = netlist.pin_directions
    all_known = (count_pins(directions != Direction.UNKNOWN) == sizes) & (sizes > 0)
    can_drive = count_pins((directions & Direction.OUTPUT) != 0)
    drives = count_pins(directions == Direction.OUTPUT)
    no_area = (netlist.areas == 0) & ~netlist.has_flag(CellFlag.PORT)
    for what, mask, names in (
        ("nets without pins", sizes == 0, netlist.net_names),
        ("nets on one cell only", sizes == 1, netlist.net_names),
        ("nets without a driver", all_known & (can_drive == 0), netlist.net_names),
        ("nets with several drivers", drives > 1, netlist.net_names),
        (f"nets on more than {_WIDE_NET} cells", sizes > _WIDE_NET, netlist.net_names),
        ("cells without nets", np.diff(netlist.cell_offsets) == 0, netlist.cell_names),
        ("cells of area 0 that are no ports", no_area, netlist.cell_names),
    ):
        if mask.any():
            yield Oddity(what, int(mask.sum()), _examples(names, mask))


def _examples(names: Names, mask: NDArray[np.bool_]) -> tuple[str, ...]:
    return tuple(names[i] for i in np.flatnonzero(mask)[:3].tolist())
