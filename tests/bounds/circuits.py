"""Netlists of known structure for the tests of bounds."""

from __future__ import annotations

import itertools

import numpy as np

from netpart.netlist import Netlist
from tests.strategies import make_netlist


def hypercube(dimension: int) -> Netlist:
    """Two-pin nets between words of bits that differ in one bit."""
    size = 2**dimension
    return make_netlist([[v, v ^ 1 << i] for v in range(size) for i in range(dimension) if v < v ^ 1 << i], size)


def grid(rows: int, columns: int) -> Netlist:
    """Two-pin nets between neighbours of a rectangular grid."""
    across = [[r * columns + c, r * columns + c + 1] for r in range(rows) for c in range(columns - 1)]
    down = [[r * columns + c, (r + 1) * columns + c] for r in range(rows - 1) for c in range(columns)]
    return make_netlist(across + down, rows * columns)


def complete(size: int) -> Netlist:
    """A two-pin net between every two cells."""
    return make_netlist([list(pair) for pair in itertools.combinations(range(size), 2)], size)


def path(size: int) -> Netlist:
    """A chain of cells."""
    return make_netlist([[v, v + 1] for v in range(size - 1)], size)


def binary_tree(height: int) -> Netlist:
    """The complete binary tree with 2^(height + 1) − 1 cells."""
    return make_netlist([[v, (v - 1) // 2] for v in range(1, 2 ** (height + 1) - 1)], 2 ** (height + 1) - 1)


def clustered(num_clusters: int, size: int, links: int, seed: int = 0) -> Netlist:
    """Clusters of cells with random nets of two to four cells inside, joined in a ring by `links` two-pin nets each."""
    rng = np.random.default_rng(seed)
    nets = []
    for c in range(num_clusters):
        first = c * size
        for _ in range(2 * size):
            nets.append((first + rng.choice(size, int(rng.integers(2, 5)), replace=False)).tolist())
        following = (c + 1) % num_clusters * size
        nets += [[first + int(rng.integers(size)), following + int(rng.integers(size))] for _ in range(links)]
    return make_netlist(nets, num_clusters * size)


def random_netlist(rng: np.random.Generator, num_cells: int) -> Netlist:
    """Nets of two to four cells; unit, whole (zero too) or decimal areas; unit, whole or decimal weights."""
    num_nets = int(rng.integers(num_cells, 3 * num_cells))
    widest = min(num_cells, 4) + 1
    nets = [rng.choice(num_cells, int(rng.integers(2, widest)), replace=False).tolist() for _ in range(num_nets)]
    areas = (None, rng.integers(0, 8, num_cells) * 1.0, rng.integers(0, 8, num_cells) * 0.0729)[rng.integers(3)]
    weights = (None, rng.integers(1, 8, num_nets) * 1.0, rng.integers(1, 8, num_nets) * 0.31)[rng.integers(3)]
    return make_netlist(
        nets, num_cells, None if areas is None else areas.tolist(), None if weights is None else weights.tolist()
    )
