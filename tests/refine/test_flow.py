"""Corridor flow: its value against max-flow libraries, what it accepts against plain counting and enumeration."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import sparse

from netpart.netlist import FREE, OBJECTIVES, AreaWindow, Netlist, Partition, Rules, UsageError
from netpart.refine.corridor_kernels import build_network, grow_corridor
from netpart.refine.flow import refine_by_flow, refine_pair, refine_pairs
from netpart.refine.flow_kernels import divide_network
from tests.strategies import enumerate_optimum, make_netlist, netlists, plain_costs

_UNLIMITED = 1000


def _expansion(netlist: Netlist) -> list[tuple[object, object, int]]:
    """The arcs of Lawler's expansion (E. L. Lawler, "Cutsets and partitions of hypergraphs", Networks 3, 1973)."""
    arcs: list[tuple[object, object, int]] = []
    for net in range(netlist.num_nets):
        arcs.append((("in", net), ("out", net), int(netlist.net_weights[net])))
        for cell in netlist.cells_of(net).tolist():
            arcs += [(cell, ("in", net), _UNLIMITED), (("out", net), cell, _UNLIMITED)]
    return arcs


def _networkx_cut(netlist: Netlist, source: int, sink: int) -> int:
    graph = nx.DiGraph()
    graph.add_nodes_from(range(netlist.num_cells))
    for tail, head, capacity in _expansion(netlist):
        graph.add_edge(tail, head, capacity=capacity)
    return int(nx.minimum_cut_value(graph, source, sink))


def _scipy_flow(netlist: Netlist, source: int, sink: int) -> int:
    arcs = _expansion(netlist)
    index: dict[object, int] = {cell: cell for cell in range(netlist.num_cells)}
    for tail, head, _ in arcs:
        index.setdefault(tail, len(index))
        index.setdefault(head, len(index))
    rows = [index[tail] for tail, _, _ in arcs]
    columns = [index[head] for _, head, _ in arcs]
    data = np.array([capacity for _, _, capacity in arcs], np.int32)
    matrix = sparse.csr_array((data, (rows, columns)), shape=(len(index), len(index)))
    return int(sparse.csgraph.maximum_flow(matrix, source, sink).flow_value)


class _Divided:
    """`divide_network` on all cells but one source and one sink, with its flow."""

    def __init__(self, netlist: Netlist, blocks: np.ndarray, source: int, sink: int, window: AreaWindow) -> None:
        corridor = np.array([cell for cell in range(netlist.num_cells) if cell not in (source, sink)], np.int32)
        sides = blocks.astype(np.int32)
        sides[[source, sink]] = [0, 1]
        self.nets, *network = build_network(
            netlist.net_offsets, netlist.net_cells, netlist.cell_offsets, netlist.cell_nets, sides, corridor
        )
        _, self.pin_cell, self.pin_net, _, _ = network
        self.capacities = netlist.net_weights[self.nets].astype(np.int64)
        self.room = self.capacities.copy()
        self.flow = np.zeros(len(self.pin_cell), np.int64)
        local = np.arange(2, len(corridor) + 2, dtype=np.int32)
        own, other = local[sides[corridor] == 0], local[sides[corridor] == 1]
        division = np.concatenate(([0, 1], sides[corridor])).astype(np.int32)
        self.cut = divide_network(
            *network,
            self.room,
            self.flow,
            netlist.areas[np.concatenate(([source, sink], corridor))],
            np.stack((np.concatenate((own[::-1], other)), np.concatenate((other[::-1], own)))),
            window.lower - window.slack,
            window.upper + window.slack,
            10**9,
            division,
        )
        self.blocks = np.empty(netlist.num_cells, np.int32)
        self.blocks[np.concatenate(([source, sink], corridor))] = division
        # nets between source and sink alone, or with one cell in the network, are no part of it
        self.constant = sum(
            float(netlist.net_weights[net])
            for net in range(netlist.num_nets)
            if {source, sink} <= set(netlist.cells_of(net).tolist())
        )

    def check_flow(self) -> None:
        """Capacities are kept, and every net gives what it takes."""
        given_to_net = np.bincount(self.pin_net, np.maximum(self.flow, 0), len(self.nets))
        taken = np.bincount(self.pin_net, np.maximum(-self.flow, 0), len(self.nets))
        assert np.array_equal(given_to_net, taken)
        assert np.array_equal(self.capacities - self.room, given_to_net)
        assert np.all(self.room >= 0)


