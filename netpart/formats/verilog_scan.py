"""Structural Verilog text to modules: a fast path for the statements that fill a netlist, the grammar for all others."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any

import pyparsing as pp

from netpart.formats.source import SourceText
from netpart.formats.verilog_grammar import IDENTIFIER, KEYWORDS, MAX_NESTING, STATEMENT, plain_name
from netpart.netlist import InputError, LimitError

__all__ = ["MAX_NAME_LENGTH", "Instance", "Module", "parse_instance", "scan_modules"]

MAX_NAME_LENGTH = 65_536
"""Characters in one identifier."""

Range = tuple[int, int]


@dataclass(slots=True)
class Module:
    """What one module declares.

    Attributes
    ----------
    ports : dict of name to direction, in the order of the header; None until a declaration says which.
    nets : dict of name to range, or None for a scalar.
    supplies : set of names declared supply0 or supply1.
    instances : list of Instance, with their names in `instance_names`.
    assignments : list of (left, right, base)
        Expressions as the grammar gives them; `base` is the offset of their statement.
    """

    name: str
    file: TextFile
    offset: int
    ports: dict[str, str | None] = field(default_factory=dict)
    nets: dict[str, Range | None] = field(default_factory=dict)
    supplies: set[str] = field(default_factory=set)
    instances: list[Instance] = field(default_factory=list)
    instance_names: set[str] = field(default_factory=set)
    assignments: list[tuple[Any, Any, int]] = field(default_factory=list)


@dataclass(slots=True)
class Instance:
    """An instance: `pins` holds (port, net, bit) of simple named connections, `connections` what the grammar gives."""

    type: str
    name: str
    offset: int
    base: int
    pins: list[tuple[str, str, str]] | None = None
    connections: Any = None


@dataclass(slots=True)
class TextFile:
    """A decoded file, and errors that point into it."""

    source: SourceText
    text: str

    def error(self, offset: int, expected: str, found: str | None = None, kind: type[InputError] = InputError) -> InputError:
        """An error at a character of this file."""
        if found is None:
            word = self.text[offset : offset + 40].split(maxsplit=1)
            found = "the end of the file" if offset >= len(self.text) else repr(word[0]) if word else "white space"
        line = self.text.count("\n", 0, offset) + 1
        column = offset - self.text.rfind("\n", 0, offset)
        return kind(self.source.path, line=line, column=column, expected=expected, found=found)


_NAME = rf"(?:(?!(?:{'|'.join(sorted(KEYWORDS))})\b)[A-Za-z_][A-Za-z0-9_$]*+|\\\S++(?=\s))"
_PIN = rf"\.\s*+({IDENTIFIER})\s*+\(\s*+(?:({_NAME})\s*+(?:\[\s*+(\d++)\s*+\]\s*+)?)?\)"
_UNGROUPED_PIN = _PIN.replace(f"({IDENTIFIER})", IDENTIFIER).replace(f"({_NAME})", _NAME).replace(r"(\d++)", r"\d++")
_FAST_PIN = re.compile(_PIN)
_FAST_INSTANCE = re.compile(rf"({_NAME})\s++({_NAME})\s*+\(\s*+({_UNGROUPED_PIN}\s*+(?:,\s*+{_UNGROUPED_PIN}\s*+)*+)\)\s*+;")
_FAST_DECLARATION = re.compile(
    rf"(input|output|inout|wire)\s++(?:\[\s*+(\d++)\s*+:\s*+(\d++)\s*+\]\s*+)?({_NAME}(?:\s*+,\s*+{_NAME})*+)\s*+;"
)
_FAST_NAME = re.compile(_NAME)
_SPACE = re.compile(r"\s*+")
_END = re.compile(r"endmodule(?![A-Za-z0-9_$])")
_TO_SEMICOLON = re.compile(r"(?:[^;\\]|\\\S*+)*+;")
_HIDDEN = re.compile(r'//[^\n]*+|/\*(?s:.*?)\*/|\(\*(?!\s*+\))(?s:.*?)\*\)|`[^\n]*+|"(?:[^"\\\n]|\\.)*+"|/\*|\(\*|"')
_NOT_NEWLINE = re.compile(r"[^\n]")


def scan_modules(source: SourceText, *, grammar_only: bool = False) -> list[Module]:
    """The modules of one file.

    Parameters
    ----------
    source : SourceText
    grammar_only : bool
        Leave the fast path out; for tests, which hold both ways against each other.

    Raises
    ------
    InputError
        Where the text is not structural Verilog, with the position.
    """
    file = TextFile(source, source.data.decode("utf-8", "surrogateescape"))
    file.text = text = _blank_hidden(file)
    modules: list[Module] = []
    module: Module | None = None
    at = 0
    while True:
        at = _SPACE.match(text, at).end()  # type: ignore[union-attr]
        if at == len(text):
            break
        if module is not None and not grammar_only:
            match = _FAST_INSTANCE.match(text, at)
            if match is not None:
                kind, name, pins = match.groups()
                _instantiate(
                    module, Instance(plain_name(kind), plain_name(name), match.start(2), at, _FAST_PIN.findall(pins))
                )
                at = match.end()
                continue
            match = _FAST_DECLARATION.match(text, at)
            if match is not None:
                word, left, right, _ = match.groups()
                bounds = None if left is None else (int(left), int(right))
                names = _FAST_NAME.finditer(text, match.start(4), match.end(4) + 1)
                entries = ((plain_name(name[0]), name.start()) for name in names)
                _declare(module, None if word == "wire" else word, "wire", bounds, entries)
                at = match.end()
                continue
        match = _END.match(text, at)
        if match is not None:
            if module is None:
                raise file.error(at, "module")
            _close(module)
            module = None
            at = match.end()
            continue
        match = _TO_SEMICOLON.match(text, at)
        end = len(text) if match is None else match.end() - 1
        parsed = _parse(file, at, end)
        if match is None:
            raise file.error(len(text), "endmodule" if module is not None and parsed[0] == "skip" else "';'")
        if parsed[0] == "module":
            if module is not None:
                raise file.error(at, f"endmodule of module {module.name}")
            module = _open(file, parsed, at)
            modules.append(module)
        elif module is None:
            if parsed[0] != "skip":
                raise file.error(at, "module")
        else:
            _take(module, parsed, at)
        at = end + 1
    if module is not None:
        raise file.error(len(text), f"endmodule of module {module.name}")
    return modules


def parse_instance(file: TextFile, instance: Instance) -> Instance:
    """The same instance as the grammar reads it, with the place of everything."""
    end = _TO_SEMICOLON.match(file.text, instance.base).end() - 1  # type: ignore[union-attr]
    name, connections, offset = _parse(file, instance.base, end)[2][0]
    return Instance(instance.type, name, instance.base + offset, instance.base, None, connections)


def _parse(file: TextFile, start: int, end: int) -> Any:
    """One statement by the grammar."""
    part = file.text[start:end]
    depth = 0
    for match in re.finditer(r"\\\S*+|[({]|[)}]", part):
        depth += {"(": 1, "{": 1, ")": -1, "}": -1}.get(match[0], 0)
        if depth > MAX_NESTING:
            raise file.error(start + match.start(), f"at most {MAX_NESTING} nested brackets", "one more", LimitError)
    try:
        return STATEMENT.parse_string(part)[0]
    except pp.ParseBaseException as fault:
        expected = fault.msg.removeprefix("Expected ").replace("end of text", "';'")
        offset = start + fault.loc
        if offset < end:
            offset = _SPACE.match(file.text, offset, end).end()  # type: ignore[union-attr]
        raise file.error(offset, expected) from None


def _open(file: TextFile, parsed: Any, at: int) -> Module:
    _, name, ports = parsed
    module = Module(name, file, at)
    direction = net_type = bounds = None
    ansi = any(port[0] is not None for port in ports)
    for own_direction, own_type, own_bounds, port, offset in ports:
        if port in module.ports:
            raise file.error(at + offset, "different port names", f"{port!r} again")
        if not ansi and (own_type or own_bounds):
            raise file.error(at + offset, "a port name or a direction")
        if own_direction is not None or own_type is not None or own_bounds is not None:
            direction, net_type, bounds = own_direction or direction, own_type, own_bounds
        module.ports[port] = None
        if ansi:
            _declare(module, direction, net_type or "wire", bounds, [(port, at + offset)])
    return module


def _take(module: Module, parsed: Any, at: int) -> None:
    kind = parsed[0]
    if kind == "declare":
        _, direction, net_type, bounds, entries = parsed
        _declare(module, direction, net_type or "wire", bounds, ((name, at + offset) for name, offset, _ in entries))
        for name, offset, value in entries:
            if value is not None:
                module.assignments.append((("net", name, offset), value, at))
    elif kind == "assign":
        module.assignments.extend((left, right, at) for left, right in parsed[1])
    elif kind == "instances":
        for name, connections, offset in parsed[2]:
            _instantiate(module, Instance(parsed[1], name, at + offset, at, None, connections))


def _instantiate(module: Module, instance: Instance) -> None:
    if instance.name:
        if instance.name in module.instance_names:
            raise module.file.error(instance.offset, "different instance names", f"{instance.name!r} again")
        module.instance_names.add(instance.name)
    module.instances.append(instance)


def _declare(module: Module, direction: str | None, net_type: str, bounds: Range | None, entries: Any) -> None:
    for name, offset in entries:
        if len(name) > MAX_NAME_LENGTH:
            raise module.file.error(offset, f"a name of at most {MAX_NAME_LENGTH} characters", f"{len(name)}", LimitError)
        if direction is not None:
            if name not in module.ports:
                raise module.file.error(offset, f"a port of module {module.name}")
            if module.ports[name] is not None:
                raise module.file.error(offset, "one direction for each port", f"a second one for {name!r}")
            module.ports[name] = direction
        elif name in module.nets and (name not in module.ports or module.nets[name] != bounds):
            raise module.file.error(offset, "a net that is not declared yet", f"{name!r} again")
        if direction is not None and name in module.nets and module.nets[name] != bounds:
            raise module.file.error(offset, "the same range as in the other declaration", f"{name!r}")
        module.nets[name] = bounds
        if net_type.startswith("supply"):
            module.supplies.add(name)


def _close(module: Module) -> None:
    for port, direction in module.ports.items():
        if direction is None:
            raise module.file.error(module.offset, f"a direction for port {port!r} of module {module.name}", "none")


def _blank_hidden(file: TextFile) -> str:
    """The text with comments, attributes, directives and strings overwritten by spaces, so that offsets stay.

    Clauses 2.3 (comments), 3.8 (attributes), 3.6 (strings), 19 (directives). What looks like one within an escaped
    identifier is part of the name.
    """
    text = file.text
    pieces: list[str] = []
    at = 0
    for match in _search_hidden(text):
        word = match[0]
        if word in ("/*", "(*", '"'):
            raise file.error(match.start(), {"/*": "*/", "(*": "*)"}.get(word, 'a closing "'), "the end of the file")
        pieces += (text[at : match.start()], _NOT_NEWLINE.sub(" ", word))
        at = match.end()
    return "".join([*pieces, text[at:]]) if pieces else text


def _search_hidden(text: str) -> Iterator[re.Match[str]]:
    at = 0
    while (match := _HIDDEN.search(text, at)) is not None:
        word_start = max(text.rfind(space, at, match.start()) for space in " \t\n\r\f\v") + 1
        escape = text.find("\\", max(word_start, at), match.start())
        if escape >= 0:
            at = re.compile(r"\S*+").match(text, match.start()).end()  # type: ignore[union-attr]
            continue
        yield match
        at = match.end()
