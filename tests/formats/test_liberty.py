"""Liberty, by the Liberty Reference Manual (2017.06), and against the package liberty-parser."""

from __future__ import annotations

import gzip
import os
from pathlib import Path
from typing import Any

import pytest

from netpart.formats import CellType, SourceText
from netpart.formats.liberty import MAX_BUS_WIDTH, looks_like_liberty, read_liberty
from netpart.netlist import Direction, InputError, LimitError

IN, OUT, BOTH, UNKNOWN = Direction.INPUT, Direction.OUTPUT, Direction.INOUT, Direction.UNKNOWN

LIBRARY = r"""
/* A library of ours: { braces and "quotes" in comments do not count. */
library (demo) {
  date : "2024 { not a group";
  delay_model : table_lookup ;
  capacitive_load_unit (1, ff);
  voltage_map (VDD, 0.7)
  lu_table_template (t2) { variable_1 : input_net_transition; index_1 ("1, 2"); }
  type (word) { base_type : array; data_type : bit; bit_width : 4; bit_from : 3; bit_to : 0 /* last */; downto : true; }
  type (upward) { base_type : array; data_type : bit; bit_width : 2; bit_from : 0; bit_to : 1; }

  cell (NAND2) {
    area : 0.729;
    pg_pin (VDD) { pg_type : primary_power; voltage_name : VDD; }
    pin (A, B) { direction : input; capacitance : 0.5; }
    pin ("Y") {
      direction : "output";
      function : "!(A * B)";
      timing () {
        related_pin : "A";  // don't stop at the { in this comment
        cell_rise (t2) {
          index_1 ("1, 2");
          values ("0.1, 0.2", \
                  "0.3, } 0.4");
        }
      }
    }
  }
  cell (FLOP) {
    area : 2.5e0;
    ff (IQ, IQN) { next_state : "D"; clocked_on : "CK"; }
    pin (CK) { direction : input; clock : true; }
    pin (D) { direction : input; }
    pin (Q) { direction : output; function : "IQ"; }
    pin (state) { direction : internal; }
    pin (floating) { }
  }
  cell ("RAM") {
    area : 1200;
    is_macro_cell : true;
    memory () { type : ram; address_width : 4; word_width : 4; }
    bus (ADDR) { bus_type : word; direction : input; }
    bus (DATA) {
      bus_type : upward;
      direction : output;
      memory_read () { address : ADDR; }
      pin (DATA[1]) { direction : inout; }
    }
    bundle (CTL) { members (CE, WE); direction : input; pin (WE) { capacitance : 1; } }
  }
  cell (FILL) { }
}
"""

STATE = {
    "ff (IQ, IQN) { }": True,
    "latch (IQ, IQN) { }": True,
    "ff_bank (IQ, IQN, 4) { }": True,
    "latch_bank (IQ, IQN, 4) { }": True,
    'statetable ("CK", "IQ") { table : "L : - : N"; }': True,
    "memory () { type : ram; }": True,
    "test_cell () { ff (IQ, IQN) { } }": True,
    'clock_gating_integrated_cell : "latch_posedge";': True,
    "pin (A) { direction : input; timing () { } }": False,
    "leakage_power () { value : 1; }": False,
}


def text(content: str) -> SourceText:
    return SourceText("demo.lib", content.encode(), "0" * 64)


def test_cells_pins_and_flags() -> None:
    cells = read_liberty(text(LIBRARY))
    assert list(cells) == ["NAND2", "FLOP", "RAM", "FILL"]
    assert cells["NAND2"] == CellType("NAND2", 0.729, {"A": IN, "B": IN, "Y": OUT})
    assert cells["FLOP"] == CellType("FLOP", 2.5, {"CK": IN, "D": IN, "Q": OUT, "floating": UNKNOWN}, sequential=True)
    assert cells["RAM"] == CellType(
        "RAM",
        1200.0,
        {f"ADDR[{bit}]": IN for bit in (3, 2, 1, 0)} | {"DATA[0]": OUT, "DATA[1]": BOTH, "CE": IN, "WE": IN},
        sequential=True,
        macro=True,
    )
    assert cells["FILL"] == CellType("FILL")


