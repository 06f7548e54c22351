"""Reading files: compression, limits, positions."""

from __future__ import annotations

import bz2
import gzip
import hashlib
import lzma
import os
import threading
import tracemalloc
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from netpart.formats import SourceText, load
from netpart.formats.source import position
from netpart.netlist import InputError, LimitError

PACKERS = {"gzip": gzip.compress, "bzip2": bz2.compress, "xz": lzma.compress}


@pytest.mark.parametrize("codec", PACKERS)
def test_compressed_files_are_told_by_content_whatever_their_name(tmp_path: Path, codec: str) -> None:
    packed = PACKERS[codec](b"module m; endmodule\n")
    path = tmp_path / "netlist.v"
    path.write_bytes(packed)
    text = load(path)
    assert text == SourceText(str(path), b"module m; endmodule\n", hashlib.sha256(packed).hexdigest())


@pytest.mark.parametrize("codec", PACKERS)
def test_all_streams_of_a_joined_archive_are_read(tmp_path: Path, codec: str) -> None:
    """RFC 1952, 2.2: a gzip file is a series of members; bzip2 and xz files may be joined in the same way."""
    path = tmp_path / "joined"
    path.write_bytes(b"".join(PACKERS[codec](part) for part in (b"first\n", b"", b"second\n" * 300_000)))
    assert load(path).data == b"first\n" + b"second\n" * 300_000


@pytest.mark.parametrize("codec", PACKERS)
def test_a_decompression_bomb_stops_early(tmp_path: Path, codec: str) -> None:
    path = tmp_path / "bomb"
    zeros = bytes(1 << 20)
    path.write_bytes(b"".join([PACKERS[codec](zeros * 32)] * 4))
    assert path.stat().st_size < 200_000
    tracemalloc.start()
    try:
        with pytest.raises(LimitError, match="decompresses to more than 1,000,000 bytes"):
            load(path, max_bytes=1_000_000)
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert peak < 16 << 20, "128 MiB must not be unpacked to see that they are more than 1 MB"


def test_the_limit_holds_for_plain_files_and_to_the_byte(tmp_path: Path) -> None:
    path = tmp_path / "plain"
    path.write_bytes(b"x" * 1000)
    assert load(path, max_bytes=1000).data == b"x" * 1000
    with pytest.raises(LimitError, match="is larger than 999 bytes"):
        load(path, max_bytes=999)
    path.write_bytes(gzip.compress(b"x" * 1000))
    assert load(path, max_bytes=1000).data == b"x" * 1000
    with pytest.raises(LimitError):
        load(path, max_bytes=999)


@pytest.mark.parametrize("codec", PACKERS)
@pytest.mark.parametrize("damage", ["cut", "changed"])
def test_damaged_archives_are_refused(tmp_path: Path, codec: str, damage: str) -> None:
    packed = PACKERS[codec](os.urandom(5000))
    path = tmp_path / "damaged"
    if damage == "cut":
        path.write_bytes(packed[:-20])
    else:
        path.write_bytes(packed[:2000] + bytes(byte ^ 255 for byte in packed[2000:2004]) + packed[2004:])
    with pytest.raises(InputError, match=f"damaged {codec} data"):
        load(path)


@pytest.mark.parametrize(
    "content", [b"", gzip.compress(b""), bz2.compress(b""), lzma.compress(b"")], ids=["plain", "gzip", "bzip2", "xz"]
)
def test_empty_files_are_refused(tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "empty"
    path.write_bytes(content)
    with pytest.raises(InputError, match="found an empty"):
        load(path)


def test_what_cannot_be_opened(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="No such file"):
        load(tmp_path / "missing.v")
    with pytest.raises(InputError, match="directory"):
        load(tmp_path)
    with pytest.raises(InputError, match="no file name"):
        load("a\0b")


def test_a_pipe_is_read_to_its_end(tmp_path: Path) -> None:
    path = tmp_path / "pipe"
    os.mkfifo(path)
    writer = threading.Thread(target=path.write_bytes, args=(b"from another program\n" * 50_000,))
    writer.start()
    text = load(path)
    writer.join()
    assert text.data == b"from another program\n" * 50_000


def test_byte_order_marks_and_wide_characters(tmp_path: Path) -> None:
    path = tmp_path / "marked"
    path.write_bytes("\ufeffwire größe x".encode())
    text = load(path)
    assert text.data.decode() == "wire größe x"
    fault = text.error(text.data.index(b"x"), "';'")
    assert (fault.line, fault.column, fault.found) == (1, 12, "'x'")


@given(st.text("ab\n\r", max_size=40), st.data())
def test_positions_match_the_plain_definition(text: str, data: st.DataObject) -> None:
    offset = data.draw(st.integers(0, len(text)))
    line, column = 1, 1
    for character in text[:offset]:
        line, column = (line + 1, 1) if character == "\n" else (line, column + 1)
    assert position(text.encode(), offset) == (line, column)
