"""The survey on the terminal."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from rich.console import Console
from rich.padding import Padding
from rich.text import Text

from netpart.netlist import Netlist
from netpart.netlist.survey import Survey
from netpart.report.terminal import plain, print_notes, table

__all__ = ["show_survey"]

_MODULE_ROWS = 30


def show_survey(
    netlist: Netlist, found: Survey, spectrum: dict[str, Any] | None, warnings: Sequence[str], console: Console
) -> None:
    """Print the figures, one small table after the other."""
    console.print(Text(netlist.name or "netlist", style="bold"))
    counts = [
        (found.cells, "cells"),
        (found.nets, "nets"),
        (found.pins, "pins"),
        (found.ports, "ports"),
        (found.macros, "macros"),
        (found.sequential, "sequential"),
        (found.fixed, "fixed"),
    ]
    console.print(Text(" · ".join(f"{count:,} {what}" for count, what in counts if count or what in ("cells", "nets"))))
    share = f", {found.largest_area / found.area:.2%}" if found.area else ""
    console.print(
        Text(f"area {found.area:,.6g}; largest cell ")
        .append(plain(found.largest_cell))
        .append(f" with {found.largest_area:,.6g}{share}".replace("%", " %"))
    )
    for file in netlist.sources:
        console.print(Text(f"read {file.format} from ", style="dim").append(plain(file.path)))

    if found.types:
        types = table("type", "cells", "area", right=(1, 2))
        for row in found.types:
            types.add_row(plain(row.type), f"{row.cells:,}", f"{row.area:,.6g}")
        if found.num_types > len(found.types):
            types.add_row(f"… {found.num_types - len(found.types):,} more", "", "")
        _section(console, types)

    histogram = table("cells on a net", "nets", "", right=(1,))
    most = max((nets for _, _, nets in found.fan_out), default=1)
    for low, high, nets in found.fan_out:
        label = f"{low:,}" if low == high else f"{low:,} – {high:,}"
        histogram.add_row(label, f"{nets:,}", "▪" * max(1, round(24 * nets / most)))
    _section(console, histogram)

    if found.num_modules > 1:
        modules = table("module instance", "cells", "area", "share", right=(1, 2, 3))
        for entry in found.modules[:_MODULE_ROWS]:
            name = entry.path.rsplit("/", 1)[-1] or "(top)"
            part = f"{entry.area / found.area * 100:.1f} %" if found.area else "–"
            modules.add_row(Text("  " * entry.depth).append(plain(name)), f"{entry.cells:,}", f"{entry.area:,.6g}", part)
        if found.num_modules > min(len(found.modules), _MODULE_ROWS):
            hidden = found.num_modules - min(len(found.modules), _MODULE_ROWS)
            modules.add_row(f"… {hidden:,} more", "", "", "")
        _section(console, modules)

    figures = table("structure", "", right=())
    parts = found.components
    figures.add_row("connected parts", f"{len(parts):,}" + (f", largest {parts[0]:,} cells" if len(parts) > 1 else ""))
    if spectrum is not None:
        figures.add_row("λ1", f"{spectrum['lambda1']:.6g} (normalised Laplacian, clique weights w/(|e| − 1))")
        figures.add_row(
            "conductance", f"{spectrum['cheeger_low']:.4g} ≤ φ ≤ {spectrum['cheeger_high']:.4g} (Cheeger's inequality)"
        )
        figures.add_row("best of the sweep", f"φ = {spectrum['conductance']:.4g}")
    if found.rent is not None:
        figures.add_row(
            "Rent exponent",
            f"{found.rent.exponent:.3f} ± {found.rent.standard_error:.3f}, "
            f"{found.rent.terminals_per_cell:.2f} terminals per cell",
        )
    _section(console, figures)
    console.print()
    print_notes(console, map(str, found.oddities), "oddity", "yellow")
    print_notes(console, [*netlist.notes, *warnings], "note", "yellow")
    for net in netlist.ignored_nets[:10]:
        print_notes(console, [f"{net.name} is left out of the cut ({net.reason}, {net.num_pins:,} pins)"], "net", "yellow")


def _section(console: Console, content: Any) -> None:
    console.print()
    console.print(Padding(content, (0, 0, 0, 2)))
