"""Loops of the corridor flow: divide the network of a corridor by minimum cuts.

The network stands for the expansion of Lawler (Networks 3, 1973): a net is an arc of capacity w(e) from a node "in" to a
node "out"; its cells reach "in", and are reached from "out", without limit. What is kept is the flow of each pin, which
is what the cell gives to the net (below zero: takes from it), and the room left in each net. Residual arcs are then

    cell → in    always             in → out    while the net has room
    cell → out   if flow < 0        in → cell   if flow > 0
    out → cell   always

and out → in, which leads nowhere that "out" does not reach. Seen from the sink the same holds with the sign of the flow
turned round. A search therefore works for both sides: the node of a net that it meets first is "near", the other one
"far". Nodes are numbered: cells, near nodes of all nets, far nodes of all nets. Cell 0 is all that the source holds
beyond the corridor, cell 1 all that the sink holds.
"""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["divide_network"]

_NO_PIN = -1
_UNSEEN, _DEAD, _SETTLED = -1, -2, 2**30
_BATCH = 0.05  # cells that cost flow are pierced together, up to this part of the area that a side lacks


@njit(cache=True, nogil=True)
def _search(
    side, num_roots, goal, net_start, pin_cell, pin_net, cell_start, cell_pin, room, flow, level, seen, first, pointer
):
    """Breadth-first on residual arcs from the cells ``seen[first:first + num_roots]``, until `goal` is met.

    Only nodes without a level are entered. Fills `level`, lists the nodes in `seen` and leaves in `pointer` the first
    arcs for `_augment`. The near node of a net that has room is not listed: the search goes on from the far one, on the
    same level.

    Returns
    -------
    last : int
        The nodes are ``seen[first:last]``.
    """
    num_cells = len(cell_start) - 1
    num_nets = len(room)
    sign = 1 - 2 * side
    last = first + num_roots
    for i in range(first, last):
        level[seen[i]] = 0
    while first < last:
        node = seen[first]
        first += 1
        step = level[node] + 1
        if node < num_cells:
            for at in range(cell_start[node], cell_start[node + 1]):
                pin = cell_pin[at]
                net = pin_net[pin]
                near = num_cells + net
                far = near + num_nets
                is_new = level[near] == _UNSEEN
                if is_new:
                    level[near] = step
                    pointer[near] = net_start[net]
                    if room[net] == 0:
                        seen[last] = near
                        last += 1
                if level[far] == _UNSEEN and ((is_new and room[net] > 0) or sign * flow[pin] < 0):
                    level[far] = step
                    pointer[far] = net_start[net] - 1
                    seen[last] = far
                    last += 1
            continue
        is_far = node >= num_cells + num_nets
        net = node - num_cells - (num_nets if is_far else 0)
        for pin in range(net_start[net], net_start[net + 1]):
            cell = pin_cell[pin]
            if level[cell] == _UNSEEN and (is_far or sign * flow[pin] > 0):
                level[cell] = step
                pointer[cell] = cell_start[cell]
                seen[last] = cell
                last += 1
                if cell == goal:
                    return last
    return last