@st.composite
def _terminals(draw: st.DrawFn) -> tuple[Netlist, np.ndarray, int, int]:
    netlist = draw(netlists(min_cells=2, max_cells=12, max_nets=20, weights=draw(st.sampled_from(["unit", "whole"]))))
    source, sink = draw(st.permutations(range(netlist.num_cells)))[:2]
    blocks = draw(st.lists(st.integers(0, 1), min_size=netlist.num_cells, max_size=netlist.num_cells))
    return netlist, np.array(blocks), source, sink


@settings(max_examples=200, deadline=None)
@given(_terminals())
def test_the_flow_is_the_maximum_flow_and_its_cut_the_minimum_cut(
    case: tuple[Netlist, np.ndarray, int, int],
) -> None:
    netlist, blocks, source, sink = case
    anything = AreaWindow(np.full(2, -1.0), np.full(2, netlist.areas.sum() + 1), 0.0)
    divided = _Divided(netlist, blocks, source, sink, anything)
    divided.check_flow()
    # with every division legal nothing that costs flow is pierced, so the flow is one from source to sink
    value = divided.cut + divided.constant
    assert value == _scipy_flow(netlist, source, sink) == _networkx_cut(netlist, source, sink)
    assert value == plain_costs(netlist, divided.blocks)["cut-nets"]
    balance = np.bincount(divided.pin_cell, divided.flow, netlist.num_cells)
    assert balance[0] == divided.cut == -balance[1] or divided.cut == 0


@settings(max_examples=200, deadline=None)
@given(_terminals(), st.sampled_from(["0%", "10%", "30%", "60%"]))
def test_pierced_divisions_are_legal_and_their_flow_is_their_cut(
    case: tuple[Netlist, np.ndarray, int, int], tolerance: str
) -> None:
    netlist, blocks, source, sink = case
    window = Rules.from_request(2, tolerance=tolerance).window(netlist)
    divided = _Divided(netlist, blocks, source, sink, window)
    divided.check_flow()
    if divided.cut < 0:
        return
    counted = Partition.from_blocks(netlist, divided.blocks, 2)
    assert not window.violation(counted.block_areas).any()
    assert (divided.blocks[source], divided.blocks[sink]) == (0, 1)
    assert counted.cut_nets == divided.cut + divided.constant >= _networkx_cut(netlist, source, sink)
    # no weak duality gap: what crosses from block 0 to block 1 through the nets is the cut itself
    local_side = np.concatenate(([0, 1], np.delete(divided.blocks, [source, sink])))
    assert divided.flow[local_side[divided.pin_cell] == 0].sum() == divided.cut


@pytest.mark.parametrize("seed", range(40))
def test_long_searches_keep_the_flow_equal_to_the_cut(seed: int) -> None:
    # rows of up to 150 cells with near neighbours: many cells are pierced, on both sides
    rng = np.random.default_rng(seed)
    num_cells = int(rng.integers(60, 150))
    centres = rng.integers(0, num_cells, int(rng.uniform(0.8, 2) * num_cells))
    nets = [np.clip(c + rng.integers(-6, 7, rng.integers(2, 6)), 0, num_cells - 1).tolist() for c in centres]
    weights = rng.integers(1, 5, len(nets)).tolist() if seed % 2 else None
    netlist = make_netlist(nets, num_cells, weights=weights)
    window = Rules.from_request(2, tolerance="4%").window(netlist)
    divided = _Divided(netlist, rng.integers(0, 2, num_cells), 0, num_cells - 1, window)
    divided.check_flow()
    counted = Partition.from_blocks(netlist, divided.blocks, 2)
    assert divided.cut >= 0
    assert not window.violation(counted.block_areas).any()
    assert counted.cut_nets == divided.cut + divided.constant >= _scipy_flow(netlist, 0, num_cells - 1)
    assert divided.flow[np.concatenate(([0, 1], divided.blocks[1:-1]))[divided.pin_cell] == 0].sum() == divided.cut


