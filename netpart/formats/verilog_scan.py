"""Structural Verilog text to modules: a fast path for the statements that fill a netlist, the grammar for all others.

The fast path knows only the shape of a statement, and hands over to the grammar whatever gives it pause: it must take
exactly what the grammar takes. Both fill the same flat tables, which `Module` describes.
"""

from __future__ import annotations

import re
from array import array
from collections.abc import Iterable
from typing import Any

import pyparsing as pp

from netpart.formats.source import SourceText
from netpart.formats.verilog_grammar import (
    CONSTANT,
    EXPRESSION,
    GATES,
    KEYWORDS,
    MAX_NAME_LENGTH,
    MAX_NESTING,
    MAX_VECTOR_WIDTH,
    NAME,
    SPACE,
    constant_bits,
    plain_name,
)
from netpart.formats.verilog_module import Expression, Module, Range, Vocabulary
from netpart.formats.verilog_text import TO_SEMICOLON, VerilogText, parse_statement, shown, skip_space
from netpart.netlist import LimitError

__all__ = ["scan_modules"]


class _Spellings(dict[str | int, int]):
    """Numbers by the spelling in the text, where an escaped name is another spelling of the plain one."""

    def __init__(self, vocabulary: Vocabulary, reserved: frozenset[str]) -> None:
        self.vocabulary = vocabulary
        self.reserved = reserved

    def __missing__(self, spelling: str | int) -> int:
        if spelling in self.reserved or (isinstance(spelling, str) and len(spelling) > MAX_NAME_LENGTH):
            raise _Doubt
        name = plain_name(spelling) if isinstance(spelling, str) else spelling
        self[spelling] = number = self.vocabulary.number(name)
        return number


class _Values(dict[str, int]):
    """Numbers of the values that stand between the parentheses of connections, by their text."""

    def __init__(self, expressions: list[Expression | None]) -> None:
        self.expressions = expressions

    def __missing__(self, text: str) -> int:
        expression = _read_value(text)
        self[text] = number = len(self.expressions)
        self.expressions.append(expression)
        return number


class _Doubt(Exception):
    """The fast path leaves it to the grammar."""


_VALUE = r"[^();\\]*+(?:\\[!-~\x80-\xff]++[^();\\]*+)*+"
_PIN = rf"\.{SPACE}*+{NAME}{SPACE}*+\({_VALUE}\)"
_INSTANCE = re.compile(
    rf"({NAME}){SPACE}++({NAME}){SPACE}*+"
    rf"\((?:({SPACE}*+{_PIN}{SPACE}*+(?:,{SPACE}*+{_PIN}{SPACE}*+)*+)|([^();{{\\.]*+))\){SPACE}*+;{SPACE}*+"
)
_EACH_PIN = re.compile(rf"\.{SPACE}*+({NAME}){SPACE}*+\({SPACE}*+({_VALUE})\)")
_HEADER = re.compile(
    rf"module{SPACE}++({NAME}){SPACE}*+\(({SPACE}*+{NAME}{SPACE}*+(?:,{SPACE}*+{NAME}{SPACE}*+)*+)\){SPACE}*+;"
)
_NUMBER = r"([0-9]{1,18}+)"
_DECLARATION = re.compile(
    rf"(input|output|inout|wire)(?:{SPACE}*+\[{SPACE}*+{_NUMBER}{SPACE}*+:{SPACE}*+{_NUMBER}{SPACE}*+\]{SPACE}*+|{SPACE}++)"
    rf"({NAME}(?:{SPACE}*+,{SPACE}*+{NAME})*+){SPACE}*+;"
)
_WIRES = re.compile(rf"(?:wire{SPACE}++{NAME}{SPACE}*+;{SPACE}*+){{1,4096}}+")
_EACH_WIRE = re.compile(rf"wire{SPACE}++({NAME}){SPACE}*+;")
_ASSIGNMENT = re.compile(rf"assign{SPACE}++({_VALUE.replace(';', ';=')})={SPACE}*+({_VALUE.replace(';', ';=')});")
_EACH_NAME = re.compile(NAME)
_ITEM = re.compile(
    rf"(?:({NAME}){SPACE}*+(?:\[{SPACE}*+{_NUMBER}{SPACE}*+(?::{SPACE}*+{_NUMBER}{SPACE}*+)?+\]{SPACE}*+)?+|({CONSTANT}){SPACE}*+)"
)
_ONE_ITEM = re.sub(r"\((?!\?)", "(?:", _ITEM.pattern)
_JOINED = re.compile(rf"\{{{SPACE}*+({_ONE_ITEM}(?:,{SPACE}*+{_ONE_ITEM})*+)\}}{SPACE}*+")
_END = re.compile(r"endmodule(?![A-Za-z0-9_$])")
_BLANKS = " \t\r\n\f\v"
_RUN = 4096