@njit(cache=True, nogil=True)
def _augment(
    side, goal, allowance, net_start, pin_cell, pin_net, cell_start, cell_pin, room, flow, level, pointer, path, path_pin
):
    """A blocking flow between `goal` and the roots on the levels that `_search` left; returns its value.

    The phase of Dinic (Soviet Math. Doklady 11, 1970), walked from `goal` to the roots, as every node with a level leads
    back to a root. It ends early when the value has passed `allowance`.
    """
    num_cells = len(cell_start) - 1
    num_nets = len(room)
    sign = 1 - 2 * side
    value = np.int64(0)
    depth = 0
    path[0] = goal
    while True:
        node = path[depth]
        if level[node] == 0:
            amount = np.int64(1) << 62
            for i in range(1, depth + 1):
                if path_pin[i] == _NO_PIN:
                    amount = min(amount, room[path[i] - num_cells])
                elif path[i - 1] >= num_cells + num_nets or num_cells <= path[i] < num_cells + num_nets:
                    # cell → far and near → cell only take back what flows the other way
                    amount = min(amount, abs(flow[path_pin[i]]))
            for i in range(1, depth + 1):
                pin = path_pin[i]
                if pin != _NO_PIN:
                    room[pin_net[pin]] += max(flow[pin], 0)
                    flow[pin] += sign * amount if path[i] < num_cells else -sign * amount
                    room[pin_net[pin]] -= max(flow[pin], 0)
            value += amount
            if value > allowance:
                return value
            depth = 0
            continue

        step = level[node] - 1
        before = -1
        pin = _NO_PIN
        if node < num_cells:
            while pointer[node] < cell_start[node + 1]:
                pin = cell_pin[pointer[node]]
                near = num_cells + pin_net[pin]
                if level[near + num_nets] == step:
                    before = near + num_nets
                    break
                if level[near] == step and sign * flow[pin] > 0:
                    before = near
                    break
                pointer[node] += 1
        else:
            is_far = node >= num_cells + num_nets
            net = node - num_cells - (num_nets if is_far else 0)
            if pointer[node] < net_start[net]:
                if room[net] > 0 and level[node - num_nets] == level[node]:
                    before = node - num_nets
                else:
                    pointer[node] += 1
            if before < 0:
                while pointer[node] < net_start[net + 1]:
                    pin = pointer[node]
                    if level[pin_cell[pin]] == step and (not is_far or sign * flow[pin] < 0):
                        before = pin_cell[pin]
                        break
                    pointer[node] += 1
        if before >= 0:
            depth += 1
            path[depth] = before
            path_pin[depth] = pin
        elif depth == 0:
            return value
        else:
            level[node] = _DEAD
            depth -= 1


@njit(cache=True, nogil=True)
def _mark(mark, num_cells, num_nets, level, seen, first, last):
    """Set the level of the nodes ``seen[first:last]``, and of near nodes that were passed on the way to far ones."""
    for i in range(first, last):
        node = seen[i]
        level[node] = mark
        if node >= num_cells + num_nets and level[node - num_nets] != _SETTLED:
            level[node - num_nets] = mark


@njit(cache=True, nogil=True)
def _pick(side, free_only, areas, level, most, need, order, cursor, picked):
    """Choose cells to pierce and return how many.

    A cell that the other side does not reach opens no augmenting path; where there is one, it is picked alone. Of the
    others several are picked, up to the area `need`. Within each kind `order` decides. Cells of more than the area
    `most` are no choice.
    """
    while cursor[side] < order.shape[1]:
        cell = order[side, cursor[side]]
        cursor[side] += 1
        if level[0, cell] == _UNSEEN and level[1, cell] == _UNSEEN and areas[cell] <= most:
            picked[0] = cell
            return 1
    count = 0
    if not free_only:
        for i in range(order.shape[1]):
            cell = order[side, i]
            # on level 0 of the other side stand the cells that it has pierced
            if level[side, cell] == _UNSEEN and 0 < level[1 - side, cell] < _SETTLED and areas[cell] <= most:
                picked[count] = cell
                count += 1
                most -= areas[cell]
                need -= areas[cell]
                if need <= 0.0:
                    break
    return count


