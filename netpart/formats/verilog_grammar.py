"""Grammar of structural Verilog: one statement of a netlist to plain tuples.

The subset is that of IEEE Std 1364-2005 which describes structure: modules and ports (clause 12.1, 12.3), nets (4.2, 4.3),
module and gate instances (12.1.2, 7.1), connections by name and by order (12.3.5, 12.3.6), continuous assignments of
one net to another (6.1), identifiers (3.7), numbers (3.5.1), selects and concatenations (5.1.14, 5.2.1). Parameters
(12.2) are read over. What behaves instead of connecting is refused.

Expressions become tuples: ``("net", name, offset)``, ``("bit", name, index, offset)``, ``("part", name, msb, lsb, offset)``,
``("constant", bits, offset)`` with one of 0, 1, x per bit and the most significant first, ``("join", (parts…), offset)``.
Offsets count characters from the beginning of the statement.
"""

from __future__ import annotations

from typing import Any

import pyparsing as pp

__all__ = ["GATES", "IDENTIFIER", "KEYWORDS", "MAX_NESTING", "STATEMENT", "plain_name"]

MAX_NESTING = 64
"""Braces and parentheses may be nested so deep in one statement."""

IDENTIFIER = r"(?:[A-Za-z_][A-Za-z0-9_$]*|\\[^\s]+(?=\s))"
"""Clause 3.7: a simple identifier, or a backslash and everything up to white space."""

GATES = frozenset(
    [
        "and",
        "nand",
        "or",
        "nor",
        "xor",
        "xnor",
        "buf",
        "not",
        "bufif0",
        "bufif1",
        "notif0",
        "notif1",
        "pullup",
        "pulldown",
    ]
)
"""Gate primitives (clause 7.1); their outputs come first."""

_NET_TYPES = frozenset(["wire", "tri", "tri0", "tri1", "triand", "trior", "wand", "wor", "supply0", "supply1"])

KEYWORDS = (
    GATES
    | _NET_TYPES
    | frozenset(
        [
            "always",
            "assign",
            "attribute",
            "begin",
            "case",
            "casex",
            "casez",
            "deassign",
            "default",
            "defparam",
            "disable",
            "edge",
            "else",
            "end",
            "endcase",
            "endfunction",
            "endgenerate",
            "endmodule",
            "endprimitive",
            "endspecify",
            "endtable",
            "endtask",
            "event",
            "for",
            "force",
            "forever",
            "fork",
            "function",
            "generate",
            "genvar",
            "if",
            "initial",
            "inout",
            "input",
            "integer",
            "join",
            "localparam",
            "macromodule",
            "module",
            "negedge",
            "output",
            "parameter",
            "posedge",
            "primitive",
            "real",
            "realtime",
            "reg",
            "release",
            "repeat",
            "scalared",
            "signed",
            "specify",
            "specparam",
            "table",
            "task",
            "time",
            "vectored",
            "wait",
            "while",
        ]
    )
)
"""Reserved words (annex B) that may begin a statement or stand where a name is expected."""


def plain_name(identifier: str) -> str:
    r"""The name that an identifier stands for: ``\cpu3`` and ``cpu3`` are the same (clause 3.7.1)."""
    return identifier[1:] if identifier[0] == "\\" else identifier


def _word(text: str) -> pp.ParserElement:
    return pp.Suppress(pp.Regex(rf"{text}(?![A-Za-z0-9_$])").set_name(text))


def _sign(text: str) -> pp.ParserElement:
    return pp.Suppress(pp.Literal(text).set_name(f"'{text}'"))


def _listed(element: pp.ParserElement, name: str) -> pp.ParserElement:
    return pp.Group(element + (_sign(",") - element)[...]).set_name(name)


def _number_bits(text: str) -> str:
    """Bits of a constant (clause 3.5.1); one of 0, 1, x for each, z reads as x: it drives nothing."""
    size, _, value = text.partition("'")
    if not _:
        return f"{int(text.replace('_', '')):032b}"[-32:]
    value = value.lstrip("sS").replace(" ", "")
    base, digits = value[0].lower(), value[1:].strip().replace("_", "").lower()
    if base == "d":
        bits = "x" if digits[0] in "xz?" else f"{int(digits):b}"
    else:
        per_digit = {"b": 1, "o": 3, "h": 4}[base]
        bits = "".join("x" * per_digit if c in "xz?" else f"{int(c, 16):0{per_digit}b}" for c in digits)
    width = int(size.replace("_", "")) if size.strip() else 32
    fill = "x" if bits[0] == "x" else "0"
    return bits.rjust(width, fill)[-width:] if width <= _MAX_CONSTANT else ""