@pytest.mark.parametrize("line_end", ["\n", "\r\n"])
def test_line_ends_and_joined_lines(line_end: str) -> None:
    split = LIBRARY.replace("area : 0.729;", "area \\\n : \\\n 0.729;").replace("cell (FLOP) {", "cell \\\n (FLOP)\n{")
    assert read_liberty(text(split.replace("\n", line_end))) == read_liberty(text(LIBRARY))


@pytest.mark.parametrize(("content", "sequential"), STATE.items())
def test_what_tells_that_a_cell_stores_state(content: str, sequential: bool) -> None:
    cells = read_liberty(text(f"library (l) {{ cell (c) {{ {content} }} cell (d) {{ }} }}"))
    assert cells["c"].sequential is sequential
    assert not cells["d"].sequential


@pytest.mark.parametrize(
    ("attributes", "bits"),
    [
        ("bit_from : 7; bit_to : 5;", [7, 6, 5]),
        ("bit_from : 5; bit_to : 7;", [5, 6, 7]),
        ("bit_width : 3; downto : true;", [2, 1, 0]),
        ("bit_width : 1; bit_from : 0; bit_to : 0;", [0]),
        ("", [0]),
    ],
)
def test_bus_types(attributes: str, bits: list[int]) -> None:
    library = f"library (l) {{ type (t) {{ {attributes} }} cell (c) {{ bus (A) {{ bus_type : t; direction : input; }} }} }}"
    assert read_liberty(text(library))["c"].pins == {f"A[{bit}]": IN for bit in bits}


def test_pin_groups_with_a_range() -> None:
    library = """library (l) { type (t) { bit_from : 3; bit_to : 0; } cell (c) { bus (A) { bus_type : t; direction : input;
        pin (A[3:2], A[0]) { direction : output; } } } }"""
    assert read_liberty(text(library))["c"].pins == {"A[3]": OUT, "A[2]": OUT, "A[1]": IN, "A[0]": OUT}


def broken(old: str, new: str) -> str:
    assert old in LIBRARY
    return LIBRARY.replace(old, new, 1)


@pytest.mark.parametrize(
    ("content", "place", "expected"),
    [
        (broken("area : 0.729", "area : -0.729"), "-0.729", "the area of cell (NAND2), a number from 0"),
        (broken("area : 0.729", "area : small"), "small", "the area of cell (NAND2), a number from 0"),
        (broken("area : 2.5e0", "area : inf"), "inf", "the area of cell (FLOP), a number from 0"),
        (broken("area : 2.5e0;", "area 2.5e0;"), "2.5e0;", "':' or '('"),
        (broken("cell (FLOP) {", "cell (FLOP {"), "{\n    area : 2.5e0", "')'"),
        (broken("cell (FLOP) {", "7cell (FLOP) {"), "7cell", "an attribute, a group or '}'"),
        ('library (l) { date : "2024; cell (c) { } }', '"2024', "an attribute, a group or '}'"),
        (broken("bit_from : 3", "bit_from : three"), "three", "a whole number for bit_from"),
        (
            broken("direction : input; capacitance", "direction : in; capacitance"),
            "in; cap",
            "input, output, inout or internal",
        ),
        (broken("bus_type : word", "bus_type : words"), "words;", "a type, defined before, as bus_type of bus (ADDR)"),
        (broken("bus_type : word;", ""), "bus (ADDR)", "a type, defined before, as bus_type of bus (ADDR)"),
        (broken("cell (FILL)", "cell (NAND2)"), "cell (NAND2) { }", "different cell names"),
        (broken("cell (FILL) { }", "library (again) { }"), "library (again)", "an attribute or a group of a library"),
        (
            broken("cell (FILL) { }", "include_file (more);"),
            "include_file",
            "a library without include_file, which is not followed",
        ),
        (broken("cell (FILL) { }", "cell (FILL) { } }"), "}\n", "library (name) {"),
        (LIBRARY + "cell (late) { }", "cell (late)", "library (name) {"),
        (LIBRARY.rstrip()[:-1], None, "'}' that closes library (demo)"),
        (LIBRARY[: LIBRARY.index('index_1 ("1, 2");\n          values')], None, "'}' that closes timing in pin (Y)"),
        ('library (l) { cell (c) { x () { a : "b; } } }', '"b', "a string or comment that ends, in x in cell (c)"),
        ("library (l) { cell (c) { x () { /* a : b; } } }", "/*", "a string or comment that ends, in x in cell (c)"),
    ],
)
def test_faults_are_told_with_their_place(content: str, place: str | None, expected: str) -> None:
    with pytest.raises(InputError) as caught:
        read_liberty(text(content))
    fault = caught.value
    assert fault.expected == expected
    if place is not None:
        before = content[: content.rindex(place)]
        assert (fault.line, fault.column) == (before.count("\n") + 1, len(before) - before.rfind("\n"))


