"""What libraries say about cell types, from Liberty or LEF, united by type name."""

from __future__ import annotations

import fnmatch
import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from netpart.netlist import Direction, IgnoredNet, Names

__all__ = ["CellType", "IgnoredByName", "ReadOptions", "ignored_by_name", "unite_types"]


@dataclass(frozen=True, slots=True)
class CellType:
    """A library cell.

    Attributes
    ----------
    name : str
    area : float or None
        In the unit of the library (commonly square micrometres); None where the library gives none.
    pins : mapping of pin name to Direction
        Buses stand as single bits, ``addr[0]``.
    sequential : bool
        It stores state (Liberty: ff, latch, statetable or memory group).
    macro : bool
        A block, not a standard cell (LEF: CLASS BLOCK; Liberty: memory group or `is_macro_cell`).
    """

    name: str
    area: float | None = None
    pins: Mapping[str, Direction] = field(default_factory=dict)
    sequential: bool = False
    macro: bool = False


@dataclass(frozen=True, slots=True)
class ReadOptions:
    """What the user asks of the readers.

    Attributes
    ----------
    top : str or None
        The top module; found where None.
    unit_areas : bool
        Every cell gets area 1; ports of a Verilog module 0, pads of an ISPD98 circuit 1, as the published figures do.
    default_area : float or None
        For cell types that no library gives an area.
    ignore_nets : tuple of str
        Globs of net names to leave out of the cut.
    """

    top: str | None = None
    unit_areas: bool = False
    default_area: float | None = None
    ignore_nets: tuple[str, ...] = ()


def unite_types(libraries: Iterable[Mapping[str, CellType]]) -> dict[str, CellType]:
    """One table of cell types; the first library that gives an area or a direction wins, pins and flags are united."""
    types: dict[str, CellType] = {}
    for library in libraries:
        for name, new in library.items():
            old = types.get(name)
            types[name] = (
                new
                if old is None
                else replace(
                    old,
                    area=new.area if old.area is None else old.area,
                    pins={pin: old.pins.get(pin) or direction for pin, direction in {**old.pins, **new.pins}.items()},
                    sequential=old.sequential or new.sequential,
                    macro=old.macro or new.macro,
                )
            )
    return types


class IgnoredByName(NamedTuple):
    """Nets that the user wants left out: which ones, and what a report says of them."""

    mask: NDArray[np.bool_]
    nets: tuple[IgnoredNet, ...]


def ignored_by_name(names: Names | list[str], pins: NDArray[np.int64], options: ReadOptions) -> IgnoredByName:
    """The nets whose name matches one of the globs in `options`; upper and lower case differ."""
    mask = np.zeros(len(names), np.bool_)
    if not options.ignore_nets:
        return IgnoredByName(mask, ())
    pattern = re.compile("|".join(fnmatch.translate(glob) for glob in options.ignore_nets))
    found = [i for i, name in enumerate(names) if pattern.match(name)]
    mask[found] = True
    return IgnoredByName(mask, tuple(IgnoredNet(names[i], "ignored on request", int(pins[i])) for i in found))
