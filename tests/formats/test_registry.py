"""Files told apart by content, in any order; assignments."""

from __future__ import annotations

import csv
import gzip
import hashlib
import io
import itertools
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from netpart.formats import read, read_assignment
from netpart.netlist import CellFlag, Direction, InputError, Netlist, UsageError

VERILOG = "module top (a, y); input a; output y; wire n; BUF b (.A(a), .Y(n)); FLOP f (.D(n), .Q(y)); endmodule\n"
LIBERTY = """library (l) {
cell (FLOP) { area : 4; ff (Q, QN) { } pin (D) { direction : input; } pin (Q) { direction : output; }
} cell (BUF) { area : 1.5; } }"""
LEF = """VERSION 5.8 ; MACRO BUF CLASS CORE ; SIZE 1 BY 2 ; PIN A DIRECTION INPUT ; END A
PIN Y DIRECTION OUTPUT ; END Y END BUF
MACRO FLOP CLASS CORE ; PIN D END D END FLOP"""
NET = "0\n4\n2\n3\n2\na0 s\na1 l\na1 s\na2 l\n"
ARE = "a0 3\na1 4\na2 5\n"
ALL = {"top.v": VERILOG, "cells.lib": LIBERTY, "cells.lef": LEF, "three.net": NET, "three.are": ARE}


@pytest.fixture
def files(tmp_path: Path) -> dict[str, Path]:
    for name, content in ALL.items():
        (tmp_path / name).write_text(content)
    return {name: tmp_path / name for name in ALL}


def areas_of(netlist: Netlist) -> dict[str, float]:
    return dict(zip(netlist.cell_names, netlist.areas.tolist(), strict=True))


def test_files_in_any_order_and_in_either_list(files: dict[str, Path]) -> None:
    names = ["top.v", "cells.lib", "cells.lef"]
    for order in itertools.permutations(names):
        for split in range(4):
            given_paths = [files[name] for name in order]
            netlist = read(*given_paths[:split], library=given_paths[split:])
            assert areas_of(netlist) == {"a": 0, "y": 0, "b": 2, "f": 4}, "the LEF size of BUF, the Liberty area of FLOP"
            flags = dict(zip(netlist.cell_names, netlist.cell_flags.tolist(), strict=True))
            assert flags == {"a": CellFlag.PORT, "y": CellFlag.PORT, "b": 0, "f": CellFlag.SEQUENTIAL}
            n = netlist.net_names.find("n")
            pins = netlist.pin_directions[netlist.net_offsets[n] : netlist.net_offsets[n + 1]]
            assert sorted(pins.tolist()) == [Direction.INPUT, Direction.OUTPUT]
            assert [source.format for source in netlist.sources] == [
                {"top.v": "verilog", "cells.lib": "liberty", "cells.lef": "lef"}[name] for name in order
            ]


def test_every_file_is_recorded_with_its_digest(files: dict[str, Path]) -> None:
    packed = files["cells.lef"].with_suffix(".gz")
    packed.write_bytes(gzip.compress(LEF.encode()))
    netlist = read(files["top.v"], library=[files["cells.lib"], packed])
    for source, path in zip(netlist.sources, (files["top.v"], files["cells.lib"], packed), strict=True):
        assert source.path == str(path)
        assert source.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()


def test_a_circuit_and_its_areas(files: dict[str, Path]) -> None:
    for order in itertools.permutations(["three.net", "three.are"]):
        netlist = read(*(files[name] for name in order))
        assert areas_of(netlist) == {"a0": 3, "a1": 4, "a2": 5}
        assert [source.format for source in netlist.sources] == ["ispd98", "ispd98"]
    assert areas_of(read(files["three.net"], unit_areas=True)) == {"a0": 1, "a1": 1, "a2": 1}
    assert areas_of(read(files["three.net"], default_area=2.5)) == {"a0": 2.5, "a1": 2.5, "a2": 2.5}


def test_a_file_given_twice_is_read_once(files: dict[str, Path]) -> None:
    netlist = read(files["top.v"], files["cells.lef"], library=[files["cells.lef"], files["cells.lib"]])
    assert len(netlist.sources) == 3


def test_content_goes_before_the_suffix(files: dict[str, Path], tmp_path: Path) -> None:
    strange = [tmp_path / "netlist.lib", tmp_path / "library.net", tmp_path / "no_suffix"]
    for path, content in zip(strange, (VERILOG, LIBERTY, LEF), strict=True):
        path.write_text(content)
    assert read(*strange).num_cells == 4


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("broken.v", None),
        ("broken.v.gz", None),
        ("broken.lib", "an attribute, a group or '}'"),
        ("broken.net", "0"),
        ("broken.NetD", "0"),
        ("broken.are", "a module aN or pN"),
    ],
)
def test_the_suffix_decides_where_the_content_tells_nothing(
    files: dict[str, Path], tmp_path: Path, name: str, expected: str | None
) -> None:
    path = tmp_path / name
    path.write_text("?? neither\n")
    beside = [] if name.startswith(("broken.v", "broken.n", "broken.N")) else [files["top.v"], files["cells.lef"]]
    if name == "broken.are":
        beside = [files["three.net"]]
    with pytest.raises(InputError) as caught:
        read(*beside, path)
    assert (caught.value.path, caught.value.line, caught.value.column) == (str(path), 1, 1)
    assert expected is None or caught.value.expected == expected


