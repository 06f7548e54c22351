"""The Verilog reader: against ISCAS-85 c17, against pyslang, and both of its paths against each other."""

from __future__ import annotations

import hashlib

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from netpart.formats import CellType, ReadOptions, SourceText
from netpart.formats.verilog import MAX_DEPTH, looks_like_verilog, read_verilog
from netpart.netlist import CellFlag, Direction, InputError, LimitError, Netlist
from tests.formats.slang_reference import slang_nets

# ISCAS-85 c17: F. Brglez and H. Fujiwara, "A neutral netlist of 10 combinational benchmark circuits and a target
# translator in Fortran", Proc. IEEE ISCAS 1985. Six NAND gates, five inputs, two outputs.
C17 = """
// c17
module c17 (N1, N2, N3, N6, N7, N22, N23);
  input N1, N2, N3, N6, N7;
  output N22, N23;
  wire N10, N11, N16, N19;
  nand NAND2_1 (N10, N1, N3);
  nand NAND2_2 (N11, N3, N6);
  nand NAND2_3 (N16, N2, N11);
  nand NAND2_4 (N19, N11, N7);
  nand NAND2_5 (N22, N10, N16);
  nand NAND2_6 (N23, N16, N19);
endmodule
"""

LIBRARY = {
    "AND2": CellType("AND2", 1.5, {"A": Direction.INPUT, "B": Direction.INPUT, "Y": Direction.OUTPUT}),
    "DFF": CellType("DFF", 4.0, {"D": Direction.INPUT, "CK": Direction.INPUT, "Q": Direction.OUTPUT}, sequential=True),
    "RAM": CellType("RAM", 50.0, {f"D[{i}]": Direction.INPUT for i in range(4)}, macro=True, sequential=True),
}
STUBS = """
module AND2(input A, input B, output Y); endmodule
module DFF(input D, input CK, output Q); endmodule
module RAM(input [3:0] D, output Q); endmodule
"""


def source(text: str | bytes) -> SourceText:
    data = text.encode() if isinstance(text, str) else text
    return SourceText("test.v", data, hashlib.sha256(data).hexdigest())


def read_text(text: str | bytes, **options: object) -> Netlist:
    grammar_only = bool(options.pop("grammar_only", False))
    return read_verilog([source(text)], LIBRARY, ReadOptions(**options), grammar_only=grammar_only)  # type: ignore[arg-type]


def shape(netlist: Netlist) -> tuple[set[str], set[frozenset[str]]]:
    names = list(netlist.cell_names)
    nets = {frozenset(names[cell] for cell in netlist.cells_of(net)) for net in range(netlist.num_nets)}
    return set(names), nets


def test_c17() -> None:
    netlist = read_text(C17, default_area=1.0)
    assert (netlist.num_cells, netlist.num_nets) == (6 + 5 + 2, 11)
    assert netlist.total_area == 6
    nets = {netlist.net_names[net]: {netlist.cell_names[c] for c in netlist.cells_of(net)} for net in range(11)}
    assert nets["N11"] == {"NAND2_2", "NAND2_3", "NAND2_4"}
    assert nets["N3"] == {"N3", "NAND2_1", "NAND2_2"}
    assert nets["N22"] == {"N22", "NAND2_5"}
    drivers = [sum(int(d) & Direction.OUTPUT != 0 for d in netlist.pin_directions[a:b])
               for a, b in zip(netlist.net_offsets[:-1], netlist.net_offsets[1:], strict=True)]  # fmt: skip
    assert drivers == [1] * 11


def test_what_a_netlist_holds() -> None:
    text = r"""
    `timescale 1ns/1ps
    (* keep = "yes; no" *) module top (input [1:0] d, input ck, output q, inout \odd;name );
      wire [3:0] v; wire \v[3] , n; supply0 gnd; tri t;
      /* AND2 no (.A(d[0])); */ assign v[1:0] = d; assign t = 1'b1;
      RAM ram (.D({v[1], d[0], gnd, 1'bz}), .Q());
      DFF \u/1 (.D(v[3]), .CK(ck), .Q(\v[3] ));
      AND2 #(.X(1), .Y("a;b")) g (.A(\v[3] ), .B(t), .Y(n)), h (n, \odd;name , q);
      sub s (.x(v[3:2]), .y(n)), r (d, );
    endmodule
    module sub (x, y); input [0:1] x; output y; wire w; AND2 g (.A(x[0]), .B(x[1]), .Y(w)); assign y = w; endmodule
    """
    netlist = read_text(text)
    names, nets = shape(netlist)
    assert names == {"d[1]", "d[0]", "ck", "q", "odd;name", "ram", "u/1", "g", "h", "s/g", "r/g"}
    assert nets == {
        frozenset(net)
        for net in [
            {"d[1]", "ram", "r/g"}, {"d[0]", "ram", "r/g"}, {"u/1", "s/g"}, {"ck", "u/1"}, {"u/1", "g"},
            {"g", "h", "s/g"}, {"odd;name", "h"}, {"h", "q"}, {"s/g"}, {"r/g"},
        ]
    }  # fmt: skip
    assert {(net.name, net.reason) for net in netlist.ignored_nets} == {
        ("1'b1", "constant"), ("gnd", "supply"), ("1'bx", "constant"),
    }  # fmt: skip
    ram = netlist.cell_names.find("ram")
    assert netlist.cell_flags[ram] == CellFlag.MACRO | CellFlag.SEQUENTIAL
    assert netlist.areas[ram] == 50
    assert list(netlist.module_names) == ["", "s", "r"]
    assert netlist.cell_modules[netlist.cell_names.find("r/g")] == 2
    assert read_text(text, ignore_nets=("ck", "o*")).num_nets == netlist.num_nets - 2
    assert shape(read_text(text, grammar_only=True)) == (names, nets)


