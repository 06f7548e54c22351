"""Consoles: data to stdout, progress and errors to stderr, both honouring NO_COLOR and the terminal's width."""

from __future__ import annotations

import sys

from rich.console import Console

from netpart.solve import Event

__all__ = ["error_console", "output_console", "progress_listener"]

_WIDTH_WITHOUT_TERMINAL = 100


def output_console() -> Console:
    """For results; 100 columns wide where stdout is no terminal and COLUMNS is not set."""
    return _console(stderr=False)


def error_console() -> Console:
    """For progress and errors."""
    return _console(stderr=True)


def _console(stderr: bool) -> Console:
    console = Console(stderr=stderr, highlight=False)
    if not console.is_terminal and "COLUMNS" not in console._environ:
        console.width = _WIDTH_WITHOUT_TERMINAL
    return console


class progress_listener:
    """Prints the lines of a run's journal on stderr: one a stage, with the time and the best cut so far."""

    def __init__(self, verbosity: int) -> None:
        self._console = error_console()
        self._verbosity = verbosity

    def __call__(self, event: Event) -> None:
        if not event.text and not self._verbosity:
            return
        best = "" if event.best is None else f"best {event.best:g}"
        line = f"{event.seconds:7.2f} s  {event.stage:<12} {event.text:<44} {best}".rstrip()
        self._console.print(line, style="dim", markup=False, soft_wrap=True)
        sys.stderr.flush()
