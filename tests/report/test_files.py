"""Output files appear whole or not at all."""

from __future__ import annotations

import os
import stat
from pathlib import Path

import pytest

from netpart.netlist import UsageError
from netpart.report import write_files


def test_all_files_stand_with_their_content(tmp_path: Path) -> None:
    written = write_files(tmp_path / "new" / "folder", {"a.csv": b"one", "b.json": b"two"})
    assert [path.read_bytes() for path in written] == [b"one", b"two"]
    assert sorted(path.name for path in (tmp_path / "new" / "folder").iterdir()) == ["a.csv", "b.json"]


def test_files_have_the_users_mode(tmp_path: Path) -> None:
    mask = os.umask(0o027)
    try:
        (path,) = write_files(tmp_path, {"a.csv": b"one"})
    finally:
        os.umask(mask)
    assert stat.S_IMODE(path.stat().st_mode) == 0o640


def test_a_folder_that_is_a_file_is_refused(tmp_path: Path) -> None:
    (tmp_path / "taken").write_text("x")
    with pytest.raises(UsageError, match="taken"):
        write_files(tmp_path / "taken", {"a.csv": b"one"})
    assert (tmp_path / "taken").read_text() == "x"


def test_a_fault_half_way_leaves_the_old_files(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    write_files(tmp_path, {"a.csv": b"old a", "b.json": b"old b"})
    flushed = []

    def failing_fsync(descriptor: int) -> None:
        flushed.append(descriptor)
        if len(flushed) == 2:
            raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", failing_fsync)
    with pytest.raises(UsageError, match="No space left on device"):
        write_files(tmp_path, {"a.csv": b"new a", "b.json": b"new b"})
    assert {path.name: path.read_bytes() for path in tmp_path.iterdir()} == {"a.csv": b"old a", "b.json": b"old b"}