def test_names_that_look_the_same_stay_apart() -> None:
    netlist = read_text(r"module t (input [1:0] d, input \d[1] , output q); AND2 \a/b (.A(d[1]), .B(\d[1] ), .Y(q)); "
                        r"s a (q); endmodule module s (input x); AND2 b (.A(x)); endmodule")  # fmt: skip
    assert list(netlist.cell_names) == ["d[1]", "d[0]", r"\d[1]", "q", "a/b", r"a/\b"]
    assert list(netlist.net_names) == ["d[1]", "d[0]", r"\d[1]", "q"]


@st.composite
def designs(draw: st.DrawFn) -> str:
    """Structural designs with hierarchy, vectors, selects, concatenations, escaped names, constants, assigns."""
    lines = [STUBS]
    scalars = ["n1", "n2", r"\esc/1 ", r"\v[0] ", r"\wire "]
    vectors = {"v": (3, 0), "w": (0, 4), r"\b;us ": (5, 2)}

    def bit() -> str:
        kind = draw(st.integers(0, 5))
        if kind <= 2:
            return draw(st.sampled_from(scalars))
        if kind == 3:
            return draw(st.sampled_from(["1'b0", "1'b1"]))
        name = draw(st.sampled_from(sorted(vectors)))
        low, high = sorted(vectors[name])
        return f"{name}[{draw(st.integers(low, high))}]"

    def word(width: int) -> str:
        kind = draw(st.integers(0, 3))
        if kind == 0:
            return "{" + ", ".join(bit() for _ in range(width)) + "}"
        if kind == 1:
            name = draw(st.sampled_from(sorted(vectors)))
            left, right = vectors[name]
            if abs(left - right) + 1 == width:
                return name
            step = 1 if left < right else -1
            start = left + step * draw(st.integers(0, abs(left - right) + 1 - width))
            return f"{name}[{start}:{start + step * (width - 1)}]"
        if kind == 2:
            return "{" + f"{width}{{{bit()}}}" + "}"
        return f"{width}'b" + "".join(draw(st.sampled_from("01")) for _ in range(width))

    def net_bit() -> str:
        return draw(st.sampled_from([*scalars, "v[2]", "w[1]"]))

    def instance(number: int, children: list[str]) -> str:
        kind = draw(st.sampled_from(["AND2", "DFF", "RAM", *children]))
        name = draw(st.sampled_from([f"u{number}", f"\\u/{number} ", f"\\u({number}) "]))
        if kind == "RAM":
            return f"RAM {name}(.D({word(4)}), .Q({draw(st.sampled_from(['', net_bit()]))}));"
        if kind not in ("AND2", "DFF"):
            return f"{kind} {name}(.x({word(2)}), .y({net_bit()}));"
        ports = ("A", "B", "Y") if kind == "AND2" else ("D", "CK", "Q")
        values = [bit() if draw(st.booleans()) else "" for _ in range(2)] + [net_bit()]
        if draw(st.booleans()):
            return f"{kind} {name}({', '.join(values)});"
        space = draw(st.sampled_from(["", " ", "\n    ", " /* x */ "]))
        pairs = draw(st.permutations(list(zip(ports, values, strict=True))))
        return f"{kind} {name}(" + f",{space}".join(f".{port}{space}({value})" for port, value in pairs) + ");"

    children: list[str] = []
    for number in range(draw(st.integers(0, 2))):
        body = [instance(i, list(children)) for i in range(draw(st.integers(0, 3)))]
        name = f"child{number}"
        nets = "wire n1, n2, \\esc/1 , \\v[0] , \\wire ; wire [3:0] v; wire [0:4] w; wire [5:2] \\b;us ;"
        lines.append(
            f"module {name}(x, y); input [1:0] x; output y; {nets}\n"
            f"assign n1 = x[1]; assign y = n2; {' '.join(body)} AND2 last(.A(x[0]), .B(n1), .Y(n2)); endmodule"
        )
        children.append(name)
    body = [instance(i, children) for i in range(draw(st.integers(1, 8)))]
    for _ in range(draw(st.integers(0, 2))):
        body.append(f"assign {{v[1], w[3]}} = {word(2)};")
    lines.append(
        "module top(input n1, output [0:4] w, inout \\esc/1 );\n"
        "wire n2, \\v[0] ; wire \\wire ; wire [3:0] v; // nets\nwire [5:2] \\b;us ;\n" + "\n".join(body) + "\nendmodule"
    )
    return "\n".join(lines)


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(designs())
def test_both_paths_and_pyslang_read_the_same(text: str) -> None:
    fast, slow = read_text(text, top="top"), read_text(text, top="top", grammar_only=True)
    assert shape(fast) == shape(slow)
    assert list(fast.net_names) == list(slow.net_names)
    for name in ("net_offsets", "net_cells", "pin_directions", "net_pins", "areas", "cell_flags", "cell_modules"):
        assert getattr(fast, name).tolist() == getattr(slow, name).tolist(), name
    assert shape(fast) == slang_nets(text, {"AND2", "DFF", "RAM"})


