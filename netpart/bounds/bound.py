"""Bound: a number that no legal partition can beat, with what a report says about it."""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from netpart.netlist import Netlist

__all__ = ["Bound", "next_attainable"]


@dataclass(frozen=True, slots=True)
class Bound:
    """A verified lower bound on the cost of every legal partition.

    Attributes
    ----------
    kind : str
        How it was derived: ``"spectral"``, ``"spreading"``, ``"exact"`` …
    value : float
        The bound, rounded to the safe side.
    verified : bool
        Whether an independent check has accepted it; a bound that is not verified is never printed.
    seconds : float
        What it took, the check included.
    certificate : str or None
        What was checked, in a phrase, or the certificate's file name.
    """

    kind: str
    value: float
    verified: bool
    seconds: float
    certificate: str | None = None

    def to_dict(self) -> dict[str, str | float | bool | None]:
        """The entry of a record."""
        return {
            "kind": self.kind,
            "value": self.value,
            "seconds": round(self.seconds, 4),
            "verified": self.verified,
            "certificate": self.certificate,
        }


def next_attainable(value: float, netlist: Netlist) -> float:
    """The smallest value ≥ `value` that a sum of net weights can take, where the weights are whole numbers.

    With weights that are all multiples of a whole number g, every cut is a multiple of g, so a bound may be rounded
    up to the next one. Other weights leave the value as it is.
    """
    weights = netlist.net_weights
    if value <= 0 or not len(weights) or np.any(weights != np.floor(weights)) or weights.sum() >= 2**53:
        return max(value, 0.0)
    step = int(np.gcd.reduce(weights.astype(np.int64)))
    return float(math.ceil(Fraction(value) / step) * step)