def scan_modules(source: SourceText, types: Vocabulary, ports: Vocabulary, *, grammar_only: bool = False) -> list[Module]:
    """The modules of one file.

    Parameters
    ----------
    source : SourceText
    types, ports : Vocabulary
        Numbers of cell types and ports; new names are added.
    grammar_only : bool
        Leave the fast path out; for tests, which hold both ways against each other.

    Raises
    ------
    InputError
        Where the text is not structural Verilog, with the position.
    """
    text = VerilogText(source)
    scanner = _Scanner(text, types, ports)
    at = 0
    while True:
        at = skip_space(text.text, at)
        if at == len(text.text):
            break
        after = at if grammar_only else scanner.take_fast(at)
        at = scanner.take(at) if after == at else after
    if scanner.module is not None:
        raise text.error(at, f"endmodule of module {shown(scanner.module.name)}")
    return scanner.modules


def _read_value(text: str) -> Expression | None:
    """What stands between the parentheses of a connection, without offsets."""
    item = _ITEM.fullmatch(text)
    if item is not None:
        return _read_item(item)
    joined = _JOINED.fullmatch(text)
    if joined is not None:
        return ("join", tuple(map(_read_item, _ITEM.finditer(joined[1]))), 0)
    if not text.strip(_BLANKS):
        return None
    if text.count("{") + text.count("(") > MAX_NESTING // 2:
        raise _Doubt
    try:
        return EXPRESSION.parse_string(text, parse_all=True)[0]
    except pp.ParseBaseException:
        raise _Doubt from None


def _is_doubtful(name: str) -> bool:
    return name in KEYWORDS or len(name) > MAX_NAME_LENGTH


def _read_item(match: re.Match[str]) -> Expression:
    name, left, right, constant = match.groups()
    if constant is not None:
        bits = constant_bits(constant)
        if not bits:
            raise _Doubt
        return ("constant", bits, 0)
    if _is_doubtful(name):
        raise _Doubt
    name = plain_name(name)
    if left is None:
        return ("net", name, 0)
    return ("bit", name, int(left), 0) if right is None else ("part", name, int(left), int(right), 0)


