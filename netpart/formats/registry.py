"""Which reader a file needs: told by content, whatever the order in which files are given."""

from __future__ import annotations

import csv
import io
from collections.abc import Callable, Sequence
from pathlib import Path

from netpart.formats.ispd98 import looks_like_ispd98, looks_like_ispd98_areas, read_ispd98
from netpart.formats.lef import looks_like_lef, read_lef
from netpart.formats.liberty import looks_like_liberty, read_liberty
from netpart.formats.library import CellType, ReadOptions, unite_types
from netpart.formats.source import SourceText, load
from netpart.formats.verilog import looks_like_verilog, read_verilog
from netpart.netlist import InputError, Netlist, Source, UsageError

__all__ = ["read", "read_assignment"]

_Reader = Callable[[SourceText], dict[str, CellType]]

_KINDS: tuple[tuple[str, Callable[[bytes], bool], tuple[str, ...]], ...] = (
    ("ispd98", looks_like_ispd98, (".net", ".netd")),
    ("ispd98 areas", looks_like_ispd98_areas, (".are",)),
    ("liberty", looks_like_liberty, (".lib",)),
    ("lef", looks_like_lef, (".lef",)),
    ("verilog", looks_like_verilog, (".v", ".vg", ".vo")),
)
_LIBRARIES: tuple[tuple[str, _Reader], ...] = (("lef", read_lef), ("liberty", read_liberty))
_FORMATS = "structural Verilog, an ISPD98 circuit or its areas, Liberty, or LEF"


def read(
    *paths: str | Path,
    library: Sequence[str | Path] = (),
    top: str | None = None,
    unit_areas: bool = False,
    default_area: float | None = None,
    ignore_nets: Sequence[str] = (),
) -> Netlist:
    """Read a netlist from files.

    Parameters
    ----------
    *paths, library : str or Path
        Netlist, libraries and areas in any order, plain or compressed; each is recognised by its content, or where that
        tells nothing by its suffix, and it makes no difference in which of the two lists a file stands.
    top : str, optional
        The top module of a Verilog netlist, where it is not the only module that no other one instantiates.
    unit_areas : bool
        Every cell has area 1.
    default_area : float, optional
        The area of cell types that no library describes.
    ignore_nets : sequence of str
        Globs of names of nets to leave out.

    Raises
    ------
    UsageError
        If no file or an impossible default area is given.
    InputError
        For a file that cannot be read, with the position; for a file too much or too few.
    NetlistError
        For a netlist that breaks the model.

    Notes
    -----
    Where LEF and Liberty give a cell different areas, the LEF size counts: it is what the cell covers on the chip.
    Among files of one format, the first that describes a cell type counts.
    """
    if default_area is not None and not 0 <= default_area < float("inf"):
        raise UsageError(f"the default area must be a finite number from 0, found {default_area:g}")
    options = ReadOptions(top, unit_areas, default_area, tuple(ignore_nets))
    texts: dict[str, list[SourceText]] = {kind: [] for kind, _, _ in _KINDS}
    sources: list[Source] = []
    for path in dict.fromkeys((*map(str, paths), *map(str, library))):
        text = load(path)
        kind = _recognise(text)
        texts[kind].append(text)
        sources.append(Source(text.path, kind.split()[0], text.sha256))
    if not sources:
        raise UsageError("no file is given")
    verilog, circuits, areas = texts["verilog"], texts["ispd98"], texts["ispd98 areas"]
    if verilog and circuits:
        raise InputError(circuits[0].path, expected=f"no second netlist beside {verilog[0].path}", found="a circuit")
    if not verilog and not circuits:
        raise InputError(sources[0].path, expected="a netlist among the files", found="libraries and areas alone")
    if verilog:
        if areas:
            raise InputError(areas[0].path, expected="Liberty or LEF beside Verilog", found="areas of a circuit")
        types = unite_types(reader(text) for kind, reader in _LIBRARIES for text in texts[kind])
        netlist = read_verilog(verilog, types, options)
    else:
        for surplus in (*circuits[1:], *areas[1:], *texts["liberty"], *texts["lef"]):
            raise InputError(surplus.path, expected="one circuit and one file of areas", found="one file too many")
        netlist = read_ispd98(circuits[0], areas[0] if areas else None, options)
    return netlist.with_sources(tuple(sources))


def read_assignment(path: str | Path) -> list[tuple[str, str, int]]:
    """(cell, block, line) of every line of an assignment: CSV with the header ``cell,block`` (RFC 4180).

    Raises
    ------
    InputError
        For another header, a line without two fields, a cell that stood before, or text that is no CSV.
    """
    text = load(path)
    rows = csv.reader(io.StringIO(text.data.decode("utf-8", "surrogateescape"), newline=""), strict=True)
    entries: list[tuple[str, str, int]] = []
    lines: dict[str, int] = {}
    line = 1
    try:
        for row in rows:
            if line == 1 and row != ["cell", "block"]:
                raise InputError(path, line=1, column=1, expected="the header cell,block", found=_shown(row))
            if len(row) != 2 or not all(row):
                raise InputError(path, line=line, column=1, expected="a cell and a block", found=_shown(row))
            if line > 1:
                first = lines.setdefault(row[0], line)
                if first != line:
                    found = f"{row[0]!r} again, after line {first}"
                    raise InputError(path, line=line, column=1, expected="each cell once", found=found)
                entries.append((row[0], row[1], line))
            line = rows.line_num + 1
    except csv.Error as fault:
        raise InputError(path, line=line, column=1, expected="CSV with short fields", found=str(fault)) from None
    return entries


def _recognise(text: SourceText) -> str:
    for kind, looks_like, _ in _KINDS:
        if looks_like(text.data):
            return kind
    suffixes = [suffix.lower() for suffix in Path(text.path).suffixes]
    for kind, _, endings in _KINDS:
        if any(ending in suffixes for ending in endings):
            return kind
    raise text.error(0, _FORMATS)


def _shown(row: list[str]) -> str:
    return repr(",".join(row)[:40]) if row else "an empty line"
