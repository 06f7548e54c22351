"""Input files: plain or compressed, told apart by content, read whole with a limit on the decompressed size."""

from __future__ import annotations

import bz2
import gzip
import hashlib
import io
import lzma
import zlib
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO, cast

from netpart.netlist import InputError, LimitError

__all__ = ["MAX_BYTES", "SourceText", "load", "position"]

MAX_BYTES = 8 * 1024**3
"""Default limit on the decompressed size of one file."""

_CHUNK = 1 << 20
_CODECS: tuple[tuple[bytes, str, Callable[[BinaryIO], BinaryIO]], ...] = (
    (b"\x1f\x8b", "gzip", lambda raw: cast(BinaryIO, gzip.GzipFile(fileobj=raw))),
    (b"BZh", "bzip2", lambda raw: cast(BinaryIO, bz2.BZ2File(raw))),
    (b"\xfd7zXZ\x00", "xz", lambda raw: cast(BinaryIO, lzma.open(raw))),
)


@dataclass(frozen=True, slots=True)
class SourceText:
    """A file as it was read.

    Attributes
    ----------
    path : str
        As the user named it.
    data : bytes
        Decompressed content.
    sha256 : str
        Of the file as it lies on disk.
    """

    path: str
    data: bytes
    sha256: str

    def error(self, offset: int, expected: str, found: str | None = None) -> InputError:
        """An error that points at a byte of this file; `found` defaults to the word that stands there."""
        line, column = position(self.data, offset)
        return InputError(
            self.path, line=line, column=column, expected=expected, found=found or _word_at(self.data, offset)
        )


def load(path: str | Path, max_bytes: int = MAX_BYTES) -> SourceText:
    """Read one file.

    Raises
    ------
    InputError
        If it cannot be opened, its compression is damaged, or it is empty.
    LimitError
        If it decompresses to more than `max_bytes`.
    """
    try:
        packed = Path(path).read_bytes()
    except OSError as fault:
        raise InputError(path, reason=fault.strerror or "cannot be read") from None
    if not packed:
        raise InputError(path, expected="a netlist, library or placement", found="an empty file")
    data = packed
    for magic, name, opener in _CODECS:
        if packed.startswith(magic):
            data = _decompress(path, opener(io.BytesIO(packed)), name, max_bytes)
            break
    if len(data) > max_bytes:
        raise LimitError(path, reason=f"is larger than {max_bytes:,} bytes")
    return SourceText(str(path), data, hashlib.sha256(packed).hexdigest())


def _decompress(path: str | Path, stream: BinaryIO, codec: str, max_bytes: int) -> bytes:
    chunks: list[bytes] = []
    size = 0
    try:
        while chunk := stream.read(_CHUNK):
            size += len(chunk)
            if size > max_bytes:
                raise LimitError(path, reason=f"decompresses to more than {max_bytes:,} bytes")
            chunks.append(chunk)
    except (OSError, EOFError, zlib.error, lzma.LZMAError) as fault:
        raise InputError(path, reason=f"damaged {codec} data after {size:,} decompressed bytes ({fault})") from None
    if not size:
        raise InputError(path, expected="a netlist, library or placement", found=f"empty {codec} data")
    return b"".join(chunks)


def position(data: bytes, offset: int) -> tuple[int, int]:
    """Line and column, both from 1, of a byte offset."""
    start = data.rfind(b"\n", 0, offset) + 1
    return data.count(b"\n", 0, offset) + 1, offset - start + 1


def _word_at(data: bytes, offset: int) -> str:
    if offset >= len(data):
        return "the end of the file"
    word = data[offset : offset + 40].split(maxsplit=1)
    return repr(word[0].decode("utf-8", "replace")) if word else "white space"
