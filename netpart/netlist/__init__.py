"""The model: netlists, rules and partitions, without any input or output."""

from netpart.netlist.builder import Builder
from netpart.netlist.errors import (
    AssignmentError,
    DuplicateNameError,
    EmptyNetlistError,
    IndexOverflowError,
    InfeasibleError,
    InputError,
    LimitError,
    NetlistError,
    NetpartError,
    UnknownNameError,
    UsageError,
    ValueRangeError,
)
from netpart.netlist.model import MAX_PINS, CellFlag, Direction, IgnoredNet, Netlist, Source
from netpart.netlist.names import Names
from netpart.netlist.partition import OBJECTIVES, Partition, spans
from netpart.netlist.rent import RentFit, fit_rent
from netpart.netlist.restrict import restrict
from netpart.netlist.rules import FREE, AreaWindow, Rules
from netpart.netlist.survey import Oddity, Survey, survey

__all__ = [
    "FREE",
    "MAX_PINS",
    "OBJECTIVES",
    "AreaWindow",
    "AssignmentError",
    "Builder",
    "CellFlag",
    "Direction",
    "DuplicateNameError",
    "EmptyNetlistError",
    "IgnoredNet",
    "IndexOverflowError",
    "InfeasibleError",
    "InputError",
    "LimitError",
    "Names",
    "Netlist",
    "NetlistError",
    "NetpartError",
    "Oddity",
    "Partition",
    "RentFit",
    "Rules",
    "Source",
    "Survey",
    "UnknownNameError",
    "UsageError",
    "ValueRangeError",
    "fit_rent",
    "restrict",
    "spans",
    "survey",
]