@st.composite
def _bisections(draw: st.DrawFn, max_cells: int = 12) -> tuple[Netlist, np.ndarray, np.ndarray, AreaWindow]:
    netlist = draw(netlists(min_cells=4, max_cells=max_cells, max_nets=20))
    blocks = np.array(draw(st.lists(st.integers(0, 1), min_size=netlist.num_cells, max_size=netlist.num_cells)))
    is_fixed = np.array(draw(st.lists(st.booleans(), min_size=netlist.num_cells, max_size=netlist.num_cells)))
    some_fixed = draw(st.booleans())
    fixed = np.where(is_fixed & some_fixed, blocks, FREE).astype(np.int32)
    window = Rules.from_request(2, tolerance=draw(st.sampled_from(["5%", "30%", "60%", "100%"]))).window(netlist)
    return netlist, blocks.astype(np.int32), fixed, window


@settings(max_examples=250, deadline=None)
@given(_bisections(), st.sampled_from([0.05, 0.2, 0.5]), st.booleans())
def test_never_worse_never_illegal_and_fixed_cells_stay(
    case: tuple[Netlist, np.ndarray, np.ndarray, AreaWindow], share: float, sideways: bool
) -> None:
    netlist, blocks, fixed, window = case
    before = Partition.from_blocks(netlist, blocks, 2)
    found, improvement = refine_by_flow(netlist, blocks, window, fixed=fixed, corridor_share=share, sideways=sideways)
    after = Partition.from_blocks(netlist, found, 2)
    assert np.array_equal(blocks, before.blocks)
    if window.violation(before.block_areas).any():
        assert np.array_equal(found, blocks)
        assert improvement == 0
        return
    assert not window.violation(after.block_areas).any()
    assert after.cut_nets <= before.cut_nets
    assert before.cut_nets - after.cut_nets == pytest.approx(improvement, abs=1e-9)
    assert not np.any((fixed != FREE) & (fixed != found))


@settings(max_examples=60, deadline=None)
@given(_bisections(max_cells=9))
def test_never_below_the_optimum(case: tuple[Netlist, np.ndarray, np.ndarray, AreaWindow]) -> None:
    netlist, blocks, fixed, window = case
    if window.violation(np.bincount(blocks, netlist.areas, 2)).any():
        return
    best = min(
        plain_costs(netlist, assigned)["cut-nets"]
        for assigned in np.ndindex(*(2,) * netlist.num_cells)
        if not np.any((fixed != FREE) & (fixed != assigned))
        and not window.violation(np.bincount(assigned, netlist.areas, 2)).any()
    )
    found, _ = refine_by_flow(netlist, blocks, window, fixed=fixed)
    assert plain_costs(netlist, found)["cut-nets"] >= best - 1e-9


@pytest.mark.parametrize(
    ("graph", "start", "tolerance", "width", "source"),
    [
        (
            nx.grid_2d_graph(8, 8),
            lambda node: node[0] >= 4 if node[1] < 4 else node[0] >= 5,
            "15%",
            8,
            "bisection width of the 2k x 2k mesh is 2k: Leighton, Parallel Algorithms, 1992, ch. 1",
        ),
        (
            nx.grid_2d_graph(40, 3),
            lambda node: node[0] % 40 >= 20 + node[1],
            "10%",
            3,
            "a straight cut through a 3-row grid has three edges; every row has to be cut",
        ),
        (
            nx.barbell_graph(20, 6),
            lambda node: node >= 20,
            "30%",
            1,
            "any edge of the path of a barbell is a cut",
        ),
    ],
)
def test_known_bisections_are_reached(graph: nx.Graph, start: object, tolerance: str, width: int, source: str) -> None:
    assert callable(start)
    index = {node: i for i, node in enumerate(graph)}
    netlist = make_netlist([[index[a], index[b]] for a, b in graph.edges], len(index))
    window = Rules.from_request(2, tolerance=tolerance).window(netlist)
    blocks = np.array([int(start(node)) for node in graph], np.int32)
    found, _ = refine_by_flow(netlist, blocks, window)
    assert nx.cut_size(graph, [node for node, i in index.items() if found[i] == 0]) == width, source


