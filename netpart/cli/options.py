"""Options that several commands share, and how their values are found: flag, then NETPART_… variable, then default."""

from __future__ import annotations

import argparse
import os
import re
from collections.abc import Callable, Sequence
from fractions import Fraction
from typing import Any

from netpart.cli.console import output_console
from netpart.formats import read
from netpart.netlist import OBJECTIVES, Netlist, Rules, UsageError
from netpart.report import show_settings
from netpart.solve import EFFORTS, Settings

__all__ = [
    "add_engine_options",
    "add_input_options",
    "add_option",
    "add_output_options",
    "add_rule_options",
    "parse_duration",
    "read_netlist",
    "reading_options",
    "resolve_rules",
    "resolve_settings",
    "whole_from",
]


def add_option(
    group: Any, flag: str, *, kind: Callable[[str], Any] = str, default: Any = None, help: str, **extra: Any
) -> None:
    """Add a valued option whose default may come from the environment: ``--time-limit`` from NETPART_TIME_LIMIT."""
    variable = "NETPART_" + flag.lstrip("-").replace("-", "_").upper()
    from_environment = os.environ.get(variable)
    if from_environment is not None:
        try:
            default = kind(from_environment)
        except argparse.ArgumentTypeError as fault:
            raise UsageError(f"{variable}: {fault}") from None
        if extra.get("choices") and default not in extra["choices"]:
            raise UsageError(f"{variable}: expected one of {', '.join(extra['choices'])}, found {from_environment!r}")
    group.add_argument(flag, type=kind, default=default, help=help, **extra)


def add_input_options(parser: argparse.ArgumentParser) -> None:
    """The netlist and how to read it."""
    group = parser.add_argument_group("input")
    group.add_argument(
        "files",
        nargs="+",
        metavar="NETLIST",
        help="netlist files, plain or compressed; libraries and areas may stand among them, in any order",
    )
    group.add_argument(
        "--library", nargs="+", action="extend", default=[], metavar="FILE", help="Liberty or LEF, for areas and pins"
    )
    add_option(group, "--top", metavar="NAME", help="the top module, where it is not the only one nobody instantiates")
    group.add_argument("--unit-areas", action="store_true", help="every cell counts 1, whatever the library says")
    add_option(group, "--default-area", kind=_area, metavar="AREA", help="the area of cell types that no library describes")
    group.add_argument(
        "--ignore-net", action="append", default=[], metavar="GLOB", help="leave nets of this name out of the cut"
    )


def add_rule_options(parser: argparse.ArgumentParser) -> None:
    """What a partition must keep to."""
    group = parser.add_argument_group("rules")
    add_option(group, "--blocks", kind=whole_from(1), metavar="K", help="number of blocks (default: 2)")
    add_option(group, "--shares", metavar="60,40", help="target share of each block (default: equal)")
    add_option(
        group,
        "--tolerance",
        kind=_tolerance,
        metavar="10%",
        help="how far a block's area may leave its share, relative (default: 10%%, that is 45:55 for two blocks)",
    )
    add_option(
        group,
        "--objective",
        choices=OBJECTIVES,
        help="what is minimised (default: cut-nets)",
    )


class _ListSettings(argparse.Action):
    def __init__(self, option_strings: Sequence[str], dest: str, **extra: Any) -> None:
        super().__init__(option_strings, argparse.SUPPRESS, nargs=0, **extra)

    def __call__(self, parser: argparse.ArgumentParser, *_: Any, **__: Any) -> None:
        show_settings(Settings.describe(), EFFORTS, output_console())
        parser.exit()


def add_engine_options(parser: argparse.ArgumentParser) -> None:
    """How hard to try."""
    group = parser.add_argument_group("engine")
    add_option(group, "--effort", choices=tuple(EFFORTS), help="preset of settings (default: normal)")
    add_option(group, "--settings", metavar="FILE.toml", help="settings by name; see --list-settings")
    group.add_argument("--list-settings", action=_ListSettings, help="print every setting with its default, and stop")
    group.add_argument("--set", action="append", default=[], metavar="NAME=VALUE", help="one setting by name, over the file")
    add_option(group, "--starts", kind=whole_from(1), metavar="N", help="independent starts, the best is kept")
    add_option(group, "--seed", kind=whole_from(0), default=1, metavar="N", help="random seed (default: 1)")
    add_option(
        group,
        "--jobs",
        kind=whole_from(1),
        default=os.cpu_count() or 1,
        metavar="N",
        help="threads; the result does not depend on it (default: one per processor)",
    )
    add_option(
        group,
        "--time-limit",
        kind=parse_duration,
        metavar="60s",
        help="stop with the best so far; makes a run hard to reproduce",
    )
    add_option(
        group,
        "--bound-time",
        kind=parse_pause,
        metavar="10s",
        help="time for the lower bound instead of its work budget (not reproducible); 0s leaves it at the spectral one",
    )


