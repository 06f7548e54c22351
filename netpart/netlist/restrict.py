"""The part of a netlist that lies on some of its cells."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from netpart.netlist.model import Netlist

__all__ = ["restrict"]


def restrict(netlist: Netlist, cells: NDArray[np.int32], *, whole_nets_only: bool) -> Netlist:
    """The netlist of some cells alone, without names; cell i of it is ``cells[i]``.

    Parameters
    ----------
    netlist : Netlist
    cells : (c,) int32, ascending
    whole_nets_only : bool
        True drops every net that also touches other cells: right where such a net is cut already and costs no more
        (cut nets). False keeps what is left of it, as the other objectives count each further block.

    Notes
    -----
    Nets left with fewer than two cells are dropped. O(n + p).
    """
    position = np.full(netlist.num_cells, -1, np.int32)
    position[cells] = np.arange(len(cells), dtype=np.int32)
    new_cells = position[netlist.net_cells]
    inside = new_cells >= 0
    running = np.concatenate(([0], np.cumsum(inside)))
    kept_pins = running[netlist.net_offsets[1:]] - running[netlist.net_offsets[:-1]]
    kept = kept_pins >= 2
    if whole_nets_only:
        kept &= kept_pins == netlist.net_sizes
    pin_kept = inside & np.repeat(kept, netlist.net_sizes)
    offsets = np.concatenate(([0], np.cumsum(kept_pins[kept]))).astype(np.int64)
    return Netlist.from_clusters(
        offsets, new_cells[pin_kept], areas=netlist.areas[cells], net_weights=netlist.net_weights[kept]
    )
