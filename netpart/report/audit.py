"""Audit: recompute an assignment from the definitions, in exact arithmetic, and compare it with what a record claims.

Nothing here is shared with the code that made the assignment: sets and fractions instead of arrays and floats.
"""

from __future__ import annotations

import hashlib
import math
from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, NamedTuple

from netpart.bounds import Certificate
from netpart.netlist import CellFlag, Netlist, Rules
from netpart.solve import recheck_bounds

__all__ = ["AuditReport", "Finding", "audit", "rules_of_record"]


class Finding(NamedTuple):
    """One comparison: what was claimed or required, what was found, and whether they agree."""

    subject: str
    claimed: str
    found: str
    holds: bool


@dataclass(frozen=True, slots=True)
class AuditReport:
    """All findings of an audit; `success` when every one of them holds."""

    findings: tuple[Finding, ...]

    @property
    def status(self) -> str:
        """``"confirmed"`` or ``"refuted"``."""
        return "confirmed" if self.success else "refuted"

    @property
    def success(self) -> bool:
        """Whether every finding holds."""
        return all(finding.holds for finding in self.findings)

    @property
    def message(self) -> str:
        """One sentence."""
        wrong = [finding for finding in self.findings if not finding.holds]
        if not wrong:
            return f"all {len(self.findings)} points checked hold"
        first = wrong[0]
        more = f", and {len(wrong) - 1} more" if len(wrong) > 1 else ""
        return f"{first.subject}: claimed {first.claimed}, found {first.found}{more}"

    def to_dict(self) -> dict[str, Any]:
        """For JSON."""
        return {
            "status": self.status,
            "message": self.message,
            "findings": [finding._asdict() for finding in self.findings],
        }


def rules_of_record(record: Mapping[str, Any]) -> Rules:
    """The rules that a record says were asked for."""
    request = record["request"]
    return Rules.from_request(
        blocks=request["blocks"],
        shares=request["shares"],
        tolerance=request["tolerance"],
        block_names=request["rules"]["block_names"],
    )


def audit(
    netlist: Netlist,
    assignment: Iterable[tuple[str, str]],
    rules: Rules,
    *,
    record: Mapping[str, Any] | None = None,
    assignment_bytes: bytes | None = None,
    certificates: Sequence[Certificate] = (),
) -> AuditReport:
    """Check an assignment against the rules, and a record's claims against both.

    Parameters
    ----------
    netlist : Netlist
    assignment : iterable of (cell, block name)
    rules : Rules
    record : mapping, optional
        A parsed record.json; each of its figures becomes a finding.
    assignment_bytes : bytes, optional
        The file as it lies on disk, compared with the record's hash.
    certificates : sequence of Certificate
        Proofs of the bounds that the record claims; a bound that cannot be proved again is refuted.

    Returns
    -------
    AuditReport
    """
    findings = [*_check_complete(netlist, assignment_pairs := list(assignment), rules)]
    if not all(finding.holds for finding in findings):
        return AuditReport(tuple(findings))
    block_of_name = dict(assignment_pairs)
    blocks = [block_of_name[name] for name in netlist.cell_names]
    figures = _recount(netlist, blocks, rules)
    findings += _check_rules(netlist, blocks, figures, rules)
    legal = all(finding.holds for finding in findings)
    if record is not None:
        findings += _check_claims(netlist, figures, rules, record, legal, assignment_bytes)
        findings += _check_bounds(netlist, rules, record, certificates)
    return AuditReport(tuple(findings))


def _check_complete(netlist: Netlist, pairs: list[tuple[str, str]], rules: Rules) -> Iterable[Finding]:
    known = set(netlist.cell_names)
    counted = Counter(cell for cell, _ in pairs)
    missing = sorted(known - counted.keys())
    unknown = sorted(counted.keys() - known)
    repeated = sorted(cell for cell, count in counted.items() if count > 1)
    strange = sorted({block for _, block in pairs} - set(rules.block_names))
    for subject, faults in (
        ("every cell has a block", missing),
        ("every cell named exists", unknown),
        ("no cell is named twice", repeated),
        ("every block named exists", strange),
    ):
        shown = ", ".join(repr(name) for name in faults[:3]) + (f" and {len(faults) - 3} more" if faults[3:] else "")
        yield Finding(subject, "all", f"not {shown}" if faults else "all", not faults)


def _recount(netlist: Netlist, blocks: list[str], rules: Rules) -> dict[str, Any]:
    cut_nets = connectivity = terminals = Fraction(0)
    num_cut = 0
    pins_of_block: Counter[str] = Counter()
    for net in range(netlist.num_nets):
        touched = {blocks[cell] for cell in netlist.cells_of(net).tolist()}
        if len(touched) > 1:
            weight = Fraction(float(netlist.net_weights[net]))
            num_cut += 1
            cut_nets += weight
            connectivity += weight * (len(touched) - 1)
            terminals += weight * len(touched)
            pins_of_block.update(touched)
    areas = dict.fromkeys(rules.block_names, Fraction(0))
    cells = Counter(blocks)
    for block, area, flags in zip(blocks, netlist.areas.tolist(), netlist.cell_flags.tolist(), strict=True):
        areas[block] += Fraction(area)
        if flags & CellFlag.PORT:
            pins_of_block[block] += 1
    return {
        "cut_nets": cut_nets,
        "connectivity": connectivity,
        "terminals": terminals,
        "num_cut": num_cut,
        "areas": areas,
        "cells": cells,
        "block_terminals": pins_of_block,
    }


