"""netpart bound: lower bounds alone."""

from __future__ import annotations

import argparse
import sys

from netpart.bounds import dump_certificates
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
    whole_from,
)
from netpart.report import describe_input, dump_json, show_bounds, write_files
from netpart.solve import Budget, Journal, find_bounds

__all__ = ["NAME", "SUMMARY", "add_options", "run"]

NAME = "bound"
SUMMARY = "Verified lower bounds: what no legal partition of a netlist can beat."


def add_options(parser: argparse.ArgumentParser) -> None:
    """Declare the command's options."""
    add_input_options(parser)
    add_rule_options(parser)
    group = parser.add_argument_group("engine")
    add_option(
        group, "--time-limit", kind=parse_duration, metavar="60s", help="time for the spreading bound, instead of work"
    )
    add_option(
        group, "--work", kind=_work, default=1000.0, metavar="N", help="trees x pins in millions, for it (default: 1000)"
    )
    add_option(
        group,
        "--jobs",
        kind=whole_from(1),
        metavar="N",
        help="threads; the bounds do not depend on it (default: one per processor)",
    )
    add_output_options(parser, folder=True)


def _work(text: str) -> float:
    try:
        work = float(text)
    except ValueError:
        work = -1.0
    if not 0 <= work < 1e12:
        raise argparse.ArgumentTypeError(f"expected a number from 0, found {text!r}")
    return work


def run(arguments: argparse.Namespace) -> int:
    """0, also where no bound could be verified (the report says so)."""
    rules = resolve_rules(arguments)
    journal = Journal(None if arguments.quiet else progress_listener(arguments.verbose))
    with journal.stage("read", arguments.files[0]):
        netlist = read_netlist(arguments)
    found = find_bounds(
        netlist,
        rules,
        arguments.objective or "cut-nets",
        work=arguments.work,
        time_limit=arguments.time_limit,
        diagonal=True,
        jobs=arguments.jobs,
        journal=journal,
        budget=Budget(),
    )
    if arguments.output is not None and found.certificates:
        write_files(arguments.output, {"certificate.npz": dump_certificates(netlist, rules, found.certificates)})
    if arguments.json:
        best = found.bounds[0].value
        entries = [bound.to_dict() for bound in found.bounds]
        content = {
            "input": describe_input(netlist, reading_options(arguments)),
            "bounds": entries,
            "best_bound": best,
            "history": found.history,
            "warnings": journal.warnings,
        }
        sys.stdout.write(dump_json(content).decode())
    elif not arguments.quiet:
        show_bounds(netlist, rules, found.bounds, journal.warnings, output_console())
    return 0