_MAX_CONSTANT = 1 << 20


def _take_number(text: str, loc: int, tokens: pp.ParseResults) -> Any:
    bits = _number_bits(tokens[0])
    if not bits:
        raise pp.ParseFatalException(text, loc, f"Expected a constant of 1 to {_MAX_CONSTANT} bits")
    return [("constant", bits, loc)]


# An escaped identifier may spell a reserved word, a simple one may not.
_RESERVED = "|".join(sorted(KEYWORDS))
_identifier: pp.ParserElement = pp.Regex(rf"(?:(?!(?:{_RESERVED})(?![A-Za-z0-9_$]))[A-Za-z_][A-Za-z0-9_$]*|\\[^\s]+)")
_identifier = _identifier.set_parse_action(lambda tokens: plain_name(tokens[0])).set_name("a name")
_integer = pp.Regex(r"-?\d[\d_]*").set_parse_action(lambda tokens: int(tokens[0].replace("_", ""))).set_name("a number")
_constant = (
    pp.Regex(
        r"(?:\d[\d_]*\s*)?'\s*[sS]?(?:[bB]\s*[01xXzZ?_]+|[oO]\s*[0-7xXzZ?_]+|[hH]\s*[0-9a-fA-FxXzZ?_]+|"
        r"[dD]\s*(?:\d[\d_]*|[xXzZ?]_*))|\d[\d_]*"
    )
    .set_parse_action(_take_number)
    .set_name("a constant")
)
_expression = pp.Forward()
_expression.set_name("a net, a select, a concatenation or a constant")
_select = pp.Located(_identifier) + pp.Optional(_sign("[") - _integer + pp.Optional(_sign(":") - _integer) + _sign("]"))


def _take_select(tokens: pp.ParseResults) -> Any:
    start, (name,), _ = tokens[0], tokens[1], tokens[2]
    numbers = tokens[3:]
    if not numbers:
        return [("net", name, start)]
    return [("bit", name, numbers[0], start) if len(numbers) == 1 else ("part", name, *numbers, start)]


_select.set_parse_action(_take_select)
_joined = pp.Located(_sign("{") - _listed(_expression, "expressions") + _sign("}"))
_joined.set_parse_action(lambda tokens: [("join", tuple(tokens[1][0]), tokens[0])])
_repeated = pp.Located(_sign("{") + _integer + _sign("{") - _listed(_expression, "expressions") + _sign("}") + _sign("}"))


def _take_repeated(text: str, loc: int, tokens: pp.ParseResults) -> Any:
    count, parts = tokens[1]
    if not 1 <= count <= _MAX_CONSTANT:
        raise pp.ParseFatalException(text, loc, f"Expected 1 to {_MAX_CONSTANT} repetitions")
    return [("repeat", count, tuple(parts), tokens[0])]


_repeated.set_parse_action(_take_repeated)
_expression <<= _repeated | _joined | _constant | _select

_range = pp.Group(_sign("[") - _integer + _sign(":") + _integer + _sign("]")).set_name("a range")
_maybe_range = pp.Optional(_range, default=None)
_signed = pp.Optional(_word("signed"))
_direction = pp.Regex(r"(?:input|output|inout)(?![A-Za-z0-9_$])").set_name("input, output or inout")
_net_type = pp.Regex(rf"(?:{'|'.join(sorted(_NET_TYPES))})(?![A-Za-z0-9_$])").set_name("a net type")
_parameters = pp.Suppress(pp.Optional(_sign("#") - (pp.nested_expr() | pp.Regex(r"[\d.]+|" + IDENTIFIER))))

_ansi_port = pp.Group(
    pp.Optional(_direction, default=None)
    + pp.Optional(_net_type, default=None)
    + _signed
    + _maybe_range
    + pp.Located(_identifier)
)
_port_list = pp.Group(pp.Optional(_ansi_port + (_sign(",") - _ansi_port)[...])).set_name("ports")
_header = (
    pp.Suppress(pp.Regex(r"(?:macro)?module(?![A-Za-z0-9_$])")).set_name("module")
    - _identifier
    + _parameters
    + pp.Optional(_sign("(") - _port_list + _sign(")"), default=())
)
_header.set_parse_action(lambda tokens: [("module", tokens[0], tuple(map(_port, tokens[1])))])


