"""The Verilog reader: against ISCAS-85 c17, against pyslang, and both of its paths against each other."""

from __future__ import annotations

import dataclasses
import hashlib
import re
from collections import Counter

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from netpart.formats import CellType, ReadOptions, SourceText
from netpart.formats.verilog import looks_like_verilog, read_verilog
from netpart.formats.verilog_grammar import CONSTANT, constant_bits
from netpart.netlist import CellFlag, Direction, InputError, Netlist, NetpartError
from tests.formats.slang_reference import Nets, slang_literal, slang_nets

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
    "RAM": CellType(
        "RAM",
        50.0,
        {**{f"D[{i}]": Direction.INPUT for i in range(4)}, "Q": Direction.OUTPUT},
        macro=True,
        sequential=True,
    ),
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


def nets_of(netlist: Netlist) -> dict[str, dict[str, int]]:
    """The direction of each cell on each net."""
    cells, bounds = list(netlist.cell_names), netlist.net_offsets.tolist()
    pins = list(zip(netlist.net_cells.tolist(), netlist.pin_directions.tolist(), strict=True))
    return {
        name: {cells[cell]: direction for cell, direction in pins[bounds[net] : bounds[net + 1]]}
        for net, name in enumerate(netlist.net_names)
    }


def shape(netlist: Netlist) -> tuple[set[str], Nets]:
    return set(netlist.cell_names), Counter(frozenset(net.items()) for net in nets_of(netlist).values())


def outcome(text: str | bytes, *, grammar_only: bool) -> object:
    """Everything that a reader can give: each field of the netlist, or the error."""
    try:
        top = "top" if re.search(r"\bmodule top\b", str(text)) else None
        netlist = read_text(text, top=top, default_area=1.0, grammar_only=grammar_only)
    except NetpartError as fault:
        return type(fault), str(fault)
    fields = {field.name: getattr(netlist, field.name) for field in dataclasses.fields(netlist)}
    return {name: value.tolist() if isinstance(value, np.ndarray) else value for name, value in fields.items()}


def test_c17() -> None:
    netlist = read_text(C17, default_area=1.0)
    assert (netlist.num_cells, netlist.num_nets) == (6 + 5 + 2, 11)
    assert netlist.total_area == 6
    nets = nets_of(netlist)
    assert nets["N11"] == {"NAND2_2": 2, "NAND2_3": 1, "NAND2_4": 1}
    assert nets["N3"] == {"N3": 2, "NAND2_1": 1, "NAND2_2": 1}
    assert nets["N22"] == {"N22": 1, "NAND2_5": 2}
    assert all(sorted(net.values())[-2:] == [1, 2] for net in nets.values())  # one driver
    with_cells = re.sub(r"nand (\w+) \((\w+), (\w+), (\w+)\)", r"NAND2 \1 (.A(\3), .B(\4), .Y(\2))", C17)
    assert {name: set(net) for name, net in nets_of(read_text(with_cells, unit_areas=True)).items()} == {
        name: set(net) for name, net in nets.items()
    }


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
    assert sorted(sorted(cell for cell, _ in net) for net in nets.elements()) == [
        ["ck", "u/1"], ["d[0]", "r/g", "ram"], ["d[1]", "r/g", "ram"], ["g", "h", "s/g"], ["g", "u/1"], ["h", "odd;name"],
        ["h", "q"], ["r/g"], ["s/g"], ["s/g", "u/1"],
    ]  # fmt: skip
    assert netlist.ignored_nets == (("gnd", "supply0", 1), ("t", "tied to 1", 1))
    assert netlist.notes == ("1 pins are tied to constants and join no net", "2 pins are left open")
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
    assert outcome(text, grammar_only=False) == outcome(text, grammar_only=True)
    assert shape(read_text(text, top="top")) == slang_nets(text, {"AND2", "DFF", "RAM"})


# IEEE Std 1364-2005, clause 3.5.1, from memory of its examples: sized, unsized, padded on the left; z reads as x here.
@pytest.mark.parametrize(
    ("constant", "bits"),
    [
        ("4'b1001", "1001"), ("5 'D 3", "00011"), ("3'b01x", "01x"), ("12'hx", "x" * 12), ("16'hz", "x" * 16),
        ("4'shf", "1111"), ("16'sd?", "x" * 16), ("659", f"{659:032b}"), ("'h 837FF", f"{0x837FF:032b}"),
        ("'o7460", f"{0o7460:032b}"),
        ("16'b0011_0101_0001_1111", "0011010100011111"), ("32'h 12ab_f001", f"{0x12ABF001:032b}"),
        ("12'h3x", "00000011xxxx"), ("12'hz3", "xxxxxxxx0011"), ("12'h0z3", "0000xxxx0011"), ("2'hf", "11"), ("1'B0", "0"),
    ],
)  # fmt: skip
def test_constants_of_the_standard(constant: str, bits: str) -> None:
    assert constant_bits(constant) == bits
    assert re.fullmatch(CONSTANT, constant)


@given(st.integers(1, 70), st.sampled_from("bodh"), st.data())
def test_constants_as_pyslang_has_them(width: int, base: str, data: st.DataObject) -> None:
    digits = {"b": "01xz_", "o": "07xZ_5", "d": "0129_", "h": "09aFXz_"}[base]
    body = data.draw(st.sampled_from(digits.replace("_", ""))) + data.draw(st.text(digits, max_size=12))
    constant = f"{width}'{base}{body}"
    assert constant_bits(constant) == slang_literal(constant)


