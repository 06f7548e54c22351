"""Improving partitions by moving cells."""

from netpart.refine.bisection import TIE_RULES, Bisection, grow_bisection, random_bisection
from netpart.refine.blocks import RefinedBlocks, refine_blocks
from netpart.refine.flow import refine_by_flow, refine_pairs

__all__ = [
    "TIE_RULES",
    "Bisection",
    "RefinedBlocks",
    "grow_bisection",
    "random_bisection",
    "refine_blocks",
    "refine_by_flow",
    "refine_pairs",
]
