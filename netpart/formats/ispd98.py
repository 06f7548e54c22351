"""Circuits of the ISPD98 benchmark suite: ``.net``, ``.netD`` (with pin directions) and ``.are`` (areas).

Published with C. J. Alpert, "The ISPD98 circuit benchmark suite", Proc. ISPD 1998, and used before for the MCNC
circuits. A ``.net`` file has five header lines (0, pins, nets, modules, pad offset) and then a line a pin: ``aN`` is
module N, ``pN`` is module pad offset + N; ``s`` begins a net and ``l`` continues it, and in ``.netD`` a direction I, O
or B follows. An ``.are`` file has a line ``name area`` a module. Nets have no names in these files and are called
``n0``, ``n1``, …
"""

from __future__ import annotations

import re
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from netpart.formats.library import ReadOptions, ignored_by_name
from netpart.formats.source import SourceText
from netpart.netlist import MAX_PINS, CellFlag, IndexOverflowError, InputError, Names, Netlist, Source

__all__ = ["looks_like_ispd98", "looks_like_ispd98_areas", "read_ispd98"]

_HEADER = re.compile(
    rb"\s*0[ \t\r]*\n[ \t]*(\d+)[ \t\r]*\n[ \t]*(\d+)[ \t\r]*\n[ \t]*(\d+)[ \t\r]*\n[ \t]*(\d+)[ \t\r]*(?:\n|$)"
)
_PIN = re.compile(rb"^[ \t]*([ap])(\d{1,10})[ \t]+([sl])(?:[ \t]+1)?(?:[ \t]+([IOB]))?[ \t\r]*$", re.MULTILINE)
_PIN_TEXT = "a pin: aN or pN, then s or l, then perhaps I, O or B"
_AREA = re.compile(rb"^[ \t]*([ap])(\d{1,10})[ \t]+(\d+(?:\.\d*)?(?:[eE][-+]?\d+)?)[ \t\r]*$", re.MULTILINE)
_LINE = re.compile(rb"[^\n]*\S[^\n]*")
_DIRECTIONS = {b"": 0, b"I": 1, b"O": 2, b"B": 3}


def looks_like_ispd98(data: bytes) -> bool:
    """Whether the five header lines stand at the beginning."""
    return _HEADER.match(data) is not None


def looks_like_ispd98_areas(data: bytes) -> bool:
    """Whether the first line is ``aN area`` or ``pN area``."""
    first = _LINE.search(data)
    return first is not None and _AREA.fullmatch(first[0]) is not None


def read_ispd98(net: SourceText, areas: SourceText | None, options: ReadOptions) -> Netlist:
    """Read a circuit, with its areas where given.

    Raises
    ------
    InputError
        For a line that is no pin, a module out of range, counts that differ from the header, or areas that are missing
        where neither unit areas nor a default area is asked for.
    """
    header = _HEADER.match(net.data)
    if header is None:
        raise net.error(0, "five header lines: 0, pins, nets, modules, pad offset")
    num_pins, num_nets, num_cells, pad_offset = (int(value) for value in header.groups())
    for count, what in ((num_pins, "pins"), (num_nets, "nets"), (num_cells, "modules")):
        if count > MAX_PINS:
            raise IndexOverflowError(f"{net.path}: {count:,} {what}; at most {MAX_PINS:,} can be counted")
    rows = _matched_lines(net, _PIN, header.end(), _PIN_TEXT)
    kinds, numbers, starts, directions = zip(*rows, strict=True) if rows else ((), (), (), ())
    cells = _module_numbers(kinds, numbers, pad_offset)
    begins = np.array(starts) == b"s"
    if len(cells) and not begins[0]:
        raise net.error(_line_offset(net.data, header.end(), 0), "s, which begins the first net", "l")
    bad = np.flatnonzero((cells < 0) | (cells >= num_cells))
    if len(bad):
        row = int(bad[0])
        name = (kinds[row] + numbers[row]).decode()
        raise net.error(
            _line_offset(net.data, header.end(), row), f"one of {num_cells} modules, pads from {pad_offset}", name
        )
    for found, stated, what in ((len(cells), num_pins, "pins"), (int(begins.sum()), num_nets, "nets")):
        if found != stated:
            raise net.error(len(net.data), f"{stated} {what}, as the header says", f"{found} at the end of the file")

    is_pad = np.arange(num_cells) > pad_offset
    cell_names = Names.from_bytes(
        [b"p%d" % (i - pad_offset) if i > pad_offset else b"a%d" % i for i in range(num_cells)]
    )
    net_names = Names.numbered("n", num_nets)
    offsets = np.append(np.flatnonzero(begins), len(cells))
    pin_directions = np.fromiter(map(_DIRECTIONS.__getitem__, directions), np.uint8, len(cells))
    dropped = ignored_by_name(net_names, np.diff(offsets), options)
    keep = ~dropped.mask
    keep_pin = np.repeat(keep, np.diff(offsets))
    sizes = np.diff(offsets)[keep]
    return Netlist.from_arrays(
        np.concatenate(([0], np.cumsum(sizes))),
        cells[keep_pin],
        num_cells=num_cells,
        areas=_areas(net, areas, options, num_cells, pad_offset),
        cell_names=cell_names,
        net_names=net_names if keep.all() else Names.from_strings(net_names[i] for i in np.flatnonzero(keep).tolist()),
        cell_flags=np.where(is_pad, int(CellFlag.PORT), 0),
        pin_directions=pin_directions[keep_pin],
        name=re.sub(r"\.(net|netD)(\.\w+)?$", "", net.path.rsplit("/", 1)[-1]),
        ignored_nets=dropped.nets,
        sources=tuple(
            Source(text.path, "ispd98", text.sha256) for text in (net, *([areas] if areas is not None else []))
        ),
    )