def test_gates_by_place() -> None:
    """IEEE Std 1364-2005, clauses 7.2 and 7.3: the outputs of buf and not come first, and only the last is the input."""
    text = "module t (input a, output x, y, z, inout w); buf (x, y, a); xor (z, a, x), g (w, a, y); endmodule"
    assert nets_of(read_text(text, unit_areas=True)) == {
        "a": {"a": 2, "buf#1": 1, "xor#2": 1, "g": 1},
        "x": {"x": 1, "buf#1": 2, "xor#2": 1},
        "y": {"y": 1, "buf#1": 2, "g": 1},
        "z": {"z": 1, "xor#2": 2},
        "w": {"w": 3, "g": 2},
    }


def test_nets_take_the_name_nearest_to_the_top() -> None:
    netlist = read_text(
        "module t (input i, output o); wire m; s a (.x(i), .y(m)), b (.x(m), .y(o)); endmodule "
        "module s (input x, output y); wire p, q; AND2 g (.A(x), .Y(q)); assign p = q; assign y = p; endmodule"
    )
    assert list(netlist.net_names) == ["i", "o", "m"]
    through = read_text(
        "module t (input i, output o); s a (i, o); AND2 g (.A(o)); endmodule "
        "module s (input x, output y); assign y = x; endmodule"
    )
    assert nets_of(through) == {"i": {"i": 2, "o": 1, "g": 1}}


def test_black_boxes_are_cells() -> None:
    text = (
        "module t (input [1:0] a, output y); wire n; PAD p (a, n), q (.x({a[0], 1'b0}), .y()); "
        "AND2 g (n, a[0], y); endmodule "
        "module PAD (x, y); input [1:0] x; output y; endmodule module AND2 (output Y, input A, B); endmodule"
    )
    assert nets_of(read_text(text, default_area=3.0)) == {
        "a[1]": {"a[1]": 2, "p": 1},
        "a[0]": {"a[0]": 2, "p": 1, "q": 1, "g": 1},
        "n": {"p": 2, "g": 2},
        "y": {"y": 1, "g": 1},
    }
    assert read_text(text, default_area=3.0).total_area == 7.5
    with pytest.raises(InputError, match=r"none for PAD \(2 cells\)"):
        read_text(text)


def test_ports_of_another_width() -> None:
    """IEEE Std 1364-2005, clause 12.3.9.2: a port is assigned, so the low bits are joined; an input is padded with 0."""
    netlist = read_text(
        "module t (input a, input [3:0] b, output y); wire [2:0] z; s u (.x(a), .y(b)), v (.x(b), .y(z)); "
        "AND2 g (.A(b), .B(z[0]), .Y(y)); endmodule "
        "module s (input [1:0] x, output [1:0] y); AND2 l (.A(x[0]), .Y(y[0])), h (.A(x[1]), .Y(y[1])); endmodule"
    )
    nets = nets_of(netlist)
    assert nets["a"] == {"a": 2, "u/l": 1}
    assert nets["b[0]"] == {"b[0]": 2, "u/l": 2, "v/l": 1, "g": 1}
    assert nets["b[1]"] == {"b[1]": 2, "u/h": 2, "v/h": 1}
    assert (nets["b[3]"], nets["z[0]"], nets["z[1]"]) == ({"b[3]": 2}, {"v/l": 2, "g": 1}, {"v/h": 2})
    assert any("wider or narrower" in note for note in netlist.notes)


def test_instances_whose_paths_look_the_same() -> None:
    netlist = read_text(r"""
        module t (input i); s \a/b (i); m a (i); endmodule
        module m (input x); s b (x); endmodule
        module s (input x); AND2 g (.A(x)); endmodule
    """)
    assert list(netlist.module_names) == ["", "a/b", "a", r"a/\b"]
    assert list(netlist.cell_names) == ["i", "a/b/g", r"a/\b/g"]


def test_directives_and_files() -> None:
    text = (
        "`celldefine module t (input a); `timescale 1 ns / 10 ps\n`define X \\\n module\n AND2 u (.A(a), .B(b)); endmodule"
    )
    assert read_text(text).num_nets == 2
    parts = ["module t (input a); s u (a); endmodule", "module s (input x); AND2 g (.A(x)); endmodule"]
    netlist = read_verilog([source(part) for part in parts], LIBRARY, ReadOptions())
    assert nets_of(netlist) == {"a": {"a": 2, "u/g": 1}}
    assert [entry.format for entry in netlist.sources] == ["verilog", "verilog"]
    with pytest.raises(InputError, match="'s' again"):
        read_verilog([source(part) for part in [*parts, parts[1]]], LIBRARY, ReadOptions())


def test_line_ends_and_odd_bytes() -> None:
    text = "module t (a);\r\n input a;\r\n AND2 \\u\xffx (.A(a));\r\nendmodule\r\n".encode("latin-1")
    netlist = read_text(text)
    assert netlist.cell_names.bytes_at(1) == b"u\xffx"
    assert looks_like_verilog(b"// c\n/* d */ `timescale 1ns/1ps\n module x;")
    assert not looks_like_verilog(b"modulex")