@pytest.mark.parametrize(
    "junk", [b"\x7fELF\x02\x01\x01" + bytes(range(256)), b"PK\x03\x04", b"\xff\xfe\x00m", b"hello world"]
)
def test_unknown_files_are_refused_with_the_formats_that_are_known(tmp_path: Path, junk: bytes) -> None:
    path = tmp_path / "junk"
    path.write_bytes(junk)
    with pytest.raises(InputError, match=r"expected structural Verilog, an ISPD98 circuit or its areas, Liberty, or LEF"):
        read(path)


@pytest.mark.parametrize(
    ("names", "at", "message"),
    [
        (["top.v", "three.net"], "three.net", "no second netlist beside"),
        (["top.v", "three.are"], "three.are", "Liberty or LEF beside Verilog"),
        (["cells.lib", "cells.lef"], "cells.lib", "a netlist among the files"),
        (["three.net", "three.are", "cells.lef"], "cells.lef", "one file too many"),
        (["three.net", "cells.lib"], "cells.lib", "one file too many"),
    ],
)
def test_combinations_that_make_no_sense(files: dict[str, Path], names: list[str], at: str, message: str) -> None:
    with pytest.raises(InputError, match=message) as caught:
        read(*(files[name] for name in names))
    assert caught.value.path == str(files[at])


def test_two_circuits_or_two_files_of_areas(files: dict[str, Path], tmp_path: Path) -> None:
    for name in ("three.net", "three.are"):
        again = tmp_path / f"again_{name}"
        again.write_text(ALL[name])
        with pytest.raises(InputError, match="one file too many"):
            read(files["three.net"], files["three.are"], again)


def test_requests_that_make_no_sense(files: dict[str, Path]) -> None:
    with pytest.raises(UsageError, match="no file is given"):
        read()
    for area in (-1.0, float("inf"), float("nan")):
        with pytest.raises(UsageError, match="a finite number from 0"):
            read(files["three.net"], default_area=area)


def test_an_assignment(tmp_path: Path) -> None:
    path = tmp_path / "assignment.csv"
    path.write_bytes(b'\xef\xbb\xbfcell,block\r\nu1/a,B0\r\n"odd, ""name""",B1\r\n"two\nlines",B0\r\nlast,B1')
    assert read_assignment(path) == [("u1/a", "B0", 2), ('odd, "name"', "B1", 3), ("two\nlines", "B0", 4), ("last", "B1", 6)]
    path.write_text("cell,block\n")
    assert read_assignment(path) == []


@pytest.mark.parametrize(
    ("content", "line", "message"),
    [
        ("block,cell\na,B0\n", 1, "expected the header cell,block, found 'block,cell'"),
        ("\ncell,block\n", 1, "found an empty line"),
        ("a,B0\n", 1, "expected the header cell,block, found 'a,B0'"),
        ("cell,block\na,B0\nb\n", 3, "expected a cell and a block, found 'b'"),
        ("cell,block\na,B0,x\n", 2, "expected a cell and a block, found 'a,B0,x'"),
        ("cell,block\na,\n", 2, "expected a cell and a block, found 'a,'"),
        ("cell,block\n,B0\n", 2, "expected a cell and a block, found ',B0'"),
        ("cell,block\na,B0\n\nb,B0\n", 3, "expected a cell and a block, found an empty line"),
        ("cell,block\na,B0\nb,B1\na,B1\n", 4, "expected each cell once, found 'a' again, after line 2"),
        ('cell,block\na,B0\n"b,B1\nc,B0\n', 3, "unexpected end of data"),
        ('cell,block\n"a"b,B0\n', 2, "expected CSV"),
        ("cell,block\n" + "x" * 200_000 + ",B0\n", 2, "field larger than field limit"),
    ],
)
def test_faults_in_an_assignment(tmp_path: Path, content: str, line: int, message: str) -> None:
    path = tmp_path / "assignment.csv"
    path.write_text(content)
    with pytest.raises(InputError) as caught:
        read_assignment(path)
    assert (caught.value.path, caught.value.line, caught.value.column) == (str(path), line, 1)
    assert message in str(caught.value)


NAMES = st.text(st.characters(exclude_categories=("Cs",), exclude_characters="\0"), min_size=1, max_size=8)


@given(st.dictionaries(NAMES, NAMES))
def test_what_the_csv_module_writes_is_read_back(tmp_path_factory: pytest.TempPathFactory, blocks: dict[str, str]) -> None:
    buffer = io.StringIO()
    writer = csv.writer(buffer)
    writer.writerows([("cell", "block"), *blocks.items()])
    path = tmp_path_factory.mktemp("csv") / "assignment.csv"
    path.write_bytes(buffer.getvalue().encode())
    assert [(cell, block) for cell, block, _ in read_assignment(path)] == list(blocks.items())
