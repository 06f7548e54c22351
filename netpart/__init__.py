"""Divide a gate-level netlist into area-balanced blocks with few crossing nets, and bound what any cut could reach."""

from netpart.formats import read
from netpart.netlist import Builder, Netlist, NetpartError, Partition, Rules, survey
from netpart.report import AuditReport, audit
from netpart.solve import Result, Settings, bound, split

__all__ = [
    "AuditReport",
    "Builder",
    "Netlist",
    "NetpartError",
    "Partition",
    "Result",
    "Rules",
    "Settings",
    "audit",
    "bound",
    "read",
    "split",
    "survey",
]
