"""Circuits of the ISPD98 benchmark suite: ``.net``, ``.netD`` (with pin directions) and ``.are`` (areas).

Published with C. J. Alpert, "The ISPD98 circuit benchmark suite", Proc. ISPD 1998, and used before for the MCNC
circuits. A ``.net`` file has five header lines (0, pins, nets, modules, pad offset) and then a line a pin: ``aN`` is
module N, ``pN`` is module pad offset + N; ``s`` begins a net and ``l`` continues it, and in ``.netD`` a direction I, O
or B follows. An ``.are`` file has a line ``name area`` a module. Nets have no names in these files and are called
``n0``, ``n1``, …
"""

from __future__ import annotations

import re
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from netpart.formats.library import ReadOptions, ignored_by_name
from netpart.formats.source import SourceText
from netpart.netlist import MAX_PINS, CellFlag, IndexOverflowError, InputError, Names, Netlist, Source

__all__ = ["looks_like_ispd98", "looks_like_ispd98_areas", "read_ispd98"]

_Row = tuple[bytes, ...]
_Fields = tuple[tuple[re.Pattern[bytes], str], ...]

_LINE = re.compile(rb"[^\n]*\S[^\n]*")
_ZERO = re.compile(rb"\s*0[ \t\r]*\n[ \t]*\d+[ \t\r]*\n")
_HEADER_LINES = ("0", "the number of pins", "the number of nets", "the number of modules", "the pad offset")
_PIN = re.compile(rb"^[ \t]*([ap])(\d{1,10})[ \t]+([sl])(?:[ \t]+1)?(?:[ \t]+([IOB]))?[ \t\r]*$", re.MULTILINE)
_AREA = re.compile(rb"^[ \t]*([ap])(\d{1,10})[ \t]+(\d+(?:\.\d*)?(?:[eE][-+]?\d{1,3})?)[ \t\r]*$", re.MULTILINE)
_PIN_FIELDS = (
    (re.compile(rb"[ap]\d{1,10}"), "a module aN or pN"),
    (re.compile(rb"[sl]"), "s or l"),
    (re.compile(rb"[1IOB]"), "1, a direction I, O or B, or the end of the line"),
    (re.compile(rb"[IOB]"), "a direction I, O or B, or the end of the line"),
)
_AREA_FIELDS = (_PIN_FIELDS[0], (re.compile(rb"\d+(?:\.\d*)?(?:[eE][-+]?\d{1,3})?"), "an area from 0"))
_DIRECTIONS = {b"": 0, b"I": 1, b"O": 2, b"B": 3}


def looks_like_ispd98(data: bytes) -> bool:
    """Whether it begins with a line ``0`` and a line that is one number."""
    return _ZERO.match(data) is not None


def looks_like_ispd98_areas(data: bytes) -> bool:
    """Whether the first line is ``aN area`` or ``pN area``."""
    first = _LINE.search(data)
    return first is not None and _AREA.fullmatch(first[0]) is not None


def read_ispd98(net: SourceText, areas: SourceText | None, options: ReadOptions) -> Netlist:
    """Read a circuit, with its areas where given; with unit areas, the file of areas is not looked into.

    Raises
    ------
    InputError
        For a line that is no pin, a module out of range, counts that differ from the header, or areas that are missing
        where neither unit areas nor a default area is asked for.
    """
    header = _read_header(net)
    rows = _matched_lines(net, _PIN, header.end, _PIN_FIELDS)
    cells = _module_numbers(net, rows, header, header.end)
    begins = np.array([row[2] for row in rows], "S1") == b"s"
    if len(cells) and not begins[0]:
        raise net.error(_find_line(net.data, header.end, 0), "s, which begins the first net", "l")
    for found, stated, what in ((len(cells), header.pins, "pins"), (int(begins.sum()), header.nets, "nets")):
        if found != stated:
            raise net.error(len(net.data), f"{stated} {what}, as the header says", f"{found} at the end of the file")

    offsets = np.append(np.flatnonzero(begins), len(cells)).astype(np.int64)
    net_names = Names.numbered("n", header.nets)
    dropped = ignored_by_name(net_names, np.diff(offsets), options)
    keep = ~dropped.mask
    if dropped.nets:
        net_names = Names.from_bytes([net_names.bytes_at(i) for i in np.flatnonzero(keep).tolist()])
    keep_pin = np.repeat(keep, np.diff(offsets))
    directions = np.fromiter((_DIRECTIONS[row[3]] for row in rows), np.uint8, len(rows))
    return Netlist.from_arrays(
        np.concatenate(([0], np.cumsum(np.diff(offsets)[keep]))),
        cells[keep_pin],
        num_cells=header.modules,
        areas=_areas(net, areas, options, header),
        cell_names=Names.from_bytes([header.name(i) for i in range(header.modules)]),
        net_names=net_names,
        cell_flags=np.where(np.arange(header.modules) > header.pad_offset, int(CellFlag.PORT), 0),
        pin_directions=directions[keep_pin],
        name=re.sub(r"\.(net|netD)(\.\w+)?$", "", net.path.rsplit("/", 1)[-1]),
        ignored_nets=dropped.nets,
        sources=tuple(Source(text.path, "ispd98", text.sha256) for text in (net, areas) if text is not None),
    )


