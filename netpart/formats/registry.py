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
from netpart.netlist import InputError, Netlist, Source

__all__ = ["read", "read_assignment"]

_KNOWN: tuple[tuple[str, Callable[[bytes], bool], tuple[str, ...]], ...] = (
    ("ispd98", looks_like_ispd98, (".net", ".netD")),
    ("ispd98 areas", looks_like_ispd98_areas, (".are",)),
    ("liberty", looks_like_liberty, (".lib",)),
    ("lef", looks_like_lef, (".lef",)),
    ("verilog", looks_like_verilog, (".v", ".vg", ".vo")),
)
_LIBRARIES: dict[str, Callable[[SourceText], dict[str, CellType]]] = {"liberty": read_liberty, "lef": read_lef}


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
        Netlist, libraries and areas in any order, plain or compressed; each is recognised by its content.
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
    InputError
        For a file that cannot be read, with the position; `NetlistError` for a netlist that breaks the model.
    """
    options = ReadOptions(top, unit_areas, default_area, tuple(ignore_nets))
    texts: dict[str, list[SourceText]] = {}
    order: list[Source] = []
    for path in dict.fromkeys((*map(str, paths), *map(str, library))):
        text = load(path)
        kind = _recognise(text)
        texts.setdefault(kind, []).append(text)
        order.append(Source(text.path, kind.split()[0], text.sha256))
    netlists = [kind for kind in ("verilog", "ispd98") if kind in texts]
    if len(netlists) != 1:
        found = "none" if not netlists else " and ".join(texts[kind][0].path for kind in netlists)
        raise InputError(str(paths[0]), expected="one netlist among the files", found=found)
    if netlists[0] == "verilog":
        types = unite_types(_LIBRARIES[kind](text) for kind in _LIBRARIES for text in texts.get(kind, ()))
        if "ispd98 areas" in texts:
            raise InputError(
                texts["ispd98 areas"][0].path, expected="Liberty or LEF with a Verilog netlist", found="areas"
            )
        netlist = read_verilog(texts["verilog"], types, options)
    else:
        areas = texts.get("ispd98 areas", [])
        for surplus in (*texts["ispd98"][1:], *areas[1:], *(texts[kind][0] for kind in _LIBRARIES if kind in texts)):
            raise InputError(surplus.path, expected="one circuit and its areas", found="one file more")
        netlist = read_ispd98(texts["ispd98"][0], areas[0] if areas else None, options)
    return netlist.with_sources(tuple(order))


def read_assignment(path: str | Path) -> list[tuple[str, str, int]]:
    """(cell, block, line) of every line of an assignment: CSV with the header ``cell,block`` (RFC 4180).

    Raises
    ------
    InputError
        For another header, a line that has not two fields, or text that is no CSV.
    """
    text = load(path)
    data = text.data.removeprefix(b"\xef\xbb\xbf").decode("utf-8", "surrogateescape")
    rows = csv.reader(io.StringIO(data, newline=""), strict=True)
    entries: list[tuple[str, str, int]] = []
    line = 1
    try:
        for number, row in enumerate(rows):
            if number == 0:
                if row != ["cell", "block"]:
                    raise InputError(path, line=1, column=1, expected="the header cell,block", found=",".join(row)[:40])
            elif len(row) != 2:
                shown = ",".join(row)[:40]
                raise InputError(path, line=line, column=1, expected="two fields: cell,block", found=repr(shown))
            else:
                entries.append((row[0], row[1], line))
            line = rows.line_num + 1
    except csv.Error as fault:
        raise InputError(path, line=line, column=1, expected="CSV", found=str(fault)) from None
    if not line > 1:
        raise InputError(path, line=1, column=1, expected="the header cell,block", found="nothing")
    return entries


def _recognise(text: SourceText) -> str:
    suffixes = Path(text.path).suffixes
    for kind, looks_like, _ in _KNOWN:
        if looks_like(text.data):
            return kind
    for kind, _, endings in _KNOWN:
        if any(ending in suffixes for ending in endings):
            return kind
    raise text.error(0, "structural Verilog, an ISPD98 circuit, Liberty or LEF")
