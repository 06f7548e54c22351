"""Grammar of structural Verilog: one statement of a netlist to plain tuples.

The subset is that of IEEE Std 1364-2005 which describes structure: modules and ports (clauses 12.1, 12.3), nets (4.2, 4.3),
module and gate instances (12.1.2, 7.1), connections by order and by name (12.3.5, 12.3.6), continuous assignments of
one net to another (6.1), identifiers (3.7), numbers (3.5.1), selects (5.2.1) and concatenations (5.1.14). Parameters
(12.2) are read over, since no structure may depend on them here. What behaves instead of connecting is refused.

Expressions become tuples that end with their offset: ``("net", name, offset)``, ``("bit", name, index, offset)``,
``("part", name, left, right, offset)``, ``("constant", bits, offset)`` with 0, 1 or x for each bit, ``("join", parts,
offset)`` and ``("repeat", count, parts, offset)``; the most significant bit comes first. Offsets count characters from
the beginning of the statement. Text holds one character for each byte of the file (Latin-1), so offsets are those of
bytes and names keep bytes that are no UTF-8.
"""

from __future__ import annotations

from typing import Any

import pyparsing as pp

__all__ = [
    "CONSTANT",
    "EXPRESSION",
    "GATES",
    "KEYWORDS",
    "MAX_NAME_LENGTH",
    "MAX_NESTING",
    "MAX_VECTOR_WIDTH",
    "NAME",
    "SPACE",
    "STATEMENT",
    "BeyondLimit",
    "constant_bits",
    "plain_name",
]

MAX_NAME_LENGTH = 65_536
"""Characters in one identifier."""

MAX_NESTING = 32
"""Brackets within brackets in one statement."""

MAX_VECTOR_WIDTH = 1 << 20
"""Bits in one vector or constant."""

SPACE = r"[ \t\r\n\f\v]"
"""White space (clause 3.2); `\\s` would also match odd bytes."""

NAME = rf"(?:[A-Za-z_][A-Za-z0-9_$]*+|\\[!-~\x80-\xff]++(?={SPACE}))"
"""Clause 3.7: a simple identifier, or a backslash and printable characters up to white space (bytes above 127 too)."""

CONSTANT = (
    rf"(?:[0-9][0-9_]*+{SPACE}*+)?+'[sS]?+(?:[bB]{SPACE}*+[01xXzZ?][01xXzZ?_]*+|[oO]{SPACE}*+[0-7xXzZ?][0-7xXzZ?_]*+"
    rf"|[hH]{SPACE}*+[0-9a-fA-FxXzZ?][0-9a-fA-FxXzZ?_]*+|[dD]{SPACE}*+(?:[0-9][0-9_]*+|[xXzZ?]_*+))|[0-9][0-9_]*+"
)
"""Clause 3.5.1: an integer constant."""

_END = r"(?![A-Za-z0-9_$])"
_OPERATOR = r"[-+*/%&|^~!<>?]|=="


def _words(text: str) -> frozenset[str]:
    return frozenset(text.split())


GATES = _words("and nand or nor xor xnor buf not bufif0 bufif1 notif0 notif1 pullup pulldown")
"""Gate primitives (clause 7.1); their outputs come first."""

_NET_TYPES = _words("wire tri tri0 tri1 triand trior trireg uwire wand wor supply0 supply1")
_BEHAVIOUR = _words(
    """always initial function task generate genvar specify specparam primitive table reg integer real realtime time event
    for if case casex casez begin fork deassign force release repeat while forever wait disable config
    cmos nmos pmos rcmos rnmos rpmos tran tranif0 tranif1 rtran rtranif0 rtranif1"""
)
_OTHER_WORDS = _words(
    """assign automatic cell default defparam design edge else end endcase endconfig endfunction endgenerate endmodule
    endprimitive endspecify endtable endtask highz0 highz1 ifnone incdir include inout input instance join large liblist
    library localparam macromodule medium module negedge noshowcancelled output parameter posedge pull0 pull1
    pulsestyle_ondetect pulsestyle_onevent scalared showcancelled signed small strong0 strong1 unsigned use vectored
    weak0 weak1"""
)
KEYWORDS = GATES | _NET_TYPES | _BEHAVIOUR | _OTHER_WORDS
"""Reserved words (annex B)."""


class BeyondLimit(pp.ParseFatalException):
    """What stands there goes beyond one of the limits above."""


def plain_name(identifier: str) -> str:
    r"""The name that an identifier stands for: ``\cpu3`` and ``cpu3`` are the same (clause 3.7.1)."""
    return identifier[1:] if identifier[0] == "\\" else identifier


