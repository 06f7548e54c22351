"""LEF libraries (LEF/DEF 5.8 Language Reference): MACRO SIZE for areas, CLASS, PIN DIRECTION and USE.

What a LEF file says about layers, vias, sites and geometry is read over. LEF does not tell which cells store state.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from fractions import Fraction

from netpart.formats.library import CellType
from netpart.formats.source import SourceText
from netpart.netlist import Direction, InputError

__all__ = ["looks_like_lef", "read_lef"]

_TOKEN = re.compile(r'(?:\s|#[^\n]*)*+("[^"]*+"|;|[^\s;"#][^\s;"]*+)')
_DIRECTIONS = {
    "INPUT": Direction.INPUT,
    "OUTPUT": Direction.OUTPUT,
    "INOUT": Direction.INOUT,
    "FEEDTHRU": Direction.INOUT,
}
_MACRO_CLASSES = {"BLOCK", "RING", "COVER", "PAD"}
_OPENING = {"VERSION", "BUSBITCHARS", "DIVIDERCHAR", "NAMESCASESENSITIVE", "UNITS", "LAYER", "SITE", "MACRO"}
_OPENING |= {"PROPERTYDEFINITIONS", "MANUFACTURINGGRID", "CLEARANCEMEASURE", "VIA"}
_DESIGN = re.compile(rb"^\s*DESIGN\s+\S+\s*;", re.MULTILINE)


def looks_like_lef(data: bytes) -> bool:
    """Whether the first word opens a LEF section, and no DESIGN statement makes it a DEF file."""
    head = data[:65536].decode("utf-8", "replace")
    first = _TOKEN.match(head)
    return first is not None and first[1] in _OPENING and _DESIGN.search(data[:262144]) is None


class _Tokens:
    def __init__(self, source: SourceText) -> None:
        self.source = source
        self.text = source.data.decode("utf-8", "surrogateescape")
        self.offset = 0
        self._matches: Iterator[re.Match[str]] = _TOKEN.finditer(self.text)

    def next(self, expected: str) -> str:
        """The next word; an error where the file ends."""
        word = self.peek_end()
        if word is None:
            self.offset = len(self.text)
            raise self.error(expected)
        return word

    def peek_end(self) -> str | None:
        """The next word, or None at the end of the file."""
        match = next(self._matches, None)
        if match is None:
            return None
        self.offset = match.start(1)
        return match[1]

    def skip_statement(self, first: str = "") -> None:
        """Read on behind the next ``;``."""
        word = first
        while word != ";":
            word = self.next("';'")

    def error(self, expected: str, found: str | None = None) -> InputError:
        """An error at the last word."""
        return self.source.error(len(self.text[: self.offset].encode("utf-8", "surrogateescape")), expected, found)


def read_lef(source: SourceText) -> dict[str, CellType]:
    """The macros of a LEF file by name; empty for a technology file.

    Raises
    ------
    InputError
        For a macro that is not ended, or a size or class that cannot be read.
    """
    tokens = _Tokens(source)
    types: dict[str, CellType] = {}
    while (word := tokens.peek_end()) is not None:
        if word == "PROPERTYDEFINITIONS":
            while tokens.next("END PROPERTYDEFINITIONS") != "END":
                tokens.skip_statement()
            tokens.next("PROPERTYDEFINITIONS")
        elif word == "BEGINEXT":
            while tokens.next("ENDEXT") != "ENDEXT":
                pass
        elif word == "MACRO":
            cell = _read_macro(tokens)
            if cell.name in types:
                raise tokens.error("different macro names", f"MACRO {cell.name} again")
            types[cell.name] = cell
    return types


def _read_macro(tokens: _Tokens) -> CellType:
    name = tokens.next("a macro name")
    area: float | None = None
    macro = False
    pins: dict[str, Direction] = {}
    while True:
        word = tokens.next(f"END {name}")
        if word == "END":
            if tokens.next(name) != name:
                raise tokens.error(f"END {name}")
            return CellType(name, area, pins, False, macro)
        if word == "CLASS":
            macro = tokens.next("a class") in _MACRO_CLASSES
            tokens.skip_statement()
        elif word == "SIZE":
            width = _read_size(tokens)
            if tokens.next("BY") != "BY":
                raise tokens.error("BY")
            area = float(width * _read_size(tokens))
            if tokens.next("';'") != ";":
                raise tokens.error("';'")
        elif word == "PIN":
            pin, direction, is_supply = _read_pin(tokens)
            if not is_supply:
                pins[pin] = direction
        elif word in ("OBS", "DENSITY"):
            _skip_to_end(tokens)
        else:
            tokens.skip_statement(word)


def _read_pin(tokens: _Tokens) -> tuple[str, Direction, bool]:
    name = tokens.next("a pin name")
    direction, is_supply = Direction.UNKNOWN, False
    while True:
        word = tokens.next(f"END {name}")
        if word == "END":
            if tokens.next(name) != name:
                raise tokens.error(f"END {name}")
            return name, direction, is_supply
        if word == "DIRECTION":
            value = tokens.next("a direction")
            if value not in _DIRECTIONS:
                raise tokens.error("INPUT, OUTPUT, INOUT or FEEDTHRU")
            direction = _DIRECTIONS[value]
            tokens.skip_statement()
        elif word == "USE":
            is_supply = tokens.next("a use") in ("POWER", "GROUND")
            tokens.skip_statement()
        elif word == "PORT":
            _skip_to_end(tokens)
        else:
            tokens.skip_statement(word)


def _skip_to_end(tokens: _Tokens) -> None:
    while tokens.next("END") != "END":
        pass


def _read_size(tokens: _Tokens) -> Fraction:
    word = tokens.next("a size")
    try:
        size = Fraction(word)
    except (ValueError, ZeroDivisionError):
        size = Fraction(-1)
    if size < 0:
        raise tokens.error("a size from 0")
    return size