def _areas(
    net: SourceText, text: SourceText | None, options: ReadOptions, num_cells: int, pad_offset: int
) -> NDArray[np.float64]:
    if options.unit_areas:
        return np.ones(num_cells)
    if text is None:
        if options.default_area is None:
            raise InputError(net.path, expected="areas (an .are file, --default-area or --unit-areas)", found="none")
        return np.full(num_cells, options.default_area)
    rows = _matched_lines(text, _AREA, 0, "a module and its area")
    values = np.full(num_cells, np.nan if options.default_area is None else options.default_area)
    given = np.zeros(num_cells, np.bool_)
    kinds, numbers, sizes = zip(*rows, strict=True) if rows else ((), (), ())
    for row, (cell, size) in enumerate(zip(_module_numbers(kinds, numbers, pad_offset).tolist(), sizes, strict=True)):
        if not 0 <= cell < num_cells:
            raise text.error(_line_offset(text.data, 0, row), f"one of {num_cells} modules, pads from {pad_offset}")
        if given[cell]:
            raise text.error(_line_offset(text.data, 0, row), "each module once")
        given[cell] = True
        values[cell] = float(size)
    missing = np.flatnonzero(np.isnan(values))
    if len(missing):
        cell = int(missing[0])
        name = f"p{cell - pad_offset}" if cell > pad_offset else f"a{cell}"
        raise InputError(
            text.path, expected=f"{num_cells} areas", found=f"none for {len(missing)} modules, first {name}"
        )
    return values


def _matched_lines(text: SourceText, pattern: re.Pattern[bytes], start: int, expected: str) -> list[tuple[bytes, ...]]:
    """The groups of every line that is not blank; all of them must match."""
    rows: list[tuple[bytes, ...]] = pattern.findall(text.data, start)
    if len(rows) != sum(1 for _ in _LINE.finditer(text.data, start)):
        for line in _LINE.finditer(text.data, start):
            if pattern.fullmatch(line[0]) is None:
                shown = line[0].strip()[:40].decode("utf-8", "replace")
                raise text.error(line.start(), expected, repr(shown))
    return rows


def _module_numbers(kinds: Sequence[bytes], numbers: Sequence[bytes], pad_offset: int) -> NDArray[np.int64]:
    values = np.array([int(number) for number in numbers], np.int64)
    return values + pad_offset * (np.array(kinds, dtype="S1") == b"p")


def _line_offset(data: bytes, start: int, row: int) -> int:
    """Where the row-th line that is not blank begins."""
    for number, line in enumerate(_LINE.finditer(data, start)):
        if number == row:
            return line.start()
    return len(data)
