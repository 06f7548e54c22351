"""record.json: a run in a form that machines read, with its JSON Schema; and assignment.csv."""

from __future__ import annotations

import csv
import hashlib
import importlib.resources
import io
import json
from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from netpart.netlist import Netlist, Rules
from netpart.report.environment import describe_environment
from netpart.solve.result import Result

__all__ = ["SCHEMA_NAME", "describe_input", "dump_json", "format_assignment", "load_schema", "make_record"]

SCHEMA_NAME = "netpart-record/1"


def make_record(result: Result, *, reading: Mapping[str, Any], jobs: int, assignment: bytes) -> dict[str, Any]:
    """The whole record of a run, as it stands in record.json.

    Parameters
    ----------
    result : Result
    reading : mapping
        The options the netlist was read with.
    jobs : int
        Threads that were allowed.
    assignment : bytes
        The content of assignment.csv, whose hash binds the record to it.
    """
    parts = result.to_dict()
    return {
        "schema": SCHEMA_NAME,
        "input": describe_input(result.netlist, reading),
        "request": parts.pop("request"),
        "result": {**parts.pop("result"), "assignment_sha256": hashlib.sha256(assignment).hexdigest()},
        **parts,
        "environment": describe_environment(jobs),
    }


def describe_input(netlist: Netlist, reading: Mapping[str, Any]) -> dict[str, Any]:
    """The `input` part of a record."""
    return {
        "name": netlist.name,
        "files": [source._asdict() for source in netlist.sources],
        "reading": dict(reading),
        "cells": netlist.num_cells,
        "nets": netlist.num_nets,
        "pins": int(netlist.net_pins.sum()),
        "area": netlist.total_area,
        "ignored_nets": [net._asdict() for net in netlist.ignored_nets],
    }


def format_assignment(netlist: Netlist, blocks: NDArray[np.int32], rules: Rules) -> bytes:
    """The assignment as CSV (RFC 4180, line feeds): a header ``cell,block``, then a line a cell in netlist order."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(("cell", "block"))
    block_names = rules.block_names
    writer.writerows((name, block_names[block]) for name, block in zip(netlist.cell_names, blocks.tolist(), strict=True))
    return text.getvalue().encode("utf-8", "surrogateescape")


def load_schema() -> dict[str, Any]:
    """The JSON Schema (draft 2020-12) of record.json."""
    text = importlib.resources.files("netpart.report").joinpath("record.schema.json").read_text(encoding="utf-8")
    schema: dict[str, Any] = json.loads(text)
    return schema


def dump_json(value: Any) -> bytes:
    """JSON as the commands write it: indented, keys in order of meaning, a final line feed; no NaN or infinity."""
    return (json.dumps(value, indent=2, ensure_ascii=True, allow_nan=False) + "\n").encode("ascii")
