"""Graphs below a netlist: no mixture of parts is overdrawn by any partition, and the energy has the right slope."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from netpart.bounds.netgraph import NetParts, bounding_ratio
from netpart.netlist import OBJECTIVES, Netlist
from tests.strategies import make_netlist, netlists, plain_costs


@given(
    netlists(max_cells=6, max_nets=8, max_net_size=6),
    st.integers(2, 3),
    st.sampled_from(OBJECTIVES),
    st.integers(0, 2**32 - 1),
    st.sampled_from([0.1, 1.0, 8.0]),
)
def test_any_shares_give_a_graph_below_the_cost(
    netlist: Netlist, num_blocks: int, objective: str, seed: int, contrast: float
) -> None:
    """Every partition, for random shares of every contrast, some of them zero, negative or not a number."""
    rng = np.random.default_rng(seed)
    parts = NetParts.from_netlist(netlist, num_blocks, objective)
    shares = 10.0 ** rng.uniform(-contrast, contrast, parts.num_shares)
    shares[rng.random(len(shares)) < 0.2] = rng.choice([0.0, -1.0, np.nan, np.inf])
    graph = parts.build_graph(shares)
    adjacency = graph.adjacency().toarray()
    assert np.all(adjacency >= 0)
    for blocks in itertools.product(range(num_blocks), repeat=netlist.num_cells):
        assigned = np.array(blocks)
        cut = adjacency[assigned[:, None] != assigned[None, :]].sum() / 2
        assert cut <= plain_costs(netlist, assigned)[objective] * (1 + 1e-14)


@pytest.mark.parametrize("objective", OBJECTIVES)
def test_whole_shares_give_the_bounding_cliques_and_pair_shares_the_pairs(objective: str) -> None:
    netlist = make_netlist([[0, 1, 2, 3], [1, 4]], 5, weights=[3.0, 2.0])
    parts = NetParts.from_netlist(netlist, 2, objective)
    assert parts.offsets.tolist() == [0, 7, 8]
    scale = {"cut-nets": 1, "connectivity": 1, "terminals": 2}[objective]
    whole = parts.build_graph(np.array([0, 0, 0, 0, 0, 0, 1.0, 1.0])).adjacency().toarray()
    assert whole[0, 1] == pytest.approx(scale * 3 / 4)
    assert whole[1, 4] == pytest.approx(scale * 2)
    single = parts.build_graph(np.array([0, 0, 5.0, 0, 0, 0, 0, 0])).adjacency().toarray()
    assert single[0, 3] == pytest.approx(scale * 3)
    assert np.count_nonzero(single) == 2


def test_large_nets_stay_whole() -> None:
    netlist = make_netlist([list(range(17)), list(range(16))], 17)
    parts = NetParts.from_netlist(netlist, 2, "cut-nets")
    assert np.diff(parts.offsets).tolist() == [0, 121]
    graph = parts.build_graph(np.zeros(121))
    assert graph.clique_sizes.tolist() == [17]
    assert graph.pairs.nnz == 0


def test_ratios_of_small_nets_by_hand() -> None:
    """Three cells, three blocks: all three pairs can be cut, for one cut net, a connectivity of two, three terminals."""
    assert [bounding_ratio(3, 3, objective) for objective in OBJECTIVES] == pytest.approx([1 / 3, 1 / 2, 1])
    assert [bounding_ratio(3, 2, objective) for objective in OBJECTIVES] == pytest.approx([1 / 2, 1 / 2, 1])
    assert bounding_ratio(1, 2, "cut-nets") == 0


@pytest.mark.parametrize("power", [2.0, 4.0, 16.0])
def test_the_energy_has_the_slope_it_claims_and_its_shares_are_a_mixture(power: float) -> None:
    """Central differences; and Σ shares ≤ 1 (power-mean inequality: Hardy, Littlewood and Pólya, Inequalities, 2.9)."""
    rng = np.random.default_rng(1)
    nets = [rng.choice(12, size, replace=False).tolist() for size in (2, 3, 4, 5, 7, 9)]
    netlist = make_netlist(nets, 12, weights=[1.0, 2.0, 0.5, 1.0, 3.0, 1.0])
    parts = NetParts.from_netlist(netlist, 2, "cut-nets")
    vectors = rng.normal(size=(12, 3))
    gradient, shares = np.zeros((12, 3)), np.zeros(parts.num_shares)
    value = parts.evaluate(vectors, power, gradient, shares)
    for i, j in itertools.product(range(12), range(3)):
        step = np.zeros((12, 3))
        step[i, j] = 1e-6
        spare = np.zeros_like(gradient), np.zeros_like(shares)
        rise = parts.evaluate(vectors + step, power, *spare) - parts.evaluate(vectors - step, power, *spare)
        assert gradient[i, j] == pytest.approx(rise / 4e-6, rel=1e-6, abs=1e-7)
    sums = np.add.reduceat(shares, parts.offsets[:-1])
    assert np.all(sums <= 1 + 1e-12)
    strain = 0.0
    for net in range(netlist.num_nets):
        members = vectors[netlist.cells_of(net)]
        squares = np.sum((members[:, None] - members[None, :]) ** 2, axis=2)
        most = max(squares.max(), squares.sum() / 2 * float(bounding_ratio(len(members), 2, "cut-nets")))
        strain += netlist.net_weights[net] * most
    assert 0.5 * strain < value <= strain
    assert parts.evaluate(vectors, 200.0, np.zeros((12, 3)), shares) == pytest.approx(strain, rel=0.03)


def test_vectors_that_coincide_strain_nothing() -> None:
    netlist = make_netlist([[0, 1, 2]], 3)
    parts = NetParts.from_netlist(netlist, 2, "cut-nets")
    gradient, shares = np.zeros((3, 2)), np.zeros(4)
    assert parts.evaluate(np.ones((3, 2)), 4.0, gradient, shares) == 0
    assert not gradient.any()
    assert shares.tolist() == [0.25] * 4
