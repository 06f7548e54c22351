"""Windows for recursive bisection: how far each half may leave its share so that every final block can still be legal."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from netpart.netlist import AreaWindow

__all__ = ["half_window", "split_blocks"]


def split_blocks(targets: Sequence[float]) -> int:
    """How many of the leading blocks go to the first half: the count whose targets come nearest to half the total.

    Ties go to the more even count, so that equal shares give the flattest tree.
    """
    running = np.cumsum(targets)
    total = running[-1]
    middle = len(targets) / 2
    return min(range(1, len(targets)), key=lambda i: (abs(running[i - 1] - total / 2), abs(i - middle), i))


def half_window(window: AreaWindow, first: int, area: float) -> AreaWindow:
    """The window of a bisection whose halves will be divided further.

    Blocks 0 … `first` − 1 of `window` will lie in half 0, the rest in half 1. Let a half hold q blocks with limits
    l_i ≤ u_i and targets t_i = (l_i + u_i)/2, T = Σ t_i over both halves and d the number of bisections that a block
    takes part in, this one included. A block ends with area t_i Π r_j where each bisection multiplies by r_j; it is
    legal when the product stays within [l_i/t_i, u_i/t_i]. With ρ = area/T the factor already spent, giving each of the
    d bisections the same share of what is left allows

        r from (min_i l_i/(t_i ρ))^(1/d) to (max_i u_i/(t_i ρ))^(1/d)

    and in any case the half must lie within [Σ l_i, Σ u_i], and leave as much to the other half.

    Parameters
    ----------
    window : AreaWindow
        Limits of the final blocks.
    first : int
    area : float
        Area of the cells that are to be divided.
    """
    whole = window.slack == 0
    targets = (window.lower + window.upper) / 2
    ratio = area / targets.sum() if targets.sum() > 0 else 1.0
    lows, highs = [], []
    for part in (slice(0, first), slice(first, None)):
        low, high, target = window.lower[part], window.upper[part], targets[part]
        depth = 1 + math.ceil(math.log2(len(target)))
        share = target.sum() * ratio
        positive = target > 0
        spread_low = float(np.max(low[positive] / target[positive], initial=0.0)) / ratio if ratio else 0.0
        spread_high = float(np.min(high[positive] / target[positive], initial=np.inf)) / ratio if ratio else math.inf
        if len(target) == 1:
            lows.append(float(low[0]))
            highs.append(float(high[0]))
        else:
            lows.append(max(float(low.sum()), share * min(spread_low, 1.0) ** (1 / depth)))
            highs.append(min(float(high.sum()), share * max(spread_high, 1.0) ** (1 / depth)))
    lower = np.array([max(lows[0], area - highs[1]), max(lows[1], area - highs[0])])
    upper = np.array([min(highs[0], area - lows[1]), min(highs[1], area - lows[0])])
    if whole:
        lower, upper = np.ceil(lower - 1e-9), np.floor(upper + 1e-9)
    if np.any(lower > upper):
        loose_low, loose_high = _loosest(window, first)
        lower = np.maximum(loose_low, area - loose_high[::-1])
        upper = np.minimum(loose_high, area - loose_low[::-1])
    return AreaWindow(lower, upper, window.slack)


def _loosest(window: AreaWindow, first: int) -> tuple[np.ndarray, np.ndarray]:
    low = np.array([window.lower[:first].sum(), window.lower[first:].sum()])
    high = np.array([window.upper[:first].sum(), window.upper[first:].sum()])
    return low, high
