"""netpart audit: recompute everything that an assignment and its record claim."""

from __future__ import annotations

import argparse
import json
import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

from netpart.bounds import Certificate, CertificateError, load_certificates
from netpart.cli.console import output_console
from netpart.cli.options import (
    add_input_options,
    add_option,
    add_output_options,
    add_rule_options,
    read_netlist,
    resolve_rules,
)
from netpart.formats import read_assignment
from netpart.netlist import InputError, Netlist, Rules
from netpart.report import SCHEMA_NAME, AuditReport, Finding, audit, dump_json, rules_of_record, show_audit

__all__ = ["NAME", "SUMMARY", "add_options", "run"]

NAME = "audit"
SUMMARY = "Recompute an assignment independently, and compare it with the rules and with what its record claims."


def add_options(parser: argparse.ArgumentParser) -> None:
    """Declare the command's options."""
    add_input_options(parser)
    parser.add_argument("--assignment", required=True, metavar="FILE", help="assignment.csv of a run")
    add_option(
        parser,
        "--record",
        metavar="FILE",
        help="the record whose claims are checked (default: record.json beside the assignment, where there is one)",
    )
    add_option(
        parser,
        "--certificate",
        metavar="FILE",
        help="proofs of the bounds in the record (default: certificate.npz beside the assignment, where there is one)",
    )
    add_rule_options(parser)
    add_output_options(parser, folder=False)


def run(arguments: argparse.Namespace) -> int:
    """0: every point holds. 1: a claim is false or a rule is broken."""
    record = _find_record(arguments)
    rules = _complete_from_record(arguments, record)
    netlist = read_netlist(arguments)
    try:
        rows = read_assignment(arguments.assignment)
    except InputError as fault:
        if record is None or not Path(arguments.assignment).is_file():
            raise
        report = AuditReport((Finding("the assignment is the one of the record", "readable", str(fault), False),))
    else:
        content = Path(arguments.assignment).read_bytes()
        pairs = [(cell, block) for cell, block, _ in rows]
        try:
            certificates = _find_certificates(arguments, netlist, rules)
        except CertificateError as fault:
            report = AuditReport((Finding("the certificate can be read and belongs here", "yes", str(fault), False),))
        else:
            report = audit(netlist, pairs, rules, record=record, assignment_bytes=content, certificates=certificates)
    if arguments.json:
        sys.stdout.write(dump_json(report.to_dict()).decode())
    elif not arguments.quiet:
        show_audit(report, output_console())
    return 0 if report.success else 1


def _complete_from_record(arguments: argparse.Namespace, record: dict[str, Any] | None) -> Rules:
    """What the command line leaves out is as the record says; what it says goes first."""
    if record is None:
        return resolve_rules(arguments)
    for name, value in record["input"]["reading"].items():
        option = "ignore_net" if name == "ignore_nets" else name
        setattr(arguments, option, getattr(arguments, option) or value)
    if arguments.blocks or arguments.shares:
        return resolve_rules(arguments)
    claimed = rules_of_record(record)
    return claimed if arguments.tolerance is None else replace(claimed, tolerance=arguments.tolerance)


def _find_certificates(arguments: argparse.Namespace, netlist: Netlist, rules: Rules) -> list[Certificate]:
    path = Path(arguments.certificate) if arguments.certificate else None
    if path is None:
        path = Path(arguments.assignment).with_name("certificate.npz")
        if not path.exists():
            return []
    return load_certificates(path, netlist, rules)


def _find_record(arguments: argparse.Namespace) -> dict[str, Any] | None:
    path = Path(arguments.record) if arguments.record else Path(arguments.assignment).with_name("record.json")
    if not arguments.record and not path.exists():
        return None
    try:
        record = json.loads(path.read_text(encoding="utf-8"))
    except OSError as fault:
        raise InputError(path, reason=fault.strerror or "cannot be read") from None
    except ValueError as fault:
        raise InputError(path, expected="a record in JSON", found=str(fault)) from None
    if not isinstance(record, dict) or record.get("schema") != SCHEMA_NAME:
        found = record.get("schema") if isinstance(record, dict) else type(record).__name__
        raise InputError(path, expected=f'"schema": "{SCHEMA_NAME}"', found=repr(found))
    return record
