"""Output files that appear whole or not at all."""

from __future__ import annotations

import contextlib
import os
import tempfile
from collections.abc import Mapping
from pathlib import Path

from netpart.netlist import UsageError

__all__ = ["write_files"]


def write_files(directory: str | Path, contents: Mapping[str, bytes]) -> list[Path]:
    """Write files into a directory: all of them to temporary files first, flushed to the disk, then renamed.

    A fault before the first rename leaves the directory as it was. The renames follow in the order of `contents`, so
    the file that speaks of the others goes last.

    Raises
    ------
    UsageError
        If the directory or a file cannot be written, with the reason.
    """
    folder = Path(directory)
    waiting: list[tuple[str, Path]] = []
    try:
        folder.mkdir(parents=True, exist_ok=True)
        for name, data in contents.items():
            handle, temporary = tempfile.mkstemp(prefix=f".{name}.", dir=folder)
            waiting.append((temporary, folder / name))
            with os.fdopen(handle, "wb") as stream:
                stream.write(data)
                stream.flush()
                os.fsync(stream.fileno())
            os.chmod(temporary, 0o666 & ~_umask())
        for temporary, final in waiting:
            os.replace(temporary, final)
        _flush_directory(folder)
    except OSError as fault:
        raise UsageError(f"{fault.filename or folder}: cannot be written ({fault.strerror or fault})") from None
    finally:
        for temporary, _ in waiting:
            with contextlib.suppress(OSError):
                os.unlink(temporary)
    return [final for _, final in waiting]


def _umask() -> int:
    """The process's file mode mask; reading it means setting it for a moment."""
    mask = os.umask(0o022)
    os.umask(mask)
    return mask


def _flush_directory(folder: Path) -> None:
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)
