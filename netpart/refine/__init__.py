"""Improving partitions by moving cells."""

from netpart.refine.bisection import TIE_RULES, Bisection, grow_bisection, random_bisection

__all__ = ["TIE_RULES", "Bisection", "grow_bisection", "random_bisection"]
