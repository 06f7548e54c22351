"""Loops of the refinement of many blocks: one pass of single moves with exact gains.

``counts[e, i]`` is the number of cells of net e in block i and ``spans[e]`` = λ(e) the number of blocks it touches. A net of
weight w costs w [λ > 1], w (λ − 1) or w λ [λ > 1], by objective 0, 1 or 2.
"""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["block_pass", "count_blocks"]


_EXTRA_SPAN = 0.05  # what a further block of a cut net counts for the choice of a move, where only cut nets cost
_RETRIES = 8


@njit(cache=True, nogil=True)
def _price(objective, span):
    """The cost of a net of weight 1."""
    if span <= 1:
        return 0.0
    if objective == 0:
        return 1.0
    return span - 1.0 if objective == 1 else 1.0 * span


@njit(cache=True, nogil=True)
def _lure(objective, span):
    """The price that moves are chosen by: it also tells which of two cut nets is nearer to being whole."""
    price = _price(objective, span)
    if objective == 0 and span > 2:
        price += _EXTRA_SPAN * (span - 2)
    return price


@njit(cache=True, nogil=True)
def count_blocks(net_offsets, net_cells, net_weights, blocks, objective, counts, spans):
    """Fill `counts` and `spans`, and return the cost."""
    counts[:] = 0
    cost = 0.0
    for net in range(len(net_weights)):
        span = 0
        for pin in range(net_offsets[net], net_offsets[net + 1]):
            block = blocks[net_cells[pin]]
            if counts[net, block] == 0:
                span += 1
            counts[net, block] += 1
        spans[net] = span
        cost += net_weights[net] * _price(objective, span)
    return cost


@njit(cache=True, nogil=True)
def _best_move(
    cell,
    cell_offsets,
    cell_nets,
    net_weights,
    areas,
    lower,
    upper,
    margin,
    objective,
    blocks,
    counts,
    spans,
    load,
    bonus,
    tiny,
):
    """The best allowed move of a cell: its gain and its target, −1 where there is none.

    Allowed is what leaves no window by more than `margin`, or lessens the sum of the violations. Of equal targets the one
    with more room is taken.
    """
    source = blocks[cell]
    num_blocks = len(load)
    bonus[:] = 0.0
    base = 0.0
    for at in range(cell_offsets[cell], cell_offsets[cell + 1]):
        net = cell_nets[at]
        span = spans[net]
        left = span - 1 if counts[net, source] == 1 else span
        weight = net_weights[net]
        apart = _lure(objective, left + 1)
        base += weight * (_lure(objective, span) - apart)
        if span > 1:
            together = weight * (apart - _lure(objective, left))
            for block in range(num_blocks):
                if counts[net, block] > 0:
                    bonus[block] += together
    area = areas[cell]
    remaining = load[source] - area
    source_fits = remaining >= lower[source] - margin - tiny
    best = -1
    best_gain = -np.inf
    for block in range(num_blocks):
        if block == source:
            continue
        filled = load[block] + area
        if not (source_fits and filled <= upper[block] + margin + tiny):
            before = max(0.0, lower[source] - load[source], load[source] - upper[source])
            before += max(0.0, lower[block] - load[block], load[block] - upper[block])
            after = max(0.0, lower[source] - remaining, remaining - upper[source])
            after += max(0.0, lower[block] - filled, filled - upper[block])
            if after >= before - tiny:
                continue
        gain = base + bonus[block]
        room = upper[block] - load[block]
        if gain > best_gain + 1e-12 or (gain > best_gain - 1e-12 and best >= 0 and room > upper[best] - load[best] + tiny):
            best = block
            best_gain = max(gain, best_gain)
    return best_gain, best


@njit(cache=True, nogil=True)
def _move(cell, target, cell_offsets, cell_nets, net_weights, areas, objective, blocks, counts, spans, load):
    """Move a cell and return what the cost falls by."""
    source = blocks[cell]
    gain = 0.0
    for at in range(cell_offsets[cell], cell_offsets[cell + 1]):
        net = cell_nets[at]
        before = spans[net]
        after = before
        counts[net, source] -= 1
        if counts[net, source] == 0:
            after -= 1
        if counts[net, target] == 0:
            after += 1
        counts[net, target] += 1
        if after != before:
            spans[net] = after
            gain += net_weights[net] * (_price(objective, before) - _price(objective, after))
    load[source] -= areas[cell]
    load[target] += areas[cell]
    blocks[cell] = target
    return gain


@njit(cache=True, nogil=True)
def _push(heap_keys, heap_cells, size, key, cell):
    at = size
    while at > 0:
        parent = (at - 1) // 2
        if heap_keys[parent] >= key:
            break
        heap_keys[at] = heap_keys[parent]
        heap_cells[at] = heap_cells[parent]
        at = parent
    heap_keys[at] = key
    heap_cells[at] = cell
    return size + 1


@njit(cache=True, nogil=True)
def _pop(heap_keys, heap_cells, size):
    """Drop the largest entry."""
    size -= 1
    key = heap_keys[size]
    cell = heap_cells[size]
    at = 0
    while 2 * at + 1 < size:
        child = 2 * at + 1
        if child + 1 < size and heap_keys[child + 1] > heap_keys[child]:
            child += 1
        if heap_keys[child] <= key:
            break
        heap_keys[at] = heap_keys[child]
        heap_cells[at] = heap_cells[child]
        at = child
    heap_keys[at] = key
    heap_cells[at] = cell
    return size


