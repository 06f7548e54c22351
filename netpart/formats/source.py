"""Input files: plain or compressed, told apart by content, read whole with a limit on the decompressed size."""

from __future__ import annotations

import bz2
import codecs
import gzip
import hashlib
import io
import lzma
import zlib
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from netpart.netlist import InputError, LimitError

__all__ = ["MAX_BYTES", "SourceText", "load", "position"]

MAX_BYTES = 8 * 1024**3
"""Default limit on the decompressed size of one file."""

_CHUNK = 1 << 20
_CODECS: tuple[tuple[bytes, str, Callable[[io.BytesIO], io.BufferedIOBase]], ...] = (
    (b"\x1f\x8b", "gzip", lambda raw: gzip.GzipFile(fileobj=raw)),
    (b"BZh", "bzip2", bz2.BZ2File),
    (b"\xfd7zXZ\x00", "xz", lzma.LZMAFile),
)


@dataclass(frozen=True, slots=True)
class SourceText:
    """A file as it was read.

    Attributes
    ----------
    path : str
        As the user named it.
    data : bytes
        Decompressed content, without a byte order mark.
    sha256 : str
        Of the file as it lies on disk.
    """

    path: str
    data: bytes
    sha256: str

    def error(self, offset: int, expected: str, found: str | None = None, kind: type[InputError] = InputError) -> InputError:
        """An error that points at a byte of this file; `found` defaults to the word that stands there."""
        line, column = position(self.data, offset)
        return kind(self.path, line=line, column=column, expected=expected, found=found or _word_at(self.data, offset))


def load(path: str | Path, max_bytes: int = MAX_BYTES) -> SourceText:
    """Read one file, or a pipe to its end.

    Raises
    ------
    InputError
        If it cannot be opened, its compression is damaged, or it is empty.
    LimitError
        If it holds or decompresses to more than `max_bytes`; reading stops there.
    """
    try:
        with open(path, "rb") as file:
            packed = _read_at_most(file, max_bytes)
    except OSError as fault:
        raise InputError(path, reason=fault.strerror or "cannot be read") from None
    except ValueError:
        raise InputError(path, reason="is no file name") from None
    if packed is None:
        raise LimitError(path, reason=f"is larger than {max_bytes:,} bytes")
    data, what = packed, "file"
    for magic, codec, opener in _CODECS:
        if packed.startswith(magic):
            data, what = _decompress(path, opener(io.BytesIO(packed)), codec, max_bytes), f"{codec} file"
    if not data:
        raise InputError(path, expected="text", found=f"an empty {what}")
    return SourceText(str(path), data.removeprefix(codecs.BOM_UTF8), hashlib.sha256(packed).hexdigest())


def _decompress(path: str | Path, stream: io.BufferedIOBase, codec: str, max_bytes: int) -> bytes:
    try:
        data = _read_at_most(stream, max_bytes)
    except (OSError, EOFError, zlib.error, lzma.LZMAError) as fault:
        raise InputError(path, reason=f"damaged {codec} data ({fault})") from None
    if data is None:
        raise LimitError(path, reason=f"decompresses to more than {max_bytes:,} bytes")
    return data


def _read_at_most(stream: io.BufferedIOBase, max_bytes: int) -> bytes | None:
    """The rest of a stream, or None as soon as it proves longer than `max_bytes`."""
    chunks: list[bytes] = []
    size = 0
    while chunk := stream.read(_CHUNK):
        size += len(chunk)
        if size > max_bytes:
            return None
        chunks.append(chunk)
    return b"".join(chunks)


def position(data: bytes, offset: int) -> tuple[int, int]:
    """Line and column, both from 1 and in characters, of a byte offset."""
    start = data.rfind(b"\n", 0, offset) + 1
    return data.count(b"\n", 0, offset) + 1, len(data[start:offset].decode("utf-8", "replace")) + 1


def _word_at(data: bytes, offset: int) -> str:
    if offset >= len(data):
        return "the end of the file"
    word = data[offset : offset + 40].split(maxsplit=1)
    return repr(word[0].decode("utf-8", "replace")) if word else "white space"
