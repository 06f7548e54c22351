"""Loops of the refinement: gains, moves, one pass of moves, one pass of swaps.

Arrays have the shapes of `Netlist`; `side` is 0 or 1 per cell, ``counts[e, s]`` the number of cells of net e on side s,
and ``gains[v]`` what the cut falls by when v changes sides. Buckets are doubly linked lists of cells, one list per side
and quantised gain: list ``s * num_buckets + b``. All of them are kept by the caller, so that passes can go on where the
last one ended.
"""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["compute_gains", "count_sides", "grow_side", "move_pass", "swap_pass", "take_back"]

NEWEST, OLDEST, RANDOM = 0, 1, 2
_LOOKS = 24  # cells that a side may offer in vain before it passes its turn


@njit(cache=True, nogil=True)
def _next_random(state):
    """Advance a (1,) uint64 state that is not zero and return 64 random bits (xorshift64*, Vigna 2016)."""
    word = state[0]
    word ^= word >> np.uint64(12)
    word ^= word << np.uint64(25)
    word ^= word >> np.uint64(27)
    state[0] = word
    return word * np.uint64(2685821657736338717)


@njit(cache=True, nogil=True)
def count_sides(net_offsets, net_cells, net_weights, side, counts):
    """Fill `counts` and return the weight of the cut nets."""
    cut = 0.0
    for net in range(len(net_weights)):
        ones = 0
        for pin in range(net_offsets[net], net_offsets[net + 1]):
            ones += side[net_cells[pin]]
        counts[net, 1] = ones
        counts[net, 0] = net_offsets[net + 1] - net_offsets[net] - ones
        if counts[net, 0] > 0 and ones > 0:
            cut += net_weights[net]
    return cut


@njit(cache=True, nogil=True)
def compute_gains(net_offsets, net_cells, net_weights, side, counts, gains):
    """Fill `gains` from `counts`, by the definition, and return the largest weighted degree of a cell."""
    gains[:] = 0.0
    degrees = np.zeros(len(gains))
    for net in range(len(net_weights)):
        if counts[net, 0] + counts[net, 1] < 2:
            continue
        weight = net_weights[net]
        for pin in range(net_offsets[net], net_offsets[net + 1]):
            degrees[net_cells[pin]] += weight
        if counts[net, 0] == 0 or counts[net, 1] == 0:
            for pin in range(net_offsets[net], net_offsets[net + 1]):
                gains[net_cells[pin]] -= weight
        elif counts[net, 0] == 1 or counts[net, 1] == 1:
            for pin in range(net_offsets[net], net_offsets[net + 1]):
                if counts[net, side[net_cells[pin]]] == 1:
                    gains[net_cells[pin]] += weight
    largest = 0.0
    for cell in range(len(gains)):
        largest = max(largest, degrees[cell])
    return largest


@njit(cache=True, nogil=True)
def grow_side(net_offsets, net_cells, cell_offsets, cell_nets, areas, free, order, max_net_size, wanted, side):
    """Move free cells from side 1 to side 0 in breadth-first order until side 0 has grown by the area `wanted`.

    The walk begins at the first free cell of `order` and, when it has seen all it can reach, goes on at the next one.
    Nets of more than `max_net_size` cells are not walked.
    """
    queue = np.empty(len(areas), np.int32)
    seen = np.zeros(len(areas), np.bool_)
    walked = np.zeros(len(net_offsets) - 1, np.bool_)
    grown = 0.0
    for i in range(len(order)):
        if seen[order[i]] or not free[order[i]]:
            continue
        first = 0
        last = 1
        queue[0] = order[i]
        seen[order[i]] = True
        while first < last:
            cell = queue[first]
            first += 1
            if grown + 0.5 * areas[cell] > wanted:
                if areas[cell] <= 0.0 or first < last:
                    continue
                break
            side[cell] = 0
            grown += areas[cell]
            for at in range(cell_offsets[cell], cell_offsets[cell + 1]):
                net = cell_nets[at]
                if walked[net] or net_offsets[net + 1] - net_offsets[net] > max_net_size:
                    continue
                walked[net] = True
                for pin in range(net_offsets[net], net_offsets[net + 1]):
                    other = net_cells[pin]
                    if free[other] and not seen[other]:
                        seen[other] = True
                        queue[last] = other
                        last += 1
        if grown >= wanted:
            break


