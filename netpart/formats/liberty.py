"""Liberty libraries: area, pin directions, whether a cell stores state or is a macro.

Syntax as in the Liberty Reference Manual (Liberty Technical Advisory Board, 2017.06): groups ``name (arguments) {…}``,
simple attributes ``name : value ;`` and complex attributes ``name (arguments) ;``. Timing and power tables make up most
of a library; groups that say nothing about area, pins or state are skipped without being looked into.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field

from netpart.formats.library import CellType
from netpart.formats.source import SourceText
from netpart.netlist import Direction, InputError, LimitError

__all__ = ["MAX_BUS_WIDTH", "looks_like_liberty", "read_liberty"]

MAX_BUS_WIDTH = 1 << 16
"""Bits in one bus."""

_BLANK = rb"(?:\s|\\\r?\n|/\*(?s:.*?)\*/|//[^\n]*+)*+"
_STRING = rb'"(?:[^"\\]|\\(?s:.))*+"'
_VALUE = _STRING + rb'|(?:[^;{}"\n/\\]++|/(?![*/])|\\(?!\r?\n))*+'
_ARGUMENTS = rb'(?:[^()"{};]++|' + _STRING + rb"|\([^()]*+\))*+"
_STATEMENT = re.compile(
    rb"%(_)s (?: (?P<name>[A-Za-z_][\w.]*+) %(_)s"
    rb"(?: : %(_)s (?P<value>%(v)s) | \( (?P<arguments>%(a)s) \) (?: %(_)s (?P<open>\{) )? )"
    rb"| (?P<close>\}) | ; | (?P<eof>\Z) )".replace(b" ", b"")
    % {b"_": _BLANK, b"v": _VALUE, b"a": _ARGUMENTS}
)
_SKIP_BLANK = re.compile(_BLANK)
_NAME_AND_BLANK = re.compile(rb"[A-Za-z_][\w.]*+" + _BLANK)
_OPEN_ARGUMENTS = re.compile(rb"\(" + _ARGUMENTS)
_BRACE = re.compile(_STRING + rb'|/\*(?s:.*?)\*/|//[^\n]*+|[{}"]|/\*')
_HEAD = re.compile(_BLANK + rb"library" + _BLANK + rb"\(")
_PIN_RANGE = re.compile(r"(.*)\[(\d{1,9}):(\d{1,9})\]")

_DIRECTIONS = {"input": Direction.INPUT, "output": Direction.OUTPUT, "inout": Direction.INOUT}
_STATE = {"ff", "latch", "ff_bank", "latch_bank", "statetable", "memory", "test_cell"}
_ENTERED = {"library", "cell", "type", "pin", "bus", "bundle"}


@dataclass(slots=True)
class _Group:
    kind: str
    name: str
    offset: int
    attributes: dict[str, tuple[str, int]] = field(default_factory=dict)
    pins: dict[str, Direction] = field(default_factory=dict)
    members: list[str] = field(default_factory=list)
    sequential: bool = False
    macro: bool = False

    def attribute(self, name: str) -> str:
        """The value of an attribute; empty where it is not given."""
        return self.attributes.get(name, ("", 0))[0]


def looks_like_liberty(data: bytes) -> bool:
    """Whether the first group is a library."""
    return _HEAD.match(data) is not None


def read_liberty(text: SourceText) -> dict[str, CellType]:
    """The cells of a library by name, with supply pins and internal pins left out.

    Raises
    ------
    InputError
        Where the text leaves the syntax, a number cannot be read, or the end comes too early.
    """
    data = text.data
    types: dict[str, CellType] = {}
    buses: dict[str, range] = {}
    stack: list[_Group] = []
    at = 0
    while True:
        match = _STATEMENT.match(data, at)
        if match is None:
            raise _syntax_error(text, at)
        at = match.end()
        if match["eof"] is not None:
            if stack:
                raise text.error(len(data), f"'}}' that closes {stack[-1].kind} ({stack[-1].name})")
            return types
        if match["close"]:
            if not stack:
                raise text.error(match.start("close"), "library (name) {")
            _close(text, stack.pop(), stack, types, buses)
        elif match["name"]:
            name, offset = match["name"].decode(), match.start("name")
            if bool(stack) == (name == "library" and match["open"] is not None):
                raise text.error(offset, "an attribute or a group of a library" if stack else "library (name) {")
            if match["value"] is not None:
                stack[-1].attributes[name] = (_plain(match["value"]), match.start("value"))
            elif match["open"] is None:
                if name == "members":
                    stack[-1].members = _names(match["arguments"])
                elif name == "include_file":
                    raise text.error(offset, "a library without include_file, which is not followed")
            elif name in _ENTERED:
                stack.append(_Group(name, _plain(match["arguments"]), offset))
            else:
                stack[-1].sequential |= name in _STATE
                stack[-1].macro |= name == "memory"
                at = _skip_group(text, at, f"{name} in {stack[-1].kind} ({stack[-1].name})")


def _close(
    text: SourceText, group: _Group, stack: list[_Group], types: dict[str, CellType], buses: dict[str, range]
) -> None:
    if group.kind == "type":
        buses[group.name] = _bits(text, group)
    elif group.kind == "cell":
        if group.name in types:
            raise text.error(group.offset, "different cell names", f"cell ({group.name}) again")
        types[group.name] = CellType(
            group.name,
            _area(text, group),
            group.pins,
            group.sequential or group.attribute("clock_gating_integrated_cell").startswith(("latch", "ff")),
            group.macro or group.attribute("is_macro_cell") == "true",
        )
    elif group.kind in ("pin", "bus", "bundle") and group.attribute("direction") != "internal":
        word, offset = group.attributes.get("direction", ("", 0))
        if word and word not in _DIRECTIONS:
            raise text.error(offset, "input, output, inout or internal")
        direction = _DIRECTIONS.get(word, Direction.UNKNOWN)
        pins = stack[-1].pins
        pins.update(dict.fromkeys(_bit_names(text, group, buses), direction))
        pins.update({pin: own or direction for pin, own in group.pins.items()})


def _bit_names(text: SourceText, group: _Group, buses: dict[str, range]) -> list[str]:
    """The pins that a pin, bus or bundle group stands for."""
    if group.kind == "bus":
        bus_type, offset = group.attributes.get("bus_type", ("", group.offset))
        if bus_type not in buses and not group.pins:
            raise text.error(offset, f"a type, defined before, as bus_type of bus ({group.name})")
        return [f"{group.name}[{bit}]" for bit in buses.get(bus_type, ())]
    if group.kind == "bundle":
        return group.members
    names: list[str] = []
    for name in _names(group.name.encode("utf-8", "surrogateescape")):
        part = _PIN_RANGE.fullmatch(name)
        if part is None:
            names.append(name)
        else:
            bits = _range(text, group.offset, int(part[2]), int(part[3]))
            names += [f"{part[1]}[{bit}]" for bit in bits]
    return names


def _bits(text: SourceText, group: _Group) -> range:
    """The bits of a type group; what is not given defaults to bit_width − 1 and 0."""
    values = {}
    for key in ("bit_width", "bit_from", "bit_to"):
        value, offset = group.attributes.get(key, ("", 0))
        if value and not re.fullmatch(r"\d{1,9}", value):
            raise text.error(offset, f"a whole number for {key}")
        values[key] = int(value) if value else None
    width = values["bit_width"] or 1
    first = width - 1 if values["bit_from"] is None else values["bit_from"]
    return _range(text, group.offset, first, values["bit_to"] or 0)


def _range(text: SourceText, offset: int, first: int, last: int) -> range:
    width = abs(first - last) + 1
    if width > MAX_BUS_WIDTH:
        raise text.error(offset, f"a bus of at most {MAX_BUS_WIDTH} bits", f"{width}", LimitError)
    return range(first, last + 1) if first <= last else range(first, last - 1, -1)


def _area(text: SourceText, group: _Group) -> float | None:
    if "area" not in group.attributes:
        return None
    value, offset = group.attributes["area"]
    if not re.fullmatch(r"\+?(\d+\.?\d*|\.\d+)([eE][-+]?\d{1,2})?", value):
        raise text.error(offset, f"the area of cell ({group.name}), a number from 0")
    return float(value)


def _skip_group(text: SourceText, at: int, what: str) -> int:
    depth = 1
    for match in _BRACE.finditer(text.data, at):
        token = match[0]
        if token == b"{":
            depth += 1
        elif token == b"}":
            depth -= 1
            if depth == 0:
                return match.end()
        elif token in (b'"', b"/*"):
            raise text.error(match.start(), f"a string or comment that ends, in {what}")
    raise text.error(len(text.data), f"'}}' that closes {what}")


def _syntax_error(text: SourceText, at: int) -> InputError:
    """Find the place where `_STATEMENT` could not go on."""
    at = _SKIP_BLANK.match(text.data, at).end()  # type: ignore[union-attr]
    name = _NAME_AND_BLANK.match(text.data, at)
    if name is None:
        return text.error(at, "an attribute, a group or '}'")
    arguments = _OPEN_ARGUMENTS.match(text.data, name.end())
    if arguments is None:
        return text.error(name.end(), "':' or '('")
    return text.error(arguments.end(), "')'")


def _names(arguments: bytes) -> list[str]:
    """Names separated by commas, with the quotes around one or all of them taken away."""
    return [_plain(part) for part in arguments.replace(b'"', b"").split(b",") if part.strip()]


def _plain(value: bytes) -> str:
    return value.decode("utf-8", "surrogateescape").strip().strip('"').strip()
