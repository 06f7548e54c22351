"""Settings of the engine: every knob by name, typed and described, and the presets that `--effort` names."""

from __future__ import annotations

import dataclasses
import difflib
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from netpart.netlist import InputError, UsageError
from netpart.refine import TIE_RULES

__all__ = ["EFFORTS", "Settings"]


def _knob(default: Any, text: str, *, choices: tuple[str, ...] = (), low: float = 0, high: float = 1e9) -> Any:
    return field(default=default, metadata={"text": text, "choices": choices, "low": low, "high": high})


@dataclass(frozen=True, slots=True)
class Settings:
    """All settings of the engine; `describe` prints them with their meaning."""

    starts: int = _knob(30, "independent starts", low=1, high=100_000)
    levels: str = _knob(
        "many", "refine on a hierarchy of clusters, or on the netlist alone (no cycles then)", choices=("many", "one")
    )
    seed_from: str = _knob(
        "each",
        "first partition: spectral sweep, random, grown breadth-first, or each of them in turn",
        choices=("sweep", "random", "grown", "each"),
    )
    seed_tries: int = _knob(12, "first partitions on the coarsest level; half of them go down a level", low=1, high=1000)
    method: str = _knob("moves", "single moves, or moves and then pair swaps", choices=("moves", "swaps"))
    passes: int = _knob(4, "passes at most on a level", low=0, high=10_000)
    stall: int = _knob(150, "moves without improvement after which a pass ends", low=1)
    tie_rule: str = _knob("newest", "which of the cells with equal gain moves first", choices=TIE_RULES)
    coarsest: int = _knob(150, "clusters on the coarsest level", low=2, high=100_000)
    coarsen_ratio: float = _knob(3.0, "cells per cluster from a level to the next, at most", low=1.1, high=10)
    coarsen_net_power: float = _knob(0.7, "how much large nets attract less than small ones", low=0, high=4)
    coarsen_area_power: float = _knob(0.7, "how much small clusters are preferred", low=0, high=4)
    coarsen_area_cap: float = _knob(2.0, "largest cluster, in shares of total area / coarsest", low=0.5, high=1000)
    coarsen_net_size: int = _knob(40, "nets with more cells don't attract clusters", low=2)
    pool: int = _knob(8, "solutions that are followed up", low=1, high=1000)
    cycles: int = _knob(2, "times the pool is coarsened within its blocks and improved again", low=0, high=10_000)
    recombinations: int = _knob(24, "times two solutions of the pool are recombined", low=0, high=100_000)
    flow: bool = _knob(True, "minimum cuts through a corridor around the cut, after every cycle and recombination")
    flow_starts: bool = _knob(False, "after every start too, before the pool is chosen")
    flow_share: float = _knob(0.2, "area of the corridor on each side, in shares of the total", low=0.001, high=0.5)
    flow_cells: int = _knob(60_000, "cells in a corridor at most", low=10)
    block_tries: int = _knob(3, "attempts at more than two blocks, the best is kept", low=1, high=1000)
    block_cycles: int = _knob(2, "times more than two blocks are improved together level by level", low=0, high=1000)
    bound_work: float = _knob(100.0, "for the spreading bound: trees x pins in millions; 0 leaves it out", low=0, high=1e9)
    work: float = _knob(12.0, "millions of pins after which a phase ends; at least 4 of its tasks run", low=0, high=1e9)

    @classmethod
    def from_mapping(cls, values: Mapping[str, Any], base: Settings | None = None, source: str = "settings") -> Settings:
        """Settings from names and values on top of `base`.

        Raises
        ------
        UsageError
            For an unknown name (with the nearest known one), a wrong type or a value out of range.
        """
        knobs = {knob.name: knob for knob in dataclasses.fields(cls)}
        for name, value in values.items():
            if name not in knobs:
                near = difflib.get_close_matches(name, knobs, n=1, cutoff=0.0)
                raise UsageError(f"{source}: unknown setting {name!r}; the nearest known one is {near[0]!r}")
            _check(knobs[name], value, source)
        return dataclasses.replace(base or cls(), **dict(values))

    @classmethod
    def from_effort(cls, effort: str) -> Settings:
        """One of the presets in `EFFORTS`."""
        if effort not in EFFORTS:
            raise UsageError(f"effort: expected one of {', '.join(EFFORTS)}, found {effort!r}")
        return cls.from_mapping(EFFORTS[effort])

    @classmethod
    def from_file(cls, path: str | Path, base: Settings | None = None) -> Settings:
        """Settings from a TOML file of ``name = value`` lines; ``effort = "…"`` picks the preset they start from."""
        try:
            text = Path(path).read_text(encoding="utf-8")
            values = tomllib.loads(text)
        except OSError as fault:
            raise InputError(path, reason=fault.strerror or "cannot be read") from None
        except UnicodeDecodeError as fault:
            raise InputError(path, expected="UTF-8 text", found=f"byte 0x{fault.object[fault.start]:02x}") from None
        except tomllib.TOMLDecodeError as fault:
            raise InputError(path, expected="TOML", reason=str(fault)) from None
        effort = values.pop("effort", None)
        if effort is not None:
            base = cls.from_effort(effort)
        return cls.from_mapping(values, base, source=str(path))

    @classmethod
    def from_text(cls, name: str, text: str) -> Any:
        """The value of a setting written as text, as on a command line."""
        for knob in dataclasses.fields(cls):
            if knob.name == name:
                kind: Any = type(knob.default)
                try:
                    return _BOOLEANS[text.lower()] if kind is bool else kind(text)
                except (ValueError, KeyError):
                    raise UsageError(f"setting {name}: expected {_expected(knob)}, found {text!r}") from None
        return text

    @classmethod
    def describe(cls) -> list[tuple[str, str, str]]:
        """(name, default, meaning) of every setting."""
        return [
            (knob.name, str(knob.default), f"{knob.metadata['text']} ({_expected(knob)})")
            for knob in dataclasses.fields(cls)
        ]

    def to_dict(self) -> dict[str, Any]:
        """Names and values."""
        return dataclasses.asdict(self)


_BOOLEANS = {"true": True, "yes": True, "on": True, "1": True, "false": False, "no": False, "off": False, "0": False}


def _expected(knob: Any) -> str:
    if knob.metadata["choices"]:
        return " | ".join(knob.metadata["choices"])
    if isinstance(knob.default, bool):
        return "true or false"
    kind = "a whole number" if isinstance(knob.default, int) else "a number"
    return f"{kind} within {knob.metadata['low']:g}..{knob.metadata['high']:g}"


def _check(knob: Any, value: Any, source: str) -> None:
    kind = type(knob.default)
    fits = type(value) is kind or (kind is float and type(value) is int)
    if fits and kind in (int, float):
        fits = knob.metadata["low"] <= value <= knob.metadata["high"]
    if fits and knob.metadata["choices"]:
        fits = value in knob.metadata["choices"]
    if not fits:
        raise UsageError(f"{source}: setting {knob.name}: expected {_expected(knob)}, found {value!r}")


EFFORTS: dict[str, dict[str, Any]] = {
    "quick": {
        "starts": 1,
        "pool": 1,
        "cycles": 0,
        "recombinations": 0,
        "block_tries": 1,
        "block_cycles": 1,
        "bound_work": 20.0,
    },
    "normal": {},
    "thorough": {
        "starts": 80,
        "flow_starts": True,
        "pool": 16,
        "cycles": 3,
        "recombinations": 120,
        "work": 120.0,
        "block_tries": 8,
        "block_cycles": 4,
        "bound_work": 1000.0,
    },
}
"""Presets by name: what each sets differently from the defaults of `Settings`."""
