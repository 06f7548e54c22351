"""Every figure of a partition against its plain definition, and cuts against networkx."""

from __future__ import annotations

from fractions import Fraction

import networkx as nx
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from netpart.netlist import (
    FREE,
    OBJECTIVES,
    AssignmentError,
    Builder,
    CellFlag,
    Netlist,
    Partition,
    Rules,
    spans,
)
from tests.strategies import make_netlist, netlists, plain_costs


@given(netlists(), st.integers(1, 4), st.data())
def test_all_figures_match_their_definitions(netlist: Netlist, num_blocks: int, data: st.DataObject) -> None:
    blocks = data.draw(st.lists(st.integers(0, num_blocks - 1), min_size=netlist.num_cells, max_size=netlist.num_cells))
    partition = Partition.from_blocks(netlist, blocks, num_blocks)
    costs = plain_costs(netlist, tuple(blocks))
    for objective in OBJECTIVES:
        assert partition.cost(objective) == pytest.approx(costs[objective], rel=1e-12)
    touched = [{blocks[cell] for cell in netlist.cells_of(net).tolist()} for net in range(netlist.num_nets)]
    assert spans(netlist, partition.blocks, num_blocks).tolist() == [len(found) for found in touched]
    assert partition.num_cut == sum(len(found) > 1 for found in touched)
    for block in range(num_blocks):
        members = [cell for cell in range(netlist.num_cells) if blocks[cell] == block]
        exact = sum((Fraction(float(netlist.areas[cell])) for cell in members), Fraction(0))
        assert partition.block_areas[block] == float(exact)
        assert partition.block_cells[block] == len(members)
        assert partition.block_terminals[block] == sum(block in found for found in touched if len(found) > 1)


def test_ports_count_as_terminals_of_their_block() -> None:
    builder = Builder()
    port = builder.add_cell("in", area=0, flags=CellFlag.PORT)
    builder.add_net("a", [port, builder.add_cell("g")])
    partition = Partition.from_blocks(builder.build(), [0, 1], 2)
    assert partition.block_terminals.tolist() == [2, 1]
    assert Partition.from_blocks(builder.build(), [0, 0], 2).block_terminals.tolist() == [1, 0]


@given(st.integers(2, 9), st.data())
def test_two_pin_nets_cut_as_networkx_counts(size: int, data: st.DataObject) -> None:
    """networkx.cut_size: the total weight of the edges between two sets of nodes."""
    pairs = data.draw(st.lists(st.tuples(st.integers(0, size - 1), st.integers(0, size - 1)).filter(lambda p: p[0] != p[1])))
    weights = [float(data.draw(st.integers(1, 9))) for _ in pairs]
    graph = nx.MultiGraph()
    graph.add_nodes_from(range(size))
    graph.add_edges_from((a, b, {"weight": weight}) for (a, b), weight in zip(pairs, weights, strict=True))
    side = data.draw(st.sets(st.integers(0, size - 1)))
    blocks = [int(cell in side) for cell in range(size)]
    partition = Partition.from_blocks(make_netlist([list(pair) for pair in pairs], size, weights=weights), blocks, 2)
    assert partition.cut_nets == nx.cut_size(graph, side, weight="weight")
    assert partition.num_cut == nx.cut_size(graph, side)
    assert partition.connectivity == partition.cut_nets
    assert partition.terminals == 2 * partition.cut_nets


def test_the_club_that_fell_apart() -> None:
    """W. W. Zachary, "An information flow model for conflict and fission in small groups", J. Anthropological Research
    33 (1977): 34 members, 78 ties; the data and the sides that the members took as networkx ships them.
    """
    club = nx.karate_club_graph()
    netlist = make_netlist([list(tie) for tie in club.edges], 34, weights=[club.edges[tie]["weight"] for tie in club.edges])
    assert (netlist.num_cells, netlist.num_nets) == (34, 78)
    sides = [int(club.nodes[member]["club"] == "Officer") for member in club]
    officers = [member for member, side in enumerate(sides) if side]
    partition = Partition.from_blocks(netlist, sides, 2)
    assert partition.num_cut == nx.cut_size(club, officers)
    assert partition.cut_nets == nx.cut_size(club, officers, weight="weight")
    assert partition.block_cells.tolist() == [17, 17]
    assert partition.block_terminals.tolist() == [partition.num_cut] * 2
    alone = [int(member == 33) for member in club]
    assert Partition.from_blocks(netlist, alone, 2).num_cut == club.degree(33) == 17


def test_a_hypergraph_by_hand() -> None:
    """Three nets over three blocks: λ = 3, 2, 1."""
    netlist = make_netlist([[0, 1, 2], [0, 1, 3], [0, 3]], 4, areas=[1, 2, 3, 4], weights=[5, 7, 11])
    partition = Partition.from_blocks(netlist, [0, 1, 2, 0], 3)
    assert (partition.cut_nets, partition.connectivity, partition.terminals) == (12, 5 * 2 + 7, 5 * 3 + 7 * 2)
    assert partition.block_areas.tolist() == [5, 2, 3]
    assert partition.block_terminals.tolist() == [2, 2, 1]
    assert partition.imbalance(netlist, Rules.from_request(3)) == pytest.approx(5 / (10 / 3) - 1)
    assert partition.imbalance(netlist, Rules.from_request(3, [5, 2, 3])) == 0
    assert repr(partition) == "<Partition: 3 blocks, cut 12, areas 5:2:3>"


def test_no_area_no_imbalance() -> None:
    netlist = make_netlist([], 2, areas=[0, 0])
    assert Partition.from_blocks(netlist, [0, 0], 2).imbalance(netlist, Rules.from_request(2)) == 0


def test_assignments_that_do_not_fit() -> None:
    netlist = make_netlist([[0, 1]], 3)
    with pytest.raises(AssignmentError, match="2 cells are assigned, expected 3"):
        Partition.from_blocks(netlist, [0, 1], 2)
    for blocks, shown in (([0, 1, 2], "'c2' lies in block 2"), ([0, -1, 1], "'c1' lies in block -1")):
        with pytest.raises(AssignmentError, match=rf"cell {shown}, expected 0\.\.1"):
            Partition.from_blocks(netlist, blocks, 2)


def test_blocks_are_copied_and_read_only() -> None:
    blocks = np.array([0, 1], np.int32)
    partition = Partition.from_blocks(make_netlist([[0, 1]], 2), blocks, 2)
    blocks[0] = 1
    assert partition.blocks.tolist() == [0, 1]
    with pytest.raises(ValueError, match="read-only"):
        partition.blocks[0] = 1


def test_broken_rules_are_told_with_their_measure() -> None:
    netlist = make_netlist([[0, 1]], 4, areas=[4, 3, 2, 1])
    rules = Rules.from_request(
        2, tolerance="20%", block_names=["left", "right"], fixed=np.array([FREE, 1, FREE, 0], np.int32)
    )
    assert Partition.from_blocks(netlist, [0, 1, 1, 0], 2).broken_rules(netlist, rules) == []
    assert Partition.from_blocks(netlist, [0, 0, 1, 1], 2).broken_rules(netlist, rules) == [
        "block left has area 7, 1 above its limit 6",
        "block right has area 3, 1 below its limit 4",
        "cell 'c1' is fixed to block right, but lies in left",
        "cell 'c3' is fixed to block left, but lies in right",
    ]