BROKEN = [
    ("truncated", "module t (a);\n input a;\n AND2 u (.A(a), .B(", 3, 20, "end of the file"),
    ("no endmodule", "module t (a);\n input a;\n", 3, 1, "end of the file"),
    ("missing semicolon", "module t (a);\n input a\n AND2 u (.A(a));\nendmodule", 3, 2, "'AND2'"),
    ("behaviour", "module t (a);\n input a;\n always @(a) b = a;\nendmodule", 3, 2, "'always'"),
    ("operator", "module t (a);\n input a; wire b;\n assign b = a & a;\nendmodule", 3, 15, "'&'"),
    ("array", "module t (a);\n input a;\n AND2 u [3:0] (.A(a));\nendmodule", 3, 7, "'u'"),
    ("bit out of range", "module t (a);\n input [3:0] a;\n AND2 u (.A(a[4]));\nendmodule", 3, 13, "bit 4"),
    ("no such vector", "module t (a);\n input a;\n AND2 u (.A(b[4]), .B({a}));\nendmodule", 3, 13, "'b'"),
    ("bad number", "module t (a);\n input [3:x] a;\nendmodule", 2, 11, "'x]"),
    ("deep", "module t (a);\n input a;\n AND2 u (.A(" + "{" * 200 + "a" + "}" * 200 + "));\nendmodule", 3, 75, "one more"),
    ("huge vector", "module t (a);\n input [2000000000:0] a;\nendmodule", 1, 1, "[2000000000:0]"),
    ("junk", "module t (a);\n input a;\n \x01\x02;\nendmodule", 3, 2, "'\\x01\\x02;'"),
    ("comment", "module t (a);\n input a; /* open\nendmodule", 2, 11, "end of the file"),
    ("same net", "module t (a);\n input a; wire b;\n wire b;\nendmodule", 3, 7, "'b' again"),
    ("no direction", "module t (a, b);\n input a;\nendmodule", 1, 1, "none"),
]


@pytest.mark.parametrize(("name", "text", "line", "column", "found"), BROKEN, ids=[case[0] for case in BROKEN])
def test_broken_text_is_told_with_its_place(name: str, text: str, line: int, column: int, found: str) -> None:
    for grammar_only in (False, True):
        with pytest.raises(InputError) as caught:
            read_text(text, grammar_only=grammar_only)
        assert (caught.value.line, caught.value.column) == (line, column), str(caught.value)
        assert found in str(caught.value)


def test_hierarchy_is_checked_before_it_is_walked() -> None:
    with pytest.raises(InputError, match="cycles"):
        read_text("module t(); a u (); endmodule module a(); b u (); endmodule module b(); a u (); endmodule")
    chain = "".join(f"module m{i}(); m{i + 1} u (); endmodule\n" for i in range(MAX_DEPTH + 5))
    with pytest.raises(LimitError, match="nested instances"):
        read_text(chain + f"module m{MAX_DEPTH + 5}(); endmodule", top="m0")
    with pytest.raises(InputError, match="one top module"):
        read_text("module a(); endmodule module b(); endmodule")
    doubling = "".join(f"module m{i}(); m{i + 1} u (); m{i + 1} v (); endmodule\n" for i in range(40))
    with pytest.raises(Exception, match="at most"):
        read_text(doubling + "module m40(); AND2 g (); endmodule")


def test_missing_areas_are_all_listed() -> None:
    with pytest.raises(InputError, match=r"BAR \(1 cells\), FOO \(2 cells\)"):
        read_text("module t (a); input a; FOO x (.A(a)); FOO y (.A(a)); BAR z (.A(a)); AND2 g (.A(a)); endmodule")
    with pytest.raises(InputError, match="different module names"):
        read_text("module t (); endmodule\nmodule t (); endmodule")


def test_line_ends_and_odd_bytes() -> None:
    text = "module t (a);\r\n input a;\r\n AND2 \\u\xffx (.A(a));\r\nendmodule\r\n".encode("latin-1")
    netlist = read_text(text)
    assert netlist.cell_names.bytes_at(1) == b"u\xffx"
    assert looks_like_verilog(b"// c\n/* d */ `timescale 1ns/1ps\n module x;")
    assert not looks_like_verilog(b"modulex")
