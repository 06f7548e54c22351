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
from netpart.netlist import Direction

__all__ = ["looks_like_liberty", "read_liberty"]

_TOKEN = re.compile(
    rb"""(?:\s|\\\r?\n|/\*(?s:.*?)\*/|//[^\n]*)*+
    (?:(?P<name>[A-Za-z_][A-Za-z0-9_.]*+)(?:\s|\\\r?\n)*+
       (?: :\s*+(?P<value>"(?:[^"\\]|\\(?s:.))*+"|[^;{}"\n]*+)
         | \((?P<arguments>(?:[^()"]|"(?:[^"\\]|\\(?s:.))*+"|\([^()]*+\))*+)\)(?:\s|\\\r?\n)*+(?P<open>\{)? )
     | (?P<close>\}) | (?P<end>;) | (?P<eof>\Z))""",
    re.VERBOSE,
)
_BRACE = re.compile(rb'[{}]|"(?:[^"\\]|\\(?s:.))*+"|/\*(?s:.*?)\*/')
_DIRECTIONS = {"input": Direction.INPUT, "output": Direction.OUTPUT, "inout": Direction.INOUT}
_STATE = {"ff", "latch", "ff_bank", "latch_bank", "statetable"}
_ENTERED = {"library", "cell", "type", "pin", "bus", "bundle"}
_HEAD = re.compile(rb"(?:\s|/\*(?s:.*?)\*/|//[^\n]*)*library\s*\(")


@dataclass(slots=True)
class _Group:
    kind: str
    name: str
    offset: int
    attributes: dict[str, str] = field(default_factory=dict)
    pins: dict[str, Direction] = field(default_factory=dict)
    members: list[str] = field(default_factory=list)
    sequential: bool = False
    macro: bool = False


def looks_like_liberty(data: bytes) -> bool:
    """Whether the first group is a library."""
    return _HEAD.match(data) is not None


def read_liberty(text: SourceText) -> dict[str, CellType]:
    """The cells of a library by name.

    Raises
    ------
    InputError
        Where the text leaves the syntax, a number cannot be read, or the end comes too early.
    """
    data = text.data
    types: dict[str, CellType] = {}
    buses: dict[str, tuple[int, int]] = {}
    stack: list[_Group] = []
    at = 0
    while True:
        match = _TOKEN.match(data, at)
        if match is None:
            raise text.error(_skip_space(data, at), "an attribute, a group or '}'")
        if match.lastgroup == "eof":
            if stack:
                raise text.error(len(data), f"'}}' that closes {stack[-1].kind} ({stack[-1].name})")
            break
        at = match.end()
        if match["close"]:
            if not stack:
                raise text.error(match.start("close"), "a group", "'}'")
            _close(text, stack.pop(), stack, types, buses)
        elif match["name"]:
            name = match["name"].decode()
            if not stack and not (match["open"] and name == "library"):
                raise text.error(match.start("name"), "library (name) {")
            if match["value"] is not None:
                stack[-1].attributes[name] = _plain(match["value"])
            elif match["open"] is None:
                if name == "members" and stack[-1].kind == "bundle":
                    stack[-1].members = [_plain(part) for part in match["arguments"].split(b",")]
            elif name in _ENTERED:
                stack.append(_Group(name, _plain(match["arguments"]), match.start("name")))
            else:
                stack[-1].sequential |= name in _STATE or name == "memory"
                stack[-1].macro |= name == "memory"
                at = _skip_group(text, at, name)
    return types


def _close(
    text: SourceText, group: _Group, stack: list[_Group], types: dict[str, CellType], buses: dict[str, tuple[int, int]]
) -> None:
    if group.kind == "type":
        bounds = tuple(_number(text, group, group.attributes.get(key, ""), int) for key in ("bit_from", "bit_to"))
        buses[group.name] = (int(bounds[0]), int(bounds[1]))
    elif group.kind == "cell":
        area = group.attributes.get("area")
        if group.name in types:
            raise text.error(group.offset, "different cell names", f"cell ({group.name}) again")
        types[group.name] = CellType(
            group.name,
            None if area is None else _number(text, group, area, float),
            group.pins,
            group.sequential,
            group.macro or group.attributes.get("is_macro_cell") == "true",
        )
    elif group.kind in ("pin", "bus", "bundle"):
        direction = _DIRECTIONS.get(group.attributes.get("direction", ""), Direction.UNKNOWN)
        own = dict(group.pins)
        if group.kind == "bus":
            first, last = buses.get(group.attributes.get("bus_type", ""), (0, -1))
            step = 1 if first <= last else -1
            if abs(first - last) > _MAX_BUS:
                raise text.error(group.offset, f"a bus of at most {_MAX_BUS} bits", f"{group.name}[{first}:{last}]")
            if (first, last) != (0, -1):
                for bit in range(first, last + step, step):
                    own.setdefault(f"{group.name}[{bit}]", direction)
        elif group.kind == "bundle":
            for member in group.members:
                own.setdefault(member, direction)
        else:
            for name in group.name.split(","):
                own.setdefault(name.strip().strip('"'), direction)
        if direction:
            own = {name: known or direction for name, known in own.items()}
        if stack:
            stack[-1].pins.update(own)


_MAX_BUS = 1 << 16


def _number(text: SourceText, group: _Group, value: str, kind: type[int] | type[float]) -> float:
    try:
        number = kind(value)
    except ValueError:
        number = -1
    if not (kind is int or 0 <= number < float("inf")):
        raise text.error(group.offset, f"a number in {group.kind} ({group.name})", repr(value))
    return number


def _skip_group(text: SourceText, at: int, name: str) -> int:
    depth = 1
    for match in _BRACE.finditer(text.data, at):
        depth += {b"{": 1, b"}": -1}.get(match[0], 0)
        if depth == 0:
            return match.end()
    raise text.error(len(text.data), f"'}}' that closes {name}")


def _skip_space(data: bytes, at: int) -> int:
    while at < len(data) and data[at : at + 1].isspace():
        at += 1
    return at


def _plain(value: bytes) -> str:
    return value.decode("utf-8", "surrogateescape").strip().strip('"').strip()