def _check_rules(netlist: Netlist, blocks: list[str], figures: Mapping[str, Any], rules: Rules) -> Iterable[Finding]:
    areas = figures["areas"]
    total = sum(areas.values(), Fraction(0))
    whole = all(area.is_integer() for area in netlist.areas.tolist())
    slack = Fraction(0) if whole else total / 10**9
    for name, share in zip(rules.block_names, rules.shares, strict=True):
        low, high = (1 - rules.tolerance) * share * total, (1 + rules.tolerance) * share * total
        holds = low - slack <= areas[name] <= high + slack
        yield Finding(f"area of block {name}", f"{float(low):.6g} … {float(high):.6g}", f"{float(areas[name]):.6g}", holds)
    if rules.fixed is not None:
        strayed = [
            cell
            for cell, wanted in enumerate(rules.fixed.tolist())
            if wanted >= 0 and rules.block_names[wanted] != blocks[cell]
        ]
        yield Finding(
            "fixed cells lie in their blocks",
            "all",
            f"not {netlist.cell_names[strayed[0]]!r} and {len(strayed) - 1} more" if strayed else "all",
            not strayed,
        )


def _check_claims(
    netlist: Netlist,
    figures: Mapping[str, Any],
    rules: Rules,
    record: Mapping[str, Any],
    legal: bool,
    assignment_bytes: bytes | None,
) -> Iterable[Finding]:
    result = record["result"]
    if assignment_bytes is not None:
        digest = hashlib.sha256(assignment_bytes).hexdigest()
        yield _compare("sha256 of the assignment", result["assignment_sha256"][:16], digest[:16])
    present = {source.sha256 for source in netlist.sources}
    for file in record["input"]["files"]:
        here = file["sha256"] in present
        yield Finding(f"input {file['path']}", file["sha256"][:16], file["sha256"][:16] if here else "not given", here)
    for name, count in (
        ("cells", netlist.num_cells),
        ("nets", netlist.num_nets),
        ("pins", int(netlist.net_pins.sum())),
    ):
        yield _compare(f"{name} of the netlist", record["input"][name], count)
    for name in ("cut_nets", "connectivity", "terminals", "num_cut"):
        yield _compare(name.replace("_", " "), result[name], figures[name])
    for block in result["blocks"]:
        name = block["name"]
        if name not in rules.block_names:
            yield Finding(f"block {name}", "exists", "no such block", False)
            continue
        yield _compare(f"area of block {name}", block["area"], figures["areas"][name])
        yield _compare(f"cells of block {name}", block["cells"], figures["cells"][name])
        yield _compare(f"terminals of block {name}", block["terminals"], figures["block_terminals"][name])
    yield _compare("all rules met", result["legal"], legal)
    yield from _check_gap(figures, record)


def _check_bounds(
    netlist: Netlist, rules: Rules, record: Mapping[str, Any], certificates: Sequence[Certificate]
) -> Iterable[Finding]:
    claims = record["bounds"]
    proved = recheck_bounds(netlist, rules, record["request"]["objective"], claims, certificates)
    for claim in claims:
        again = proved[claim["kind"]]
        holds = isinstance(again, float) and claim["value"] <= again
        found = f"{again:g} proved again" if isinstance(again, float) else again
        yield Finding(f"{claim['kind']} bound", f"{claim['value']:g}", found, holds)


def _check_gap(figures: Mapping[str, Any], record: Mapping[str, Any]) -> Iterable[Finding]:
    cost = figures[record["request"]["objective"].replace("-", "_")]
    verified = [bound["value"] for bound in record["bounds"] if bound["verified"]]
    best = max(verified, default=None)
    yield _compare("best bound", record["best_bound"], best)
    if best is not None and record["result"]["legal"]:
        yield Finding("the bound is not above the cost", f"≤ {float(cost):g}", f"{best:g}", Fraction(best) <= cost)
        gap = (cost - Fraction(best)) / cost if cost else Fraction(0)
        yield _compare("gap", record["gap"], gap)


def _compare(subject: str, claimed: Any, found: Any) -> Finding:
    """Exact for counts and words; sums of decimals may differ by their last rounding."""
    if isinstance(found, Fraction):
        holds = isinstance(claimed, int | float) and math.isclose(claimed, found, rel_tol=1e-12, abs_tol=1e-12)
        return Finding(
            subject, f"{claimed:.12g}" if isinstance(claimed, float) else str(claimed), f"{float(found):.12g}", holds
        )
    return Finding(subject, str(claimed), str(found), bool(claimed == found))
