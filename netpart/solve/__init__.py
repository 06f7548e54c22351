"""Putting the stages together: settings, starts, search, bounds, results."""

from netpart.solve.bounding import BoundSearch, bound, find_bounds, recheck_bounds
from netpart.solve.journal import Budget, Event, Journal, StageCost, TraceRow
from netpart.solve.result import Request, Result
from netpart.solve.settings import EFFORTS, Settings
from netpart.solve.spectrum import describe_spectrum
from netpart.solve.split import split
from netpart.solve.warmup import kernels_are_cached, warm_up

__all__ = [
    "EFFORTS",
    "BoundSearch",
    "Budget",
    "Event",
    "Journal",
    "Request",
    "Result",
    "Settings",
    "StageCost",
    "TraceRow",
    "bound",
    "describe_spectrum",
    "find_bounds",
    "kernels_are_cached",
    "recheck_bounds",
    "split",
    "warm_up",
]