@njit(cache=True, nogil=True)
def block_pass(
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
    objective,
    blocks,
    counts,
    spans,
    load,
    cost,
    stall,
    max_net_size,
):
    """One pass: the best move first, every cell at most once, then back to the best prefix by (violation, cost).

    A heap holds cells by gains that may be out of date; a cell moves only with the gain it has at that moment. Cells of a
    net are valued anew when a count falls to 0 or 1 or rises to 1 or 2, for nets up to `max_net_size`. Cells that no block
    has room for wait, and some of them are tried again after every move.

    Returns
    -------
    best_prefix : int
        Moves kept; 0 if the pass brought nothing.
    best_cost : float
    """
    num_cells = len(areas)
    num_blocks = len(load)
    tiny = 1e-12 * load.sum()
    violation = 0.0
    for block in range(num_blocks):
        violation += max(0.0, lower[block] - load[block], load[block] - upper[block])
    bonus = np.empty(num_blocks)
    locked = np.zeros(num_cells, np.bool_)
    touched = np.empty(num_cells, np.int32)
    is_touched = np.zeros(num_cells, np.bool_)
    num_touched = 0
    for cell in range(num_cells):
        if not movable[cell]:
            locked[cell] = True
            continue
        at_border = violation > tiny
        if not at_border:
            for at in range(cell_offsets[cell], cell_offsets[cell + 1]):
                if spans[cell_nets[at]] > 1:
                    at_border = True
                    break
        if at_border:
            touched[num_touched] = cell
            num_touched += 1

    keys = np.full(num_cells, -np.inf)  # of the valid heap entry of a cell; none where −inf
    target_of = np.empty(num_cells, np.int32)
    valued_at = np.full(num_cells, -1, np.int32)
    capacity = num_cells + 16
    heap_keys = np.empty(capacity)
    heap_cells = np.empty(capacity, np.int32)
    size = 0
    waiting = np.empty(num_cells, np.int32)  # a ring
    is_waiting = np.zeros(num_cells, np.bool_)
    first_waiting = 0
    num_waiting = 0
    moved = np.empty(num_cells, np.int32)
    origin = np.empty(num_cells, np.int32)
    num_moved = 0
    best_prefix = 0
    best_cost = cost
    best_violation = violation
    while True:
        for i in range(num_touched):
            cell = touched[i]
            is_touched[cell] = False
            if locked[cell]:
                continue
            gain, target = _best_move(
                cell,
                cell_offsets,
                cell_nets,
                net_weights,
                areas,
                lower,
                upper,
                margin,
                objective,
                blocks,
                counts,
                spans,
                load,
                bonus,
                tiny,
            )
            target_of[cell] = target
            valued_at[cell] = num_moved
            if target < 0:
                keys[cell] = -np.inf
                if not is_waiting[cell]:
                    is_waiting[cell] = True
                    waiting[(first_waiting + num_waiting) % num_cells] = cell
                    num_waiting += 1
            elif gain != keys[cell]:
                keys[cell] = gain
                if size == capacity:
                    heap_keys = np.concatenate((heap_keys, np.empty(capacity)))
                    heap_cells = np.concatenate((heap_cells, np.empty(capacity, np.int32)))
                    capacity *= 2
                size = _push(heap_keys, heap_cells, size, gain, cell)
        num_touched = 0
        if size == 0 or num_moved - best_prefix >= stall:
            break
        cell = heap_cells[0]
        key = heap_keys[0]
        size = _pop(heap_keys, heap_cells, size)
        if locked[cell] or key != keys[cell]:
            continue
        keys[cell] = -np.inf
        if valued_at[cell] != num_moved:
            touched[0] = cell
            num_touched = 1
            continue

        source = blocks[cell]
        target = target_of[cell]
        moved[num_moved] = cell
        origin[num_moved] = source
        num_moved += 1
        locked[cell] = True
        cost -= _move(cell, target, cell_offsets, cell_nets, net_weights, areas, objective, blocks, counts, spans, load)
        violation = 0.0
        for block in range(num_blocks):
            violation += max(0.0, lower[block] - load[block], load[block] - upper[block])
        if violation < best_violation - tiny or (violation <= best_violation + tiny and cost < best_cost - 1e-9):
            best_prefix = num_moved
            best_cost = cost
            best_violation = violation
        for at in range(cell_offsets[cell], cell_offsets[cell + 1]):
            net = cell_nets[at]
            if counts[net, source] > 1 and counts[net, target] > 2:
                continue
            if net_offsets[net + 1] - net_offsets[net] > max_net_size:
                continue
            for pin in range(net_offsets[net], net_offsets[net + 1]):
                other = net_cells[pin]
                if not locked[other] and not is_touched[other]:
                    is_touched[other] = True
                    touched[num_touched] = other
                    num_touched += 1
        for _ in range(min(num_waiting, _RETRIES)):
            other = waiting[first_waiting]
            first_waiting = (first_waiting + 1) % num_cells
            num_waiting -= 1
            is_waiting[other] = False
            if not locked[other] and not is_touched[other]:
                is_touched[other] = True
                touched[num_touched] = other
                num_touched += 1
    for i in range(num_moved - 1, best_prefix - 1, -1):
        _move(moved[i], origin[i], cell_offsets, cell_nets, net_weights, areas, objective, blocks, counts, spans, load)
    return best_prefix, best_cost
