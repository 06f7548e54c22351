"""Modules of a Verilog netlist as flat tables: what the scanner fills and the flattening reads."""

from __future__ import annotations

from array import array
from dataclasses import dataclass, field
from itertools import accumulate
from typing import Any

from netpart.formats.verilog_text import VerilogText, parse_statement

__all__ = ["Expression", "Module", "Range", "Vocabulary"]

Expression = tuple[Any, ...]
Range = tuple[int, int]


class Vocabulary:
    """Numbers for names, in the order of their first appearance; one for all types of a design, one for all ports."""

    def __init__(self) -> None:
        self.names: list[str | int] = []
        self.numbers: dict[str | int, int] = {}

    def number(self, name: str | int) -> int:
        """The number of a plain name, or of a place in an ordered list."""
        number = self.numbers.setdefault(name, len(self.names))
        if number == len(self.names):
            self.names.append(name)
        return number


@dataclass(slots=True)
class Module:
    """What one module declares.

    Attributes
    ----------
    ports : dict of name to direction, in the order of the header; None until a declaration says which.
    nets : dict of name to range, or None for a scalar.
    supplies : dict of name to supply0 or supply1.
    implicit : bool
        Nets may be used without a declaration (``default_nettype``, clause 19.2).
    types, names, statements, num_connections
        One entry for each instance: the number of its type, its name (empty where it has none), the offset of its
        statement, and how many connections it has.
    connected_ports, connected_values
        One entry for each connection, instance by instance: the number of the port (of its name, or of its place in
        an ordered list), and an index into `values`.
    values : list of Expression, or None for a pin left open
    assignments : list of (left, right, statement)
    """

    name: str
    text: VerilogText
    offset: int
    ports: dict[str, str | None] = field(default_factory=dict)
    nets: dict[str, Range | None] = field(default_factory=dict)
    supplies: dict[str, str] = field(default_factory=dict)
    implicit: bool = True
    types: array[int] = field(default_factory=lambda: array("i"))
    names: list[str] = field(default_factory=list)
    statements: array[int] = field(default_factory=lambda: array("q"))
    num_connections: array[int] = field(default_factory=lambda: array("i"))
    connected_ports: array[int] = field(default_factory=lambda: array("i"))
    connected_values: array[int] = field(default_factory=lambda: array("i"))
    values: list[Expression | None] = field(default_factory=list)
    assignments: list[tuple[Expression, Expression, int]] = field(default_factory=list)

    @property
    def is_black_box(self) -> bool:
        """It has ports and nothing inside."""
        return bool(self.ports) and not self.names and not self.assignments

    @property
    def num_instances(self) -> int:
        """Instances of modules, library cells and gates."""
        return len(self.names)

    def connections(self, instance: int) -> tuple[int, list[tuple[str | int, Expression | None, int]]]:
        """The offset of an instance, and (port, value, offset of the port) of its connections, by the grammar."""
        start = self.statements[instance]
        _, _, entries = parse_statement(self.text, start)
        first = self.statements.index(start)
        _, connections, offset = entries[instance - first]
        at = start + offset
        return at, [(port, value, at if place is None else start + place) for port, value, place in connections]

    def assigned(self, start: int) -> list[tuple[Expression, Expression]]:
        """Both sides of all assignments of the statement that begins there, by the grammar."""
        kind, *parsed = parse_statement(self.text, start)
        if kind == "assign":
            return list(parsed[0])
        return [(("net", name, place), value) for name, place, value in parsed[-1] if value is not None]

    def instance_with(self, value: int) -> int:
        """The first instance that has the value on one of its pins."""
        connection = self.connected_values.index(value)
        return next(i for i, end in enumerate(accumulate(self.num_connections)) if connection < end)
