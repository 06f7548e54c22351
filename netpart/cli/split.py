"""netpart split: partition, bound, report."""

from __future__ import annotations

import argparse
import signal
import sys

from netpart.bounds import dump_certificates
from netpart.cli.console import output_console, progress_listener
from netpart.cli.options import (
    add_engine_options,
    add_input_options,
    add_output_options,
    add_rule_options,
    read_netlist,
    reading_options,
    resolve_rules,
    resolve_settings,
)
from netpart.report import dump_json, format_assignment, make_record, show_split, write_files
from netpart.solve import Budget, Journal, kernels_are_cached, split

__all__ = ["NAME", "SUMMARY", "add_options", "run"]

NAME = "split"
SUMMARY = "Divide a netlist into area-balanced blocks with few crossing nets, with a verified lower bound."


def add_options(parser: argparse.ArgumentParser) -> None:
    """Declare the command's options."""
    add_input_options(parser)
    add_rule_options(parser)
    add_engine_options(parser)
    add_output_options(parser, folder=True)


def run(arguments: argparse.Namespace) -> int:
    """0: legal. 1: a rule is broken. 130: interrupted, best so far written."""
    rules, settings = resolve_rules(arguments), resolve_settings(arguments)
    journal = Journal(None if arguments.quiet else progress_listener(arguments.verbose))
    with journal.stage("read", arguments.files[0]):
        netlist = read_netlist(arguments)
    if not kernels_are_cached():
        journal.say("kernels", "this first run compiles them, which takes some 10 s; later runs don't")
    budget = Budget(arguments.time_limit)
    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, lambda *_: budget.request_stop())
    result = split(
        netlist,
        rules=rules,
        objective=arguments.objective or "cut-nets",
        settings=settings,
        rng=arguments.seed,
        jobs=arguments.jobs,
        bound_time=arguments.bound_time,
        budget=budget,
        journal=journal,
    )
    assignment = format_assignment(netlist, result.partition.blocks, rules)
    record = make_record(result, reading=reading_options(arguments), jobs=arguments.jobs, assignment=assignment)
    if arguments.output is not None:
        files = {"assignment.csv": assignment}
        if result.certificates:
            files["certificate.npz"] = dump_certificates(netlist, rules, result.certificates)
        write_files(arguments.output, {**files, "record.json": dump_json(record)})
    if arguments.json:
        sys.stdout.write(dump_json(record).decode())
    elif not arguments.quiet:
        show_split(result, output_console())
    if result.status == "interrupted":
        return 130
    return 1 if result.broken_rules else 0
