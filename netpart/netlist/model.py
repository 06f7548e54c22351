"""The netlist as a hypergraph over flat arrays."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from enum import IntFlag
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from netpart.netlist.errors import (
    DuplicateNameError,
    EmptyNetlistError,
    IndexOverflowError,
    NetlistError,
    ValueRangeError,
)
from netpart.netlist.names import Names

__all__ = ["MAX_PINS", "CellFlag", "Direction", "IgnoredNet", "Netlist", "Source"]

MAX_PINS = 2**31 - 1
"""Cells, nets and pins are counted in int32; a netlist with more is refused."""


class CellFlag(IntFlag):
    """What is known of a cell besides its type and area."""

    FIXED = 1
    """Its place is given by the input (a placed macro, a pad)."""
    MACRO = 2
    """A block of the library (memory, analogue), not a standard cell."""
    PORT = 4
    """A port of the top module, or a pad."""
    SEQUENTIAL = 8
    """It stores state: flip-flop, latch, memory."""


class Direction(IntFlag):
    """The direction of a pin as the cell sees it; 0 where unknown, INPUT | OUTPUT for a bidirectional pin."""

    UNKNOWN = 0
    INPUT = 1
    OUTPUT = 2
    INOUT = 3


class IgnoredNet(NamedTuple):
    """A net that is left out of the cut."""

    name: str
    reason: str
    num_pins: int


class Source(NamedTuple):
    """A file that the netlist was read from."""

    path: str
    format: str
    sha256: str


def _empty_sources() -> tuple[Source, ...]:
    return ()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Netlist:
    """A netlist H = (V, E): n cells, m nets, p pins. All arrays are read-only.

    Attributes
    ----------
    name : str
        The top module or the circuit.
    cell_names : Names, n
        Full hierarchical names. Ports of the top module are cells too.
    cell_types : (n,) int32
        Index into `type_names`; ports have the type ``""``.
    resources : (r, n) float64
        What each cell takes of each resource, ≥ 0. Row 0 is the area a(v), in the unit of the library.
    cell_flags : (n,) uint8
        Bits of `CellFlag`.
    cell_modules : (n,) int32
        The module instance that holds the cell: an index into `module_names` and `module_parents`.
    module_names : Names, h
        Paths of module instances; entry 0 is the top with the path ``""``, and parents come before children.
    module_parents : (h,) int32
        Index of the enclosing instance, −1 for the top.
    net_names : Names, m
    net_weights : (m,) float64
        w(e) > 0.
    net_offsets : (m + 1,) int64 and net_cells : (p,) int32
        The cells of net e, each once, are ``net_cells[net_offsets[e]:net_offsets[e + 1]]`` in the order of the file.
    pin_directions : (p,) uint8
        Beside `net_cells`: the united `Direction` bits of all pins that the cell has on the net.
    net_pins : (m,) int32
        Pins of the net as they stood in the file: several pins of one cell count once above, and each here.
    cell_offsets : (n + 1,) int64 and cell_nets : (p,) int32
        The nets of cell v, ascending, are ``cell_nets[cell_offsets[v]:cell_offsets[v + 1]]``.
    type_names : Names
    resource_names : tuple of str, r
    ignored_nets : tuple of IgnoredNet
        Nets that were left out (supplies, nets ignored on request).
    sources : tuple of Source
        The files it was read from.
    notes : tuple of str
        What the reader wants the user to know: nets without a driver, pins left open and the like.
    """

    name: str
    cell_names: Names
    cell_types: NDArray[np.int32]
    resources: NDArray[np.float64]
    cell_flags: NDArray[np.uint8]
    cell_modules: NDArray[np.int32]
    module_names: Names
    module_parents: NDArray[np.int32]
    net_names: Names
    net_weights: NDArray[np.float64]
    net_offsets: NDArray[np.int64]
    net_cells: NDArray[np.int32]
    pin_directions: NDArray[np.uint8]
    net_pins: NDArray[np.int32]
    cell_offsets: NDArray[np.int64]
    cell_nets: NDArray[np.int32]
    type_names: Names
    resource_names: tuple[str, ...] = ("area",)
    ignored_nets: tuple[IgnoredNet, ...] = ()
    sources: tuple[Source, ...] = field(default_factory=_empty_sources)
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        for array in (
            self.cell_types,
            self.resources,
            self.cell_flags,
            self.cell_modules,
            self.module_parents,
            self.net_weights,
            self.net_offsets,
            self.net_cells,
            self.pin_directions,
            self.net_pins,
            self.cell_offsets,
            self.cell_nets,
        ):
            array.flags.writeable = False

    @classmethod
    def from_arrays(
        cls,
        net_offsets: ArrayLike,
        net_cells: ArrayLike,
        *,
        num_cells: int,
        areas: ArrayLike | None = None,
        net_weights: ArrayLike | None = None,
        cell_names: Names | None = None,
        net_names: Names | None = None,
        cell_types: ArrayLike | None = None,
        type_names: Names | None = None,
        cell_flags: ArrayLike | None = None,
        cell_modules: ArrayLike | None = None,
        module_names: Names | None = None,
        module_parents: ArrayLike | None = None,
        pin_directions: ArrayLike | None = None,
        name: str = "",
        ignored_nets: tuple[IgnoredNet, ...] = (),
        sources: tuple[Source, ...] = (),
        notes: tuple[str, ...] = (),
    ) -> Netlist:
        """Build and check a netlist from raw pins; the one gate through which every netlist from outside passes.

        `net_cells` may hold a cell several times in one net. What is not given defaults to area 1, weight 1, numbered
        names, one unnamed type and module, unknown directions. Takes O(p log p).

        Raises
        ------
        EmptyNetlistError, IndexOverflowError, ValueRangeError, DuplicateNameError, NetlistError
        """
        offsets = np.array(net_offsets, dtype=np.int64)
        num_nets = len(offsets) - 1
        num_pins = int(offsets[-1]) if len(offsets) else 0
        if num_cells < 1:
            raise EmptyNetlistError(f"netlist {name!r} has no cells")
        for count, what in ((num_cells, "cells"), (num_nets, "nets"), (num_pins, "pins")):
            if count > MAX_PINS:
                raise IndexOverflowError(f"netlist {name!r} has {count:,} {what}; at most {MAX_PINS:,} can be counted")
        raw_cells = np.asarray(net_cells)
        if num_nets < 0 or offsets[0] != 0 or np.any(np.diff(offsets) < 0) or len(raw_cells) != num_pins:
            raise NetlistError("net_offsets must start at 0, never fall, and end at the number of pins")
        if num_pins and (raw_cells.min() < 0 or raw_cells.max() >= num_cells):
            raise NetlistError(f"net_cells holds an index outside 0..{num_cells - 1}")
        raw_cells = raw_cells.astype(np.int32, copy=False)
        raw_counts = np.diff(offsets).astype(np.int32)
        raw_directions = (
            np.zeros(num_pins, np.uint8) if pin_directions is None else np.asarray(pin_directions).astype(np.uint8)
        )

        _check_length("pin_directions", raw_directions, num_pins)
        offsets, cells, directions = _unite_pins(offsets, raw_cells, raw_directions, num_cells)
        cell_offsets, cell_nets = transpose(offsets, cells, num_cells)

        cell_names = Names.numbered("c", num_cells) if cell_names is None else cell_names
        net_names = Names.numbered("n", num_nets) if net_names is None else net_names
        module_names = Names.from_strings([""]) if module_names is None else module_names
        type_names = Names.from_strings([""]) if type_names is None else type_names
        area = np.ones(num_cells) if areas is None else np.array(areas, dtype=np.float64)
        weights = np.ones(num_nets) if net_weights is None else np.array(net_weights, dtype=np.float64)

        flags = np.zeros(num_cells, np.uint8) if cell_flags is None else np.array(cell_flags).astype(np.uint8)
        parents = np.full(1, -1, np.int32) if module_parents is None else np.array(module_parents, dtype=np.int32)

        _check_length("areas", area, num_cells)
        _check_length("net_weights", weights, num_nets)
        _check_length("cell_names", cell_names, num_cells)
        _check_length("net_names", net_names, num_nets)
        _check_length("cell_flags", flags, num_cells)
        _check_length("module_parents", parents, len(module_names))
        enclosing = parents[1:]
        if parents[:1].tolist() != [-1] or np.any((enclosing < 0) | (enclosing > np.arange(len(enclosing)))):
            raise NetlistError("module_parents must be -1 for the top and then name an earlier module each")
        bad = np.flatnonzero(~(np.isfinite(area) & (area >= 0)))
        if len(bad):
            raise ValueRangeError(f"cell {cell_names[bad[0]]!r} has area {area[bad[0]]}; expected a finite number ≥ 0")
        bad = np.flatnonzero(~(np.isfinite(weights) & (weights > 0)))
        if len(bad):
            raise ValueRangeError(f"net {net_names[bad[0]]!r} has weight {weights[bad[0]]}; expected a finite number > 0")
        for names, what in ((cell_names, "cell"), (net_names, "net")):
            repeat = names.first_repeat()
            if repeat is not None:
                raise DuplicateNameError(f"{what} {names[repeat]!r} is defined twice")

        return cls(
            name=name,
            cell_names=cell_names,
            cell_types=_index_array("cell_types", cell_types, num_cells, len(type_names)),
            resources=area.reshape(1, -1),
            cell_flags=flags,
            cell_modules=_index_array("cell_modules", cell_modules, num_cells, len(module_names)),
            module_names=module_names,
            module_parents=parents,
            net_names=net_names,
            net_weights=weights,
            net_offsets=offsets,
            net_cells=cells,
            pin_directions=directions,
            net_pins=raw_counts,
            cell_offsets=cell_offsets,
            cell_nets=cell_nets,
            type_names=type_names,
            ignored_nets=ignored_nets,
            sources=sources,
            notes=notes,
        )

    @classmethod
    def from_clusters(
        cls,
        net_offsets: NDArray[np.int64],
        net_cells: NDArray[np.int32],
        *,
        areas: NDArray[np.float64],
        net_weights: NDArray[np.float64],
        by_cell: tuple[NDArray[np.int64], NDArray[np.int32]] | None = None,
    ) -> Netlist:
        """A netlist of nameless clusters, from arrays that are already in order (each cell once per net); not checked.

        `by_cell` is (cell_offsets, cell_nets) where the caller has them.
        """
        num_cells, num_nets = len(areas), len(net_weights)
        cell_offsets, cell_nets = by_cell if by_cell is not None else transpose(net_offsets, net_cells, num_cells)
        return cls(
            name="",
            cell_names=Names.blank(num_cells),
            cell_types=np.broadcast_to(np.int32(0), num_cells),
            resources=areas.reshape(1, -1),
            cell_flags=np.broadcast_to(np.uint8(0), num_cells),
            cell_modules=np.broadcast_to(np.int32(0), num_cells),
            module_names=Names.blank(1),
            module_parents=np.full(1, -1, np.int32),
            net_names=Names.blank(num_nets),
            net_weights=net_weights,
            net_offsets=net_offsets,
            net_cells=net_cells,
            pin_directions=np.broadcast_to(np.uint8(0), len(net_cells)),
            net_pins=np.diff(net_offsets).astype(np.int32),
            cell_offsets=cell_offsets,
            cell_nets=cell_nets,
            type_names=Names.blank(1),
        )

    def with_sources(self, sources: tuple[Source, ...]) -> Netlist:
        """The same netlist, read from these files."""
        return replace(self, sources=sources)

    @property
    def num_cells(self) -> int:
        """n = |V|, ports included."""
        return len(self.cell_types)

    @property
    def num_nets(self) -> int:
        """m = |E|."""
        return len(self.net_weights)

    @property
    def num_pins(self) -> int:
        """p: pins that count for the cut (each cell once per net)."""
        return len(self.net_cells)

    @property
    def areas(self) -> NDArray[np.float64]:
        """(n,) cell areas a(v)."""
        area: NDArray[np.float64] = self.resources[0]
        return area

    @property
    def total_area(self) -> float:
        """A, the total area of all cells, correctly rounded."""
        return math.fsum(self.areas.tolist())

    @property
    def net_sizes(self) -> NDArray[np.int64]:
        """(m,) |e|: the number of different cells on each net."""
        return np.diff(self.net_offsets)

    def cells_of(self, net: int) -> NDArray[np.int32]:
        """The cells of a net."""
        return self.net_cells[self.net_offsets[net] : self.net_offsets[net + 1]]

    def nets_of(self, cell: int) -> NDArray[np.int32]:
        """The nets of a cell."""
        return self.cell_nets[self.cell_offsets[cell] : self.cell_offsets[cell + 1]]

    def has_flag(self, flag: CellFlag) -> NDArray[np.bool_]:
        """(n,) which cells carry a flag."""
        flagged: NDArray[np.bool_] = (self.cell_flags & int(flag)) != 0
        return flagged

    def __repr__(self) -> str:
        name = f" {self.name}" if self.name else ""
        return f"<Netlist{name}: {self.num_cells:,} cells, {self.num_nets:,} nets, {self.num_pins:,} pins>"


def transpose(
    offsets: NDArray[np.int64], columns: NDArray[np.int32], num_columns: int
) -> tuple[NDArray[np.int64], NDArray[np.int32]]:
    """Turn the rows-to-columns lists of a sparse 0/1 matrix into columns-to-rows lists, rows ascending; O(p)."""
    counts = np.bincount(columns, minlength=num_columns)
    new_offsets = np.zeros(num_columns + 1, dtype=np.int64)
    np.cumsum(counts, out=new_offsets[1:])
    rows = np.repeat(np.arange(len(offsets) - 1, dtype=np.int32), np.diff(offsets))
    order = np.argsort(columns, kind="stable")
    return new_offsets, rows[order]


def _unite_pins(
    offsets: NDArray[np.int64], cells: NDArray[np.int32], directions: NDArray[np.uint8], num_cells: int
) -> tuple[NDArray[np.int64], NDArray[np.int32], NDArray[np.uint8]]:
    """Keep the first pin of every (net, cell) pair, in file order, with the directions of all its pins united."""
    num_nets = len(offsets) - 1
    nets = np.repeat(np.arange(num_nets, dtype=np.int64), np.diff(offsets))
    keys = nets * num_cells + cells
    order = np.argsort(keys, kind="stable")
    ordered = keys[order]
    starts = np.flatnonzero(np.concatenate(([True], ordered[1:] != ordered[:-1]))) if len(keys) else keys[:0]
    if len(starts) == len(keys):
        return offsets, cells.copy(), directions.copy()
    first = order[starts]
    united = np.bitwise_or.reduceat(directions[order], starts)
    by_position = np.argsort(first, kind="stable")
    first = first[by_position]
    new_offsets = np.zeros(num_nets + 1, dtype=np.int64)
    np.cumsum(np.bincount(nets[first], minlength=num_nets), out=new_offsets[1:])
    return new_offsets, cells[first], united[by_position]


def _check_length(what: str, values: Names | NDArray[Any], expected: int) -> None:
    if len(values) != expected:
        raise NetlistError(f"{what} has {len(values)} entries, expected {expected}")


def _index_array(what: str, values: ArrayLike | None, length: int, limit: int) -> NDArray[np.int32]:
    if values is None:
        return np.zeros(length, np.int32)
    array = np.array(values, dtype=np.int32)
    if len(array) != length or (length and (array.min() < 0 or array.max() >= limit)):
        raise NetlistError(f"{what} needs {length} indices within 0..{limit - 1}")
    return array
