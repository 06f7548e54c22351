"""The spectral lower bound: no legal bisection cuts fewer nets than the second eigenvalue allows."""

from __future__ import annotations

import math
import time
from fractions import Fraction

import numpy as np

from netpart.bounds.bound import Bound, next_attainable
from netpart.bounds.eigenproof import EigenProof, prove_eigenvalue
from netpart.expand import pair_weights
from netpart.netlist import Netlist, Rules, restrict
from netpart.spectral.eigen import second_eigenpair
from netpart.spectral.spectrum import find_components

__all__ = ["smallest_area_product", "spectral_bound"]

_RETREATS = (1e-7, 1e-5, 1e-3, 1e-2, 0.1)
_MAX_SIZE = 150_000


def spectral_bound(netlist: Netlist, rules: Rules, objective: str) -> Bound | None:
    """A verified lower bound on the cost of every legal partition, or None where none can be proved.

    Let λ be the smallest nonzero eigenvalue of L x = λ diag(a) x on the clique expansion with bounding weights. For two
    blocks S, V∖S the netlist's cut is at least the graph's, which is at least λ a(S) a(V∖S)/A (Rayleigh-Ritz; the unit
    area case goes back to Fiedler 1973 and Donath & Hoffman 1973). The product is smallest at an end of the window.

    For k blocks every block i is one side of a bisection {i, rest}; nets cut between i and the rest are cut nets, so the
    largest of the k bounds holds. Connectivity is never below the cut nets, terminals never below twice them. Fixed cells
    are not looked at: they only make the optimum larger. Where the netlist is not connected, the bound is that of its
    largest connected part, whose share of each block is known up to the area of the other parts.

    Parameters
    ----------
    netlist : Netlist
    rules : Rules
    objective : str
        One of `netlist.OBJECTIVES`.
    """
    started = time.monotonic()
    cells = np.sort(find_components(netlist)[0])
    part = restrict(netlist, cells, whole_nets_only=True)
    if part.num_cells < 2 or part.num_nets == 0 or part.num_cells + part.num_nets > _MAX_SIZE:
        return None
    product = max(smallest_area_product(part, netlist, rules, block) for block in range(rules.num_blocks))
    if product <= 0:
        return None
    if part.num_cells == 2:
        return None
    mean = part.areas.sum() / part.num_cells
    areas = part.areas / 2.0 ** round(math.log2(mean))
    unit = Fraction(2) ** round(math.log2(mean))
    claimed = second_eigenpair(
        Netlist.from_clusters(part.net_offsets, part.net_cells, areas=areas, net_weights=part.net_weights),
        mass="area",
        weighting="bounding",
    ).value
    pairs = pair_weights(part, "bounding") * (1 - 2.0**-50)  # a rounded weight never above the exact one
    proof: EigenProof | None = None
    for retreat in _RETREATS:
        proof = prove_eigenvalue(part, pairs, areas, claimed * (1 - retreat))
        if proof is not None:
            break
    if proof is None:
        return None
    exact = Fraction(proof.eigenvalue) * product / unit - Fraction(proof.loss)
    factor = 2 if objective == "terminals" else 1
    value = factor * _rounded_down(exact)
    bound = next_attainable(value, part) if objective != "terminals" else 2 * next_attainable(value / 2, part)
    return Bound("spectral", bound, True, time.monotonic() - started, "L D Lᵀ factors with measured error")


def smallest_area_product(part: Netlist, netlist: Netlist, rules: Rules, block: int) -> Fraction:
    """The smallest legal a(S) a(part∖S)/a(part), with S what block `block` holds of a part of the netlist; exact.

    The product is concave in a(S), so it is smallest at an end of the interval of legal a(S).
    """
    window = rules.window(netlist)
    whole = sum(map(Fraction, netlist.areas.tolist()), Fraction(0))
    own = sum(map(Fraction, part.areas.tolist()), Fraction(0))
    if own <= 0:
        return Fraction(0)
    slack = Fraction(window.slack)
    low = max(Fraction(float(window.lower[block])) - slack - (whole - own), Fraction(0))
    high = min(Fraction(float(window.upper[block])) + slack, own)
    # the other blocks have limits too: the block holds what they cannot
    others = [i for i in range(rules.num_blocks) if i != block]
    most = sum((Fraction(float(window.upper[i])) + slack for i in others), Fraction(0))
    least = sum((Fraction(float(window.lower[i])) - slack for i in others), Fraction(0))
    low = max(low, own - most)
    high = min(high, whole - max(least, Fraction(0)))
    if low > high:
        return Fraction(0)
    return min(low * (own - low), high * (own - high)) / own


def _rounded_down(value: Fraction) -> float:
    nearest = float(value)
    return nearest if Fraction(nearest) <= value else math.nextafter(nearest, -math.inf)
