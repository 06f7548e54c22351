"""Improving partitions by moving cells."""

from netpart.refine.bisection import TIE_RULES, Bisection, grow_bisection, random_bisection
from netpart.refine.blocks import RefinedBlocks, refine_blocks

__all__ = [
    "TIE_RULES",
    "Bisection",
    "RefinedBlocks",
    "grow_bisection",
    "random_bisection",
    "refine_blocks",
]