def _port(tokens: Any) -> tuple[Any, ...]:
    direction, net_type, bounds, (start, (name,), _) = tokens[0], tokens[1], tokens[2], tokens[3:6]
    return direction, net_type, None if bounds is None else tuple(bounds), name, start


_declared = pp.Group(pp.Located(_identifier) + pp.Optional(_sign("=") - _expression, default=None))
_declaration = (
    pp.Group((_direction + pp.Optional(_net_type, default=None)) | (pp.Empty().set_parse_action(lambda: [None]) + _net_type))
    + _signed
    + pp.Optional(_word("vectored") | _word("scalared"))
    + _maybe_range
    - _listed(_declared, "names")
)


def _take_declaration(tokens: pp.ParseResults) -> Any:
    (direction, net_type), bounds, names = tokens
    entries = tuple((entry[1][0], entry[0], entry[3]) for entry in names)
    return [("declare", direction, net_type, None if bounds is None else tuple(bounds), entries)]


_declaration.set_parse_action(_take_declaration)

_assignment = pp.Group((_joined | _select) + _sign("=") - _expression)
_assign = _word("assign") - _listed(_assignment, "assignments")
_assign.set_parse_action(lambda tokens: [("assign", tuple((left, right) for left, right in tokens[0]))])

_named = pp.Group(_sign(".") - _identifier + _sign("(") + pp.Optional(_expression, default=None) + _sign(")"))
_connections = (
    (_named + (_sign(",") - _named)[...]).set_parse_action(lambda tokens: [("named", tuple(map(tuple, tokens)))])
    | (pp.Optional(_expression, default=None) + (_sign(",") + pp.Optional(_expression, default=None))[...]).set_parse_action(
        lambda tokens: [("ordered", tuple(tokens) if tuple(tokens) != (None,) else ())]
    )
).set_name("connections")
_instance = pp.Group(pp.Located(_identifier) + _maybe_range + _sign("(") - _connections + _sign(")"))
_instances = pp.Located(_identifier) + _parameters + _listed(_instance, "instances")
_gate_instance = pp.Group(
    pp.Located(pp.Optional(_identifier, default="")) + _maybe_range + _sign("(") - _connections + _sign(")")
)
_gates = (
    pp.Located(pp.Regex(rf"(?:{'|'.join(sorted(GATES))})(?![A-Za-z0-9_$])").set_name("a gate type"))
    + _parameters
    + _listed(_gate_instance, "instances")
)


def _take_instances(text: str, loc: int, tokens: pp.ParseResults) -> Any:
    entries = []
    for start, (name,), _, bounds, connections in tokens[3]:
        if bounds is not None:
            raise pp.ParseFatalException(text, start, "Expected one instance, not an instance array")
        entries.append((name, connections, start))
    return [("instances", tokens[1][0], tuple(entries), tokens[0])]


_instances.set_parse_action(_take_instances)
_gates.set_parse_action(_take_instances)

_skipped = pp.Regex(r"(?:parameter|localparam|defparam|specparam)(?![A-Za-z0-9_$])(?s:.*)")
_skipped.set_parse_action(lambda: [("skip",)])
_empty = pp.Empty().set_parse_action(lambda: [("skip",)]) + pp.StringEnd()
_behaviour = pp.Regex(
    r"(?:always|initial|function|task|generate|genvar|specify|primitive|table|reg|integer|real|realtime|time|event|for|if|case|"
    r"begin|fork|deassign|force|release)(?![A-Za-z0-9_$])"
)


def _refuse_behaviour(text: str, loc: int, tokens: pp.ParseResults) -> None:
    raise pp.ParseFatalException(text, loc, "Expected structure (a declaration, an instance or an assignment of nets)")


_behaviour.set_parse_action(_refuse_behaviour)
STATEMENT = (
    (_header | _declaration | _assign | _skipped | _behaviour | _gates | _instances | _empty) + pp.StringEnd()
).set_name("a statement")
"""The grammar of one statement, without its final ``;``."""
for _element in STATEMENT.visit_all():
    _element.set_whitespace_chars(" \t\r\n\f\v")
STATEMENT.parse_with_tabs()
