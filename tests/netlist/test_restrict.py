"""The restriction of a netlist to some cells, against its definition with Python sets."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from netpart.netlist import Netlist, restrict
from tests.strategies import netlists


@given(netlists(), st.data())
def test_restriction_matches_sets(netlist: Netlist, data: st.DataObject) -> None:
    cells = sorted(data.draw(st.sets(st.integers(0, netlist.num_cells - 1), min_size=1)))
    whole = data.draw(st.booleans())
    part = restrict(netlist, np.array(cells, np.int32), whole_nets_only=whole)
    expected = []
    for net in range(netlist.num_nets):
        pins = netlist.cells_of(net).tolist()
        left = [cells.index(cell) for cell in pins if cell in cells]
        if len(left) >= 2 and (not whole or len(left) == len(pins)):
            expected.append((left, netlist.net_weights[net]))
    assert [(part.cells_of(e).tolist(), part.net_weights[e]) for e in range(part.num_nets)] == expected
    assert part.areas.tolist() == netlist.areas[cells].tolist()
