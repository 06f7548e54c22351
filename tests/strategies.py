"""Hypothesis strategies and plain references that several test folders share."""

from __future__ import annotations

import itertools

import numpy as np
from hypothesis import strategies as st

from netpart.netlist import FREE, Netlist, Rules


@st.composite
def netlists(
    draw: st.DrawFn,
    min_cells: int = 2,
    max_cells: int = 9,
    max_nets: int = 14,
    max_net_size: int = 5,
    areas: str = "any",
    weights: str = "any",
) -> Netlist:
    """Small netlists; `areas` is unit, whole or any (decimals too), `weights` is unit, whole or any."""
    num_cells = draw(st.integers(min_cells, max_cells))
    nets = draw(
        st.lists(st.lists(st.integers(0, num_cells - 1), min_size=0, max_size=max_net_size), min_size=0, max_size=max_nets)
    )
    return make_netlist(
        nets,
        num_cells,
        areas=_values(draw, areas, num_cells, zero=True),
        weights=_values(draw, weights, len(nets), zero=False),
    )


def _values(draw: st.DrawFn, kind: str, count: int, zero: bool) -> list[float] | None:
    if kind == "any":
        kind = draw(st.sampled_from(["unit", "whole", "decimal"]))
    if kind == "unit":
        return None
    low = 0 if zero else 1
    whole = draw(st.lists(st.integers(low, 7), min_size=count, max_size=count))
    return [float(value) if kind == "whole" else value * 0.0729 for value in whole]


def make_netlist(
    nets: list[list[int]],
    num_cells: int,
    areas: list[float] | None = None,
    weights: list[float] | None = None,
    name: str = "",
) -> Netlist:
    """A netlist from lists of cells."""
    offsets = np.concatenate(([0], np.cumsum([len(net) for net in nets], dtype=np.int64)))
    cells = np.array([cell for net in nets for cell in net], dtype=np.int64)
    return Netlist.from_arrays(offsets, cells, num_cells=num_cells, areas=areas, net_weights=weights, name=name)


def plain_costs(netlist: Netlist, blocks: tuple[int, ...] | np.ndarray) -> dict[str, float]:
    """The three objectives, written from the definitions with Python sets."""
    costs = {"cut-nets": 0.0, "connectivity": 0.0, "terminals": 0.0}
    for net in range(netlist.num_nets):
        weight = float(netlist.net_weights[net])
        touched = {int(blocks[cell]) for cell in netlist.cells_of(net)}
        if len(touched) > 1:
            costs["cut-nets"] += weight
            costs["connectivity"] += weight * (len(touched) - 1)
            costs["terminals"] += weight * len(touched)
    return costs


def enumerate_optimum(netlist: Netlist, rules: Rules, objective: str = "cut-nets") -> float | None:
    """The smallest cost of any legal partition by trying all k^n, or None where no partition is legal."""
    window = rules.window(netlist)
    best: float | None = None
    for blocks in itertools.product(range(rules.num_blocks), repeat=netlist.num_cells):
        assigned = np.array(blocks)
        if rules.fixed is not None and np.any((rules.fixed != FREE) & (rules.fixed != assigned)):
            continue
        areas = np.bincount(assigned, netlist.areas, rules.num_blocks)
        if np.any(window.violation(areas) > 0):
            continue
        cost = plain_costs(netlist, blocks)[objective]
        if best is None or cost < best:
            best = cost
    return best
