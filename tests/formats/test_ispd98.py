"""ISPD98 circuits, in the format published with C. J. Alpert, "The ISPD98 circuit benchmark suite", Proc. ISPD 1998."""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from netpart.formats import ReadOptions, SourceText, read
from netpart.formats.ispd98 import looks_like_ispd98, looks_like_ispd98_areas, read_ispd98
from netpart.netlist import MAX_PINS, CellFlag, Direction, IndexOverflowError, InputError, Netlist

# Four cells a0..a3, two pads p1 and p2, three nets; trailing blanks as in the published files.
NET = """0 \n9\n3\n6\n3\np1 s 1 \na0 l \na1 l \na0 s 1 \na2 l \na3 l \na1 l \na3 s 1 \np2 l \n"""
NET_D = """0\n9\n3\n6\n3\np1 s B \na0 l I \na1 l I \na0 s O \na2 l I \na3 l I \na1 l B \na3 s O \np2 l B\n"""
ARE = "a0 4\na1 2.5\na2 1e2\na3 0\np1 0\np2 0\n"
UNIT = ReadOptions(unit_areas=True)


def text(content: str, path: str = "folder/four.net") -> SourceText:
    return SourceText(path, content.encode(), "0" * 64)


def nets_of(netlist: Netlist) -> list[list[str]]:
    return [[netlist.cell_names[cell] for cell in netlist.cells_of(net)] for net in range(netlist.num_nets)]


def test_a_circuit_without_directions() -> None:
    netlist = read_ispd98(text(NET), None, UNIT)
    assert netlist.name == "four"
    assert list(netlist.cell_names) == ["a0", "a1", "a2", "a3", "p1", "p2"]
    assert list(netlist.net_names) == ["n0", "n1", "n2"]
    assert nets_of(netlist) == [["p1", "a0", "a1"], ["a0", "a2", "a3", "a1"], ["a3", "p2"]]
    assert netlist.has_flag(CellFlag.PORT).tolist() == [False] * 4 + [True] * 2
    assert netlist.areas.tolist() == [1] * 6, "pads count too where areas are one, as in the published cuts"
    assert not netlist.pin_directions.any()


def test_directions_and_areas() -> None:
    netlist = read_ispd98(text(NET_D, "four.netD.gz"), text(ARE), ReadOptions())
    assert netlist.name == "four"
    assert nets_of(netlist) == nets_of(read_ispd98(text(NET), None, UNIT))
    assert netlist.areas.tolist() == [4, 2.5, 100, 0, 0, 0]
    both, into, out = Direction.INOUT, Direction.INPUT, Direction.OUTPUT
    assert netlist.pin_directions.tolist() == [both, into, into, out, into, into, both, out, both]


def test_areas_that_are_not_given() -> None:
    with pytest.raises(InputError, match=r"expected areas .*, found none"):
        read_ispd98(text(NET), None, ReadOptions())
    assert read_ispd98(text(NET), None, ReadOptions(default_area=2.0)).areas.tolist() == [2] * 6
    partial = text("a1 7\np2 1\n", "four.are")
    with pytest.raises(InputError, match=r"four\.are: expected 6 areas, found none for 4 modules, first a0"):
        read_ispd98(text(NET), partial, ReadOptions())
    assert read_ispd98(text(NET), partial, ReadOptions(default_area=2.0)).areas.tolist() == [2, 7, 2, 2, 2, 1]


def test_a_cell_with_several_pins_on_a_net_counts_once_for_the_cut() -> None:
    netlist = read_ispd98(text("0\n4\n1\n2\n1\na0 s O\na1 l I\na0 l I\na0 l I\n"), None, UNIT)
    assert nets_of(netlist) == [["a0", "a1"]]
    assert netlist.net_pins.tolist() == [4]
    assert netlist.pin_directions.tolist() == [Direction.INOUT, Direction.INPUT]


