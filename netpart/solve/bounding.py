"""Lower bounds: which kinds are tried, with how much work, and the check of bounds that somebody claims."""

from __future__ import annotations

import os
from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from netpart.bounds import (
    Bound,
    Certificate,
    check_diagonal,
    check_spreading,
    diagonal_bound,
    next_attainable,
    spectral_bound,
    spreading_bound,
)
from netpart.netlist import OBJECTIVES, Netlist, NetpartError, Rules, UsageError
from netpart.solve.journal import Budget, Journal

__all__ = ["BoundSearch", "bound", "find_bounds", "recheck_bounds"]

_TRIVIAL = Bound("trivial", 0.0, True, 0.0, "no cost is negative")
_MOST_TREES = 20_000
DEFAULT_WORK = 100.0


@dataclass(frozen=True, slots=True, eq=False)
class BoundSearch:
    """What a search for bounds has found.

    Attributes
    ----------
    bounds : tuple of Bound
        Best first; the trivial 0 where there is no other.
    certificates : tuple of Certificate
        For a certificate file.
    history : tuple of (seconds, value)
        How the estimate of the spreading bound rose; estimates are not verified, the bound itself is.
    """

    bounds: tuple[Bound, ...]
    certificates: tuple[Certificate, ...]
    history: tuple[tuple[float, float], ...]


def find_bounds(
    netlist: Netlist,
    rules: Rules,
    objective: str,
    *,
    work: float = DEFAULT_WORK,
    time_limit: float | None = None,
    diagonal: bool = False,
    jobs: int | None = None,
    journal: Journal,
    budget: Budget,
) -> BoundSearch:
    """All verified bounds that can be found.

    Parameters
    ----------
    work : float
        For the spreading bound: trees times pins of the netlist, in millions; 0 leaves it out.
    time_limit : float, optional
        Seconds for the spreading bound instead of `work`; 0 leaves it out.
    diagonal : bool
        Also try the diagonal bound: two to three times the spectral one, in several times its time.
    jobs : int, optional
        Threads; the bounds do not depend on them.
    """
    if objective not in OBJECTIVES:
        raise UsageError(f"objective: expected one of {', '.join(OBJECTIVES)}, found {objective!r}")
    rules.check_feasible(netlist)
    bounds: list[Bound] = []
    certificates: list[Certificate] = []
    history: list[tuple[float, float]] = []
    if rules.num_blocks > 1 and netlist.num_pins and not budget.exhausted:
        with journal.stage("bound", "spectral lower bound and its proof"):
            found = spectral_bound(netlist, rules, objective)
        if found is not None:
            bounds.append(found)
        if diagonal and not budget.exhausted:
            with journal.stage("bound", "diagonal correction of the spectral bound and its proof"):
                corrected = diagonal_bound(netlist, rules, objective)
            if corrected is not None and corrected.certificate is not None:
                bounds.append(corrected.bound)
                certificates.append(corrected.certificate)
        wanted = work > 0 if time_limit is None else time_limit > 0
        if wanted and not budget.exhausted:
            with journal.stage("bound", "spreading lower bound, its certificate and the check of it"):
                spread = spreading_bound(
                    netlist,
                    rules,
                    objective,
                    num_trees=max(1, min(_MOST_TREES, int(work * 1e6 / netlist.num_pins))),
                    time_limit=time_limit,
                    threads=jobs or os.cpu_count() or 1,
                )
            if spread is not None:
                bounds.append(spread.bound)
                certificates.append(spread.certificate)
                history.extend(spread.history)
    bounds.sort(key=lambda entry: -entry.value)
    return BoundSearch(tuple(bounds) or (_TRIVIAL,), tuple(certificates), tuple(history))


def bound(
    netlist: Netlist,
    blocks: int = 2,
    tolerance: float | Fraction | str = 0.10,
    *,
    rules: Rules | None = None,
    objective: str = "cut-nets",
    time_limit: float | None = None,
) -> Bound:
    """The best verified lower bound on the cost of every legal partition; the trivial 0 where there is no better.

    Parameters are those of `split`.
    """
    rules = rules or Rules.from_request(blocks, tolerance=tolerance)
    found = find_bounds(netlist, rules, objective, time_limit=time_limit, journal=Journal(), budget=Budget())
    return found.bounds[0]


def recheck_bounds(
    netlist: Netlist,
    rules: Rules,
    objective: str,
    claims: Iterable[dict[str, Any]],
    certificates: Iterable[Certificate],
) -> dict[str, float | str]:
    """What can be proved again of the bounds that a record claims: the value by kind, or why there is none.

    A spreading bound is proved by its certificate, through a check that shares no code with what made it. A spectral
    bound needs none: it is found and proved anew.
    """
    certificates = tuple(certificates)
    factor = 2.0 if objective == "terminals" else 1.0
    spreading = [certificate for certificate in certificates if certificate.kind == "spreading"]
    proved: dict[str, float | str] = {}
    for kind in dict.fromkeys(str(claim["kind"]) for claim in claims):
        if kind == "trivial":
            proved[kind] = 0.0
        elif kind == "spectral":
            again = spectral_bound(netlist, rules, objective)
            proved[kind] = "no proof" if again is None else again.value
        elif kind == "spreading":
            if not spreading:
                proved[kind] = "no certificate"
                continue
            try:
                values = [check_spreading(netlist, rules, certificate).value for certificate in spreading]
            except NetpartError as fault:
                proved[kind] = str(fault)
            else:
                proved[kind] = factor * next_attainable(max(values), netlist)
        elif kind == "diagonal":
            proved[kind] = _recheck_diagonal(netlist, rules, objective, certificates)
        else:
            proved[kind] = "no way to check this kind"
    return proved


def _recheck_diagonal(netlist: Netlist, rules: Rules, objective: str, certificates: Iterable[Certificate]) -> float | str:
    for certificate in certificates:
        if certificate.kind == "diagonal":
            try:
                proved_for, value = check_diagonal(netlist, rules, certificate)
            except NetpartError as fault:
                return str(fault)
            if proved_for == objective:
                return value
    return "no certificate"
