"""The spectrum of a netlist: connected parts, the ordering by the second eigenvector, what the sweep finds along it."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.sparse as sparse
import scipy.sparse.csgraph
from numpy.typing import NDArray

from netpart.expand import Weighting, incidence
from netpart.netlist import AreaWindow, Netlist, restrict
from netpart.spectral.eigen import Eigenpair, second_eigenpair
from netpart.spectral.sweep import Profile, legal_seed, sweep_profile

__all__ = ["Spectrum", "find_components", "find_spectrum"]


@dataclass(frozen=True, slots=True, eq=False)
class Spectrum:
    """What an eigenvector of the clique expansion says of the largest connected part of a netlist.

    The graph that λ1, volumes and conductance belong to is the clique expansion with weights w/(|e| − 1), unless another
    weighting was asked for; Cheeger's inequality is about its normalised Laplacian (mass ``"degree"``).

    Attributes
    ----------
    cells : (c,) int32
        The cells of the largest connected part.
    parts : tuple of (c_i,) int32
        The other connected parts.
    pair : Eigenpair
        λ1 and its vector D^(−1/2) φ1, in the order of `cells`.
    order : (c,) int64
        `cells` sorted by the vector; equal entries by cell index.
    profile : Profile
        Along `order`, of the largest part alone.
    """

    netlist: Netlist
    cells: NDArray[np.int32]
    parts: tuple[NDArray[np.int32], ...]
    pair: Eigenpair
    order: NDArray[np.int64]
    profile: Profile

    @property
    def cheeger_low(self) -> float:
        """λ1/2: no set of cells of the largest part has a smaller conductance."""
        return self.pair.value / 2

    @property
    def cheeger_high(self) -> float:
        """√(2 λ1): some threshold of the sweep has no larger conductance."""
        return math.sqrt(2 * self.pair.value)

    def seed(self, window: AreaWindow, fixed: NDArray[np.int32] | None = None) -> NDArray[np.int32]:
        """(n,) the best legal bisection along the order, see `legal_seed`."""
        if fixed is None:
            return legal_seed(self.netlist, self.order, window, None, self.parts)
        rest = np.concatenate([part.astype(np.int64) for part in self.parts]) if self.parts else self.order[:0]
        return legal_seed(self.netlist, np.concatenate([self.order, rest]), window, fixed)

    def to_dict(self) -> dict[str, Any]:
        """The `spectral` part of a record."""
        return {
            "lambda1": self.pair.value,
            "residual": self.pair.residual,
            "converged": self.pair.converged,
            "cheeger_low": self.cheeger_low,
            "cheeger_high": self.cheeger_high,
            "conductance": self.profile.best_conductance,
            "components": 1 + len(self.parts),
            "cells": len(self.cells),
        }


def find_components(netlist: Netlist) -> list[NDArray[np.int32]]:
    """The connected parts, the one of largest area first; ties by size, then by first cell."""
    holds = incidence(netlist)
    joined = sparse.block_array([[None, holds.T], [holds, None]], format="csr")
    count, labels = scipy.sparse.csgraph.connected_components(joined, directed=False)
    labels = labels[: netlist.num_cells]
    order = np.argsort(labels, kind="stable").astype(np.int32)
    sizes = np.bincount(labels, minlength=count)
    groups = [group for group in np.split(order, np.cumsum(sizes)[:-1]) if len(group)]
    areas = np.bincount(labels, netlist.areas, count)
    return sorted(groups, key=lambda group: (-areas[labels[group[0]]], -len(group), int(group[0])))


def find_spectrum(netlist: Netlist, *, mass: str = "degree", weighting: Weighting = "standard") -> Spectrum | None:
    """The spectrum of the largest connected part, or None where it has fewer than three cells.

    `mass` and `weighting` are those of `second_eigenpair`.
    """
    components = find_components(netlist)
    cells = np.sort(components[0])
    if len(cells) < 3:
        return None
    part = netlist if len(components) == 1 else restrict(netlist, cells, whole_nets_only=True)
    pair = second_eigenpair(part, mass=mass, weighting=weighting)
    inner = np.lexsort((np.arange(len(cells)), pair.vector))
    profile = sweep_profile(part, inner, weighting)
    return Spectrum(netlist, cells, tuple(components[1:]), pair, cells[inner].astype(np.int64), profile)
