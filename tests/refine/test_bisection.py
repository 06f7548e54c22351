"""Passes of moves and swaps: every tally against the plain definition, results against exhaustive enumeration."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from netpart.netlist import FREE, Netlist, Partition, Rules
from netpart.refine import TIE_RULES, Bisection, grow_bisection, random_bisection
from tests.strategies import enumerate_optimum, make_netlist, netlists, plain_costs


def _plain_gains(netlist: Netlist, blocks: np.ndarray) -> list[float]:
    """What the cut falls by when each cell changes sides, by trying it."""
    before = plain_costs(netlist, blocks)["cut-nets"]
    gains = []
    for cell in range(netlist.num_cells):
        flipped = blocks.copy()
        flipped[cell] = 1 - flipped[cell]
        gains.append(before - plain_costs(netlist, flipped)["cut-nets"])
    return gains


class _Checked(Bisection):
    """Compares counts and gains with the plain definition after every pass, before anything is taken back."""

    def _take_back(self, first: int, last: int, *, stay_exact: bool) -> None:
        self._compare()
        super()._take_back(first, last, stay_exact=stay_exact)
        if self._exact:
            self._compare()

    def _compare(self) -> None:
        assert self._gains == pytest.approx(_plain_gains(self.netlist, self.blocks), abs=1e-9)
        for net in range(self.netlist.num_nets):
            ones = int(self.blocks[self.netlist.cells_of(net)].sum())
            assert self._counts[net].tolist() == [len(self.netlist.cells_of(net)) - ones, ones]
        assert not self._is_touched.any()


@settings(max_examples=150, deadline=None)
@given(netlists(), st.data())
def test_tallies_follow_every_pass(netlist: Netlist, data: st.DataObject) -> None:
    blocks = np.array(data.draw(st.lists(st.integers(0, 1), min_size=netlist.num_cells, max_size=netlist.num_cells)))
    fixed = np.where(np.array(data.draw(st.lists(st.booleans(), min_size=len(blocks), max_size=len(blocks)))), blocks, FREE)
    window = Rules.from_request(2, tolerance=data.draw(st.sampled_from(["0%", "10%", "40%"]))).window(netlist)
    work = _Checked(netlist, blocks, window, fixed.astype(np.int32))
    start = (work.violation, work.cut)
    work.move(
        data.draw(st.integers(0, 4)),
        data.draw(st.integers(1, 20)),
        data.draw(st.sampled_from(TIE_RULES)),
        boundary=data.draw(st.booleans()),
    )
    if work.violation == 0:
        work.swap(data.draw(st.integers(0, 2)), 5)
    counted = Partition.from_blocks(netlist, work.blocks, 2)
    assert work.cut == pytest.approx(counted.cut_nets, abs=1e-9)
    assert work.load == pytest.approx(counted.block_areas, abs=1e-9)
    assert not np.any((fixed != FREE) & (fixed != work.blocks))
    assert work.violation < start[0] + 1e-9
    if work.violation >= start[0] - 1e-12:
        assert work.cut <= start[1] + 1e-9


@settings(max_examples=60, deadline=None)
@given(netlists(min_cells=4, max_cells=8))
def test_never_below_the_optimum_and_never_illegal(netlist: Netlist) -> None:
    rules = Rules.from_request(2, tolerance="30%")
    optimum = enumerate_optimum(netlist, rules)
    if optimum is None:
        return
    window = rules.window(netlist)
    reached = []
    for seed in range(10):
        rng = np.random.default_rng(seed)
        grow = grow_bisection if seed % 2 else random_bisection
        work = Bisection(netlist, grow(netlist, window, None, rng), window)
        work.move(10, 100)
        if work.violation == 0:
            work.swap(3, 10)
            work.move(10, 100)
            assert not window.violation(Partition.from_blocks(netlist, work.blocks, 2).block_areas).any()
            reached.append(work.cut)
    assert all(cut >= optimum - 1e-9 for cut in reached)


@pytest.mark.parametrize(
    ("graph", "width", "source"),
    [
        (nx.hypercube_graph(4), 8, "bisection width 2^(d-1) of the d-cube: Leighton, Parallel Algorithms, 1992, ch. 3"),
        (nx.grid_2d_graph(4, 4), 4, "bisection width of the 2k x 2k mesh is 2k: Leighton 1992, ch. 1"),
        (nx.complete_graph(8), 16, "bisection width n^2/4 of the complete graph, counted"),
        (nx.cycle_graph(12), 2, "every cut of a cycle into two arcs has two edges"),
        (
            nx.petersen_graph(),
            5,
            "bisection width of the Petersen graph is 5; from memory, checked by enumeration here",
        ),
    ],
)
def test_known_bisection_widths_are_reached(graph: nx.Graph, width: int, source: str) -> None:
    index = {node: i for i, node in enumerate(graph)}
    netlist = make_netlist([[index[a], index[b]] for a, b in graph.edges], len(index))
    window = Rules.from_request(2, tolerance=0).window(netlist)
    cuts = []
    for seed in range(20):
        work = Bisection(netlist, random_bisection(netlist, window, None, np.random.default_rng(seed)), window)
        work.swap(10, 10)
        cuts.append(work.cut)
        assert nx.cut_size(graph, [node for node, i in index.items() if work.blocks[i] == 0]) == work.cut
    assert min(cuts) == width, source


def test_an_illegal_start_is_brought_into_the_window() -> None:
    netlist = make_netlist([[i, i + 1] for i in range(19)], 20)
    window = Rules.from_request(2, tolerance="10%").window(netlist)
    work = Bisection(netlist, np.zeros(20, np.int32), window)
    assert work.violation > 0
    work.move(5, 50)
    assert work.violation == 0
    assert work.cut >= 1


@pytest.mark.parametrize("tie_rule", TIE_RULES)
def test_equal_input_gives_equal_output(tie_rule: str) -> None:
    rng = np.random.default_rng(3)
    netlist = make_netlist([rng.choice(60, 3, replace=False).tolist() for _ in range(120)], 60)
    window = Rules.from_request(2).window(netlist)
    results = []
    for _ in range(2):
        start = random_bisection(netlist, window, None, np.random.default_rng(1))
        work = Bisection(netlist, start, window, state=np.array([77], np.uint64))
        work.move(10, 50, tie_rule)
        results.append(work.blocks.tobytes())
    assert results[0] == results[1]


def test_grown_blocks_hold_their_share_and_fixed_cells_stay() -> None:
    netlist = make_netlist([[i, i + 1] for i in range(99)], 100)
    window = Rules.from_request(2, shares=[30, 70], tolerance="5%").window(netlist)
    fixed = np.full(100, FREE, np.int32)
    fixed[[0, 99]] = [1, 0]
    for make in (grow_bisection, random_bisection):
        blocks = make(netlist, window, fixed, np.random.default_rng(0))
        assert blocks[0] == 1
        assert blocks[99] == 0
        assert not window.violation(np.bincount(blocks, netlist.areas, 2)).any()
