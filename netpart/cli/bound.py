"""netpart bound: lower bounds alone."""

from __future__ import annotations

import argparse
import sys

from netpart.cli.console import output_console, progress_listener
from netpart.cli.options import (
    add_input_options,
    add_option,
    add_output_options,
    add_rule_options,
    parse_duration,
    read_netlist,
    reading_options,
    resolve_rules,
)
from netpart.report import describe_input, dump_json, show_bounds
from netpart.solve import Budget, Journal, find_bounds

__all__ = ["NAME", "SUMMARY", "add_options", "run"]

NAME = "bound"
SUMMARY = "Verified lower bounds: what no legal partition of a netlist can beat."


def add_options(parser: argparse.ArgumentParser) -> None:
    """Declare the command's options."""
    add_input_options(parser)
    add_rule_options(parser)
    group = parser.add_argument_group("engine")
    add_option(group, "--time-limit", kind=parse_duration, metavar="60s", help="stop with the best bound so far")
    add_output_options(parser, folder=False)


def run(arguments: argparse.Namespace) -> int:
    """0, also where no bound could be verified (the report says so)."""
    rules = resolve_rules(arguments)
    journal = Journal(None if arguments.quiet else progress_listener(arguments.verbose))
    with journal.stage("read", arguments.files[0]):
        netlist = read_netlist(arguments)
    bounds = find_bounds(
        netlist, rules, arguments.objective or "cut-nets", journal=journal, budget=Budget(arguments.time_limit)
    )
    if arguments.json:
        best = max((bound.value for bound in bounds), default=None)
        entries = [bound.to_dict() for bound in bounds]
        content = {"input": describe_input(netlist, reading_options(arguments)), "bounds": entries, "best_bound": best}
        sys.stdout.write(dump_json({**content, "warnings": journal.warnings}).decode())
    elif not arguments.quiet:
        show_bounds(netlist, rules, bounds, journal.warnings, output_console())
    return 0