def test_a_corridor_wider_than_the_window_finds_the_cut_that_small_moves_do_not() -> None:
    # A row of ten complete clusters of 12 cells, joined by four wires each and by one in the middle. The two clusters
    # beside the middle are exchanged, while the window lets a single cell be out of place.
    size, count = 12, 10
    nets = []
    for cluster in range(count):
        cells = range(cluster * size, (cluster + 1) * size)
        nets += [[a, b] for a in cells for b in cells if a < b]
    for cluster in range(count - 1):
        for wire in range(1 if cluster == 4 else 4):
            nets.append([cluster * size + wire, (cluster + 1) * size + wire])
    netlist = make_netlist(nets, size * count)
    window = Rules.from_request(2, tolerance="2%").window(netlist)
    blocks = np.repeat([0, 0, 0, 0, 1, 0, 1, 1, 1, 1], size).astype(np.int32)
    assert not window.violation(np.bincount(blocks, netlist.areas, 2)).any()
    found, improvement = refine_by_flow(netlist, blocks, window, corridor_share=0.3)
    assert plain_costs(netlist, found)["cut-nets"] == 1
    assert improvement == 8


@settings(max_examples=60, deadline=None)
@given(netlists(min_cells=4, max_cells=12), st.data())
def test_the_corridor_is_free_cells_within_its_area_and_leaves_terminals(netlist: Netlist, data: st.DataObject) -> None:
    sides = st.lists(st.integers(0, 1), min_size=netlist.num_cells, max_size=netlist.num_cells)
    blocks = np.array(data.draw(sides), np.int32)
    movable = np.array(data.draw(sides)) > 0
    is_cut = np.array([len(set(blocks[netlist.cells_of(net)])) > 1 for net in range(netlist.num_nets)], np.bool_)
    share = data.draw(st.sampled_from([0.1, 0.5, 1.0])) * netlist.areas.sum()
    room = np.bincount(blocks, minlength=2) - 1
    corridor = grow_corridor(
        netlist.net_offsets,
        netlist.net_cells,
        netlist.cell_offsets,
        netlist.cell_nets,
        netlist.areas,
        blocks,
        movable,
        is_cut,
        3,
        np.full(2, share),
        room.copy(),
    )
    assert len(set(corridor.tolist())) == len(corridor)
    assert np.all(movable[corridor])
    for side in range(2):
        mine = corridor[blocks[corridor] == side]
        assert netlist.areas[mine].sum() <= share + 1e-9
        assert len(mine) <= max(room[side], 0)
    if share >= netlist.areas.sum() and np.all(movable):
        reached = {cell for net in np.flatnonzero(is_cut) for cell in netlist.cells_of(net).tolist()}
        for side in range(2):
            wanted = sum(1 for cell in reached if blocks[cell] == side)
            assert np.count_nonzero(blocks[corridor] == side) >= min(wanted, max(room[side], 0))


@settings(max_examples=120, deadline=None)
@given(netlists(min_cells=6, max_cells=12, max_nets=20), st.sampled_from(OBJECTIVES), st.data())
def test_pairs_improve_the_objective_by_what_they_say(netlist: Netlist, objective: str, data: st.DataObject) -> None:
    count = st.lists(st.integers(0, 2), min_size=netlist.num_cells, max_size=netlist.num_cells)
    blocks = np.array(data.draw(count), np.int32)
    fixed = np.where(np.array(data.draw(count)) == 0, blocks, FREE).astype(np.int32)
    window = Rules.from_request(3, tolerance=data.draw(st.sampled_from(["50%", "100%"]))).window(netlist)
    before = Partition.from_blocks(netlist, blocks, 3)
    first, second = data.draw(st.permutations(range(3)))[:2]
    others = (blocks != first) & (blocks != second)
    one, one_gain = refine_pair(netlist, blocks, first, second, window, objective, fixed=fixed)
    assert np.array_equal(one[others], blocks[others])
    all_pairs, gain = refine_pairs(netlist, blocks, window, objective, fixed=fixed)
    for found, improvement in ((one, one_gain), (all_pairs, gain)):
        after = Partition.from_blocks(netlist, found, 3)
        assert before.cost(objective) - after.cost(objective) == pytest.approx(improvement, abs=1e-9)
        assert improvement >= 0
        assert not np.any((fixed != FREE) & (fixed != found))
        if not window.violation(before.block_areas).any():
            assert not window.violation(after.block_areas).any()


