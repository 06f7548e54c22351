"""LEF, by the LEF/DEF 5.8 Language Reference, and against the package sc-leflib (a binding of the LEF 5.8 parser)."""

from __future__ import annotations

import os
from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from netpart.formats import CellType, SourceText
from netpart.formats.lef import looks_like_lef, read_lef
from netpart.netlist import Direction, InputError

IN, OUT, BOTH, UNKNOWN = Direction.INPUT, Direction.OUTPUT, Direction.INOUT, Direction.UNKNOWN

TECHNOLOGY = """VERSION 5.8 ;
BUSBITCHARS "[]" ;
DIVIDERCHAR "/" ;
UNITS
  DATABASE MICRONS 1000 ;
END UNITS
MANUFACTURINGGRID 0.005 ;
PROPERTYDEFINITIONS
  LAYER LEF58_TYPE STRING ;
  MACRO width REAL ;
END PROPERTYDEFINITIONS
LAYER M1
  TYPE ROUTING ;
  DIRECTION HORIZONTAL ;
  PITCH 0.05 ;
  WIDTH 0.02 ;
  PROPERTY LEF58_TYPE "TYPE ROUTING ; MACRO nothing END" ;
END M1
SITE core
  CLASS CORE ;
  SIZE 0.054 BY 0.27 ;
END core
"""
MACROS = """
# A comment with MACRO in it ; END
MACRO NAND2
  CLASS CORE ;
  ORIGIN 0 0 ;
  FOREIGN NAND2 0 0 ;
  SIZE 0.324 BY 0.27 ;
  SYMMETRY X Y ;
  SITE core ;
  PIN A
    DIRECTION INPUT ;
    USE SIGNAL ;
    ANTENNAGATEAREA 0.1 LAYER M1 ;
    PORT
      LAYER M1 ;
        RECT 0.072 0.07 0.09 0.2 ;
    END
  END A
  PIN B
    DIRECTION INPUT ;
    PORT
      LAYER M1 ;
      POLYGON 0 0 0.1 0 0.1 0.1 ;
    END
    PORT
      LAYER M1 ;
      RECT 0.2 0.07 0.21 0.2 ;
    END
  END B
  PIN Y
    DIRECTION OUTPUT ;
  END Y
  PIN Z
    DIRECTION OUTPUT TRISTATE ;
  END Z
  PIN VDD
    DIRECTION INOUT ;
    USE POWER ;
    SHAPE ABUTMENT ;
  END VDD
  PIN VSS
    USE GROUND ;
    DIRECTION INOUT ;
  END VSS
  OBS
    LAYER M1 ;
    RECT 0 0 0.1 0.1 ;
  END
END NAND2

MACRO RAM
  CLASS BLOCK ;
  SIZE 8.36 BY 16.8 ;
  PIN D[0]
    DIRECTION INOUT ;
    USE SIGNAL ;
  END D[0]
  PIN THROUGH
    DIRECTION FEEDTHRU ;
  END THROUGH
  PIN PLAIN
    USE CLOCK ;
  END PLAIN
END RAM
"""


def text(content: str) -> SourceText:
    return SourceText("demo.lef", content.encode(), "0" * 64)


def test_macros_with_their_pins() -> None:
    cells = read_lef(text(TECHNOLOGY + MACROS + "END LIBRARY\n"))
    assert list(cells) == ["NAND2", "RAM"]
    assert cells["NAND2"] == CellType("NAND2", 0.08748, {"A": IN, "B": IN, "Y": OUT, "Z": OUT})
    assert cells["RAM"] == CellType("RAM", 140.448, {"D[0]": BOTH, "THROUGH": BOTH, "PLAIN": UNKNOWN}, macro=True)


def test_a_technology_file_has_no_macros() -> None:
    assert read_lef(text(TECHNOLOGY)) == {}
    assert read_lef(text(TECHNOLOGY + 'BEGINEXT "ours"\nMACRO x ;\nENDEXT\nEND LIBRARY')) == {}


@pytest.mark.parametrize(
    ("words", "macro"),
    [
        ("CORE", False),
        ("CORE TIEHIGH", False),
        ("CORE SPACER", False),
        ("ENDCAP PRE", False),
        ("BLOCK", True),
        ("BLOCK BLACKBOX", True),
        ("RING", True),
        ("COVER BUMP", True),
        ("PAD INOUT", True),
        ("block", True),
    ],
)
def test_classes(words: str, macro: bool) -> None:
    """The classes of a macro in LEF 5.8."""
    assert read_lef(text(f"MACRO m CLASS {words} ; SIZE 1 BY 2 ; END m"))["m"] == CellType("m", 2.0, macro=macro)


def test_areas_are_exact_products() -> None:
    assert read_lef(text("MACRO m SIZE 0.1 BY 0.7 ; END m"))["m"].area == 0.07
    assert 0.1 * 0.7 != 0.07


