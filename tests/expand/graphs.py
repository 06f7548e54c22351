"""Graphs as netlists of two-cell nets, and dense references written from the definitions."""

from __future__ import annotations

import itertools

import networkx as nx
import numpy as np
from numpy.typing import NDArray

from netpart.netlist import Netlist
from tests.strategies import make_netlist


def netlist_of(graph: nx.Graph) -> Netlist:
    """One net per edge, in the order of the graph's nodes; edge attribute ``weight`` if there is one."""
    index = {node: i for i, node in enumerate(graph.nodes)}
    edges = [[index[u], index[v]] for u, v in graph.edges]
    weights = [float(data.get("weight", 1.0)) for _, _, data in graph.edges(data=True)]
    return make_netlist(edges, len(index), weights=weights)


def dense_clique(netlist: Netlist, weights: NDArray[np.float64]) -> NDArray[np.float64]:
    """W from its definition, pair by pair."""
    matrix = np.zeros((netlist.num_cells, netlist.num_cells))
    for net in range(netlist.num_nets):
        for u, v in itertools.permutations(netlist.cells_of(net).tolist(), 2):
            matrix[u, v] += weights[net]
    return matrix