def test_nets_left_out_on_request() -> None:
    netlist = read_ispd98(text(NET), None, ReadOptions(unit_areas=True, ignore_nets=("n1", "x*")))
    assert list(netlist.net_names) == ["n0", "n2"]
    assert nets_of(netlist) == [["p1", "a0", "a1"], ["a3", "p2"]]
    assert [tuple(net) for net in netlist.ignored_nets] == [("n1", "ignored on request", 4)]


def test_line_ends_and_blank_lines() -> None:
    expected = nets_of(read_ispd98(text(NET), None, UNIT))
    assert nets_of(read_ispd98(text(NET.replace("\n", "\r\n")), None, UNIT)) == expected
    assert nets_of(read_ispd98(text(NET.replace("\n", "\t\n\n ")), None, UNIT)) == expected
    assert nets_of(read_ispd98(text(NET.rstrip()), None, UNIT)) == expected


@pytest.mark.parametrize(
    ("content", "line", "column", "expected", "found"),
    [
        (NET.replace("0 \n", "1\n", 1), 1, 1, "0", "'1'"),
        ("0\n9\n3\nsix\n3\n", 4, 1, "the number of modules", "'six'"),
        ("0\n9\n3\n", 4, 1, "the number of modules", "the end of the file"),
        ("0\n9\n3\n1000000000\n3\na0 s\n", 4, 1, "no more modules than the file has room for", "1000000000"),
        (NET.replace("a2 l", "b2 l"), 10, 1, "a module aN or pN", "'b2'"),
        (NET.replace("a2 l", "  2a l"), 10, 3, "a module aN or pN", "'2a'"),
        (NET.replace("a2 l", "a2 m"), 10, 4, "s or l", "'m'"),
        (NET.replace("a2 l", "a2"), 10, 3, "s or l", "the end of the line"),
        (NET_D.replace("a2 l I", "a2 l X"), 10, 6, "1, a direction I, O or B, or the end of the line", "'X'"),
        (NET_D.replace("a2 l I", "a2 l 1 X"), 10, 8, "a direction I, O or B, or the end of the line", "'X'"),
        (NET_D.replace("a2 l I", "a2 l I I"), 10, 8, "the end of the line", "'I'"),
        (NET_D.replace("a2 l I", "a2 l 1 I 7"), 10, 10, "the end of the line", "'7'"),
        (NET.replace("a2 l", "a4 l"), 10, 1, "a module a0..a3 or p1..p2", "a4"),
        (NET.replace("a2 l", "p0 l"), 10, 1, "a module a0..a3 or p1..p2", "p0"),
        (NET.replace("a2 l", "p3 l"), 10, 1, "a module a0..a3 or p1..p2", "p3"),
        (NET.replace("a2 l", "a9999999999 l"), 10, 1, "a module a0..a3 or p1..p2", "a9999999999"),
        (NET.replace("p1 s", "p1 l"), 6, 1, "s, which begins the first net", "l"),
        (NET + "a2 l\n", 16, 1, "9 pins, as the header says", "10 at the end of the file"),
        (NET.replace("a2 l \n", ""), 14, 1, "9 pins, as the header says", "8 at the end of the file"),
        (NET.replace("a2 l", "a2 s"), 15, 1, "3 nets, as the header says", "4 at the end of the file"),
    ],
)
def test_faults_are_told_with_their_place(content: str, line: int, column: int, expected: str, found: str) -> None:
    with pytest.raises(InputError) as caught:
        read_ispd98(text(content), None, UNIT)
    fault = caught.value
    assert (fault.line, fault.column, fault.expected, fault.found) == (line, column, expected, found)


