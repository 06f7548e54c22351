"""Kernels of the spreading bound: flow trees over nets, their loads, and the step that mixes them in."""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["mix_trees", "route_trees"]


@njit(cache=True, nogil=True)
def grow_tree(
    cell_offsets,
    cell_nets,
    net_offsets,
    net_cells,
    lengths,
    limit,
    num_roots,
    heads,
    links,
    entries,
    seen,
    order,
    nets,
    firsts,
):
    """Shortest-path tree of nets around the first cells of ``order``, up to a distance; returns the number of its nets.

    A net is crossed at once in full: the first cell that reaches it is its entry, and all its other cells get the
    distance of the entry plus the length of the net. Nets wait in circular buckets (Dial, Communications of the ACM,
    1969) of whole distances; ``len(heads)`` is a power of two above the longest net. Of the nets at one distance the
    one that came last leaves first. O(pins + distance).

    On return ``order`` holds the cells reached, net ``nets[j]`` brought ``order[firsts[j]:firsts[j + 1]]`` and was
    entered from cell ``entries[nets[j]]``.
    """
    mask = len(heads) - 1
    heads[:] = -1
    entries[:] = -1
    seen[:] = 0
    for i in range(num_roots):
        seen[order[i]] = 1
    num_cells = num_roots
    num_nets = 0
    expanded = 0
    waiting = 0
    distance = 0
    while True:
        while expanded < num_cells:
            v = order[expanded]
            expanded += 1
            for q in range(cell_offsets[v], cell_offsets[v + 1]):
                e = cell_nets[q]
                if entries[e] < 0:
                    entries[e] = v
                    bucket = (distance + lengths[e]) & mask
                    links[e] = heads[bucket]
                    heads[bucket] = e
                    waiting += 1
        if waiting == 0:
            break
        while heads[distance & mask] < 0:
            distance += 1
        if distance > limit:
            break
        bucket = distance & mask
        e = heads[bucket]
        heads[bucket] = links[e]
        waiting -= 1
        first = num_cells
        for q in range(net_offsets[e], net_offsets[e + 1]):
            u = net_cells[q]
            if seen[u] == 0:
                seen[u] = 1
                order[num_cells] = u
                num_cells += 1
        if num_cells > first:
            nets[num_nets] = e
            firsts[num_nets] = first
            num_nets += 1
    firsts[num_nets] = num_cells
    return num_nets


@njit(cache=True, nogil=True)
def load_tree(order, nets, firsts, num_nets, entries, demands, rates, below, sources, places, loads):
    """Add the load that a tree lays on each net when each cell v of it sends ``rates[v] * demands[u]`` to each u.

    The net's load is the flow between cells of different branches: with r and a the rates and the demands of one
    branch (the entry's side is one), and a(U) the demand of the whole tree, the branch sends r (a(U) − a) across.
    Returns a(U), the rates in the tree.
    """
    num_cells = firsts[num_nets]
    covered = 0.0
    rate = 0.0
    for i in range(num_cells):
        v = order[i]
        below[v] = demands[v]
        sources[v] = rates[v]
        covered += demands[v]
        rate += rates[v]
    for j in range(num_nets - 1, -1, -1):
        e = nets[j]
        reached = 0.0
        inside = 0.0
        load = 0.0
        for i in range(firsts[j], firsts[j + 1]):
            v = order[i]
            reached += below[v]
            if sources[v] > 0.0:
                inside += sources[v]
                load += sources[v] * (covered - below[v])
        u = entries[e]
        below[u] += reached
        sources[u] += inside
        loads[places[e]] = load + (rate - inside) * reached
    return covered, rate


