"""The `netpart` command: picks the command, turns errors into one line and an exit code."""

from __future__ import annotations

import argparse
import os
import signal
import sys
from collections.abc import Sequence
from typing import NoReturn

from rich_argparse import RichHelpFormatter

from netpart.cli import audit, bound, split, survey, warmup
from netpart.cli.console import error_console
from netpart.netlist import NetpartError
from netpart.report import version

__all__ = ["build_parser", "main"]

_COMMANDS = (split, survey, bound, audit, warmup)
_INTERRUPTED = 130


class _Parser(argparse.ArgumentParser):
    def error(self, message: str) -> NoReturn:
        error_console().print(f"netpart: {message}", style="bold red", markup=False)
        self.print_usage(sys.stderr)
        sys.exit(2)


def build_parser() -> argparse.ArgumentParser:
    """The parser of all commands."""
    parser = _Parser(
        prog="netpart",
        description="Divide a gate-level netlist into area-balanced blocks with few crossing nets, "
        "and say how much better any cut could be.",
        formatter_class=RichHelpFormatter,
    )
    parser.add_argument("--version", action="version", version=f"netpart {version()}")
    commands = parser.add_subparsers(dest="command", metavar="COMMAND", required=True)
    for module in _COMMANDS:
        command = commands.add_parser(
            module.NAME, help=module.SUMMARY, description=module.SUMMARY, formatter_class=RichHelpFormatter
        )
        module.add_options(command)
        command.set_defaults(run=module.run)
    _add_completion(parser)
    return parser


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code.

    0: all rules met. 1: a rule is violated, or an audit found a false claim. 2: bad usage or input. 3: proved
    infeasible. 130: interrupted.
    """
    signal.signal(signal.SIGTERM, _raise_interrupt)
    try:
        arguments = build_parser().parse_args(argv)
        code: int = arguments.run(arguments)
        sys.stdout.flush()
        return code
    except NetpartError as fault:
        error_console().print(f"netpart: {fault}", style="bold red", markup=False, highlight=False, soft_wrap=True)
        return fault.exit_code
    except KeyboardInterrupt:
        error_console().print("netpart: interrupted, nothing written", style="bold red")
        return _INTERRUPTED
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except MemoryError:
        error_console().print("netpart: not enough memory for this netlist, nothing written", style="bold red")
        return 2


def _raise_interrupt(signum: int, frame: object) -> NoReturn:
    raise KeyboardInterrupt


def _add_completion(parser: argparse.ArgumentParser) -> None:
    """``--print-completion SHELL``, where the optional library that writes the scripts is installed."""
    try:
        import shtab
    except ImportError:
        return
    shtab.add_argument_to(parser, "--print-completion", help="print a completion script for this shell and exit")