@njit(cache=True, nogil=True)
def _move(cell, net_offsets, net_cells, cell_offsets, cell_nets, net_weights, side, counts, gains, touched, is_touched):
    """Move a cell to the other side; keep counts and all gains; list the cells whose gain changed.

    The four cases are those of Fiduccia & Mattheyses (1982): only nets that have none or one cell on a side matter.
    """
    source = side[cell]
    target = 1 - source
    num_touched = 0
    for at in range(cell_offsets[cell], cell_offsets[cell + 1]):
        net = cell_nets[at]
        before = counts[net, target]
        after = counts[net, source] - 1
        counts[net, source] = after
        counts[net, target] = before + 1
        if before > 1 and after > 1:
            continue
        if before + after == 0:
            continue
        weight = net_weights[net]
        if before == 0 or after == 0:  # the net becomes cut, or is no longer cut: every other cell feels it
            change = weight if before == 0 else -weight
            if before + after == 1:
                change += change
            waiting = before + after
        else:  # a cell is no longer alone on its side, or now is
            change = 0.0
            waiting = (before == 1) + (after == 1)
        for pin in range(net_offsets[net], net_offsets[net + 1]):
            other = net_cells[pin]
            if other == cell:
                continue
            if change != 0.0:
                gains[other] += change
            elif side[other] == target:
                if before != 1:
                    continue
                gains[other] -= weight
            else:
                if after != 1:
                    continue
                gains[other] += weight
            if not is_touched[other]:
                is_touched[other] = True
                touched[num_touched] = other
                num_touched += 1
            waiting -= 1
            if waiting == 0:
                break
    side[cell] = target
    gains[cell] = -gains[cell]
    return num_touched


@njit(cache=True, nogil=True)
def take_back(
    moved,
    first,
    last,
    stay_exact,
    net_offsets,
    net_cells,
    cell_offsets,
    cell_nets,
    net_weights,
    areas,
    side,
    counts,
    gains,
    load,
    touched,
    is_touched,
):
    """Move ``moved[first:last]`` back, the last one first, and return whether counts and gains are still exact.

    With `stay_exact` they are, unless so much is taken back that counting anew costs less.
    """
    pins = 0
    for i in range(first, last):
        pins += cell_offsets[moved[i] + 1] - cell_offsets[moved[i]]
    exact = stay_exact and 2 * pins < len(net_cells)
    for i in range(last - 1, first - 1, -1):
        cell = moved[i]
        load[side[cell]] -= areas[cell]
        load[1 - side[cell]] += areas[cell]
        if exact:
            num_touched = _move(
                np.int64(cell),
                net_offsets,
                net_cells,
                cell_offsets,
                cell_nets,
                net_weights,
                side,
                counts,
                gains,
                touched,
                is_touched,
            )
            for j in range(num_touched):
                is_touched[touched[j]] = False
        else:
            side[cell] = 1 - side[cell]
    return exact


@njit(cache=True, nogil=True)
def _unlink(cell, heads, tails, nexts, prevs, list_of):
    place = list_of[cell]
    if prevs[cell] >= 0:
        nexts[prevs[cell]] = nexts[cell]
    else:
        heads[place] = nexts[cell]
    if nexts[cell] >= 0:
        prevs[nexts[cell]] = prevs[cell]
    else:
        tails[place] = prevs[cell]
    list_of[cell] = -1


@njit(cache=True, nogil=True)
def _link(cell, place, at_head, heads, tails, nexts, prevs, list_of):
    list_of[cell] = place
    if at_head:
        prevs[cell] = -1
        nexts[cell] = heads[place]
        if heads[place] >= 0:
            prevs[heads[place]] = cell
        else:
            tails[place] = cell
        heads[place] = cell
    else:
        nexts[cell] = -1
        prevs[cell] = tails[place]
        if tails[place] >= 0:
            nexts[tails[place]] = cell
        else:
            heads[place] = cell
        tails[place] = cell


@njit(cache=True, nogil=True)
def _violation(load, lower, upper):
    total = 0.0
    for s in range(2):
        total += max(0.0, lower[s] - load[s], load[s] - upper[s])
    return total