def constant_bits(text: str) -> str:
    """Bits of a constant (clause 3.5.1), 0, 1 or x for each, where z reads as x: it drives nothing; empty if too wide."""
    size, quote, value = text.partition("'")
    if not quote:
        size, value = "32", "d" + text
    value = value.lstrip("sS")
    base, digits = value[0].lower(), value[1:].strip().replace("_", "").lower()
    size = size.strip().replace("_", "").lstrip("0") or ("" if size else "32")
    if not 1 <= len(size) <= 7 or not 1 <= int(size) <= MAX_VECTOR_WIDTH:
        return ""
    if base == "d" and digits[0] not in "xz?":
        if len(digits) > 4000:  # int() refuses more
            return ""
        bits = f"{int(digits):b}"
    else:
        per_digit = {"b": 1, "o": 3, "h": 4, "d": 1}[base]
        bits = "".join("x" * per_digit if digit in "xz?" else f"{int(digit, 16):0{per_digit}b}" for digit in digits)
    return bits.rjust(int(size), "x" if bits[0] == "x" else "0")[-int(size) :]


def _fail(expected: str) -> Any:
    """A parse action that refuses what has just been matched."""

    def refuse(text: str, loc: int, tokens: pp.ParseResults) -> None:
        raise pp.ParseFatalException(text, loc, f"Expected {expected}")

    return refuse


def _word(text: str) -> pp.ParserElement:
    return pp.Suppress(pp.Regex(rf"(?:{text}){_END}").set_name(text))


def _sign(text: str, name: str | None = None) -> pp.ParserElement:
    return pp.Suppress(pp.Literal(text).set_name(name or f"'{text}'"))


def _one_of(words: frozenset[str], name: str) -> pp.ParserElement:
    return pp.Regex(rf"(?:{'|'.join(sorted(words))}){_END}").set_name(name)


def _listed(element: pp.ParserElement) -> pp.ParserElement:
    return pp.Group(element + (_sign(",") - element)[...])


def _take_name(text: str, loc: int, tokens: pp.ParseResults) -> str:
    name = plain_name(tokens[0])
    if len(name) > MAX_NAME_LENGTH:
        raise BeyondLimit(text, loc, f"Expected a name of at most {MAX_NAME_LENGTH:,} characters")
    return name


# An escaped identifier may spell a reserved word, a simple one may not.
_name: pp.ParserElement = pp.Regex(rf"(?!(?:{'|'.join(sorted(KEYWORDS))}){_END}){NAME}")
_name = _name.set_parse_action(_take_name).set_name("a name")
_located_name = pp.Located(_name)


def _take_integer(text: str, loc: int, tokens: pp.ParseResults) -> int:
    if len(tokens[0]) > 18:
        raise BeyondLimit(text, loc, "Expected a number of at most 18 digits")
    return int(tokens[0].replace("_", ""))


_integer = pp.Regex(r"-?[0-9][0-9_]*").set_parse_action(_take_integer).set_name("a number")


def _take_constant(text: str, loc: int, tokens: pp.ParseResults) -> Any:
    bits = constant_bits(tokens[0])
    if not bits:
        raise BeyondLimit(text, loc, f"Expected a constant of 1 to {MAX_VECTOR_WIDTH:,} bits")
    return [("constant", bits, loc)]


_constant = pp.Regex(CONSTANT).set_parse_action(_take_constant).set_name("a constant")
_select = _located_name + pp.Optional(_sign("[") - _integer + pp.Optional(_sign(":") - _integer) + _sign("]", "':' or ']'"))


def _take_select(tokens: pp.ParseResults) -> Any:
    start, (name,), _, *numbers = tokens
    return [(("net", "bit", "part")[len(numbers)], name, *numbers, start)]


_select.set_parse_action(_take_select)
EXPRESSION = pp.Forward()
"""What may be connected: a net, a select, a concatenation, a replication or a constant."""
_parts = _listed(EXPRESSION) + _sign("}", "',' or '}'")
_joined = pp.Located(_sign("{") - _parts)
_joined.set_parse_action(lambda tokens: [("join", tuple(tokens[1][0]), tokens[0])])
_repeated = pp.Located(_sign("{") + _integer + _sign("{") - _parts + _sign("}"))


def _take_repeated(text: str, loc: int, tokens: pp.ParseResults) -> Any:
    count, parts = tokens[1]
    if not 1 <= count <= MAX_VECTOR_WIDTH:
        raise BeyondLimit(text, loc, f"Expected 1 to {MAX_VECTOR_WIDTH:,} repetitions")
    return [("repeat", count, tuple(parts), tokens[0])]


_repeated.set_parse_action(_take_repeated)
_operator = pp.Regex(_OPERATOR).set_parse_action(_fail("a net without operators (only structure is read)"))
_operand = _select | _repeated | _joined | _constant | (_sign("(") + EXPRESSION + _sign(")")) | _operator
EXPRESSION <<= _operand.set_name("a net, a select, a concatenation or a constant") + pp.Optional(_operator)

