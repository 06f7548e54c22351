"""python -m benchmarks quality|speed|scale [--circuits DIR] [--seeds N] [--limit SECONDS] [--cells N]"""

from __future__ import annotations

import argparse
import resource
import statistics
import time

import numpy as np
from rich.console import Console
from rich.table import Table

from benchmarks.baselines import BASELINES, run_limited
from benchmarks.circuits import find_circuits, make_synthetic
from netpart.netlist import Netlist, Partition, Rules
from netpart.refine import kernels
from netpart.solve import Budget, Journal, Settings
from netpart.solve.kway import partition_blocks


def main() -> None:
    parser = argparse.ArgumentParser(prog="python -m benchmarks", description=__doc__)
    parser.add_argument("what", choices=("quality", "speed", "scale"))
    parser.add_argument("--circuits", metavar="DIR", help="a folder of .net circuits")
    parser.add_argument("--seeds", type=int, default=5)
    parser.add_argument("--limit", type=float, default=600.0, help="seconds that a baseline may take")
    parser.add_argument("--cells", type=int, default=1_000_000, help="size of the largest synthetic netlist")
    arguments = parser.parse_args()
    {"quality": quality, "speed": speed, "scale": scale}[arguments.what](arguments)


def partition(netlist: Netlist, rules: Rules, settings: Settings, seed: int, jobs: int = 2) -> tuple[float, float]:
    """(cut, seconds) of one run of the engine, reading and bounds apart; the result must be legal."""
    started = time.perf_counter()
    blocks = partition_blocks(
        netlist, rules.window(netlist), None, "cut-nets", settings, seed, jobs=jobs, budget=Budget(), journal=Journal()
    )
    seconds = time.perf_counter() - started
    found = Partition.from_blocks(netlist, blocks, rules.num_blocks)
    if found.broken_rules(netlist, rules):
        raise SystemExit(f"{netlist.name}: illegal result: {found.broken_rules(netlist, rules)[0]}")
    return found.cut_nets, seconds


def plain_pass(netlist: Netlist) -> float:
    """Seconds of one plain pass over all pins: counting the sides of every net."""
    side = np.arange(netlist.num_cells, dtype=np.int32) % 2
    counts = np.empty((netlist.num_nets, 2), np.int32)
    times = []
    for _ in range(5):
        started = time.perf_counter()
        kernels.count_sides(netlist.net_offsets, netlist.net_cells, netlist.net_weights, side, counts)
        times.append(time.perf_counter() - started)
    return min(times)


def quality(arguments: argparse.Namespace) -> None:
    """Cuts by effort and tolerance, with general libraries on the same netlists in the same run."""
    console = Console()
    table = Table(box=None)
    for heading in ("circuit", "tolerance", "effort", "best", "mean", "seconds", *BASELINES, "times faster than networkx"):
        table.add_column(heading, justify="left" if heading in ("circuit", "effort") else "right")
    warm_up()
    for name, netlist in find_circuits(arguments.circuits):
        for tolerance in ("10%", "2%"):
            rules = Rules.from_request(2, tolerance=tolerance)
            others = {}
            if tolerance == "10%":
                others = {other: run_limited(other, netlist, rules, arguments.limit) for other in BASELINES}
            for effort in ("quick", "normal", "thorough"):
                seeds = range(arguments.seeds if effort != "thorough" else min(arguments.seeds, 3))
                runs = [partition(netlist, rules, Settings.from_effort(effort), seed) for seed in seeds]
                cuts, seconds = [cut for cut, _ in runs], statistics.mean(time_ for _, time_ in runs)
                row = [name, tolerance, effort, f"{min(cuts):g}", f"{statistics.mean(cuts):.1f}", f"{seconds:.2f}"]
                swaps = others.get("networkx swaps")
                for other in BASELINES:
                    found = others.get(other)
                    row.append("" if not others else f"> {arguments.limit:g} s" if found is None else f"{found[0]:g}")
                ratio = (arguments.limit if swaps is None else swaps[1]) / seconds
                row.append("" if not others else f"{'> ' if swaps is None else ''}{ratio:.0f}")
                table.add_row(*row)
    console.print(table)


def speed(arguments: argparse.Namespace) -> None:
    """One quick start, in nanoseconds per pin and in plain passes over all pins."""
    console = Console()
    table = Table(box=None)
    for heading in ("circuit", "pins", "seconds", "ns per pin", "plain passes"):
        table.add_column(heading, justify="left" if heading == "circuit" else "right")
    warm_up()
    for name, netlist in find_circuits(arguments.circuits):
        rules = Rules.from_request(2)
        times = [
            partition(netlist, rules, Settings.from_effort("quick"), seed, jobs=1)[1] for seed in range(arguments.seeds)
        ]
        seconds = statistics.median(times)
        passes = seconds / plain_pass(netlist)
        table.add_row(
            name, f"{netlist.num_pins:,}", f"{seconds:.3f}", f"{seconds / netlist.num_pins * 1e9:.0f}", f"{passes:.0f}"
        )
    console.print(table)


def scale(arguments: argparse.Namespace) -> None:
    """Quick starts on synthetic netlists of growing size, with peak memory."""
    console = Console()
    table = Table(box=None)
    for heading in ("cells", "pins", "cut", "seconds", "ns per pin", "plain passes", "engine memory, MB"):
        table.add_column(heading, justify="right")
    warm_up()
    size = 10_000
    while size <= arguments.cells:
        netlist = make_synthetic(size)
        before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
        cut, seconds = partition(netlist, Rules.from_request(2), Settings.from_effort("quick"), 1)
        memory = (resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before) / 1024
        pins = netlist.num_pins
        passes = seconds / plain_pass(netlist)
        table.add_row(
            f"{size:,}",
            f"{pins:,}",
            f"{cut:g}",
            f"{seconds:.2f}",
            f"{seconds / pins * 1e9:.0f}",
            f"{passes:.0f}",
            f"{memory:.0f}",
        )
        size *= 10
    console.print(table)


def warm_up() -> None:
    """Compile every kernel before anything is measured."""
    for effort in ("quick", "normal"):
        partition(make_synthetic(1000), Rules.from_request(2), Settings.from_effort(effort), 1)


if __name__ == "__main__":
    main()
