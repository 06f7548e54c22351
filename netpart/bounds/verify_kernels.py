"""Kernels of the certificate check; whole numbers only, and nothing shared with the kernels that make certificates."""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["replay_trees"]


@njit(cache=True, nogil=True)
def replay_trees(
    cell_offsets,
    cell_nets,
    net_offsets,
    net_cells,
    demands,
    shares,
    member_offsets,
    members,
    groups,
    table,
    ring_mask,
    marks,
    change_offsets,
    change_nets,
    change_marks,
    limits,
    tree_offsets,
    roots,
    rates,
    first_stage,
    last_stage,
    loads,
    cell_rates,
):
    """Build the trees of some stages and add their loads to `loads` and their rates to `cell_rates`.

    Net e has length ``table[marks[e]]``; each stage first changes some marks. A tree takes in nets by distance from
    its root, of equal ones the one met last first, up to the stage's limit. Returns the sum of rate × demand left
    out over all trees. All sums stay below 2^62 when the sum of the rates times the total demand does.
    """
    num_cells = len(cell_offsets) - 1
    num_nets = len(net_offsets) - 1
    total = np.int64(0)
    for v in range(num_cells):
        total += demands[v]
    left_out = np.int64(0)
    ring_top = np.full(ring_mask + 1, -1, np.int32)  # the net met last at each distance, modulo the ring size
    older = np.empty(num_nets, np.int32)  # the net met before it at the same distance
    met = np.zeros(num_nets, np.int32)  # the tree that met the net last
    taken = np.zeros(num_cells, np.int32)
    by = np.empty(num_nets, np.int32)  # the cell through which a tree enters a net
    sequence = np.empty(num_cells, np.int32)
    bringer = np.empty(num_cells, np.int32)  # the net that brought each cell
    area_below = np.empty(num_cells, np.int64)
    share_below = np.empty(num_cells, np.int64)
    net_area = np.zeros(num_nets, np.int64)
    net_share = np.zeros(num_nets, np.int64)
    net_load = np.zeros(num_nets, np.int64)
    serial = np.int32(0)
    for stage in range(first_stage, last_stage):
        for i in range(change_offsets[stage], change_offsets[stage + 1]):
            marks[change_nets[i]] = change_marks[i]
        for tree in range(tree_offsets[stage], tree_offsets[stage + 1]):
            serial += np.int32(1)
            root = roots[tree]
            ring_top[:] = -1
            taken[root] = serial
            sequence[0] = root
            bringer[root] = -1
            count = 1
            scanned = 0
            pending = 0
            now = np.int64(0)
            while True:
                while scanned < count:
                    v = sequence[scanned]
                    scanned += 1
                    for i in range(cell_offsets[v], cell_offsets[v + 1]):
                        e = cell_nets[i]
                        if met[e] != serial:
                            met[e] = serial
                            by[e] = v
                            slot = (now + table[marks[e]]) & ring_mask
                            older[e] = ring_top[slot]
                            ring_top[slot] = e
                            pending += 1
                if pending == 0:
                    break
                while ring_top[now & ring_mask] == -1:
                    now += 1
                if now > limits[stage]:
                    break
                e = ring_top[now & ring_mask]
                ring_top[now & ring_mask] = older[e]
                pending -= 1
                for i in range(net_offsets[e], net_offsets[e + 1]):
                    u = net_cells[i]
                    if taken[u] != serial:
                        taken[u] = serial
                        bringer[u] = e
                        sequence[count] = u
                        count += 1

            # Areas and source shares per branch, from the leaves to the root.
            area = np.int64(0)
            share = np.int64(0)
            for i in range(count):
                v = sequence[i]
                area += demands[v]
                area_below[v] = demands[v]
                share_below[v] = 0
            home = groups[root]
            for i in range(member_offsets[home], member_offsets[home + 1]):
                v = members[i]
                if taken[v] == serial:
                    share_below[v] = shares[v]
                    share += shares[v]
                    cell_rates[v] += rates[tree] * shares[v]
            left_out += rates[tree] * share * (total - area)
            for i in range(count - 1, 0, -1):
                v = sequence[i]
                e = bringer[v]
                net_area[e] += area_below[v]
                net_share[e] += share_below[v]
                net_load[e] += share_below[v] * (area - area_below[v])
                if i == 1 or bringer[sequence[i - 1]] != e:  # the first cell that e brought: e is complete
                    u = by[e]
                    loads[e] += rates[tree] * (net_load[e] + (share - net_share[e]) * net_area[e])
                    area_below[u] += net_area[e]
                    share_below[u] += net_share[e]
                    net_area[e] = 0
                    net_share[e] = 0
                    net_load[e] = 0
            if area_below[root] != area or share_below[root] != share:
                return np.int64(-1)
    return left_out