@njit(cache=True, nogil=True)
def move_pass(
    net_offsets,
    net_cells,
    cell_offsets,
    cell_nets,
    net_weights,
    areas,
    movable,
    lower,
    upper,
    margin,
    side,
    counts,
    gains,
    load,
    cut,
    stall,
    tie_rule,
    boundary_only,
    scale,
    reach,
    heads,
    tails,
    nexts,
    prevs,
    list_of,
    moved,
    touched,
    is_touched,
    random,
):
    """One pass: move cells one by one, best gain first, each at most once; the caller rolls back to the best prefix.

    Moves may leave the window by `margin`; the prefix that is kept leaves it only where nothing better was found.
    `list_of` comes and goes as all −1, `is_touched` as all False. A gain g stands in bucket
    ``reach + floor(g * scale)``, held within the 2 `reach` + 1 buckets of its side.

    Returns
    -------
    num_moved, best_prefix : int
        Cells moved, and how many of them make the best prefix by (violation, cut, imbalance).
    best_cut : float
    """
    num_cells = len(areas)
    num_buckets = 2 * reach + 1
    heads[:] = -1
    tails[:] = -1
    top = np.full(2, -1, np.int64)
    target0 = 0.5 * (lower[0] + upper[0])
    # list_of is −2 for a cell that is fixed or has moved
    num_touched = 0
    for cell in range(num_cells):
        if not movable[cell]:
            list_of[cell] = -2
    if boundary_only:
        for net in range(len(net_weights)):
            if counts[net, 0] > 0 and counts[net, 1] > 0:
                for pin in range(net_offsets[net], net_offsets[net + 1]):
                    cell = net_cells[pin]
                    if movable[cell] and not is_touched[cell]:
                        is_touched[cell] = True
                        touched[num_touched] = cell
                        num_touched += 1
    if num_touched == 0:
        for cell in range(num_cells):
            if movable[cell]:
                touched[num_touched] = cell
                num_touched += 1
    if tie_rule == RANDOM:
        for i in range(num_touched - 1, 0, -1):
            j = np.int64(_next_random(random) % np.uint64(i + 1))
            touched[i], touched[j] = touched[j], touched[i]

    num_moved = 0
    best_prefix = 0
    best_cut = cut
    violation = _violation(load, lower, upper)
    best_violation = violation
    best_imbalance = abs(load[0] - target0)
    tiny = 1e-12 * (load[0] + load[1])
    while True:
        # the one place where cells enter or change buckets
        for i in range(num_touched):
            cell = touched[i]
            is_touched[cell] = False
            if list_of[cell] == -2:
                continue
            bucket = min(max(np.int64(np.floor(gains[cell] * scale)) + reach, 0), num_buckets - 1)
            place = side[cell] * num_buckets + bucket
            if list_of[cell] == place:
                continue
            if list_of[cell] >= 0:
                _unlink(np.int64(cell), heads, tails, nexts, prevs, list_of)
            at_head = tie_rule == NEWEST or (tie_rule == RANDOM and (_next_random(random) >> np.uint64(63)) == 0)
            _link(np.int64(cell), place, at_head, heads, tails, nexts, prevs, list_of)
            top[side[cell]] = max(top[side[cell]], bucket)

        chosen = -1
        chosen_bucket = -1
        for s in range(2):
            while top[s] >= 0 and heads[s * num_buckets + top[s]] < 0:
                top[s] -= 1
            bucket = top[s]
            looks = 0
            found = -1
            while bucket >= 0 and bucket >= chosen_bucket and found < 0 and looks < _LOOKS:
                cell = heads[s * num_buckets + bucket]
                while cell >= 0 and looks < _LOOKS:
                    looks += 1
                    left = load[s] - areas[cell]
                    right = load[1 - s] + areas[cell]
                    if left >= lower[s] - margin - tiny and right <= upper[1 - s] + margin + tiny:
                        found = cell
                        break
                    if violation > tiny:
                        after = max(0.0, lower[s] - left, left - upper[s])
                        after += max(0.0, lower[1 - s] - right, right - upper[1 - s])
                        if after < violation - tiny:
                            found = cell
                            break
                    cell = nexts[cell]
                if found < 0:
                    bucket -= 1
            if found >= 0:
                if bucket > chosen_bucket or load[s] - upper[s] > load[1 - s] - upper[1 - s]:
                    chosen = found
                    chosen_bucket = bucket
        if chosen < 0:
            break

        s = side[chosen]
        _unlink(chosen, heads, tails, nexts, prevs, list_of)
        list_of[chosen] = -2
        load[s] -= areas[chosen]
        load[1 - s] += areas[chosen]
        cut -= gains[chosen]
        num_touched = _move(
            chosen,
            net_offsets,
            net_cells,
            cell_offsets,
            cell_nets,
            net_weights,
            side,
            counts,
            gains,
            touched,
            is_touched,
        )
        moved[num_moved] = chosen
        num_moved += 1

        violation = _violation(load, lower, upper)
        imbalance = abs(load[0] - target0)
        better = False
        if violation < best_violation - tiny:
            better = True
        elif violation <= best_violation + tiny:
            if cut < best_cut - 1e-9:
                better = True
            elif cut <= best_cut + 1e-9 and imbalance < best_imbalance - tiny:
                better = True
        if better:
            best_violation = violation
            best_cut = cut
            best_imbalance = imbalance
            best_prefix = num_moved
        elif num_moved - best_prefix >= stall:
            break
    for i in range(num_touched):
        is_touched[touched[i]] = False
    list_of[:] = -1
    return num_moved, best_prefix, best_cut