def add_output_options(parser: argparse.ArgumentParser, *, folder: bool) -> None:
    """Where results go."""
    group = parser.add_argument_group("output")
    if folder:
        add_option(group, "-o", dest="output", metavar="DIR", help="write the result files into this folder")
    group.add_argument("--json", action="store_true", help="the record on stdout, nothing else there")
    group.add_argument("--quiet", action="store_true", help="no progress, no report; files and exit code only")
    group.add_argument("-v", "--verbose", action="count", default=0, help="more progress; twice: internal detail too")


def reading_options(arguments: argparse.Namespace) -> dict[str, Any]:
    """The options that decide what a netlist file means; a record keeps them."""
    return {
        "top": arguments.top,
        "unit_areas": arguments.unit_areas,
        "default_area": arguments.default_area,
        "ignore_nets": arguments.ignore_net,
    }


def read_netlist(arguments: argparse.Namespace) -> Netlist:
    """The netlist that the input options name."""
    return read(*arguments.files, library=tuple(arguments.library), **reading_options(arguments))


def resolve_rules(arguments: argparse.Namespace) -> Rules:
    """The rules that the options ask for; shares alone say how many blocks there are."""
    shares = None if arguments.shares is None else [part.strip() for part in re.split("[,:]", arguments.shares)]
    blocks = arguments.blocks or (2 if shares is None else len(shares))
    tolerance = Fraction(1, 10) if arguments.tolerance is None else arguments.tolerance
    return Rules.from_request(blocks=blocks, shares=shares, tolerance=tolerance)


def resolve_settings(arguments: argparse.Namespace) -> Settings:
    """Preset, then file, then --set, then the flags of their own."""
    settings = Settings.from_effort("normal")
    if arguments.settings is not None:
        settings = Settings.from_file(arguments.settings, settings)
    if arguments.effort is not None:
        if arguments.settings is not None:
            raise UsageError('--effort and --settings exclude each other; write effort = "…" into the file')
        settings = Settings.from_effort(arguments.effort)
    values: dict[str, Any] = {}
    for item in arguments.set:
        name, sign, text = item.partition("=")
        if not sign:
            raise UsageError(f"--set: expected NAME=VALUE, found {item!r}")
        values[name.strip()] = Settings.from_text(name.strip(), text.strip())
    if arguments.starts is not None:
        values["starts"] = arguments.starts
    return Settings.from_mapping(values, settings, source="command line")


_UNITS = {"": 1.0, "s": 1.0, "ms": 1e-3, "m": 60.0, "min": 60.0, "h": 3600.0}


def parse_duration(text: str) -> float:
    """Seconds from ``60``, ``60s``, ``1.5min``, ``2h``."""
    seconds = parse_pause(text)
    if seconds <= 0:
        raise argparse.ArgumentTypeError(f"expected a duration above zero, found {text!r}")
    return seconds


def parse_pause(text: str) -> float:
    """Seconds as in `parse_duration`, or 0."""
    match = re.fullmatch(r"\s*(\d+(?:\.\d+)?)\s*([a-z]*)\s*", text)
    if match is None or match[2] not in _UNITS:
        raise argparse.ArgumentTypeError(f"expected a duration such as 60s or 2min, found {text!r}")
    seconds = float(match[1]) * _UNITS[match[2]]
    if seconds >= 1e9:
        raise argparse.ArgumentTypeError(f"expected a duration below 1e9 s, found {text!r}")
    return seconds


def whole_from(low: int) -> Callable[[str], int]:
    """A parser of whole numbers from `low`."""

    def parse(text: str) -> int:
        if not re.fullmatch(r"\d{1,18}", text.strip()) or int(text) < low:
            raise argparse.ArgumentTypeError(f"expected a whole number from {low}, found {text!r}")
        return int(text)

    return parse


def _area(text: str) -> float:
    try:
        area = float(text)
    except ValueError:
        area = -1.0
    if not 0 <= area < float("inf"):
        raise argparse.ArgumentTypeError(f"expected an area from 0, found {text!r}")
    return area


def _tolerance(text: str) -> Fraction:
    try:
        return Rules.from_request(tolerance=text).tolerance
    except UsageError as fault:
        raise argparse.ArgumentTypeError(str(fault)) from None