@njit(cache=True, nogil=True)
def route_trees(
    cell_offsets,
    cell_nets,
    net_offsets,
    net_cells,
    lengths,
    limit,
    roots,
    groups,
    group_offsets,
    group_cells,
    demands,
    places,
    prices,
    heads,
    links,
    entries,
    seen,
    order,
    nets,
    firsts,
    rates,
    below,
    sources,
    loads,
    covered,
    rated,
    costs,
):
    """Grow the tree of each group from its root and lay every member's flow on it (rate = demand of the member).

    Row i of `loads` is filled with the load of tree i per net place; `covered`, `rated` and `costs` get its demand,
    its rate and its loads times `prices`.
    """
    for i in range(len(roots)):
        first, last = group_offsets[groups[i]], group_offsets[groups[i] + 1]
        for q in range(first, last):
            rates[group_cells[q]] = demands[group_cells[q]]
        order[0] = roots[i]
        num_nets = grow_tree(
            cell_offsets,
            cell_nets,
            net_offsets,
            net_cells,
            lengths,
            limit,
            1,
            heads,
            links,
            entries,
            seen,
            order,
            nets,
            firsts,
        )
        row = loads[i]
        row[:] = 0.0
        covered[i], rated[i] = load_tree(order, nets, firsts, num_nets, entries, demands, rates, below, sources, places, row)
        cost = 0.0
        for j in range(num_nets):
            place = places[nets[j]]
            cost += prices[place] * row[place]
        costs[i] = cost
        for q in range(first, last):
            rates[group_cells[q]] = 0.0


@njit(cache=True, nogil=True)
def mix_trees(
    groups,
    loads,
    covered,
    rated,
    costs,
    rows,
    group_demands,
    levels,
    uncovered,
    targets,
    steps,
    load,
    weights,
    prices,
    sharpness,
    congestion,
    worth,
    value,
    price,
    total_rate,
):
    """Move the flow of each group towards its new tree by the step that lowers the potential most.

    The flow of group g is a mixture of trees: its loads ``rows[g]`` on the nets of the first places, its rate per
    demand ``levels[g]`` in 0 … 1, and the flow it leaves out ``uncovered[g]``. The potential is ln Σ exp(α L/w) / α
    against ln value; a unit of rate is worth `worth`, and `price` is what a unit of value may cost. A group whose new
    tree costs more than it is worth moves towards no flow. Returns the new value and total rate.
    """
    num_kept = rows.shape[1]
    num_nets = len(load)
    for i in range(len(groups)):
        g = groups[i]
        demand = rated[i]
        missing = demand * (1.0 - covered[i])
        target = 1.0
        if costs[i] >= price * (worth * demand - missing):
            target = 0.0
        old_rate = levels[g] * group_demands[g]
        gain = worth * (target * demand - old_rate) - target * missing + uncovered[g]
        slope = -gain * price
        curve = 0.0
        largest = 0.0
        share = old_rate / total_rate
        row = rows[g]
        new = loads[i]
        for p in range(num_nets):
            change = target * new[p] - (row[p] if p < num_kept else share * load[p])
            pull = prices[p] * change
            slope += pull
            bend = sharpness * change / weights[p]
            curve += pull * bend
            if prices[p] * weights[p] > 1e-3 and abs(bend) > largest:
                largest = abs(bend)
        targets[i] = target
        steps[i] = 0.0
        if slope >= 0.0:
            continue
        step = 1.0
        if slope + curve > 0.0:
            step = -slope / curve
        if step * largest > 1.0:
            step = 1.0 / largest
        for p in range(num_nets):
            if p < num_kept:
                change = step * (target * new[p] - row[p])
                row[p] += change
            else:
                change = step * (target * new[p] - share * load[p])
            if change != 0.0:
                load[p] += change
                exponent = sharpness * (load[p] / weights[p] - congestion)
                if exponent > -20.0:
                    prices[p] = np.exp(exponent) / weights[p]
        total_rate += step * (target * demand - old_rate)
        levels[g] = (old_rate + step * (target * demand - old_rate)) / group_demands[g]
        uncovered[g] += step * (target * missing - uncovered[g])
        value += step * gain
        steps[i] = step
    return value, total_rate
