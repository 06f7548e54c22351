"""Damaged files: every reader either reads the text or refuses it with a place in it; nothing else is raised."""

from __future__ import annotations

from collections.abc import Callable

import pytest
from hypothesis import given
from hypothesis import strategies as st

from netpart.formats import ReadOptions, SourceText
from netpart.formats.ispd98 import looks_like_ispd98, looks_like_ispd98_areas, read_ispd98
from netpart.formats.lef import looks_like_lef, read_lef
from netpart.formats.liberty import looks_like_liberty, read_liberty
from netpart.formats.verilog import looks_like_verilog, read_verilog
from netpart.netlist import InputError, NetlistError
from tests.formats.test_ispd98 import ARE, NET, NET_D
from tests.formats.test_lef import MACROS, TECHNOLOGY
from tests.formats.test_liberty import LIBRARY
from tests.formats.test_verilog import C17
from tests.formats.test_verilog import LIBRARY as TYPES

UNIT = ReadOptions(unit_areas=True)
LOOKS = (looks_like_ispd98, looks_like_ispd98_areas, looks_like_liberty, looks_like_lef, looks_like_verilog)
READERS: dict[str, tuple[str, Callable[[SourceText], object]]] = {
    "circuit": (NET, lambda text: read_ispd98(text, None, UNIT)),
    "circuit with directions": (NET_D, lambda text: read_ispd98(text, None, UNIT)),
    "areas": (ARE, lambda text: read_ispd98(SourceText("four.net", NET.encode(), ""), text, ReadOptions())),
    "Liberty": (LIBRARY, read_liberty),
    "LEF": (TECHNOLOGY + MACROS, read_lef),
    "Verilog": (C17, lambda text: read_verilog([text], TYPES, UNIT)),
}
PIECES = st.sampled_from(
    [
        b"",
        b" ",
        b"\n",
        b'"',
        b"{",
        b"}",
        b"(",
        b")",
        b";",
        b"/*",
        b"*/",
        b"//",
        b"#",
        b"END",
        b"\\\n",
        b"\0",
        b"\xff",
        b"9" * 30,
    ]
)


@given(st.sampled_from(list(READERS)), st.data())
def test_damaged_text_is_read_or_refused(name: str, data: st.DataObject) -> None:
    content, reader = READERS[name]
    text = content.encode()
    for _ in range(data.draw(st.integers(1, 3))):
        start = data.draw(st.integers(0, len(text)))
        end = data.draw(st.integers(start, min(len(text), start + 30)) | st.just(len(text)))
        text = text[:start] + data.draw(PIECES) + text[end:]
    for looks_like in LOOKS:
        looks_like(text)
    fault = None
    try:
        reader(SourceText("damaged", text, ""))
    except InputError as raised:
        fault = raised
    except NetlistError:
        return
    if fault is not None and fault.line is not None:
        lines = text.split(b"\n")
        assert 1 <= fault.line <= len(lines)
        assert fault.column is not None
        assert 1 <= fault.column <= len(lines[fault.line - 1].decode("utf-8", "replace")) + 1


@pytest.mark.parametrize(
    "filler", [b"/* a */ ", b"// a\n", b"\\\n", b"# a\n", b"(* a *) ", b'"a" ', b" ", b"/*", b"(*", b'"']
)
def test_telling_formats_apart_takes_no_more_than_linear_time(filler: bytes) -> None:
    """Backtracking over that many comments would not end."""
    for looks_like in LOOKS:
        assert not looks_like(filler * 5000 + b"?")