@njit(cache=True, nogil=True)
def divide_network(
    net_start, pin_cell, pin_net, cell_start, cell_pin, room, flow, areas, order, lower, upper, bound, division
):
    """Divide a network by minimum cuts, pierced until the areas of both sides are legal.

    After Yang & Wong (IEEE Trans. CAD 15, 1996): what the lighter side reaches is united with it, and one cell more, the
    pierced one, until the minimum cut is legal; the flow is kept and only augmented. That cells without an augmenting
    path are pierced first follows Hamann & Strasser (ACM J. Experimental Algorithmics 23, 2018). Once a legal division
    is found, cells that cost nothing are pierced on for the sake of balance.

    A side owns what it has settled: no flow passes there again, since every further augmenting path begins at a cell
    pierced later. So each search goes only through what the last pierced cells reach.

    Parameters
    ----------
    room : (m',) int64
        The capacities; left as residual capacities.
    flow : (p',) int64
        All zero; left as the flow.
    areas : (c + 2,) float64
    order : (2, c) int32
        The order in which each side looks for cells to pierce.
    lower, upper : (2,) float64
        Legal areas.
    bound : int
        The largest cut of interest.
    division : (c + 2,) int32
        Filled with the side of each cell, where a legal division was found.

    Returns
    -------
    cut : int
        The cut of the division, or −1 where none was found.

    Notes
    -----
    A search costs O(p'); there are as many as phases of augmentation, of which a pierced batch seldom needs more than
    two.
    """
    num_cells = len(areas)
    num_nets = len(room)
    num_nodes = num_cells + 2 * num_nets
    level = np.full((2, num_nodes), _UNSEEN, np.int32)
    pointer = np.empty((2, num_nodes), np.int32)
    seen = np.empty((2, num_nodes), np.int32)
    num_seen = np.zeros(2, np.int64)
    num_settled = np.zeros(2, np.int64)
    num_roots = np.ones(2, np.int64)
    load = np.zeros(2)
    settled_load = np.zeros(2)
    cursor = np.zeros(2, np.int64)
    path = np.empty(num_nodes, np.int32)
    path_pin = np.empty(num_nodes, np.int32)
    total = areas.sum()
    middle = np.array([0.5 * (lower[0] + upper[0]), total - 0.5 * (lower[0] + upper[0])])

    cut = 0
    best_cut = -1
    best_side = 0
    best_count = 0
    best_imbalance = np.inf
    # at first cell 0 is pierced for the source, while the sink has its search still to do
    side = 0
    picked = np.zeros(num_cells, np.int32)
    count = 1
    seen[1, 0] = 1
    stale = True
    while count > 0:
        other = 1 - side
        _mark(_SETTLED, num_cells, num_nets, level[side], seen[side], num_settled[side], num_seen[side])
        num_settled[side] = num_seen[side]
        settled_load[side] = load[side]
        num_roots[side] = count
        for i in range(count):
            seen[side, num_settled[side] + i] = picked[i]
        goal = picked[0] if count == 1 else -1
        while True:
            if not stale:
                for i in range(count):
                    if level[other, picked[i]] >= 0:
                        stale = True
                        cut += _augment(
                            other,
                            picked[i],
                            bound - cut,
                            net_start,
                            pin_cell,
                            pin_net,
                            cell_start,
                            cell_pin,
                            room,
                            flow,
                            level[other],
                            pointer[other],
                            path,
                            path_pin,
                        )
                        if cut > bound:
                            return -1
                if stale:
                    cursor[:] = 0
                    _mark(_UNSEEN, num_cells, num_nets, level[other], seen[other], num_settled[other], num_seen[other])
            # the side itself searches when no more flow passes between the other one and the pierced cells
            searched = other if stale else side
            last = _search(
                searched,
                num_roots[searched],
                goal,
                net_start,
                pin_cell,
                pin_net,
                cell_start,
                cell_pin,
                room,
                flow,
                level[searched],
                seen[searched],
                num_settled[searched],
                pointer[searched],
            )
            load[searched] = settled_load[searched]
            for i in range(num_settled[searched], last):
                if seen[searched, i] < num_cells:
                    load[searched] += areas[seen[searched, i]]
            num_seen[searched] = last
            if not stale:
                break
            stale = False

        for s in range(2):
            rest = total - load[s]
            if lower[s] <= load[s] <= upper[s] and lower[1 - s] <= rest <= upper[1 - s]:
                imbalance = abs(load[s] - middle[s])
                if imbalance < best_imbalance:
                    best_cut = bound = cut
                    best_side = s
                    best_count = num_seen[s]
                    best_imbalance = imbalance
        if max(settled_load[0] - upper[0], settled_load[1] - upper[1]) > 0.0:
            break
        side = 0 if load[0] - middle[0] < load[1] - middle[1] else 1
        if best_cut >= 0 and load[side] >= middle[side]:
            break
        for _ in range(2):
            count = _pick(
                side,
                cut >= bound,
                areas,
                level,
                upper[side] - load[side],
                _BATCH * (lower[side] - load[side]),
                order,
                cursor,
                picked,
            )
            if count > 0:
                break
            side = 1 - side

    if best_cut >= 0:
        division[:] = 1 - best_side
        for i in range(best_count):
            if seen[best_side, i] < num_cells:
                division[seen[best_side, i]] = best_side
    return best_cut