@njit(cache=True, nogil=True)
def swap_pass(
    net_offsets,
    net_cells,
    cell_offsets,
    cell_nets,
    net_weights,
    areas,
    movable,
    lower,
    upper,
    side,
    counts,
    gains,
    load,
    cut,
    stall,
    moved,
    touched,
    is_touched,
    shared,
):
    """One pass of Kernighan & Lin (1970) on nets: swap the best pair, lock both, go on; the caller rolls back.

    A net that holds both cells of a pair stays as it is, so the gain of a swap is the sum of both gains less what the
    two cells gain on common nets, which is never negative: pairs come in falling order of the sum, and the search ends
    where the sum cannot beat the best pair found. `shared` is an int32 mark per net, all −1.

    Returns
    -------
    num_moved, best_prefix : int
        Both even: every swap is two moves.
    best_cut : float
    """
    num_cells = len(areas)
    locked = np.zeros(num_cells, np.bool_)
    num_moved = 0
    best_prefix = 0
    best_cut = cut
    best_imbalance = abs(load[0] - 0.5 * (lower[0] + upper[0]))
    tiny = 1e-12 * (load[0] + load[1])
    order = np.argsort(-gains, kind="mergesort").astype(np.int32)
    while True:
        best_gain = -np.inf
        best_a = -1
        best_b = -1
        # candidates in falling order of gain; sides alternate through one sorted list
        for i in range(num_cells):
            a = order[i]
            if locked[a] or side[a] != 0 or not movable[a]:
                continue
            marked = False
            hopeless = True
            for j in range(num_cells):
                b = order[j]
                if locked[b] or side[b] != 1 or not movable[b]:
                    continue
                if gains[a] + gains[b] <= best_gain:
                    break
                hopeless = False
                shift = areas[b] - areas[a]
                if (
                    load[0] + shift > upper[0] + tiny
                    or load[0] + shift < lower[0] - tiny
                    or load[1] - shift > upper[1] + tiny
                    or load[1] - shift < lower[1] - tiny
                ):
                    continue
                if not marked:
                    marked = True
                    for at in range(cell_offsets[a], cell_offsets[a + 1]):
                        shared[cell_nets[at]] = a
                gain = gains[a] + gains[b]
                for at in range(cell_offsets[b], cell_offsets[b + 1]):
                    net = cell_nets[at]
                    if shared[net] == a:
                        if counts[net, 0] == 1:
                            gain -= net_weights[net]
                        if counts[net, 1] == 1:
                            gain -= net_weights[net]
                if gain > best_gain:
                    best_gain = gain
                    best_a = a
                    best_b = b
            if hopeless:
                break
        if best_a < 0:
            break
        for k in range(2):
            cell = best_a if k == 0 else best_b
            cut -= gains[cell]
            load[side[cell]] -= areas[cell]
            load[1 - side[cell]] += areas[cell]
            num_touched = _move(
                np.int64(cell),
                net_offsets,
                net_cells,
                cell_offsets,
                cell_nets,
                net_weights,
                side,
                counts,
                gains,
                touched,
                is_touched,
            )
            for i in range(num_touched):
                is_touched[touched[i]] = False
            locked[cell] = True
            moved[num_moved] = cell
            num_moved += 1
        imbalance = abs(load[0] - 0.5 * (lower[0] + upper[0]))
        if cut < best_cut - 1e-9 or (cut <= best_cut + 1e-9 and imbalance < best_imbalance - tiny):
            best_cut = cut
            best_imbalance = imbalance
            best_prefix = num_moved
        elif num_moved - best_prefix >= 2 * stall:
            break
        order = np.argsort(-gains, kind="mergesort").astype(np.int32)
    return num_moved, best_prefix, best_cut
