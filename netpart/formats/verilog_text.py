"""The text of a Verilog file: what carries no structure is overwritten by spaces, so that every offset stays."""

from __future__ import annotations

import re
from bisect import bisect
from typing import Any

import pyparsing as pp

from netpart.formats.source import SourceText
from netpart.formats.verilog_grammar import MAX_NESTING, SPACE, STATEMENT, BeyondLimit
from netpart.netlist import InputError, LimitError

__all__ = ["TO_SEMICOLON", "VerilogText", "decoded", "looks_like_verilog", "parse_statement", "shown", "skip_space"]

TO_SEMICOLON = re.compile(r"[^;\\]*+(?:\\[^ \t\r\n\f\v]*+[^;\\]*+)*+;")
"""A statement with its semicolon; one within an escaped name is part of the name."""

_SPACES = re.compile(rf"{SPACE}*+")
_BRACKETS = re.compile(r"\\[^ \t\r\n\f\v]*+|[({)}]")
_MARKS = ("//", "/*", "(*", '"', "`")
_STRING = re.compile(r'"(?:[^"\\\n]|\\.)*+"')
_ESCAPED = re.compile(r"\\[^ \t\r\n\f\v]*+")
_BLANKS = r"[ \t]*+"
_WORD = r"[A-Za-z_][A-Za-z0-9_$]*+"
_DIRECTIVE = re.compile(
    rf"`(?:timescale{SPACE}*+\d++{_BLANKS}[munpf]?s{_BLANKS}/{_BLANKS}\d++{_BLANKS}[munpf]?s|default_nettype{SPACE}++({_WORD})"
    rf"|unconnected_drive{SPACE}++{_WORD}|line{_BLANKS}\d++{_BLANKS}\"[^\"\n]*+\"{_BLANKS}\d|begin_keywords{SPACE}*+\"[^\"\n]*+\""
    rf"|pragma[^\n]*+|undef{SPACE}++{_WORD}|define(?:[^\n\\]|\\\r?\n|\\.)*+"
    r"|(?:celldefine|endcelldefine|resetall|nounconnected_drive|end_keywords|delay_mode_\w++|suppress_faults|nosuppress_faults"
    r"|enable_portfaults|disable_portfaults)(?![A-Za-z0-9_$]))",
    re.ASCII,
)
_HEAD = re.compile(
    rb"(?:\s++|//[^\n]*+|/\*(?:[^*]++|\*(?!/))*+\*/|\(\*(?:[^*]++|\*(?!\)))*+\*\)|`[^\n]*+)*+(?:macro)?module[\s\\]"
)


def looks_like_verilog(data: bytes) -> bool:
    """Whether the first word, comments and directives aside, is ``module``."""
    return _HEAD.match(data) is not None


def skip_space(text: str, offset: int) -> int:
    """The next offset where no white space stands."""
    return _SPACES.match(text, offset).end()  # type: ignore[union-attr]


def decoded(name: str) -> str:
    """A name as libraries and the model spell it."""
    return name.encode("latin-1").decode("utf-8", "surrogateescape")


def shown(name: str) -> str:
    """A name in quotes, for a message."""
    text = name.encode("latin-1").decode("utf-8", "replace")
    return repr(text if len(text) <= 80 else f"{text[:77]}...")


class VerilogText:
    """A file as text of one character for each byte, with errors that point into it.

    Comments (clause 3.3), attributes (3.8), strings (3.6) and compiler directives (19) are blanked. Directives on which
    the structure would depend are refused, macros and conditions among them.
    """

    def __init__(self, source: SourceText) -> None:
        self.source = source
        self._nettype_places: list[int] = []
        self._nettypes: list[str] = []
        self.text = self._blank(source.data.decode("latin-1"))

    def error(
        self, offset: int, expected: str, found: str | None = None, kind: type[InputError] | None = None
    ) -> InputError:
        """An error at an offset."""
        return self.source.error(offset, expected, found, kind or InputError)

    def nets_are_implicit(self, offset: int) -> bool:
        """Whether undeclared nets are allowed there: the last ``default_nettype`` before it is not ``none``."""
        last = bisect(self._nettype_places, offset)
        return last == 0 or self._nettypes[last - 1] != "none"

    def _blank(self, text: str) -> str:
        pieces: list[str] = []
        copied = at = 0
        places = {mark: text.find(mark) for mark in _MARKS}
        while True:
            start = min((place for place in places.values() if place >= 0), default=-1)
            if start < 0:
                break
            escape = text.rfind("\\", at, start)
            if escape >= 0 and (name_end := _ESCAPED.match(text, escape).end()) > start:  # type: ignore[union-attr]
                at = name_end  # a part of an escaped name
            else:
                at = self._end_of_hidden(text, start)
                if at > start:
                    hidden = text[start:at]
                    pieces += (text[copied:start], "\n".join(" " * len(line) for line in hidden.split("\n")))
                    copied = at
                else:
                    at = start + 1
            for mark, place in places.items():
                if 0 <= place < at:
                    places[mark] = text.find(mark, at)
        return "".join([*pieces, text[copied:]]) if pieces else text

    def _end_of_hidden(self, text: str, start: int) -> int:
        mark = text[start : start + 2]
        if mark == "//":
            end = text.find("\n", start)
            return len(text) if end < 0 else end
        if mark == "/*" or mark == "(*":
            if mark == "(*" and text[start + 2 : start + 40].lstrip(" \t\r\n\f\v").startswith(")"):
                return start
            close = mark[::-1].replace("(", ")")
            end = text.find(close, start + 2)
            if end < 0:
                raise self.error(len(text), f"{close!r} of the {mark!r} at line {text.count(chr(10), 0, start) + 1}")
            return end + 2
        if mark[0] == '"':
            string = _STRING.match(text, start)
            if string is None:
                raise self.error(start, "a string that ends on the same line")
            return string.end()
        directive = _DIRECTIVE.match(text, start)
        if directive is None:
            raise self.error(start, "no compiler directive on which the structure depends (run a preprocessor first)")
        if directive[1] is not None or directive[0] == "`resetall":
            self._nettype_places.append(start)
            self._nettypes.append(directive[1] or "wire")
        return directive.end()


def parse_statement(text: VerilogText, start: int) -> Any:
    """One statement by the grammar."""
    match = TO_SEMICOLON.match(text.text, start)
    end = len(text.text) if match is None else match.end() - 1
    statement = text.text[start:end]
    depth = 0
    for bracket in _BRACKETS.finditer(statement):
        depth += {"(": 1, "{": 1, ")": -1, "}": -1}.get(bracket[0], 0)
        if depth > MAX_NESTING:
            raise text.error(start + bracket.start(), f"at most {MAX_NESTING} nested brackets", "one more", LimitError)
    try:
        parsed = STATEMENT.parse_string(statement)[0]
    except pp.ParseBaseException as fault:
        offset = start + fault.loc
        if offset < end:
            offset = min(skip_space(text.text, offset), end)
        kind = LimitError if isinstance(fault, BeyondLimit) else None
        raise text.error(offset, fault.msg.removeprefix("Expected "), kind=kind) from None
    if match is None:
        raise text.error(end, "';'" if parsed[0] != "skip" else "endmodule")
    return parsed
