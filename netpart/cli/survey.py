"""netpart survey: what is in a netlist."""

from __future__ import annotations

import argparse
import sys

from netpart.cli.console import output_console, progress_listener
from netpart.cli.options import add_input_options, add_output_options, read_netlist, reading_options
from netpart.netlist import survey
from netpart.report import describe_input, dump_json, show_survey
from netpart.solve import Journal, describe_spectrum

__all__ = ["NAME", "SUMMARY", "add_options", "run"]

NAME = "survey"
SUMMARY = "What is in a netlist: sizes, fan-out, components, hierarchy, spectrum, oddities."


def add_options(parser: argparse.ArgumentParser) -> None:
    """Declare the command's options."""
    add_input_options(parser)
    add_output_options(parser, folder=False)


def run(arguments: argparse.Namespace) -> int:
    """0."""
    journal = Journal(None if arguments.quiet else progress_listener(arguments.verbose))
    with journal.stage("read", arguments.files[0]):
        netlist = read_netlist(arguments)
    with journal.stage("count"):
        found = survey(netlist)
    _, spectrum = describe_spectrum(netlist, journal)
    if arguments.json:
        content = {
            "input": describe_input(netlist, reading_options(arguments)),
            "survey": found.to_dict(),
            "spectral": spectrum,
            "warnings": journal.warnings,
        }
        sys.stdout.write(dump_json(content).decode())
    elif not arguments.quiet:
        show_survey(netlist, found, spectrum, journal.warnings, output_console())
    return 0
