"""Loops of the corridor flow: grow a corridor around the cut, and build the network of it."""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["build_network", "grow_corridor"]


@njit(cache=True, nogil=True)
def grow_corridor(
    net_offsets, net_cells, cell_offsets, cell_nets, areas, side, movable, is_cut, max_net_size, area_left, cells_left
):
    """Cells around the cut, breadth-first from the cells of cut nets, each side on its own.

    Parameters
    ----------
    is_cut : (m,) bool
    max_net_size : int
        Larger nets are not walked, unless they are cut.
    area_left : (2,) float64, cells_left : (2,) int64
        What each side may take; used up.

    Returns
    -------
    corridor : (c,) int32
        In the order of the walk.
    """
    num_nets = len(net_offsets) - 1
    corridor = np.empty(len(areas), np.int32)
    taken = np.zeros(len(areas), np.bool_)
    walked = np.zeros((2, num_nets), np.bool_)
    last = 0
    # entry i − num_nets of the corridor is walked in turn i, after the cut nets
    turn = 0
    while turn < num_nets + last:
        if turn < num_nets:
            first_net = turn if is_cut[turn] else 0
            num_around = 1 if is_cut[turn] else 0
            from_side = -1
        else:
            cell = corridor[turn - num_nets]
            first_net = cell_offsets[cell]
            num_around = cell_offsets[cell + 1] - first_net
            from_side = side[cell]
        turn += 1
        for at in range(first_net, first_net + num_around):
            if from_side < 0:
                net = at
                walked[:, net] = True
            else:
                net = cell_nets[at]
                if walked[from_side, net] or net_offsets[net + 1] - net_offsets[net] > max_net_size:
                    continue
                walked[from_side, net] = True
            for pin in range(net_offsets[net], net_offsets[net + 1]):
                other = net_cells[pin]
                s = side[other]
                if taken[other] or not movable[other] or s == 1 - from_side:
                    continue
                if areas[other] <= area_left[s] and cells_left[s] > 0:
                    area_left[s] -= areas[other]
                    cells_left[s] -= 1
                    taken[other] = True
                    corridor[last] = other
                    last += 1
    return corridor[:last].copy()


@njit(cache=True, nogil=True)
def build_network(net_offsets, net_cells, cell_offsets, cell_nets, side, corridor):
    """The nets that the corridor can change, over the cells 0 and 1 (what lies beyond) and i + 2 (``corridor[i]``).

    A net with cells beyond the corridor on both sides is left out: it stays cut.

    Returns
    -------
    nets : (m',) int32
        Their numbers in the netlist.
    net_start : (m' + 1,) int64, pin_cell : (p',) int32, pin_net : (p',) int32
    cell_start : (c + 3,) int64, cell_pin : (p',) int32
        The pins of each cell, as indices into `pin_cell` and `pin_net`.
    """
    position = side.copy()
    most_nets = 0
    for i in range(len(corridor)):
        position[corridor[i]] = i + 2
        most_nets += cell_offsets[corridor[i] + 1] - cell_offsets[corridor[i]]
    listed = np.zeros(len(net_offsets) - 1, np.bool_)
    nets = np.empty(min(most_nets, len(listed)), np.int32)
    net_start = np.zeros(len(nets) + 1, np.int64)
    pin_cell = np.empty(most_nets + len(nets), np.int32)
    num_nets = 0
    num_pins = 0
    for i in range(len(corridor)):
        for at in range(cell_offsets[corridor[i]], cell_offsets[corridor[i] + 1]):
            net = cell_nets[at]
            if listed[net]:
                continue
            listed[net] = True
            last = num_pins
            beyond = -1
            for pin in range(net_offsets[net], net_offsets[net + 1]):
                cell = position[net_cells[pin]]
                if cell >= 2:
                    pin_cell[last] = cell
                    last += 1
                elif beyond == 1 - cell:
                    beyond = 2
                elif beyond < 0:
                    beyond = cell
            if beyond == 0 or beyond == 1:
                pin_cell[last] = beyond
                last += 1
            if beyond < 2 and last - num_pins > 1:
                num_pins = last
                nets[num_nets] = net
                num_nets += 1
                net_start[num_nets] = num_pins
    nets = nets[:num_nets].copy()
    net_start = net_start[: num_nets + 1].copy()
    pin_cell = pin_cell[:num_pins].copy()
    pin_net = np.empty(num_pins, np.int32)
    cell_start = np.zeros(len(corridor) + 3, np.int64)
    for net in range(num_nets):
        for pin in range(net_start[net], net_start[net + 1]):
            pin_net[pin] = net
            cell_start[pin_cell[pin] + 1] += 1
    cell_start = np.cumsum(cell_start)
    cell_pin = np.empty(num_pins, np.int32)
    free = cell_start.copy()
    for pin in range(num_pins):
        cell_pin[free[pin_cell[pin]]] = pin
        free[pin_cell[pin]] += 1
    return nets, net_start, pin_cell, pin_net, cell_start, cell_pin