class _Header(NamedTuple):
    pins: int
    nets: int
    modules: int
    pad_offset: int
    end: int

    def name(self, module: int) -> bytes:
        """Modules up to the pad offset are called a…, those beyond it p…, so that each has one name."""
        return b"a%d" % module if module <= self.pad_offset else b"p%d" % (module - self.pad_offset)

    def range_text(self) -> str:
        """The names that there are."""
        cells, pads = min(self.pad_offset + 1, self.modules), self.modules - 1 - self.pad_offset
        return f"a0..a{cells - 1}" + (f" or p1..p{pads}" if pads > 0 else "")


def _read_header(text: SourceText) -> _Header:
    values: list[int] = []
    lines = _LINE.finditer(text.data)
    end = 0
    for what in _HEADER_LINES:
        line = next(lines, None)
        if line is None:
            raise text.error(len(text.data), what)
        word = line[0].strip()
        if not re.fullmatch(rb"\d{1,19}", word) or (not values and int(word)):
            raise text.error(line.start(), what, _shown(word))
        values.append(int(word))
        end = line.end()
        if values[-1] > MAX_PINS:
            raise IndexOverflowError(f"{text.path}: {what} is {values[-1]:,}; at most {MAX_PINS:,} can be counted")
    _, pins, nets, modules, pad_offset = values
    if modules > len(text.data):  # so that a false count claims no memory
        raise text.error(_find_line(text.data, 0, 3), "no more modules than the file has room for", str(modules))
    return _Header(pins, nets, modules, pad_offset, end)


def _areas(net: SourceText, text: SourceText | None, options: ReadOptions, header: _Header) -> NDArray[np.float64] | None:
    if options.unit_areas:
        return None
    if text is None:
        if options.default_area is None:
            raise InputError(net.path, expected="areas (an .are file, --default-area or --unit-areas)", found="none")
        return np.full(header.modules, options.default_area)
    rows = _matched_lines(text, _AREA, 0, _AREA_FIELDS)
    cells = _module_numbers(text, rows, header, 0)
    values = np.full(header.modules, np.nan if options.default_area is None else options.default_area)
    values[cells] = [float(row[2]) for row in rows]
    first = np.unique(cells, return_index=True)[1]
    if len(first) < len(cells):
        row = int(np.setdiff1d(np.arange(len(cells)), first)[0])
        name = header.name(int(cells[row])).decode()
        raise text.error(_find_line(text.data, 0, row), "each module once", f"{name} again")
    missing = np.flatnonzero(np.isnan(values))
    if len(missing):
        name = header.name(int(missing[0])).decode()
        raise InputError(
            text.path, expected=f"{header.modules} areas", found=f"none for {len(missing)} modules, first {name}"
        )
    return values


def _matched_lines(text: SourceText, pattern: re.Pattern[bytes], start: int, fields: _Fields) -> list[_Row]:
    """The groups of every line that is not blank; all of them must match."""
    rows: list[_Row] = pattern.findall(text.data, start)
    if len(rows) != sum(1 for _ in _LINE.finditer(text.data, start)):
        for line in _LINE.finditer(text.data, start):
            if pattern.fullmatch(line[0]) is None:
                raise _field_error(text, line, fields)
    return rows


def _field_error(text: SourceText, line: re.Match[bytes], fields: _Fields) -> InputError:
    """What is wrong in a line that does not match: its first field that does not fit, or is missing, or is too many."""
    at = line.start()
    words = list(re.finditer(rb"\S+", line[0]))
    for (field, expected), word in zip(fields, words, strict=False):
        at = line.start() + word.start()
        if not field.fullmatch(word[0]):
            return text.error(at, expected, _shown(word[0]))
    if len(words) < 2:
        return text.error(line.start() + len(line[0].rstrip()), fields[1][1], "the end of the line")
    return text.error(line.start() + words[min(len(fields), len(words) - 1)].start(), "the end of the line")


def _module_numbers(text: SourceText, rows: list[_Row], header: _Header, start: int) -> NDArray[np.int64]:
    """The module of each row (kind, number, …), checked."""
    values = np.array([int(row[1]) for row in rows], np.int64)
    is_pad = np.array([row[0] for row in rows], "S1") == b"p"
    cells: NDArray[np.int64] = values + header.pad_offset * is_pad
    bad = np.flatnonzero((is_pad != (cells > header.pad_offset)) | (cells >= header.modules))
    if len(bad):
        row = int(bad[0])
        name = (rows[row][0] + rows[row][1]).decode()
        raise text.error(_find_line(text.data, start, row), f"a module {header.range_text()}", name)
    return cells


def _find_line(data: bytes, start: int, row: int) -> int:
    """Where the row-th line that is not blank has its first word."""
    for number, line in enumerate(_LINE.finditer(data, start)):
        if number == row:
            return line.end() - len(line[0].lstrip())
    return len(data)


def _shown(line: bytes) -> str:
    return repr(line.strip()[:40].decode("utf-8", "replace"))