@settings(max_examples=20, deadline=None)
@given(netlists(min_cells=6, max_cells=8, max_nets=10), st.sampled_from(OBJECTIVES), st.data())
def test_pairs_never_fall_below_the_optimum(netlist: Netlist, objective: str, data: st.DataObject) -> None:
    blocks = np.array(data.draw(st.permutations([i % 3 for i in range(netlist.num_cells)])), np.int32)
    rules = Rules.from_request(3, tolerance="60%")
    optimum = enumerate_optimum(netlist, rules, objective)
    if rules.window(netlist).violation(np.bincount(blocks, netlist.areas, 3)).any():
        return
    assert optimum is not None
    found, _ = refine_pairs(netlist, blocks, rules.window(netlist), objective)
    assert plain_costs(netlist, found)[objective] >= optimum - 1e-9


def test_three_paths_in_a_ring_are_put_right_pair_by_pair() -> None:
    # a ring of 30 cells in three arcs, with the ends of the arcs exchanged: each of the three cuts is one net at best
    netlist = make_netlist([[i, (i + 1) % 30] for i in range(30)], 30)
    window = Rules.from_request(3, tolerance="20%").window(netlist)
    blocks = np.repeat([0, 1, 2], 10).astype(np.int32)
    blocks[[9, 10, 19, 20, 29, 0]] = [1, 0, 2, 1, 0, 2]
    found, improvement = refine_pairs(netlist, blocks, window)
    assert plain_costs(netlist, found)["cut-nets"] == 3
    assert improvement == plain_costs(netlist, blocks)["cut-nets"] - 3


def test_weights_of_any_size_are_counted_anew() -> None:
    rng = np.random.default_rng(5)
    nets = [rng.choice(40, rng.integers(2, 5), replace=False).tolist() for _ in range(90)]
    for scale in (1e-30, 1.0, 1e30):
        weights = (10.0 ** rng.uniform(-9, 9, len(nets)) * scale).tolist()
        netlist = make_netlist(nets, 40, weights=weights)
        window = Rules.from_request(2, tolerance="20%").window(netlist)
        blocks = (np.arange(40) % 2).astype(np.int32)
        found, improvement = refine_by_flow(netlist, blocks, window)
        before, after = (Partition.from_blocks(netlist, each, 2).cut_nets for each in (blocks, found))
        assert after < before
        assert improvement == before - after


def test_equal_input_gives_equal_output_and_is_not_changed() -> None:
    rng = np.random.default_rng(3)
    netlist = make_netlist([rng.choice(200, 3, replace=False).tolist() for _ in range(300)], 200)
    window = Rules.from_request(2).window(netlist)
    blocks = (np.arange(200) % 2).astype(np.int32)
    kept = blocks.copy()
    results = {refine_by_flow(netlist, blocks, window)[0].tobytes() for _ in range(3)}
    assert len(results) == 1
    assert np.array_equal(blocks, kept)


def test_what_is_no_bisection_or_objective_is_refused() -> None:
    netlist = make_netlist([[0, 1]], 2)
    window = Rules.from_request(2, tolerance="100%").window(netlist)
    with pytest.raises(UsageError, match="entries 0 or 1"):
        refine_by_flow(netlist, np.array([0, 2], np.int32), window)
    with pytest.raises(UsageError, match="unknown objective"):
        refine_pair(netlist, np.array([0, 1], np.int32), 0, 1, window, "delay")
    found, improvement = refine_by_flow(netlist, np.array([0, 0], np.int32), window)
    assert (found.tolist(), improvement) == ([0, 0], 0.0)