def test_a_macro_without_size_or_class() -> None:
    assert read_lef(text("MACRO m FIXEDMASK ; END m"))["m"] == CellType("m")


@given(st.decimals("0", "99999", places=3), st.decimals("0", "99999", places=3))
def test_the_area_is_the_nearest_number_to_the_exact_product(width: object, height: object) -> None:
    area = read_lef(text(f"MACRO m SIZE {width:f} BY {height:f} ; END m"))["m"].area
    assert area == float(Fraction(str(width)) * Fraction(str(height)))


def broken(old: str, new: str) -> str:
    assert MACROS.count(old) == 1
    return MACROS.replace(old, new)


@pytest.mark.parametrize(
    ("content", "place", "expected"),
    [
        (broken("SIZE 0.324 BY 0.27", "SIZE wide BY 0.27"), "wide", "a size from 0"),
        (broken("SIZE 0.324 BY 0.27", "SIZE 0.324 BY -0.27"), "-0.27", "a size from 0"),
        (broken("SIZE 0.324 BY 0.27", "SIZE 1/3 BY 0.27"), "1/3", "a size from 0"),
        (broken("SIZE 0.324 BY 0.27", "SIZE 0.324 0.27"), "0.27", "BY"),
        (broken("SIZE 0.324 BY 0.27 ;", "SIZE 0.324 BY 0.27"), "SYMMETRY", ";"),
        (broken("CLASS BLOCK", "CLASS LUMP"), "LUMP", "one of COVER, RING, BLOCK, PAD, CORE, ENDCAP"),
        (broken("OUTPUT TRISTATE", "SIDEWAYS"), "SIDEWAYS", "one of INPUT, OUTPUT, INOUT, FEEDTHRU"),
        (broken("END Y", "END X"), "X\n", "Y"),
        (broken("END NAND2", "END NAND3"), "NAND3", "NAND2"),
        (broken("MACRO RAM", "MACRO NAND2"), "NAND2\n  CLASS BLOCK", "different macro names"),
        (MACROS.rstrip().removesuffix("END RAM"), "", "END RAM"),
        (MACROS[: MACROS.index("END THROUGH")], "", "END THROUGH"),
        (MACROS[: MACROS.index("RECT 0 0 0.1")], "", "END"),
        (broken("FOREIGN NAND2 0 0", 'FOREIGN "NAND2 0 0'), '"NAND2', "a closing quote"),
        ("PROPERTYDEFINITIONS MACRO width REAL ;", "", "END PROPERTYDEFINITIONS"),
        ("BEGINEXT", "", "ENDEXT"),
    ],
)
def test_faults_are_told_with_their_place(content: str, place: str, expected: str) -> None:
    with pytest.raises(InputError) as caught:
        read_lef(text(content))
    fault = caught.value
    before = content[: content.rindex(place)] if place else content
    assert (fault.line, fault.column) == (before.count("\n") + 1, len(before) - before.rfind("\n"))
    assert fault.expected == expected


def test_the_format_is_told_by_content() -> None:
    assert looks_like_lef(TECHNOLOGY.encode())
    assert looks_like_lef(MACROS.encode())
    design = b'VERSION 5.8 ;\nDIVIDERCHAR "/" ;\nDESIGN top ;\nUNITS DISTANCE MICRONS 1000 ;\nEND DESIGN\n'
    for other in (design, b"module MACRO; endmodule", b"library (x) { }", b"", b"a0 12"):
        assert not looks_like_lef(other)


def compare(path: Path) -> int:
    """The number of macros, after every one has been compared with what sc-leflib reads."""
    reference = pytest.importorskip("sc_leflib").parse(str(path)).get("macros", {})
    cells = read_lef(SourceText(str(path), path.read_bytes(), ""))
    assert list(cells) == list(reference)
    for name, macro in reference.items():
        size = macro["size"]
        assert cells[name].area == pytest.approx(size["width"] * size["height"], rel=1e-12)
        words = {"INPUT": IN, "OUTPUT": OUT, "OUTPUT TRISTATE": OUT, "INOUT": BOTH, "FEEDTHRU": BOTH, None: UNKNOWN}
        assert cells[name].pins == {
            pin: words[entry.get("direction")]
            for pin, entry in macro.get("pins", {}).items()
            if entry.get("use") not in ("POWER", "GROUND")
        }
    return len(reference)


def test_macros_agree_with_the_reference_parser(tmp_path: Path) -> None:
    path = tmp_path / "demo.lef"
    path.write_text(TECHNOLOGY + MACROS + "END LIBRARY\n")
    assert compare(path) == 2


@pytest.mark.skipif("NETPART_CIRCUITS" not in os.environ, reason="NETPART_CIRCUITS names no folder of circuits")
def test_published_libraries_agree_with_the_reference_parser() -> None:
    paths = sorted(Path(os.environ["NETPART_CIRCUITS"]).glob("**/*.lef"))
    if not paths:
        pytest.skip("no LEF files there")
    assert sum(map(compare, paths)) > 0
