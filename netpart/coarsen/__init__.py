"""Coarsening: clusters of cells, and the hierarchy of netlists that they make."""

from netpart.coarsen.hierarchy import Hierarchy, Level, build_hierarchy, contract

__all__ = ["Hierarchy", "Level", "build_hierarchy", "contract"]
