"""netpart warmup: compile and cache every kernel."""

from __future__ import annotations

import argparse
import time

from netpart.cli.console import output_console, progress_listener
from netpart.solve import Journal, warm_up

__all__ = ["NAME", "SUMMARY", "add_options", "run"]

NAME = "warmup"
SUMMARY = "Compile every kernel once, so that no later run waits for it."


def add_options(parser: argparse.ArgumentParser) -> None:
    """Declare the command's options."""
    parser.add_argument("--quiet", action="store_true", help="no progress, no report")


def run(arguments: argparse.Namespace) -> int:
    """0."""
    started = time.monotonic()
    warm_up(Journal(None if arguments.quiet else progress_listener(0)))
    if not arguments.quiet:
        output_console().print(f"kernels are compiled and cached ({time.monotonic() - started:.1f} s)")
    return 0
