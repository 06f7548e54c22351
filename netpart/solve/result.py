"""Result: what a run found, with everything a report needs."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from netpart.bounds.bound import Bound
from netpart.bounds.certificate import Certificate
from netpart.netlist import Netlist, Partition, Rules
from netpart.solve.journal import StageCost, TraceRow
from netpart.solve.settings import Settings

__all__ = ["Request", "Result"]


@dataclass(frozen=True, slots=True)
class Request:
    """What was asked for."""

    rules: Rules
    objective: str
    settings: Settings
    seed: int
    time_limit: float | None

    def to_dict(self) -> dict[str, Any]:
        """The `request` part of a record."""
        return {
            "blocks": self.rules.num_blocks,
            "shares": [float(share) for share in self.rules.shares],
            "tolerance": float(self.rules.tolerance),
            "objective": self.objective,
            "rules": {
                "block_names": list(self.rules.block_names),
                "fixed_cells": 0 if self.rules.fixed is None else int((self.rules.fixed >= 0).sum()),
            },
            "settings": self.settings.to_dict(),
            "seed": self.seed,
            "starts": self.settings.starts,
            "time_limit": self.time_limit,
        }


@dataclass(frozen=True, slots=True)
class Result:
    """The best partition of a run.

    Attributes
    ----------
    status : str
        ``"legal"``: all rules are met. ``"violated"``: a rule is broken; `message` says which and by how much.
        ``"interrupted"``: stopped by a signal, best so far (legal or not, see `broken_rules`).
    partition : Partition
    bounds : tuple of Bound
        Verified lower bounds on the cost of every legal partition.
    certificates, bound_history
        What proves the spreading bound, and how its estimate rose (seconds, value).
    spectral : dict or None
        λ1, the Cheeger bracket and the sweep's conductance (two blocks).
    trace, stages
        Costs on the way, and what each stage took.
    reproducible : bool
        False where a time limit or a signal decided when to stop.
    """

    netlist: Netlist
    request: Request
    status: str
    message: str
    partition: Partition
    broken_rules: tuple[str, ...]
    bounds: tuple[Bound, ...]
    certificates: tuple[Certificate, ...]
    bound_history: tuple[tuple[float, float], ...]
    spectral: dict[str, Any] | None
    trace: tuple[TraceRow, ...]
    stages: tuple[StageCost, ...]
    warnings: tuple[str, ...]
    reproducible: bool

    @property
    def success(self) -> bool:
        """Whether the partition is legal and the run ended by itself."""
        return self.status == "legal"

    @property
    def cost(self) -> float:
        """The value of the objective."""
        return self.partition.cost(self.request.objective)

    @property
    def best_bound(self) -> float | None:
        """The largest verified lower bound, or None where there is none."""
        return max((bound.value for bound in self.bounds if bound.verified), default=None)

    @property
    def gap(self) -> float | None:
        """(cost − bound)/cost: how much better any partition could be at most; 0 means proved optimal."""
        if self.best_bound is None or self.broken_rules:
            return None
        return (self.cost - self.best_bound) / self.cost if self.cost > 0 else 0.0

    def to_dict(self) -> dict[str, Any]:
        """The parts of a record that do not depend on where the netlist was read."""
        rules, partition = self.request.rules, self.partition
        total = self.netlist.total_area
        return {
            "request": self.request.to_dict(),
            "result": {
                "status": self.status,
                "message": self.message,
                "legal": not self.broken_rules,
                "broken_rules": list(self.broken_rules),
                "cut_nets": partition.cut_nets,
                "connectivity": partition.connectivity,
                "terminals": partition.terminals,
                "num_cut": partition.num_cut,
                "imbalance": partition.imbalance(self.netlist, rules),
                "blocks": [
                    {
                        "name": name,
                        "area": float(partition.block_areas[i]),
                        "share": float(partition.block_areas[i]) / total if total else 0.0,
                        "cells": int(partition.block_cells[i]),
                        "terminals": int(partition.block_terminals[i]),
                    }
                    for i, name in enumerate(rules.block_names)
                ],
                "reproducible": self.reproducible,
            },
            "bounds": [bound.to_dict() for bound in self.bounds],
            "best_bound": self.best_bound,
            "bound_history": [{"seconds": seconds, "value": value} for seconds, value in self.bound_history],
            "gap": self.gap,
            "spectral": self.spectral,
            "trace": [row._asdict() for row in self.trace],
            "stages": [stage._asdict() for stage in self.stages],
            "warnings": list(self.warnings),
        }

    def __repr__(self) -> str:
        bound = "" if self.best_bound is None else f", bound {self.best_bound:g}"
        return f"<Result: {self.status}, {self.request.objective} {self.cost:g}{bound}>"