@pytest.mark.parametrize(
    ("content", "line", "column", "expected", "found"),
    [
        (ARE.replace("2.5", "-2.5"), 2, 4, "an area from 0", "'-2.5'"),
        (ARE.replace("2.5", "nan"), 2, 4, "an area from 0", "'nan'"),
        (ARE.replace("a1 2.5", "a1"), 2, 3, "an area from 0", "the end of the line"),
        (ARE.replace("a1 2.5", "a1 2.5 1"), 2, 8, "the end of the line", "'1'"),
        (ARE.replace("a1", "a0"), 2, 1, "each module once", "a0 again"),
        (ARE.replace("p2", "p3"), 6, 1, "a module a0..a3 or p1..p2", "p3"),
    ],
)
def test_faults_in_areas(content: str, line: int, column: int, expected: str, found: str) -> None:
    with pytest.raises(InputError) as caught:
        read_ispd98(text(NET), text(content, "four.are"), ReadOptions())
    fault = caught.value
    assert (fault.path, fault.line, fault.column) == ("four.are", line, column)
    assert (fault.expected, fault.found) == (expected, found)


def test_more_pins_than_can_be_counted() -> None:
    with pytest.raises(IndexOverflowError, match="the number of pins is 2,147,483,648; at most 2,147,483,647"):
        read_ispd98(text(f"0\n{MAX_PINS + 1}\n3\n6\n3\n"), None, UNIT)


def test_the_format_is_told_by_content() -> None:
    assert looks_like_ispd98(NET.encode())
    assert looks_like_ispd98_areas(ARE.encode())
    assert looks_like_ispd98_areas(b"\n\np7 1.5 \r\n")
    for other in (b"module m; endmodule", b"library (x) {}", b"0\n", b"1\n2\n", b"", b"VERSION 5.8 ;"):
        assert not looks_like_ispd98(other)
        assert not looks_like_ispd98_areas(other)


@given(st.data())
def test_what_is_written_in_the_published_format_is_read_back(data: st.DataObject) -> None:
    num_cells, num_pads = data.draw(st.integers(1, 6)), data.draw(st.integers(0, 4))
    names = [f"a{i}" for i in range(num_cells)] + [f"p{i + 1}" for i in range(num_pads)]
    nets = data.draw(st.lists(st.lists(st.sampled_from(names), min_size=1, max_size=6, unique=True), min_size=1))
    areas = data.draw(st.lists(st.floats(0, 1e6, width=32), min_size=len(names), max_size=len(names)))
    lines = ["0", str(sum(map(len, nets))), str(len(nets)), str(len(names)), str(num_cells - 1)]
    for net in nets:
        lines += [f"{name} {'l' if i else 's'}{data.draw(st.sampled_from(['', ' 1', ' O']))}" for i, name in enumerate(net)]
    order = data.draw(st.permutations(range(len(names))))
    are = "\n".join(f"{names[i]} {areas[i]!r}" for i in order)
    netlist = read_ispd98(text("\n".join(lines)), text(are, "x.are"), ReadOptions())
    assert list(netlist.cell_names) == names
    assert nets_of(netlist) == nets
    np.testing.assert_array_equal(netlist.areas, areas)


# Cells, nets, pins, as published with the suites (MCNC; C. J. Alpert, Proc. ISPD 1998, table 1).
SIZES = {
    "struct.net.gz": (1952, 1920, 5471),
    "primary2.net.gz": (3014, 3029, 11219),
    "biomed.net.gz": (6514, 5742, 21040),
    "industry3.net.gz": (15406, 21923, 65791),
    "ibm01.net.gz": (12752, 14111, 50566),
    "ibm01.netD.gz": (12752, 14111, 50566),
    "ibm03.net.gz": (23136, 27401, 93573),
}


@pytest.mark.skipif("NETPART_CIRCUITS" not in os.environ, reason="NETPART_CIRCUITS names no folder of circuits")
@pytest.mark.parametrize("name", SIZES)
def test_published_circuits_have_their_published_sizes(name: str) -> None:
    path = Path(os.environ["NETPART_CIRCUITS"]) / name
    if not path.exists():
        pytest.skip(f"{path} is not there")
    netlist = read(path, unit_areas=True)
    assert (netlist.num_cells, netlist.num_nets, int(netlist.net_pins.sum())) == SIZES[name]
