"""The error tree: every error that netpart raises on purpose, and the exit code a command gives it.

::

    NetpartError                    exit 2
    ├── UsageError                  a wrong option, setting or combination
    ├── InputError                  a file that cannot be read: where, what was expected, what stood there
    │   └── LimitError              an input beyond an explicit resource limit
    ├── NetlistError                a netlist that breaks the model
    │   ├── EmptyNetlistError       no cells
    │   ├── UnknownNameError        a name that the netlist does not hold
    │   ├── DuplicateNameError      the same cell or net twice
    │   ├── ValueRangeError         a negative or non-finite area, a weight that is not above zero
    │   └── IndexOverflowError      more cells, nets or pins than the indices can count
    ├── AssignmentError             an assignment that does not fit the netlist
    └── InfeasibleError             exit 3: no partition can meet the rules, and why
"""

from __future__ import annotations

from pathlib import Path

__all__ = [
    "AssignmentError",
    "DuplicateNameError",
    "EmptyNetlistError",
    "IndexOverflowError",
    "InfeasibleError",
    "InputError",
    "LimitError",
    "NetlistError",
    "NetpartError",
    "UnknownNameError",
    "UsageError",
    "ValueRangeError",
]


class NetpartError(Exception):
    """Base of all errors raised on purpose; `exit_code` is what a command returns for it."""

    exit_code = 2


class UsageError(NetpartError):
    """A wrong option, setting or combination of them."""


class InputError(NetpartError):
    """An input file that cannot be read, with the position where reading stopped.

    Parameters
    ----------
    path : str or Path
        The file, as the user named it.
    line, column : int, optional
        Counted from 1; left out where the file has no text position (a damaged archive, an empty file).
    expected, found : str, optional
        What the reader could have accepted there, and what stood there.
    reason : str, optional
        One sentence for faults that are not of the form expected/found.
    """

    def __init__(
        self,
        path: str | Path,
        *,
        line: int | None = None,
        column: int | None = None,
        expected: str | None = None,
        found: str | None = None,
        reason: str | None = None,
    ) -> None:
        self.path = str(path)
        self.line = line
        self.column = column
        self.expected = expected
        self.found = found
        self.reason = reason
        where = self.path
        if line is not None:
            where += f":{line}"
            if column is not None:
                where += f":{column}"
        parts = [reason] if reason else []
        if expected is not None:
            parts.append(f"expected {expected}")
        if found is not None:
            parts.append(f"found {found}")
        super().__init__(f"{where}: {', '.join(parts)}")


class LimitError(InputError):
    """An input beyond an explicit resource limit (decompressed size, nesting, vector width, name length)."""


class NetlistError(NetpartError):
    """A netlist that breaks the model."""


class EmptyNetlistError(NetlistError):
    """A netlist without cells."""


class UnknownNameError(NetlistError):
    """A cell, net or block name that is not there."""


class DuplicateNameError(NetlistError):
    """The same cell or net defined twice."""


class ValueRangeError(NetlistError):
    """A negative or non-finite area, or a net weight that is not a finite number above zero."""


class IndexOverflowError(NetlistError):
    """More cells, nets or pins than the index types can count."""


class AssignmentError(NetpartError):
    """An assignment that does not fit the netlist: a missing, unknown or repeated cell, or a bad block."""


class InfeasibleError(NetpartError):
    """No partition can meet the rules; the message says which rule, by how much, and what would do."""

    exit_code = 3
