"""Rent's exponent: against meshes whose exponent is known, and against a plain search over sets."""

from __future__ import annotations

from collections import deque

import networkx as nx
import numpy as np
import pytest

from netpart.netlist import Builder, CellFlag, Netlist, fit_rent
from tests.strategies import make_netlist


def mesh(*sides: int) -> Netlist:
    """Cells at the points of a grid, a net for each neighbouring pair."""
    graph = nx.convert_node_labels_to_integers(nx.grid_graph(list(sides)))
    return make_netlist([list(edge) for edge in graph.edges], graph.number_of_nodes())


@pytest.mark.parametrize(("sides", "exponent"), [((4096,), 0.0), ((64, 64), 1 / 2), ((20, 20, 20), 2 / 3)])
def test_a_mesh_of_d_dimensions_has_the_exponent_of_its_surface(sides: tuple[int, ...], exponent: float) -> None:
    """p = 1 − 1/d: the surface of a region grows as its volume to that power. P. Christie, D. Stroobandt, "The
    interpretation and application of Rent's rule", IEEE Trans. VLSI Systems 8 (2000) 639-648 (from memory).
    """
    found = fit_rent(mesh(*sides))
    assert found is not None
    assert found.exponent == pytest.approx(exponent, abs=0.06)
    assert 0 <= found.standard_error < 0.03


def test_regions_in_a_long_chain_have_two_terminals() -> None:
    found = fit_rent(mesh(4096))
    assert found is not None
    assert [point.cells for point in found.points] == [4, 8, 16, 32, 64, 128, 256]
    assert all(1.9 < point.terminals <= 2 for point in found.points)
    assert found.terminals_per_cell == pytest.approx(2, rel=0.1)


def plain_means(netlist: Netlist, seeds: list[int], sizes: list[int]) -> dict[int, float]:
    """Breadth-first search with a queue, terminals counted with sets."""
    is_port = netlist.has_flag(CellFlag.PORT)
    found: dict[int, list[int]] = {size: [] for size in sizes}
    for seed in seeds:
        order, queue = [seed], deque([seed])
        while queue:
            for net in netlist.nets_of(queue.popleft()).tolist():
                if netlist.net_sizes[net] <= 100:
                    for cell in netlist.cells_of(net).tolist():
                        if cell not in order and not is_port[cell]:
                            order.append(cell)
                            queue.append(cell)
        for size in sizes:
            if len(order) >= size:
                inside = set(order[:size])
                nets = [set(netlist.cells_of(net).tolist()) for net in range(netlist.num_nets)]
                found[size].append(sum(bool(net & inside) and bool(net - inside) for net in nets))
    return {size: float(np.mean(counts)) for size, counts in found.items()}


def test_regions_are_those_of_a_plain_search() -> None:
    rng = np.random.default_rng(5)
    builder = Builder()
    for cell in range(330):
        builder.add_cell(f"c{cell}", flags=CellFlag.PORT if cell % 11 == 0 else 0)
    for net in range(300):
        near = (net + rng.integers(0, 12, rng.integers(2, 5))) % 330
        builder.add_net(f"n{net}", near.tolist())
    builder.add_net("clock", range(150))
    netlist = builder.build()
    cells = [cell for cell in range(330) if cell % 11]
    seeds = [cells[i * 300 // 64] for i in range(64)]
    found = fit_rent(netlist)
    assert found is not None
    assert {point.cells: point.terminals for point in found.points} == plain_means(netlist, seeds, [4, 8, 16, 32])
    sizes, means = np.log([point.cells for point in found.points]), np.log([point.terminals for point in found.points])
    slope, intercept = np.polyfit(sizes, means, 1)
    assert found.exponent == pytest.approx(slope)
    assert found.terminals_per_cell == pytest.approx(np.exp(intercept))


def test_too_small_or_unconnected_netlists_have_none() -> None:
    assert fit_rent(mesh(127)) is None
    assert fit_rent(mesh(128)) is not None
    assert fit_rent(make_netlist([], 1000)) is None
    assert fit_rent(make_netlist([[i, i + 1] for i in range(0, 1000, 2)], 1000)) is None
