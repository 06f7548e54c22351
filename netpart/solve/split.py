"""The main job: partition, bound, result."""

from __future__ import annotations

import os
from fractions import Fraction

import numpy as np

from netpart.netlist import OBJECTIVES, Netlist, Partition, Rules, UsageError
from netpart.solve.bounding import find_bounds
from netpart.solve.journal import Budget, Journal
from netpart.solve.kway import partition_blocks
from netpart.solve.result import Request, Result
from netpart.solve.settings import Settings
from netpart.solve.spectrum import describe_spectrum
from netpart.solve.starts import seed_number

__all__ = ["split"]


def split(
    netlist: Netlist,
    blocks: int = 2,
    tolerance: float | Fraction | str = 0.10,
    *,
    shares: tuple[float, ...] | None = None,
    rules: Rules | None = None,
    objective: str = "cut-nets",
    settings: Settings | None = None,
    rng: int | np.random.Generator | None = None,
    jobs: int | None = None,
    time_limit: float | None = None,
    bound_time: float | None = None,
    budget: Budget | None = None,
    journal: Journal | None = None,
) -> Result:
    """Divide a netlist into blocks, and bound what any partition could reach.

    Parameters
    ----------
    netlist : Netlist
    blocks, tolerance, shares
        As in `Rules.from_request`; not looked at where `rules` is given.
    rules : Rules, optional
    objective : str
        ``"cut-nets"``, ``"connectivity"`` or ``"terminals"``, see `Partition`.
    settings : Settings, optional
        Default: those of the effort ``"normal"``.
    rng : int or numpy Generator, optional
        The same number gives the same partition.
    jobs : int, optional
        Threads; the partition does not depend on it.
    time_limit : float, optional
        Seconds after which no new work begins. Makes a run hard to reproduce.
    bound_time : float, optional
        Seconds for the lower bound instead of the work that the settings allow; 0 leaves the spreading bound out.
    budget, journal : optional
        To stop a run from outside, and to follow it.

    Raises
    ------
    InfeasibleError
        Where it is proved that no partition is legal.
    """
    if objective not in OBJECTIVES:
        raise UsageError(f"objective: expected one of {', '.join(OBJECTIVES)}, found {objective!r}")
    rules = rules or Rules.from_request(blocks, shares, tolerance)
    settings = settings or Settings.from_effort("normal")
    budget = budget or Budget(time_limit)
    journal = journal or Journal()
    seed = seed_number(rng)
    jobs = jobs or os.cpu_count() or 1
    window = rules.check_feasible(netlist)
    _, spectral = describe_spectrum(netlist, journal) if rules.num_blocks > 1 else (None, None)
    with journal.stage("partition", f"{settings.starts} starts"):
        assigned = partition_blocks(
            netlist,
            window,
            rules.fixed,
            objective,
            settings,
            seed,
            jobs=jobs,
            budget=budget,
            journal=journal,
        )
    partition = Partition.from_blocks(netlist, assigned, rules.num_blocks)
    journal.note_cut("result", 0, partition.cost(objective))
    found = find_bounds(
        netlist,
        rules,
        objective,
        work=settings.bound_work,
        time_limit=bound_time,
        jobs=jobs,
        journal=journal,
        budget=budget,
    )
    broken = tuple(partition.broken_rules(netlist, rules))
    if budget.stop_requested:
        status, message = "interrupted", "stopped by request; this is the best partition so far"
    elif broken:
        status, message = "violated", broken[0]
    else:
        status, message = "legal", "all rules are met"
    if netlist.ignored_nets:
        journal.warn(_describe_ignored(netlist))
    for note in netlist.notes:
        journal.warn(note)
    if budget.time_limit is not None:
        journal.warn("a time limit was set: another run may stop elsewhere and give another partition")
    return Result(
        netlist=netlist,
        request=Request(rules, objective, settings, seed, budget.time_limit),
        status=status,
        message=message,
        partition=partition,
        broken_rules=broken,
        bounds=found.bounds,
        certificates=found.certificates,
        bound_history=found.history,
        spectral=spectral,
        trace=tuple(journal.trace),
        stages=tuple(journal.stages),
        warnings=tuple(journal.warnings),
        reproducible=budget.time_limit is None and not budget.stop_requested and not bound_time,
    )


def _describe_ignored(netlist: Netlist) -> str:
    names = ", ".join(f"{net.name} ({net.reason}, {net.num_pins:,} pins)" for net in netlist.ignored_nets[:4])
    more = f" and {len(netlist.ignored_nets) - 4:,} more" if netlist.ignored_nets[4:] else ""
    return f"left out of the cut: {names}{more}"