class _Scanner:
    """Takes statement by statement into the module that is open."""

    def __init__(self, text: VerilogText, types: Vocabulary, ports: Vocabulary) -> None:
        self.text = text
        self.types = types
        self.ports = ports
        self.type_spellings = _Spellings(types, KEYWORDS - GATES)
        self.port_spellings = _Spellings(ports, KEYWORDS)
        self.modules: list[Module] = []
        self.module: Module | None = None
        self.values = _Values([])

    def take_fast(self, at: int) -> int:
        """Take as much as the fast path knows; returns where the first statement begins that it does not know."""
        text = self.text.text
        if self.module is None:
            header = _HEADER.match(text, at)
            if header is None:
                return at
            ports = [(name[0], name.start()) for name in _EACH_NAME.finditer(text, header.start(2), header.end(2))]
            if _is_doubtful(header[1]) or any(_is_doubtful(name) for name, _ in ports):
                return at
            self._open(plain_name(header[1]), [(None, None, None, plain_name(n), place) for n, place in ports], at, 0)
            return header.end()
        after = self._take_instances(self.module, at)
        if after > at:
            return after
        after = self._take_wires(self.module, at)
        if after > at:
            return after
        match = _DECLARATION.match(text, at)
        if match is not None:
            word, left, right, _ = match.groups()
            bounds = None if left is None else (int(left), int(right))
            names = [(name[0], name.start()) for name in _EACH_NAME.finditer(text, match.start(4), match.end(4) + 1)]
            if not any(_is_doubtful(name) for name, _ in names):
                direction = None if word == "wire" else word
                self._declare(self.module, direction, "wire", bounds, [(plain_name(n), place) for n, place in names])
                return match.end()
            return at
        match = _ASSIGNMENT.match(text, at)
        if match is not None:
            try:
                left_side, right_side = _read_value(match[1]), _read_value(match[2])
            except _Doubt:
                return at
            if left_side is not None and right_side is not None and left_side[0] in ("net", "bit", "part"):
                self.module.assignments.append((left_side, right_side, at))
                return match.end()
        return at

    def _take_instances(self, module: Module, at: int) -> int:
        """The longest run of instances."""
        text = self.text.text
        types: list[str] = []
        names: list[str] = []
        statements: list[int] = []
        counts: list[int] = []
        pins: list[tuple[str | int, str]] = []
        while len(names) < _RUN:
            match = _INSTANCE.match(text, at)
            if match is None:
                break
            kind, name, named, ordered = match.groups()
            if kind in KEYWORDS and (named is not None or kind not in GATES):
                break
            if named is not None:
                found: list[Any] = _EACH_PIN.findall(named)
            else:
                ordered = ordered.strip(_BLANKS)
                found = [(place, value.strip(_BLANKS)) for place, value in enumerate(ordered.split(","))] if ordered else []
            types.append(kind)
            names.append(name)
            statements.append(at)
            counts.append(len(found))
            pins += found
            at = match.end()
        if not names:
            return at
        try:
            if not KEYWORDS.isdisjoint(names) or max(map(len, names)) > MAX_NAME_LENGTH:
                raise _Doubt
            type_numbers = array("i", map(self.type_spellings.__getitem__, types))
            port_numbers = array("i", map(self.port_spellings.__getitem__, [pin[0] for pin in pins]))
            value_numbers = array("i", map(self.values.__getitem__, [pin[1] for pin in pins]))
        except _Doubt:
            for start in statements:
                self.take(start)
            return at
        module.types += type_numbers
        module.names += [name if name[0] != "\\" else name[1:] for name in names]
        module.statements.extend(statements)
        module.num_connections.extend(counts)
        module.connected_ports += port_numbers
        module.connected_values += value_numbers
        return at

    def _take_wires(self, module: Module, at: int) -> int:
        """The longest run of scalar wires, each with a statement of its own."""
        match = _WIRES.match(self.text.text, at)
        if match is None:
            return at
        names = _EACH_WIRE.findall(self.text.text, at, match.end())
        if not KEYWORDS.isdisjoint(names) or max(map(len, names)) > MAX_NAME_LENGTH:
            return at
        wires = dict.fromkeys([name if name[0] != "\\" else name[1:] for name in names])
        if len(wires) < len(names) or not module.nets.keys().isdisjoint(wires):
            return at  # declared before: one by one
        module.nets.update(wires)
        return match.end()

    def take(self, at: int) -> int:
        """Take one statement by the grammar; returns where it ends."""
        text = self.text.text
        module = self.module
        if (match := _END.match(text, at)) is not None:
            if module is None:
                raise self.text.error(at, "module")
            self._close(module)
            return match.end()
        parsed = parse_statement(self.text, at)
        kind = parsed[0]
        if kind == "module":
            if module is not None:
                raise self.text.error(at, f"endmodule of module {shown(module.name)}")
            self._open(parsed[1], parsed[2], at, at)
        elif module is None:
            if kind != "skip":
                raise self.text.error(at, "module")
        elif kind == "declare":
            _, direction, net_type, bounds, entries = parsed
            self._declare(module, direction, net_type, bounds, [(name, at + place) for name, place, _ in entries])
            for name, place, value in entries:
                if value is not None:
                    module.assignments.append((("net", name, place), value, at))
        elif kind == "assign":
            module.assignments.extend((left, right, at) for left, right in parsed[1])
        elif kind == "instances":
            type_number = self.types.number(parsed[1])
            for name, connections, _ in parsed[2]:
                module.types.append(type_number)
                module.names.append(name)
                module.statements.append(at)
                module.num_connections.append(len(connections))
                for port, value, _ in connections:
                    module.connected_ports.append(self.ports.number(port))
                    module.connected_values.append(len(module.values))
                    module.values.append(value)
        return TO_SEMICOLON.match(text, at).end()  # type: ignore[union-attr]

    def _open(self, name: str, ports: Iterable[tuple[Any, ...]], at: int, base: int) -> None:
        module = self.module = Module(name, self.text, at, implicit=self.text.nets_are_implicit(at))
        self.values = _Values(module.values)
        direction = net_type = bounds = None
        ports = list(ports)
        ansi = any(port[0] is not None for port in ports)
        for own_direction, own_type, own_bounds, port, place in ports:
            if port in module.ports:
                raise self.text.error(base + place, "different port names", f"{shown(port)} again")
            if not ansi and (own_type or own_bounds):
                raise self.text.error(base + place, "a port name or a direction")
            if own_direction is not None or own_type is not None or own_bounds is not None:
                direction, net_type, bounds = own_direction or direction, own_type, own_bounds
            module.ports[port] = None
            if ansi:
                self._declare(module, direction, net_type, bounds, [(port, base + place)])

    def _declare(
        self,
        module: Module,
        direction: str | None,
        net_type: str | None,
        bounds: Range | None,
        entries: list[tuple[str, int]],
    ) -> None:
        if bounds is not None and abs(bounds[0] - bounds[1]) >= MAX_VECTOR_WIDTH:
            found = f"[{bounds[0]}:{bounds[1]}]"
            raise self.text.error(entries[0][1], f"a vector of at most {MAX_VECTOR_WIDTH:,} bits", found, LimitError)
        for name, place in entries:
            known = name in module.nets
            if direction is not None:
                if name not in module.ports:
                    raise self.text.error(place, f"a port of module {shown(module.name)}")
                if module.ports[name] is not None:
                    raise self.text.error(place, "one direction for each port", f"a second one for {shown(name)}")
                module.ports[name] = direction
            elif known and name not in module.ports:
                raise self.text.error(place, "a net that is not declared yet", f"{shown(name)} again")
            if known and module.nets[name] != bounds:
                raise self.text.error(place, "the same range as in the other declaration", shown(name))
            module.nets[name] = bounds
            if net_type is not None and net_type.startswith("supply"):
                module.supplies[name] = net_type

    def _close(self, module: Module) -> None:
        for port, direction in module.ports.items():
            if direction is None:
                raise self.text.error(
                    module.offset, f"a direction for port {shown(port)} of module {shown(module.name)}", "none"
                )
        if len(set(module.names)) < len(module.names):
            seen: set[str] = set()
            for instance, name in enumerate(module.names):
                if name and name in seen:
                    raise self.text.error(
                        module.connections(instance)[0], "different instance names", f"{shown(name)} again"
                    )
                seen.add(name)
        self.modules.append(module)
        self.module = None
        self.values = _Values([])
