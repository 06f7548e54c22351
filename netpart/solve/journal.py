"""What happens during a run: stages with their cost, cuts on the way, a listener that shows them, and when to stop."""

from __future__ import annotations

import resource
import sys
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import NamedTuple

__all__ = ["Budget", "Event", "Journal", "StageCost", "TraceRow"]


class TraceRow(NamedTuple):
    """The cost of the best partition known at a moment of the run."""

    stage: str
    level: int
    cut: float
    seconds: float


class StageCost(NamedTuple):
    """What a stage took: wall-clock seconds, and the largest resident memory of the process up to its end, in bytes."""

    stage: str
    seconds: float
    peak_memory: int


class Event(NamedTuple):
    """One line of progress."""

    stage: str
    text: str
    seconds: float
    best: float | None


@dataclass
class Budget:
    """When to stop: a deadline on the monotonic clock, or a request from outside (a signal)."""

    time_limit: float | None = None

    def __post_init__(self) -> None:
        self._started = time.monotonic()
        self._stop = threading.Event()

    def request_stop(self) -> None:
        """Ask the run to end with the best so far."""
        self._stop.set()

    @property
    def stop_requested(self) -> bool:
        """Whether somebody asked to stop."""
        return self._stop.is_set()

    @property
    def exhausted(self) -> bool:
        """Whether to stop now, by request or by the clock."""
        return self._stop.is_set() or self.remaining <= 0

    @property
    def remaining(self) -> float:
        """Seconds left; infinite without a time limit."""
        if self.time_limit is None:
            return float("inf")
        return self.time_limit - (time.monotonic() - self._started)


class Journal:
    """Collects stages and cuts, and passes each line of progress on; safe to use from several threads."""

    def __init__(self, listener: Callable[[Event], None] | None = None) -> None:
        self._listener = listener
        self._lock = threading.Lock()
        self._started = time.monotonic()
        self._best: float | None = None
        self.trace: list[TraceRow] = []
        self.stages: list[StageCost] = []
        self.warnings: list[str] = []

    @property
    def seconds(self) -> float:
        """Since the journal was opened."""
        return time.monotonic() - self._started

    @contextmanager
    def stage(self, name: str, text: str = "") -> Iterator[None]:
        """Announce a stage, and note what it took."""
        started = time.monotonic()
        self.say(name, text)
        try:
            yield
        finally:
            with self._lock:
                self.stages.append(StageCost(name, time.monotonic() - started, peak_memory()))

    def say(self, stage: str, text: str) -> None:
        """A line of progress."""
        with self._lock:
            if self._listener is not None:
                self._listener(Event(stage, text, self.seconds, self._best))

    def note_cut(self, stage: str, level: int, cut: float, *, legal: bool = True) -> None:
        """A partition was reached; level 0 is the netlist itself."""
        with self._lock:
            self.trace.append(TraceRow(stage, level, cut, self.seconds))
            if legal and (self._best is None or cut < self._best):
                self._best = cut
                if self._listener is not None:
                    self._listener(Event(stage, "", self.seconds, cut))

    def warn(self, text: str) -> None:
        """Something the user must know; each sentence is kept once."""
        with self._lock:
            if text not in self.warnings:
                self.warnings.append(text)


def peak_memory() -> int:
    """The largest resident memory of this process so far, in bytes."""
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return peak if sys.platform == "darwin" else peak * 1024
