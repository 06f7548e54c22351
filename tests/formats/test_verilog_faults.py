"""Broken and excessive Verilog: told with its exact place, and the same by both paths of the reader."""

from __future__ import annotations

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from netpart.formats.verilog import MAX_DEPTH
from netpart.netlist import InputError, LimitError
from tests.formats.test_verilog import C17, designs, outcome, read_text

CHILD = "module s (input x); AND2 g (.A(x)); endmodule"
BROKEN = [
    ("truncated", "module t (a);\n input a;\n AND2 u (.A(a), .B(", 3, 20, "end of the file"),
    ("no endmodule", "module t (a);\n input a;\n", 3, 1, "end of the file"),
    ("missing semicolon", "module t (a);\n input a\n AND2 u (.A(a));\nendmodule", 3, 2, "'AND2'"),
    ("behaviour", "module t (a);\n input a;\n always @(a) b = a;\nendmodule", 3, 2, "'always'"),
    ("operator", "module t (a);\n input a; wire b;\n assign b = a & a;\nendmodule", 3, 15, "'&'"),
    ("array", "module t (a);\n input a;\n AND2 u [3:0] (.A(a));\nendmodule", 3, 9, "'[3:0]'"),
    ("bit out of range", "module t (a);\n input [3:0] a;\n AND2 u (.A(a[4]));\nendmodule", 3, 13, "bit 4"),
    ("no such vector", "module t (a);\n input a;\n AND2 u (.A(b[4]), .B({a}));\nendmodule", 3, 13, "'b'"),
    ("bad number", "module t (a);\n input [3:x] a;\nendmodule", 2, 11, "'x]"),
    ("deep", "module t (a);\n input a;\n AND2 u (.A(" + "{" * 200 + "a" + "}" * 200 + "));\nendmodule", 3, 43, "one more"),
    ("huge vector", "module t (a);\n input [2000000000:0] a;\nendmodule", 2, 23, "[2000000000:0]"),
    ("junk", "module t (a);\n input a;\n \x01\x02;\nendmodule", 3, 2, "'\\x01\\x02;'"),
    ("comment", "module t (a);\n input a; /* open\nendmodule", 3, 10, "end of the file"),
    ("same net", "module t (a);\n input a; wire b;\n wire b;\nendmodule", 3, 7, "'b' again"),
    ("port twice", "module t (a);\n input a;\n AND2 u (.A(a), .A(a));\nendmodule", 3, 17, "port 'A' again"),
    ("instance twice", "module t (a);\n input a;\n AND2 u (.A(a));\n AND2 u (.B(a));\nendmodule", 4, 7, "'u' again"),
    ("port as instance", "module t (a);\n input a;\n AND2 a (.A(a));\nendmodule", 3, 7, "'a'"),
    ("no such port", f"module t (a);\n input a; s u (.x(a),\n .z(a));\nendmodule {CHILD}", 3, 2, "'z'"),
    ("too many", f"module t (a);\n input a; s u (a,\n a);\nendmodule {CHILD}", 2, 13, "connection 2 of 2"),
    ("box port", "module t (a);\n input a; s u (.x(a),\n .z(a));\nendmodule module s (input x); endmodule", 3, 2, "'z'"),
    ("widths", "module t (a);\n input [3:0] a; wire [1:0] b;\n assign b = a;\nendmodule", 3, 13, "found 4"),
    ("undeclared", "module t (a);\n output a;\n assign a = b;\nendmodule", 3, 13, "'b'"),
    ("reserved word", "module t (a);\n input a; wire table;\nendmodule", 2, 16, "'table;'"),
    ("missing comma", "module t (a);\n input a;\n AND2 u (.A(a) .B(a));\nendmodule", 3, 16, "'.B(a));'"),
    ("wide constant", "module t (a);\n input a;\n AND2 u (.A(9999999'h0));\nendmodule", 3, 13, "9999999'h0"),
    ("select turned", "module t (a);\n input [3:0] a;\n AND2 u (.A(a[0:2]));\nendmodule", 3, 13, "[0:2]"),
    ("condition", "module t (a);\n input a;\n`ifdef X\n AND2 u (.A(a));\n`endif\nendmodule", 3, 1, "'`ifdef'"),
    ("macro", "module t (a);\n input a;\n AND2 u (.A(`NET));\nendmodule", 3, 13, "'`NET));'"),
    ("specify", "module t (a);\n input a;\n specify (a => a) = 1; endspecify\nendmodule", 3, 2, "'specify'"),
    ("long name", f"module t (a);\n input a;\n wire {'n' * 70000};\nendmodule", 3, 7, "nnn"),
    ("no implicit nets", "`default_nettype none\nmodule t ();\n AND2 u (.A(a));\nendmodule", 3, 13, "'a'"),
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


PIECES = [
    "", " ", "\n", "\r\n", "\0", "\xe9", ";", ",", "(", ")", "{", "}", "[", "]", "[0]", "[9]", "[3:0]", ":", ".", ".A(", "'",
    "1'b0", "8'hff", "4'd?", "0", "-1", "9" * 20, "=", "&", "#(3)", "\\", "\\x ", '"', "//", "/*", "*/", "(*", "*)", "`",
    "`celldefine ", "`default_nettype none\n", "wire", "wire n1;", "wire [2000000000:0] q;", "supply0 n2;", "reg", "and",
    "module", "endmodule", "always", "n1", "n2", "v", " w ", "AND2 u0(.A(n1));", "AND2 and(.A(n1));", "nand (n1, v);",
]  # fmt: skip


@settings(max_examples=200, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(designs() | st.just(C17), st.data())
def test_both_paths_refuse_the_same(text: str, data: st.DataObject) -> None:
    for _ in range(data.draw(st.integers(1, 2))):
        start = data.draw(st.integers(0, len(text)))
        end = min(len(text), start + data.draw(st.sampled_from([0, 0, 1, 2, 20])))
        text = text[:start] + data.draw(st.sampled_from(PIECES)) + text[end:]
    assert outcome(text, grammar_only=False) == outcome(text, grammar_only=True)


def test_depth_is_that_of_the_whole_path() -> None:
    """A part that was measured before, on a short path, still counts on a long one."""
    half = MAX_DEPTH // 2 + 5
    text = "module top(); b0 x (); a0 y (); endmodule\n"
    text += (
        "".join(f"module a{i}(); a{i + 1} u (); endmodule\n" for i in range(half))
        + f"module a{half}(); b0 u (); endmodule\n"
    )
    text += "".join(f"module b{i}(); b{i + 1} u (); endmodule\n" for i in range(half)) + f"module b{half}(); endmodule\n"
    with pytest.raises(LimitError, match="nested instances"):
        read_text(text)
    assert read_text("module top(input i); b0 x (i); endmodule " + "".join(
        f"module b{i}(input i); b{i + 1} u (i); endmodule\n" for i in range(MAX_DEPTH - 1)
    ) + f"module b{MAX_DEPTH - 1}(input i); AND2 g (.A(i)); endmodule").num_cells == 2  # fmt: skip


def test_missing_areas_are_all_listed() -> None:
    with pytest.raises(InputError, match=r"BAR \(1 cells\), FOO \(2 cells\)"):
        read_text("module t (a); input a; FOO x (.A(a)); FOO y (.A(a)); BAR z (.A(a)); AND2 g (.A(a)); endmodule")
    with pytest.raises(InputError, match="different module names"):
        read_text("module t (); endmodule\nmodule t (); endmodule")