_range = pp.Group(_sign("[") - _integer + _sign(":") + _integer + _sign("]")).set_name("a range")
_maybe_range = pp.Optional(_range, default=None)
_signed = pp.Optional(_word("signed"))
_direction = _one_of(frozenset(["input", "output", "inout"]), "input, output or inout")
_net_type = _one_of(_NET_TYPES, "a net type")
_sharp = pp.Suppress(pp.Optional(_sign("#") - (pp.nested_expr(ignore_expr=None) | pp.Regex(rf"[0-9.]+|{NAME}"))))

_ansi_port = pp.Group(
    pp.Optional(_direction, default=None) + pp.Optional(_net_type, default=None) + _signed + _maybe_range + _located_name
)
_port_list = pp.Group(pp.Optional(_ansi_port + (_sign(",") - _ansi_port)[...]))
_header = (
    _word("module|macromodule")
    - _name
    + _sharp
    + pp.Optional(_sign("(") - _port_list + _sign(")", "',' or ')'"), default=())
)


def _take_header(tokens: pp.ParseResults) -> Any:
    ports = []
    for direction, net_type, bounds, start, (name,), _ in tokens[1]:
        ports.append((direction, net_type, None if bounds is None else tuple(bounds), name, start))
    return [("module", tokens[0], tuple(ports))]


_header.set_parse_action(_take_header)

_declared = pp.Group(_located_name + pp.Optional(_sign("=") - EXPRESSION, default=None))
_declaration = (
    pp.Group((_direction + pp.Optional(_net_type, default=None)) | (pp.Empty().set_parse_action(lambda: [None]) + _net_type))
    + pp.Optional(_word("vectored|scalared"))
    + _signed
    + _maybe_range
    + _sharp
    - _listed(_declared)
)


def _take_declaration(tokens: pp.ParseResults) -> Any:
    (direction, net_type), bounds, names = tokens
    entries = tuple((name, start, value) for start, (name,), _, value in names)
    return [("declare", direction, net_type, None if bounds is None else tuple(bounds), entries)]


_declaration.set_parse_action(_take_declaration)

_assignment = pp.Group((_joined | _select).set_name("a net, a select or a concatenation") + _sign("=") - EXPRESSION)
_assign = _word("assign") - _sharp + _listed(_assignment)
_assign.set_parse_action(lambda tokens: [("assign", tuple((left, right) for left, right in tokens[0]))])

_maybe_expression = pp.Optional(EXPRESSION, default=None)
_named = pp.Group(pp.Located(_sign(".") - _name) + _sign("(") - _maybe_expression + _sign(")"))
_all_named = _named + (_sign(",") - _named)[...]
_all_named.set_parse_action(lambda tokens: [tuple((name, value, start) for start, (name,), _, value in tokens)])


def _take_ordered(tokens: pp.ParseResults) -> Any:
    values = tuple(tokens)
    return [() if values == (None,) else tuple((order, value, None) for order, value in enumerate(values))]


_all_ordered = _maybe_expression + (_sign(",") + _maybe_expression)[...]
_all_ordered.set_parse_action(_take_ordered)
_array = pp.Optional(pp.Regex(r"\[").set_parse_action(_fail("one instance, not an array of instances")))
_close = _sign(")", "',' or ')'")
_instance = pp.Group(_located_name + _array + _sign("(") - (_all_named | _all_ordered) + _close)
_gate = pp.Group(pp.Located(pp.Optional(_name, default="")) + _array + _sign("(") - _all_ordered + _close)
_instances = _name + _sharp + _listed(_instance)
_gates = _one_of(GATES, "a gate type") + _sharp - _listed(_gate)


def _take_instances(tokens: pp.ParseResults) -> Any:
    entries = tuple((name, connections, start) for start, (name,), _, connections in tokens[1])
    return [("instances", tokens[0], entries)]


_instances.set_parse_action(_take_instances)
_gates.set_parse_action(_take_instances)

_skipped = pp.Regex(rf"(?:parameter|localparam|defparam){_END}(?s:.*)").set_parse_action(lambda: [("skip",)])
_empty = pp.StringEnd().set_parse_action(lambda: [("skip",)])
_refused = _one_of(_BEHAVIOUR, "structure")
_refused.set_parse_action(_fail("structure (a declaration, an instance or an assignment of nets)"))
_any = (_header | _declaration | _assign | _skipped | _refused | _gates | _instances | _empty).set_name("a statement")
STATEMENT = _any + pp.StringEnd().set_name("';'")
"""The grammar of one statement, without its final ``;``."""
for _element in STATEMENT.visit_all():
    _element.set_whitespace_chars(" \t\r\n\f\v")
STATEMENT.parse_with_tabs()
EXPRESSION.parse_with_tabs()
