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

_TOKEN = re.compile(r'(?:\s|#[^\n]*+)*+("[^"]*+"|[;"]|[^\s;"#][^\s;"]*+)')
_NUMBER = re.compile(r"\+?(\d+\.?\d*|\.\d+)([eE][-+]?\d{1,2})?")
_DIRECTIONS = {
    "INPUT": Direction.INPUT,
    "OUTPUT": Direction.OUTPUT,
    "INOUT": Direction.INOUT,
    "FEEDTHRU": Direction.INOUT,
}
_CLASSES = {"COVER": True, "RING": True, "BLOCK": True, "PAD": True, "CORE": False, "ENDCAP": False}
"""Whether a macro of the class is a block of its own (True) or a standard cell."""

_OPENING = {"VERSION", "BUSBITCHARS", "DIVIDERCHAR", "NAMESCASESENSITIVE", "UNITS", "LAYER", "SITE", "MACRO"}
_OPENING |= {"PROPERTYDEFINITIONS", "MANUFACTURINGGRID", "CLEARANCEMEASURE", "VIA"}
_DESIGN = re.compile(rb"^\s*DESIGN\s+\S+\s*;", re.MULTILINE)


def looks_like_lef(data: bytes) -> bool:
    """Whether the first word opens a LEF section, and no DESIGN statement makes it a DEF file."""
    head = data[:65536].decode("utf-8", "replace")
    first = _TOKEN.match(head)
    return first is not None and first[1] in _OPENING and _DESIGN.search(data[:262144]) is None


class _Tokens:
    """The words of a file one by one; `next` raises where the file ends."""

    def __init__(self, source: SourceText) -> None:
        self.source = source
        self.text = source.data.decode("utf-8", "surrogateescape")
        self.offset = 0
        self._matches: Iterator[re.Match[str]] = _TOKEN.finditer(self.text)

    def next_or_none(self) -> str | None:
        """The next word, or None at the end of the file."""
        match = next(self._matches, None)
        self.offset = len(self.text) if match is None else match.start(1)
        if match is None:
            return None
        if match[1] == '"':
            raise self.error("a closing quote", "the end of the file")
        return match[1]

    def next(self, expected: str) -> str:
        """The next word."""
        word = self.next_or_none()
        if word is None:
            raise self.error(expected)
        return word

    def keyword(self, expected: str) -> str:
        """The next word in capitals, as keywords may be written either way."""
        return self.next(expected).upper()

    def require(self, *words: str) -> None:
        """Read words that must stand here."""
        for word in words:
            if self.next(word) != word:
                raise self.error(word)

    def skip_past(self, end: str) -> None:
        """Read on behind a word."""
        while self.next(end) != end:
            pass

    def error(self, expected: str, found: str | None = None) -> InputError:
        """An error at the last word."""
        return self.source.error(len(self.text[: self.offset].encode("utf-8", "surrogateescape")), expected, found)


def read_lef(source: SourceText) -> dict[str, CellType]:
    """The macros of a LEF file by name, without their supply pins; empty for a technology file.

    Raises
    ------
    InputError
        For a macro that is not ended, or a size, class or direction that cannot be read.
    """
    tokens = _Tokens(source)
    types: dict[str, CellType] = {}
    while (word := tokens.next_or_none()) is not None:
        if word == "PROPERTYDEFINITIONS":
            while tokens.next("END PROPERTYDEFINITIONS") != "END":
                tokens.skip_past(";")
            tokens.require("PROPERTYDEFINITIONS")
        elif word == "BEGINEXT":
            tokens.skip_past("ENDEXT")
        elif word == "MACRO":
            name = tokens.next("a macro name")
            if name in types:
                raise tokens.error("different macro names", f"MACRO {name} again")
            types[name] = _read_macro(tokens, name)
    return types


def _read_macro(tokens: _Tokens, name: str) -> CellType:
    area: float | None = None
    macro = False
    pins: dict[str, Direction] = {}
    while (word := tokens.keyword(f"END {name}")) != "END":
        if word == "PIN":
            pin, direction, is_supply = _read_pin(tokens)
            if not is_supply:
                pins[pin] = direction
        elif word in ("OBS", "DENSITY"):
            tokens.skip_past("END")
        elif word == "SIZE":
            width = _read_size(tokens)
            tokens.require("BY")
            area = float(width * _read_size(tokens))
            tokens.require(";")
        elif word != ";":
            if word == "CLASS":
                kind = tokens.keyword("a class")
                if kind not in _CLASSES:
                    raise tokens.error(f"one of {', '.join(_CLASSES)}")
                macro = _CLASSES[kind]
            tokens.skip_past(";")
    tokens.require(name)
    return CellType(name, area, pins, False, macro)


def _read_pin(tokens: _Tokens) -> tuple[str, Direction, bool]:
    name = tokens.next("a pin name")
    direction, is_supply = Direction.UNKNOWN, False
    while (word := tokens.keyword(f"END {name}")) != "END":
        if word == "PORT":
            tokens.skip_past("END")
        elif word != ";":
            if word == "DIRECTION":
                value = tokens.keyword("a direction")
                if value not in _DIRECTIONS:
                    raise tokens.error(f"one of {', '.join(_DIRECTIONS)}")
                direction = _DIRECTIONS[value]
            elif word == "USE":
                is_supply = tokens.keyword("a use") in ("POWER", "GROUND")
            tokens.skip_past(";")
    tokens.require(name)
    return name, direction, is_supply


def _read_size(tokens: _Tokens) -> Fraction:
    """A length, exactly, so that 0.324 by 0.27 is 0.08748."""
    word = tokens.next("a size")
    if not _NUMBER.fullmatch(word):
        raise tokens.error("a size from 0")
    return Fraction(word)
