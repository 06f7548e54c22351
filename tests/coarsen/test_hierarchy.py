"""Clustering and contraction against their definitions."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from netpart.coarsen import Level, build_hierarchy, contract
from netpart.netlist import FREE, Netlist, Partition
from tests.strategies import make_netlist, netlists, plain_costs


@settings(max_examples=200, deadline=None)
@given(netlists(max_cells=12, max_nets=20), st.data())
def test_contraction_keeps_every_cut(netlist: Netlist, data: st.DataObject) -> None:
    num_clusters = data.draw(st.integers(1, netlist.num_cells))
    labels = data.draw(st.lists(st.integers(0, num_clusters - 1), min_size=netlist.num_cells, max_size=netlist.num_cells))
    cluster = np.array(labels, np.int32)
    coarse = contract(Level(netlist, np.full(netlist.num_cells, FREE, np.int32)), cluster, num_clusters).netlist
    blocks = np.array(data.draw(st.lists(st.integers(0, 3), min_size=num_clusters, max_size=num_clusters)), np.int32)
    above, below = plain_costs(coarse, blocks), plain_costs(netlist, blocks[cluster])
    assert above == pytest.approx(below)
    assert coarse.areas == pytest.approx(np.bincount(cluster, netlist.areas, num_clusters))
    nets = [tuple(sorted(coarse.cells_of(net).tolist())) for net in range(coarse.num_nets)]
    assert len(set(nets)) == len(nets)
    assert all(len(net) == len(set(net)) >= 2 for net in nets)
    for cell in range(num_clusters):
        assert coarse.nets_of(cell).tolist() == [e for e, net in enumerate(nets) if cell in net]


@settings(max_examples=100, deadline=None)
@given(netlists(min_cells=6, max_cells=30, max_nets=60), st.data())
def test_clusters_respect_blocks_fixed_cells_and_the_cap(netlist: Netlist, data: st.DataObject) -> None:
    size = netlist.num_cells
    fixed = np.array(data.draw(st.lists(st.integers(-1, 1), min_size=size, max_size=size)), np.int32)
    keep = np.array(data.draw(st.lists(st.integers(0, 1), min_size=size, max_size=size)), np.int32)
    hierarchy = build_hierarchy(netlist, np.random.default_rng(0), fixed=fixed, keep=keep, coarsest=3, area_cap=1.5)
    top = np.arange(size)
    for level in hierarchy.levels[1:]:
        top = level.cluster[top]
    coarsest = hierarchy.coarsest
    for cluster in range(coarsest.netlist.num_cells):
        members = np.flatnonzero(top == cluster)
        assert set(keep[members]) == {coarsest.keep[cluster]}
        pinned = set(fixed[members]) - {FREE}
        assert pinned == ({int(coarsest.fixed[cluster])} - {FREE})
        assert len(members) == 1 or netlist.areas[members].sum() <= 0.5 * netlist.total_area + 1e-9
    assert Partition.from_blocks(netlist, keep, 2).cut_nets == pytest.approx(
        Partition.from_blocks(coarsest.netlist, coarsest.keep, 2).cut_nets
    )


def test_a_hierarchy_prints_itself_and_repeats_itself() -> None:
    rng = np.random.default_rng(5)
    netlist = make_netlist([rng.choice(2000, 3, replace=False).tolist() for _ in range(3000)], 2000)
    first, second = (build_hierarchy(netlist, np.random.default_rng(1)) for _ in range(2))
    assert repr(first) == repr(second)
    lines = repr(first).splitlines()
    assert lines[0].split() == ["level", "cells", "nets", "pins", "ratio"]
    assert lines[1].split() == ["0", "2,000", f"{netlist.num_nets:,}", f"{netlist.num_pins:,}"]
    assert 100 <= first.coarsest.netlist.num_cells <= 300
    blocks = np.arange(first.coarsest.netlist.num_cells) % 2
    cut = Partition.from_blocks(first.coarsest.netlist, blocks, 2).cut_nets
    for number in range(len(first.levels) - 1, 0, -1):
        blocks = first.project(blocks, number)
    assert Partition.from_blocks(netlist, blocks, 2).cut_nets == cut


def test_a_huge_net_costs_no_quadratic_time_and_stays_in_the_cut() -> None:
    size = 100_000
    netlist = make_netlist([list(range(size)), *([i, i + 1] for i in range(0, size - 1, 2))], size)
    hierarchy = build_hierarchy(netlist, np.random.default_rng(0))
    assert hierarchy.coarsest.netlist.num_nets == 1
