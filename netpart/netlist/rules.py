"""What a partition must keep to: blocks, shares, area window, fixed cells."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from netpart.netlist.errors import InfeasibleError, UsageError
from netpart.netlist.model import Netlist

__all__ = ["FREE", "AreaWindow", "Rules"]

FREE = -1
"""The entry of `Rules.fixed` for a cell that may go to any block."""

_RELATIVE_SLACK = 1e-9


class AreaWindow(NamedTuple):
    """The legal areas of the blocks.

    Attributes
    ----------
    lower, upper : (k,) float64
        (1 − t) f_i A and (1 + t) f_i A; rounded inwards to whole numbers where every cell area is one.
    slack : float
        Block i is legal when ``lower[i] - slack <= area <= upper[i] + slack``. It is 0 where all areas are whole
        numbers, and 1e-9 A otherwise: it covers the rounding of decimal areas in sums, and nothing else.
    """

    lower: NDArray[np.float64]
    upper: NDArray[np.float64]
    slack: float

    def violation(self, block_areas: NDArray[np.float64]) -> NDArray[np.float64]:
        """(k,) by how much each block leaves its window; 0 for a legal one."""
        below = self.lower - self.slack - block_areas
        above = block_areas - self.upper - self.slack
        return np.maximum(np.maximum(below, above), 0.0)


@dataclass(frozen=True, slots=True, eq=False)
class Rules:
    """Blocks and what they may hold.

    Attributes
    ----------
    block_names : tuple of str, k
    shares : tuple of Fraction, k
        f_i > 0, Σ f_i = 1.
    tolerance : Fraction
        t in 0 ≤ t ≤ 1: block i is legal when (1 − t) f_i A ≤ a(block i) ≤ (1 + t) f_i A, with A the total area.
        t = 1/10 on two equal blocks is the 45:55 window of the literature.
    fixed : (n,) int32 or None
        The block that a cell must lie in, or `FREE`.
    """

    block_names: tuple[str, ...]
    shares: tuple[Fraction, ...]
    tolerance: Fraction
    fixed: NDArray[np.int32] | None = None

    @classmethod
    def from_request(
        cls,
        blocks: int = 2,
        shares: Sequence[float | Fraction | str] | None = None,
        tolerance: float | Fraction | str = Fraction(1, 10),
        block_names: Sequence[str] | None = None,
        fixed: NDArray[np.int32] | None = None,
    ) -> Rules:
        """Rules from plain values; shares are scaled to sum to 1, decimals are taken as written (0.1 is 1/10).

        Raises
        ------
        UsageError
            If a value is out of range or the counts disagree.
        """
        if blocks < 1:
            raise UsageError(f"blocks must be at least 1, found {blocks}")
        if shares is None:
            parts = [Fraction(1, blocks)] * blocks
        else:
            parts = [_as_fraction(share, "share") for share in shares]
            if len(parts) != blocks:
                raise UsageError(f"{blocks} blocks need {blocks} shares, found {len(parts)}")
            if min(parts) <= 0:
                raise UsageError("every share must be above zero")
            parts = [part / sum(parts) for part in parts]
        allowance = _as_fraction(tolerance, "tolerance")
        if not 0 <= allowance <= 1:
            raise UsageError(f"the tolerance must lie within 0 % and 100 %, found {float(allowance):.4g}")
        names = tuple(block_names) if block_names is not None else tuple(f"B{i}" for i in range(blocks))
        if len(names) != blocks or len(set(names)) != blocks:
            raise UsageError(f"{blocks} blocks need {blocks} different names, found {', '.join(names)}")
        return cls(names, tuple(parts), allowance, fixed)

    @property
    def num_blocks(self) -> int:
        """k."""
        return len(self.shares)

    def window(self, netlist: Netlist) -> AreaWindow:
        """The legal area of each block on this netlist, computed in exact arithmetic and rounded inwards."""
        total = Fraction(netlist.total_area)
        whole = bool(np.all(netlist.areas == np.floor(netlist.areas))) and total < 2**53
        lows, highs = [], []
        for share in self.shares:
            low, high = (1 - self.tolerance) * share * total, (1 + self.tolerance) * share * total
            lows.append(float(math.ceil(low)) if whole else _float_above(low))
            highs.append(float(math.floor(high)) if whole else _float_below(high))
        slack = 0.0 if whole else float(total) * _RELATIVE_SLACK
        return AreaWindow(np.array(lows), np.array(highs), slack)

    def check_feasible(self, netlist: Netlist) -> AreaWindow:
        """The window, after the cheap proofs that nothing can meet it.

        Raises
        ------
        InfeasibleError
            With the block or cell that proves it and what tolerance would admit it.
        """
        window = self.window(netlist)
        total, slack = netlist.total_area, window.slack
        for i, name in enumerate(self.block_names):
            if window.lower[i] > window.upper[i] + 2 * slack:
                raise InfeasibleError(
                    f"block {name}: no whole number of area units lies within "
                    f"{float((1 - self.tolerance) * self.shares[i]) * total:.6g} and "
                    f"{float((1 + self.tolerance) * self.shares[i]) * total:.6g}; a wider tolerance would do"
                )
        if window.upper.sum() + slack * self.num_blocks < total:
            raise InfeasibleError(
                f"the blocks hold at most {window.upper.sum():.6g} together, but the netlist has area {total:.6g}; "
                "a wider tolerance would do"
            )
        if window.lower.sum() - slack * self.num_blocks > total:
            raise InfeasibleError(
                f"the blocks need at least {window.lower.sum():.6g} together, but the netlist has area {total:.6g}; "
                "a wider tolerance would do"
            )
        largest = int(np.argmax(netlist.areas))
        area = float(netlist.areas[largest])
        if area > window.upper.max() + slack:
            needed = Fraction(area) / (max(self.shares) * Fraction(total)) - 1
            raise InfeasibleError(
                f"cell {netlist.cell_names[largest]!r} has area {area:.6g} of {total:.6g} in all, but no block may "
                f"hold more than {window.upper.max():.6g}; "
                + (
                    f"a tolerance of {math.ceil(needed * 1000) / 10:g} % would admit it"
                    if needed <= 1
                    else "no tolerance up to 100 % would admit it, but a larger share for one block would"
                )
            )
        if self.fixed is not None:
            self._check_fixed(netlist, window)
        return window

    def _check_fixed(self, netlist: Netlist, window: AreaWindow) -> None:
        assert self.fixed is not None
        if len(self.fixed) != netlist.num_cells or self.fixed.min() < FREE or self.fixed.max() >= self.num_blocks:
            raise UsageError(f"fixed needs {netlist.num_cells} entries within {FREE}..{self.num_blocks - 1}")
        held = np.bincount(self.fixed[self.fixed >= 0], netlist.areas[self.fixed >= 0], self.num_blocks)
        free = netlist.total_area - float(held.sum())
        for i, name in enumerate(self.block_names):
            if held[i] > window.upper[i] + window.slack:
                raise InfeasibleError(
                    f"block {name}: its fixed cells have area {held[i]:.6g}, {held[i] - window.upper[i]:.6g} more than "
                    f"it may hold ({window.upper[i]:.6g})"
                )
            if held[i] + free < window.lower[i] - window.slack:
                raise InfeasibleError(
                    f"block {name}: its fixed cells and all free cells have area {held[i] + free:.6g}, "
                    f"{window.lower[i] - held[i] - free:.6g} less than it must hold ({window.lower[i]:.6g})"
                )


def _as_fraction(value: float | Fraction | str, what: str) -> Fraction:
    try:
        if isinstance(value, str):
            text = value.strip()
            return Fraction(text[:-1].strip()) / 100 if text.endswith("%") else Fraction(text)
        return Fraction(value) if isinstance(value, int | Fraction) else Fraction(value).limit_denominator(10**9)
    except (ValueError, ZeroDivisionError, OverflowError):
        raise UsageError(f"{what}: expected a number or a percentage, found {value!r}") from None


def _float_above(value: Fraction) -> float:
    nearest = float(value)
    return nearest if Fraction(nearest) >= value else math.nextafter(nearest, math.inf)


def _float_below(value: Fraction) -> float:
    nearest = float(value)
    return nearest if Fraction(nearest) <= value else math.nextafter(nearest, -math.inf)
