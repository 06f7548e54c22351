"""The terminal report: what an engineer reads first, from 60 columns upwards."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from rich.console import Console, Group, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from netpart.bounds.bound import Bound
from netpart.netlist import Netlist, Rules
from netpart.report.audit import AuditReport
from netpart.solve.result import Result

__all__ = ["CAUTION", "plain", "print_notes", "scale", "show_audit", "show_bounds", "show_settings", "show_split", "table"]

CAUTION = (
    "Before this cut is used: clock, reset, power and voltage domains, scan order and timing across the blocks are not "
    "judged here unless a rule says so. Timing, power and test sign-off decide, and isolation of safety-related logic "
    "follows your safety standard and its responsible engineers."
)


_SHORT_NAMES = {"cut-nets": "cut", "connectivity": "connectivity", "terminals": "terminals"}


def show_split(result: Result, console: Console) -> None:
    """Print a run: verdict, figures, scale, blocks, what the spectrum says, warnings, caution."""
    console.print(_heading(result.netlist, result.request.rules))
    console.print(
        Text(
            f"objective {result.request.objective} · seed {result.request.seed} · "
            f"{_count(result.request.settings.starts, 'start')}",
            style="dim",
        )
    )
    console.print()
    console.print(Padding(_figures(result), (0, 0, 0, 2)))
    if result.gap is not None and result.best_bound is not None:
        console.print()
        width = min(console.width, 100) - 4
        console.print(
            Padding(scale(result.best_bound, result.cost, width, _SHORT_NAMES[result.request.objective]), (0, 0, 0, 2))
        )
    console.print()
    console.print(Padding(_blocks(result), (0, 0, 0, 2)))
    if result.spectral is not None:
        console.print()
        console.print(Padding(_spectrum(result.spectral), (0, 0, 0, 2)))
    console.print()
    if result.status == "interrupted":
        print_notes(console, [result.message], "interrupted", "bold red")
    print_notes(console, [*result.broken_rules], "broken rule", "bold red")
    print_notes(console, result.warnings, "note", "yellow")
    console.print(Text(CAUTION, style="dim"))


def show_bounds(netlist: Netlist, rules: Rules, bounds: Sequence[Bound], warnings: Sequence[str], console: Console) -> None:
    """Print lower bounds alone."""
    console.print(_heading(netlist, rules))
    console.print()
    rows = table("bound", "at least", "verified by", "seconds", right=(1, 3))
    for bound in sorted(bounds, key=lambda entry: -entry.value):
        rows.add_row(bound.kind, f"{bound.value:g}", bound.certificate or "", f"{bound.seconds:.2f}")
    if bounds:
        console.print(Padding(rows, (0, 0, 0, 2)))
        best = max(bound.value for bound in bounds)
        console.print()
        console.print(f"No legal partition has a cost below {best:g}.", style="bold", highlight=False)
    else:
        console.print("No bound could be verified; none is printed.", style="bold", highlight=False)
    print_notes(console, warnings, "note", "yellow")


def show_audit(report: AuditReport, console: Console) -> None:
    """Print every finding, wrong ones marked by a word as well as by colour."""
    rows = table("checked", "claimed or allowed", "found", "", right=())
    for finding in report.findings:
        verdict = Text("holds", style="green") if finding.holds else Text("WRONG", style="bold red")
        rows.add_row(plain(finding.subject), plain(finding.claimed), plain(finding.found), verdict)
    console.print(Padding(rows, (0, 0, 0, 2)))
    console.print()
    style = "bold green" if report.success else "bold red"
    console.print(Text(f"{report.status}: {report.message}", style=style))


def show_settings(rows: Sequence[tuple[str, str, str]], presets: Mapping[str, Mapping[str, Any]], console: Console) -> None:
    """Print every setting, its default and its meaning, and what the presets change."""
    listing = table("setting", "default", "meaning", right=())
    for name, default, meaning in rows:
        listing.add_row(name, default, meaning)
    console.print(listing)
    console.print()
    for name, values in presets.items():
        changed = ", ".join(f"{key} = {value}" for key, value in values.items()) or "the defaults"
        console.print(Text(f"effort {name}: {changed}"))


def scale(bound: float, cost: float, width: int, name: str = "cut") -> RenderableType:
    """Bound and cost on one scale from 0, with the part that no legal partition can reach and the part left open.

    Returns
    -------
    RenderableType
        Three lines of `width` columns: the figures, the bar, what its parts mean.
    """
    inner = max(width - 2, 10)
    closed = inner if cost <= 0 else min(inner, int(inner * bound / cost))
    bar = Text("▕", style="dim")
    bar.append("█" * closed, style="blue")
    bar.append("░" * (inner - closed), style="dark_orange")
    bar.append("▏", style="dim")
    left, right = f"bound {bound:g}", f"{name} {cost:g}"
    at = max(0, min(closed + 1 - len(left), width - len(right) - len(left) - 2))
    figures = Text(" " * at).append(left, style="bold blue")
    figures.append(" " * (width - at - len(left) - len(right))).append(right, style="bold")
    meaning = Text("█", style="blue").append(" proved impossible   ", style="dim")
    if closed < inner:
        meaning.append("░", style="dark_orange").append(" open: a better one may exist", style="dim")
    else:
        meaning.append(f"the {name} is proved optimal", style="bold")
    return Group(figures, bar, meaning)


def _heading(netlist: Netlist, rules: Rules) -> Text:
    name = netlist.name or (netlist.sources[0].path if netlist.sources else "netlist")
    text = Text(name, style="bold")
    text.append(
        f"  {netlist.num_cells:,} cells · {netlist.num_nets:,} nets · {int(netlist.net_pins.sum()):,} pins · "
        f"area {netlist.total_area:,.6g}",
        style="not bold",
    )
    shares = ""
    if len(set(rules.shares)) > 1:
        shares = " · shares " + ":".join(f"{float(share) * 100:.4g}" for share in rules.shares)
    text.append(
        f"\n{_count(rules.num_blocks, 'block')} · tolerance {float(rules.tolerance) * 100:.4g} %{shares}",
        style="not bold dim",
    )
    return text


def _figures(result: Result) -> Table:
    grid = Table.grid(padding=(0, 2))
    grid.add_column(no_wrap=True)
    grid.add_column(justify="right", no_wrap=True)
    grid.add_column()
    partition, netlist = result.partition, result.netlist
    weighted = "" if partition.cut_nets == partition.num_cut else f"weights of {partition.num_cut:,} nets"
    share = f"{partition.num_cut / netlist.num_nets:.2%} of all nets".replace("%", " %") if netlist.num_nets else ""
    grid.add_row("cut nets", Text(f"{partition.cut_nets:,.10g}", style="bold"), weighted or share)
    if result.request.objective != "cut-nets" or result.request.rules.num_blocks > 2:
        grid.add_row("connectivity", f"{partition.connectivity:,.10g}", "Σ w(e) (blocks touched − 1)")
        grid.add_row("terminals", f"{partition.terminals:,.10g}", "Σ w(e) (blocks touched), cut nets")
    if result.best_bound is None:
        grid.add_row("lower bound", "–", "none verified")
    else:
        best = max((bound for bound in result.bounds if bound.verified), key=lambda bound: bound.value)
        grid.add_row("lower bound", Text(f"{best.value:,.10g}", style="bold blue"), f"{best.kind}, verified")
    if result.gap is not None:
        meaning = "proved optimal" if result.gap == 0 else "at most this much better can any legal cut be"
        grid.add_row("gap", Text(f"{result.gap * 100:.1f} %", style="bold"), meaning)
    verdict = Text("LEGAL", style="bold green") if not result.broken_rules else Text("NOT LEGAL", style="bold red")
    allowed = f"of {float(result.request.rules.tolerance) * 100:.4g} % allowed"
    deviation = partition.imbalance(netlist, result.request.rules)
    grid.add_row("balance", verdict, f"largest deviation {deviation * 100:.2f} % {allowed}")
    return grid


def _blocks(result: Result) -> Table:
    partition, rules = result.partition, result.request.rules
    total = result.netlist.total_area
    rows = table("block", "area", "share", "allowed", "cells", "terminals", right=(1, 2, 3, 4, 5))
    for i, name in enumerate(rules.block_names):
        target = float(rules.shares[i])
        low, high = (target * (1 + sign * float(rules.tolerance)) * 100 for sign in (-1, 1))
        share = f"{partition.block_areas[i] / total * 100:.2f} %" if total else "–"
        rows.add_row(
            plain(name),
            f"{partition.block_areas[i]:,.6g}",
            share,
            f"{low:.4g} – {high:.4g} %",
            f"{partition.block_cells[i]:,}",
            f"{partition.block_terminals[i]:,}",
        )
    return rows


def _spectrum(spectral: dict[str, Any]) -> Text:
    text = Text("spectrum", style="dim")
    text.append(f"  λ1 ≈ {spectral['lambda1']:.4g}: every cut of the clique graph has conductance ")
    text.append(f"{spectral['cheeger_low']:.4g} ≤ φ, and some φ ≤ {spectral['cheeger_high']:.4g} (Cheeger)")
    if spectral["conductance"] is not None:
        text.append(f"; the sweep's best has φ = {spectral['conductance']:.4g}")
    return text


def table(*headings: str, right: Iterable[int]) -> Table:
    """A table without lines; `right` names the columns of figures."""
    made = Table(box=None, pad_edge=False, padding=(0, 3, 0, 0), header_style="dim")
    for i, heading in enumerate(headings):
        made.add_column(heading, justify="right" if i in right else "left", overflow="fold")
    return made


def print_notes(console: Console, notes: Iterable[str], label: str, style: str) -> None:
    """A line a note."""
    for note in notes:
        console.print(Text.assemble((f"{label}: ", style), plain(note)))


def plain(text: str) -> Text:
    """Names from a netlist are data: control characters are shown, never sent to the terminal."""
    return Text("".join(c if c.isprintable() else c.encode("unicode_escape", "replace").decode() for c in text))


def _count(number: int, noun: str) -> str:
    return f"{number:,} {noun}" + ("" if number == 1 else "s")