def test_a_bus_beyond_the_limit() -> None:
    library = "library (l) { type (t) { bit_from : %d; bit_to : 0; } }"
    read_liberty(text(library % (MAX_BUS_WIDTH - 1)))
    with pytest.raises(LimitError, match="at most 65536 bits, found 65537"):
        read_liberty(text(library % MAX_BUS_WIDTH))


def test_deep_nesting_needs_no_recursion() -> None:
    depth = 100_000
    nested = "library (l) { cell (c) { area : 1; x () {" + "y (z) { " * depth + "}" * depth + "} } }"
    assert read_liberty(text(nested))["c"].area == 1
    open_groups = "library (l) { " + "cell (c) { " * depth
    with pytest.raises(InputError, match=r"closes cell \(c\)"):
        read_liberty(text(open_groups))


def test_the_format_is_told_by_content() -> None:
    assert looks_like_liberty(LIBRARY.encode())
    assert looks_like_liberty(b'/* library of cells */ // more\nlibrary\n("x")')
    for other in (b"module library (a);", b"VERSION 5.8 ;", b"", b"librarything (x)", b"cell (x) { }"):
        assert not looks_like_liberty(other)


def reference_cells(content: str) -> dict[str, tuple[float, dict[str, str], bool]]:
    """Area, pin directions with buses expanded, and state, by liberty-parser's tree of groups."""
    parser = pytest.importorskip("liberty.parser")
    library = parser.parse_liberty(content)
    types = {group.args[0]: group for group in library.get_groups("type")}

    def name(value: Any) -> str:
        return str(value).strip('"')

    def pins(group: Any, inherited: str | None) -> dict[str, str]:
        found = {}
        for child in group.groups:
            direction = name(child.get("direction", inherited))
            if child.group_name == "pin":
                found.update({name(argument): direction for argument in child.args})
            elif child.group_name == "bus":
                kind = types[name(child["bus_type"])]
                for bit in range(min(kind["bit_from"], kind["bit_to"]), max(kind["bit_from"], kind["bit_to"]) + 1):
                    found[f"{name(child.args[0])}[{int(bit)}]"] = direction
            elif child.group_name == "bundle":
                found.update({name(member): direction for member in child["members"]})
            if child.group_name in ("bus", "bundle"):
                found.update(pins(child, direction))
        return {pin: direction for pin, direction in found.items() if direction != "internal"}

    state = ("ff", "latch", "statetable", "ff_bank", "latch_bank", "memory")
    return {
        name(cell.args[0]): (cell.get("area"), pins(cell, None), any(group.group_name in state for group in cell.groups))
        for cell in library.get_groups("cell")
    }


def found_cells(content: str) -> dict[str, tuple[float | None, dict[str, str], bool]]:
    words = {IN: "input", OUT: "output", BOTH: "inout", UNKNOWN: "None"}
    return {
        cell.name: (cell.area, {pin: words[direction] for pin, direction in cell.pins.items()}, cell.sequential)
        for cell in read_liberty(text(content)).values()
    }


def test_cells_agree_with_liberty_parser() -> None:
    # liberty-parser knows no comments to the end of the line, which are common practice, and asks for all semicolons.
    content = LIBRARY.replace("// don't stop at the { in this comment", "").replace("(VDD, 0.7)", "(VDD, 0.7);")
    assert found_cells(content) == reference_cells(content)


@pytest.mark.skipif("NETPART_CIRCUITS" not in os.environ, reason="NETPART_CIRCUITS names no folder of circuits")
def test_published_libraries_agree_with_liberty_parser() -> None:
    paths = sorted(Path(os.environ["NETPART_CIRCUITS"]).glob("**/*.lib.gz"))
    if not paths:
        pytest.skip("no libraries there")
    for path in paths:
        content = gzip.decompress(path.read_bytes()).decode()
        assert found_cells(content) == reference_cells(content)
