"""What general libraries reach on the same netlists: every result is a legal bisection, or None where it took too long."""

from __future__ import annotations

import multiprocessing
from collections.abc import Callable

import networkx as nx
import numpy as np
import scipy.sparse as sparse
from numpy.typing import NDArray
from scipy.sparse.linalg import eigsh

from netpart.expand import CliqueGraph
from netpart.netlist import Netlist, Partition, Rules

__all__ = ["BASELINES", "run_limited"]


def networkx_swaps(netlist: Netlist, rules: Rules) -> NDArray[np.int32]:
    """networkx's Kernighan-Lin bisection of the clique expansion."""
    graph = nx.from_scipy_sparse_array(CliqueGraph.from_netlist(netlist).adjacency())
    first, _ = nx.algorithms.community.kernighan_lin_bisection(graph, seed=1)
    blocks = np.ones(netlist.num_cells, np.int32)
    blocks[list(first)] = 0
    return blocks


def scipy_sweep(netlist: Netlist, rules: Rules) -> NDArray[np.int32]:
    """The second eigenvector of the normalised Laplacian by SciPy alone, cut at the best legal threshold."""
    adjacency = CliqueGraph.from_netlist(netlist).adjacency()
    normalised = sparse.csgraph.laplacian(adjacency, normed=True)
    _, vectors = eigsh(2 * sparse.eye_array(len(netlist.areas)) - normalised, k=2, which="LA", tol=1e-4, maxiter=20_000)
    degrees = np.maximum(adjacency.sum(axis=1), 1e-12)
    return _best_threshold(netlist, rules, np.argsort(vectors[:, 0] / np.sqrt(degrees), kind="stable"))


def sklearn_spectral(netlist: Netlist, rules: Rules) -> NDArray[np.int32]:
    """scikit-learn's spectral embedding of the clique expansion, cut at the best legal threshold."""
    from sklearn.manifold import spectral_embedding

    adjacency = CliqueGraph.from_netlist(netlist).adjacency()
    vector = spectral_embedding(sparse.csr_matrix(adjacency), n_components=1, drop_first=True, random_state=1)[:, 0]
    return _best_threshold(netlist, rules, np.argsort(vector, kind="stable"))


BASELINES: dict[str, Callable[[Netlist, Rules], NDArray[np.int32]]] = {
    "networkx swaps": networkx_swaps,
    "scipy sweep": scipy_sweep,
    "scikit-learn": sklearn_spectral,
}


def _best_threshold(netlist: Netlist, rules: Rules, order: NDArray[np.int64]) -> NDArray[np.int32]:
    window = rules.window(netlist)
    area = np.cumsum(netlist.areas[order])
    position = np.empty(netlist.num_cells, np.int64)
    position[order] = np.arange(netlist.num_cells)
    pins = position[netlist.net_cells]
    used = netlist.net_sizes > 0
    starts = netlist.net_offsets[:-1][used]
    change = np.zeros(netlist.num_cells + 1)
    np.add.at(change, np.minimum.reduceat(pins, starts), netlist.net_weights[used])
    np.add.at(change, np.maximum.reduceat(pins, starts), -netlist.net_weights[used])
    cut = np.cumsum(change)[:-1]
    legal = (area >= window.lower[0]) & (area <= window.upper[0])
    best = int(np.flatnonzero(legal)[np.argmin(cut[legal])])
    blocks = np.ones(netlist.num_cells, np.int32)
    blocks[order[: best + 1]] = 0
    return blocks


def run_limited(name: str, netlist: Netlist, rules: Rules, seconds: float) -> tuple[float, float] | None:
    """(cut, seconds) of a baseline in a process of its own, or None after the time limit."""
    context = multiprocessing.get_context("fork")
    receiver, sender = context.Pipe(duplex=False)
    process = context.Process(target=_send, args=(sender, name, netlist, rules))
    process.start()
    result: tuple[float, float] | None = receiver.recv() if receiver.poll(seconds) else None
    process.kill()
    process.join()
    return result


def _send(sender: multiprocessing.connection.Connection, name: str, netlist: Netlist, rules: Rules) -> None:
    import time

    started = time.perf_counter()
    blocks = BASELINES[name](netlist, rules)
    seconds = time.perf_counter() - started
    sender.send((Partition.from_blocks(netlist, blocks, 2).cut_nets, seconds))
