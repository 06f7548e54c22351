"""Loops of the coarsening: clustering by heavy connectivity, contraction."""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["cluster_cells", "contract_nets"]


@njit(cache=True, nogil=True)
def cluster_cells(
    net_offsets,
    net_cells,
    cell_offsets,
    cell_nets,
    net_weights,
    areas,
    fixed,
    keep,
    order,
    max_area,
    max_net_size,
    net_power,
    area_power,
    enough,
):
    """Join each cell, in the given order, to the neighbouring cluster that it is most heavily connected to.

    A cell that others have joined stays where it is. Ends when `enough` clusters are left.

    Returns
    -------
    cluster : (n,) int32
        Numbered in the order of their first cells.
    num_clusters : int
    """
    num_cells = len(areas)
    leader = np.arange(num_cells).astype(np.int32)  # a cluster is named by one of its cells
    single = np.ones(num_cells, np.bool_)
    area = areas.copy()
    bulk = np.ones(num_cells)  # area to the power area_power, kept because powers are slow
    for cell in range(num_cells):
        if area[cell] > 0.0:
            bulk[cell] = area[cell] ** area_power
    pull = np.zeros(len(net_weights))
    for net in range(len(net_weights)):
        size = net_offsets[net + 1] - net_offsets[net]
        if 2 <= size <= max_net_size:
            pull[net] = net_weights[net] / (size - 1) ** net_power
    pinned = fixed.copy()
    rating = np.zeros(num_cells)
    seen = np.empty(num_cells, np.int32)
    remaining = num_cells
    for i in range(num_cells):
        if remaining <= enough:
            break
        cell = order[i]
        if not single[cell]:
            continue
        num_seen = 0
        for at in range(cell_offsets[cell], cell_offsets[cell + 1]):
            net = cell_nets[at]
            if pull[net] == 0.0:
                continue
            for pin in range(net_offsets[net], net_offsets[net + 1]):
                other = leader[net_cells[pin]]
                if rating[other] == 0.0:
                    seen[num_seen] = other
                    num_seen += 1
                rating[other] += pull[net]
        best = -1
        best_score = 0.0
        for j in range(num_seen):
            other = seen[j]
            score = rating[other] / bulk[other]
            rating[other] = 0.0
            if score < best_score or other == cell:
                continue
            if area[other] + area[cell] > max_area or keep[other] != keep[cell]:
                continue
            if pinned[other] >= 0 and pinned[cell] >= 0 and pinned[other] != pinned[cell]:
                continue
            if score > best_score or (single[other] and not single[best]):
                best = other
                best_score = score
        if best >= 0:
            leader[cell] = best
            single[cell] = False
            single[best] = False
            area[best] += area[cell]
            if area[best] > 0.0:
                bulk[best] = area[best] ** area_power
            if pinned[best] < 0:
                pinned[best] = pinned[cell]
            remaining -= 1

    number = np.full(num_cells, -1, np.int32)
    cluster = np.empty(num_cells, np.int32)
    num_clusters = 0
    for cell in range(num_cells):
        if number[leader[cell]] < 0:
            number[leader[cell]] = num_clusters
            num_clusters += 1
        cluster[cell] = number[leader[cell]]
    return cluster, num_clusters


@njit(cache=True, nogil=True)
def contract_nets(net_offsets, net_cells, net_weights, cluster, num_clusters):
    """The nets among clusters: each cluster once; nets on one cluster dropped, equal nets united.

    Equal nets are found by a hash that does not depend on the order of their cells, and then compared cell by cell.

    Returns
    -------
    net_offsets, net_cells, net_weights, cell_offsets, cell_nets
        As in `Netlist`.
    """
    num_nets = len(net_weights)
    offsets = np.zeros(num_nets + 1, np.int64)
    cells = np.empty(len(net_cells), np.int32)
    weights = np.empty(num_nets)
    table_size = 16
    while table_size < 2 * num_nets:
        table_size *= 2
    table = np.full(table_size, -1, np.int32)
    hashes = np.empty(num_nets, np.uint64)
    last_net = np.full(num_clusters, -1, np.int32)
    kept = 0
    fill = 0
    for net in range(num_nets):
        start = fill
        code = np.uint64(0)
        for pin in range(net_offsets[net], net_offsets[net + 1]):
            number = cluster[net_cells[pin]]
            if last_net[number] != net:
                last_net[number] = net
                cells[fill] = number
                fill += 1
                word = (np.uint64(number) + np.uint64(1)) * np.uint64(0x9E3779B97F4A7C15)
                code += (word ^ (word >> np.uint64(29))) * np.uint64(0xBF58476D1CE4E5B9)
        size = fill - start
        if size < 2:
            fill = start
            continue
        code ^= code >> np.uint64(32)
        slot = np.int64(code & np.uint64(table_size - 1))
        twin = -1
        while table[slot] >= 0 and twin < 0:
            other = table[slot]
            if hashes[other] == code and offsets[other + 1] - offsets[other] == size:
                twin = other
                for pin in range(offsets[other], offsets[other + 1]):
                    if last_net[cells[pin]] != net:
                        twin = -1
                        break
            slot = (slot + 1) & (table_size - 1)
        if twin >= 0:
            weights[twin] += net_weights[net]
            fill = start
        else:
            table[slot] = kept
            hashes[kept] = code
            weights[kept] = net_weights[net]
            kept += 1
            offsets[kept] = fill

    cell_offsets = np.zeros(num_clusters + 1, np.int64)
    for a in range(fill):
        cell_offsets[cells[a] + 1] += 1
    for number in range(num_clusters):
        cell_offsets[number + 1] += cell_offsets[number]
    place = cell_offsets[:-1].copy()
    cell_nets = np.empty(fill, np.int32)
    for net in range(kept):
        for a in range(offsets[net], offsets[net + 1]):
            cell_nets[place[cells[a]]] = net
            place[cells[a]] += 1
    return offsets[: kept + 1].copy(), cells[:fill].copy(), weights[:kept].copy(), cell_offsets, cell_nets
