"""Corridor flow: a bisection improved by minimum cuts through a corridor around its cut; pairs of blocks among many."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray
from scipy import sparse

from netpart.netlist import FREE, OBJECTIVES, AreaWindow, Netlist, UsageError, restrict
from netpart.refine import corridor_kernels, flow_kernels, kernels

__all__ = ["refine_by_flow", "refine_pair", "refine_pairs"]

_LARGEST_SHARE = 0.4
_WALKED_NET_SIZE = 10
_LARGEST_TOTAL = 2.0**52


def refine_by_flow(
    netlist: Netlist,
    blocks: NDArray[np.int32],
    window: AreaWindow,
    *,
    fixed: NDArray[np.int32] | None = None,
    corridor_share: float = 0.2,
    smallest_share: float = 0.1,
    max_cells: int = 60_000,
    max_rounds: int = 20,
    sideways: bool = False,
) -> tuple[NDArray[np.int32], float]:
    """Improve a legal bisection by minimum cuts through a corridor around its cut.

    In each round a corridor is grown breadth-first from the cut nets on both sides. What lies beyond it becomes source
    and sink, and a minimum cut between them is made legal by piercing (`flow_kernels.divide_network`). The corridor may
    hold far more than the window lets change sides: what the minimum cut moves too much, piercing takes back. It is
    doubled after a better cut and halved otherwise.

    Parameters
    ----------
    netlist : Netlist
    blocks : (n,) int32
        0 or 1; not changed.
    window : AreaWindow
        Of the two blocks. Where `blocks` is not legal it is given back as it is.
    fixed : (n,) int32, optional
        The block of each fixed cell, `FREE` for the others. Fixed cells never move.
    corridor_share : float
        Area of the first corridor on each side, as a share of the total area; at most 0.4 is ever used.
    smallest_share : float
        The search ends when a corridor of this share, or the first one where that is smaller, brings nothing.
    max_cells : int
        The corridor holds at most so many cells on each side.
    max_rounds : int
        At most so many corridors.
    sideways : bool
        Also accept another bisection of equal cut and balance, as a start for other methods.

    Returns
    -------
    blocks : (n,) int32
        Legal, and better by (cut, imbalance) or unchanged; with `sideways`, never worse.
    improvement : float
        By how much Σ w(e) over cut nets has fallen, from correctly rounded sums.

    Notes
    -----
    Weights that are not whole numbers are rounded to 52 bits of their sum inside the flow; what is accepted is counted
    anew. A round costs O(n + p) and the searches of the flow, each linear in the pins of the corridor.

    References
    ----------
    .. [1] E. L. Lawler, "Cutsets and partitions of hypergraphs", Networks 3 (1973).
    .. [2] H. Yang and D. F. Wong, "Efficient network flow based min-cut balanced partitioning", IEEE Trans. CAD 15
       (1996).
    .. [3] M. Hamann and B. Strasser, "Graph bisection with Pareto optimization", ACM J. Experimental Algorithmics 23
       (2018).
    """
    blocks = np.array(blocks, dtype=np.int32)
    if len(blocks) != netlist.num_cells or (len(blocks) and (blocks.min() < 0 or blocks.max() > 1)):
        raise UsageError(f"a bisection has {netlist.num_cells} entries 0 or 1")
    load = _sum_areas(blocks, netlist.areas)
    if window.violation(load).any():
        return blocks, 0.0
    movable = np.ones(netlist.num_cells, np.bool_) if fixed is None else fixed == FREE
    capacities = _round_weights(netlist.net_weights)
    middle = 0.5 * float(window.lower[0] + window.upper[0])
    is_cut, cut = _count_cut(netlist, blocks)
    imbalance = abs(float(load[0]) - middle)
    first_cut = cut
    share = min(corridor_share, _LARGEST_SHARE)
    smallest = min(smallest_share, share)
    failed_size = 0
    for _ in range(max_rounds):
        corridor = _grow_corridor(netlist, blocks, movable, is_cut, share * float(load.sum()), max_cells)
        # a corridor as large as the one that failed is the same again, limited by other things than its share
        found = None
        if len(corridor) != failed_size:
            found = _divide_corridor(netlist, blocks, window, corridor, capacities, is_cut, load)
        failed_size = len(corridor)
        gained = False
        if found is not None:
            new_load = _sum_areas(found, netlist.areas)
            new_is_cut, new_cut = _count_cut(netlist, found)
            old, new = (cut, imbalance), (new_cut, abs(float(new_load[0]) - middle))
            if (new < old or (sideways and new == old)) and not window.violation(new_load).any():
                failed_size = 0
                gained = new_cut < cut
                blocks, load, is_cut, (cut, imbalance) = found, new_load, new_is_cut, new
        if gained:
            share = min(2 * share, _LARGEST_SHARE)
        elif share > smallest:
            share = max(share / 2, smallest)
        else:
            break
    return blocks, first_cut - cut


def _grow_corridor(
    netlist: Netlist,
    blocks: NDArray[np.int32],
    movable: NDArray[np.bool_],
    is_cut: NDArray[np.bool_],
    area: float,
    max_cells: int,
) -> NDArray[np.int32]:
    """The cells of a corridor of at most this area and so many cells on each side."""
    # one cell at least stays beyond the corridor, as source or sink
    cells_left = np.minimum(np.bincount(blocks, minlength=2) - 1, max_cells)
    return corridor_kernels.grow_corridor(
        netlist.net_offsets,
        netlist.net_cells,
        netlist.cell_offsets,
        netlist.cell_nets,
        netlist.areas,
        blocks,
        movable,
        is_cut,
        _WALKED_NET_SIZE,
        np.full(2, area),
        cells_left,
    )


def _divide_corridor(
    netlist: Netlist,
    blocks: NDArray[np.int32],
    window: AreaWindow,
    corridor: NDArray[np.int32],
    capacities: NDArray[np.int64],
    is_cut: NDArray[np.bool_],
    load: NDArray[np.float64],
) -> NDArray[np.int32] | None:
    """The blocks after a new division of the corridor; None where there is none as good as the present one."""
    nets, net_start, pin_cell, pin_net, cell_start, cell_pin = corridor_kernels.build_network(
        netlist.net_offsets, netlist.net_cells, netlist.cell_offsets, netlist.cell_nets, blocks, corridor
    )
    sides, areas = blocks[corridor], netlist.areas[corridor]
    room = capacities[nets]
    division = np.concatenate(([0, 1], sides)).astype(np.int32)
    # each side pierces its own cells first, from the outside inwards, then those of the other from the cut outwards
    local = np.arange(2, len(corridor) + 2, dtype=np.int32)
    of_source, of_sink = local[sides == 0], local[sides == 1]
    order = np.stack((np.concatenate((of_source[::-1], of_sink)), np.concatenate((of_sink[::-1], of_source))))
    found = flow_kernels.divide_network(
        net_start,
        pin_cell,
        pin_net,
        cell_start,
        cell_pin,
        room,
        np.zeros(len(pin_cell), np.int64),
        np.concatenate((load - _sum_areas(sides, areas), areas)),
        order,
        window.lower - window.slack,
        window.upper + window.slack,
        int(room[is_cut[nets]].sum()),
        division,
    )
    if found < 0:
        return None
    new_blocks = blocks.copy()
    new_blocks[corridor] = division[2:]
    return new_blocks


def _sum_areas(sides: NDArray[np.int32], areas: NDArray[np.float64]) -> NDArray[np.float64]:
    """(2,) the area of each side."""
    return np.bincount(sides, areas, 2).astype(np.float64)


def _round_weights(weights: NDArray[np.float64]) -> NDArray[np.int64]:
    """Whole capacities: the weights themselves where they are whole and their sum is exact, else scaled and rounded."""
    total = float(weights.sum())
    if total <= _LARGEST_TOTAL and np.all(weights == np.floor(weights)):
        return weights.astype(np.int64)
    return np.maximum(np.rint(weights * (_LARGEST_TOTAL / total)), 1).astype(np.int64)


def _count_cut(netlist: Netlist, blocks: NDArray[np.int32]) -> tuple[NDArray[np.bool_], float]:
    """Which nets are cut, and the correctly rounded sum of their weights."""
    counts = np.empty((netlist.num_nets, 2), np.int32)
    kernels.count_sides(netlist.net_offsets, netlist.net_cells, netlist.net_weights, blocks, counts)
    is_cut = (counts[:, 0] > 0) & (counts[:, 1] > 0)
    return is_cut, math.fsum(netlist.net_weights[is_cut].tolist())


def refine_pair(
    netlist: Netlist,
    blocks: NDArray[np.int32],
    first: int,
    second: int,
    window: AreaWindow,
    objective: str = "cut-nets",
    *,
    fixed: NDArray[np.int32] | None = None,
    corridor_share: float = 0.2,
    max_cells: int = 60_000,
    max_rounds: int = 20,
) -> tuple[NDArray[np.int32], float]:
    """Improve the division between two of k blocks; the cells of the others stay where they are.

    The flow runs on the cells of the pair alone. What a net costs when it touches both blocks instead of one depends on
    whether it also touches others:

    ============  =======  =====================  ========
    objective     formula  within the pair alone  elsewhere too
    ============  =======  =====================  ========
    cut-nets      w[λ>1]   w                      0: it is cut anyway
    connectivity  w(λ−1)   w                      w
    terminals     wλ[λ>1]  2w                     w
    ============  =======  =====================  ========

    Parameters
    ----------
    netlist : Netlist
    blocks : (n,) int32
        0 … k − 1; not changed.
    first, second : int
        The two blocks.
    window : AreaWindow
        Of all k blocks.
    objective : str
        One of `OBJECTIVES`.
    fixed, corridor_share, max_cells, max_rounds
        As in `refine_by_flow`; the share is one of the area of the pair.

    Returns
    -------
    blocks : (n,) int32
    improvement : float
        By how much the objective has fallen.
    """
    if objective not in OBJECTIVES:
        raise UsageError(f"unknown objective {objective!r}; expected one of {', '.join(OBJECTIVES)}")
    blocks = np.array(blocks, dtype=np.int32)
    in_pair = (blocks == first) | (blocks == second)
    cells = np.flatnonzero(in_pair).astype(np.int32)
    if first == second or not len(cells):
        return blocks, 0.0
    if objective == "terminals":
        nets = np.repeat(np.arange(netlist.num_nets), netlist.net_sizes)
        elsewhere = np.zeros(netlist.num_nets, np.bool_)
        elsewhere[nets[~in_pair[netlist.net_cells]]] = True
        netlist = replace(netlist, net_weights=netlist.net_weights * np.where(elsewhere, 1.0, 2.0))
    part = restrict(netlist, cells, whole_nets_only=objective == "cut-nets")
    sides = (blocks[cells] == second).astype(np.int32)
    pair = [first, second]
    part_window = AreaWindow(window.lower[pair], window.upper[pair], window.slack)
    part_fixed = None if fixed is None else np.where(fixed[cells] == FREE, FREE, sides).astype(np.int32)
    new_sides, improvement = refine_by_flow(
        part,
        sides,
        part_window,
        fixed=part_fixed,
        corridor_share=corridor_share,
        max_cells=max_cells,
        max_rounds=max_rounds,
    )
    blocks[cells] = np.where(new_sides == 0, first, second)
    return blocks, improvement


def refine_pairs(
    netlist: Netlist,
    blocks: NDArray[np.int32],
    window: AreaWindow,
    objective: str = "cut-nets",
    *,
    fixed: NDArray[np.int32] | None = None,
    corridor_share: float = 0.2,
    max_cells: int = 60_000,
    max_rounds: int = 10,
) -> tuple[NDArray[np.int32], float]:
    """Improve pair after pair of k blocks that share nets, until no pair with a changed block brings anything.

    Parameters
    ----------
    max_rounds : int
        Rounds through the pairs. In a round those with the largest weight of common nets come first; after the first
        round a pair comes again only if one of its blocks has improved since.
    netlist, blocks, window, objective, fixed, corridor_share, max_cells
        As in `refine_pair`.

    Returns
    -------
    blocks : (n,) int32
    improvement : float
        By how much the objective has fallen.
    """
    blocks = np.array(blocks, dtype=np.int32)
    num_blocks = len(window.lower)
    total = 0.0
    changed = np.ones(num_blocks, np.bool_)
    for _ in range(max_rounds):
        before, changed = changed, np.zeros(num_blocks, np.bool_)
        for first, second in _adjacent_pairs(netlist, blocks, num_blocks):
            if not (before[first] or before[second] or changed[first] or changed[second]):
                continue
            blocks, improvement = refine_pair(
                netlist,
                blocks,
                first,
                second,
                window,
                objective,
                fixed=fixed,
                corridor_share=corridor_share,
                max_cells=max_cells,
            )
            if improvement > 0:
                total += improvement
                changed[[first, second]] = True
        if not changed.any():
            break
    return blocks, total


def _adjacent_pairs(netlist: Netlist, blocks: NDArray[np.int32], num_blocks: int) -> list[tuple[int, int]]:
    """Pairs of blocks with common nets, the largest weight of them first."""
    nets = np.repeat(np.arange(netlist.num_nets), netlist.net_sizes)
    shape = (netlist.num_nets, num_blocks)
    incidence = sparse.coo_array((np.ones(netlist.num_pins), (nets, blocks[netlist.net_cells])), shape=shape).tocsr()
    incidence.data[:] = 1.0  # a net counts once, however many cells it has in the block
    common = (incidence.T @ sparse.diags_array(netlist.net_weights) @ incidence).toarray()
    firsts, seconds = np.nonzero(np.triu(common, 1))
    by_weight = np.argsort(-common[firsts, seconds], kind="stable")
    return list(zip(firsts[by_weight].tolist(), seconds[by_weight].tolist(), strict=True))
