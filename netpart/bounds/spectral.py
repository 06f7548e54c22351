"""The spectral lower bound: no legal partition costs less than the eigenvalues of the netlist's graph allow."""

from __future__ import annotations

import math
import time
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from netpart.bounds.bound import Bound, next_attainable
from netpart.bounds.eigenproof import StarMatrix, verify_eigenvalue
from netpart.bounds.factor import factorize
from netpart.bounds.netgraph import bounding_weights
from netpart.expand import CliqueGraph
from netpart.netlist import Netlist, Rules, restrict
from netpart.spectral import find_components, find_smallest

__all__ = [
    "SpectralProblem",
    "bound_from_eigenvalues",
    "most_uneven_areas",
    "spectral_bound",
    "verify_spectral",
]

MAX_OPERATIONS = 1e10
"""Factorisations beyond so many multiplications are not tried; this many take some five seconds and half a GB."""

_RETREAT = 1e-7
_TRIES = 3
_PAIRED_SIZE = 4
_MOST_EIGENVALUES = 8


@dataclass(frozen=True, slots=True, eq=False)
class SpectralProblem:
    """The connected part of a netlist that the bound looks at, and the pencil L x = λ M x on it.

    The part is the largest one by area. What the blocks hold of it is known up to the area of the rest; cutting the rest
    costs nothing here.

    Attributes
    ----------
    areas : (c,) float64
        The diagonal of M.
    matrix : StarMatrix
        Of the graph with `bounding_weights`.
    uneven : tuple of Fraction, k
        See `most_uneven_areas`.
    """

    areas: NDArray[np.float64]
    matrix: StarMatrix
    uneven: tuple[Fraction, ...]

    @classmethod
    def from_netlist(cls, netlist: Netlist, rules: Rules, objective: str) -> SpectralProblem | None:
        """None where there is nothing to be cut: no nets, no area, or blocks that can take the whole part."""
        cells = np.sort(find_components(netlist)[0])
        part = restrict(netlist, cells, whole_nets_only=True)
        if part.num_cells < 2 or not part.areas.any():
            return None
        uneven = most_uneven_areas(netlist, part.areas, rules)
        if uneven is None or uneven[0] >= sum(uneven):
            return None
        graph = CliqueGraph.from_netlist(part, bounding_weights(part, rules.num_blocks, objective), _PAIRED_SIZE)
        return cls(part.areas, StarMatrix.from_graph(graph), uneven)

    def estimate_eigenvalues(self, count: int) -> list[tuple[float, float]]:
        """λ_1 … λ_count of the pencil, each with the relative retreat that makes a proof likely; also with areas of zero.

        Lanczos on (L + τM)⁻¹. A proof lowers each diagonal entry by twice the margin, which costs the eigenvalue
        2 margin Σ d x² with the diagonal d of the star expansion and its vector x, xᵀ M x = 1.
        """
        diagonal = self.matrix.laplacian.diagonal()
        shift = 1e-4 * float(diagonal[: self.matrix.num_cells].mean()) / float(self.areas.mean())
        factors = factorize(self.matrix.subtract(-shift * self.areas), self.matrix.elimination)
        if factors is None:
            return []
        root = np.sqrt(self.areas)
        padded = np.zeros(len(diagonal))
        place = factors.place

        def solve(x: NDArray[np.float64]) -> NDArray[np.float64]:
            padded[:] = 0.0
            padded[place[: len(root)]] = root * x
            solved: NDArray[np.float64] = factors.solver.solve(padded)[place]
            return solved

        def invert(x: NDArray[np.float64]) -> NDArray[np.float64]:
            return -root * solve(x)[: len(root)]

        found: list[tuple[float, float]] = []
        known = [root]
        start = np.cos(np.arange(len(root)) * 1.618) * root
        for _ in range(min(count, int(np.count_nonzero(root)) - 1)):
            value, vector, _, _ = find_smallest(invert, np.stack(known), start, tolerance=1e-8, max_steps=400)
            known.append(vector)
            eigenvalue = -1.0 / value - shift
            if not eigenvalue > 0:
                break
            full = solve(vector) / -value
            cost = 2 * self.matrix.usual_margin * float(np.sum(diagonal * full**2)) / eigenvalue
            found.append((eigenvalue, max(_RETREAT, 2 * cost)))
        return found


def most_uneven_areas(netlist: Netlist, areas: NDArray[np.float64], rules: Rules) -> tuple[Fraction, ...] | None:
    """Areas t_1 ≥ … ≥ t_k that majorise what the blocks of any legal partition hold of a part of the netlist; exact.

    Block i holds of the part between l_i, its lower limit less the area of the rest, and u_i, its upper limit. However a
    legal partition lies, its j fullest blocks hold at most T_j = min(sum of the j largest u, a(part) − sum of the k − j
    smallest l). Both are concave in j, so their differences t_j fall; every legal vector of areas is majorised by t, and
    no Schur-concave function, such as the bounds below, is smaller anywhere legal than at t.

    None where the limits contradict each other.
    """
    window = rules.window(netlist)
    slack = Fraction(window.slack)
    whole = sum(map(Fraction, netlist.areas.tolist()), Fraction(0))
    own = sum(map(Fraction, areas.tolist()), Fraction(0))
    # Sums of areas that are not whole are correctly rounded where partitions are judged, to one part in 2^53.
    slack += whole / 2**50 if slack else 0
    lows: list[Fraction] = sorted(max(Fraction(x) - slack - (whole - own), Fraction(0)) for x in window.lower.tolist())
    highs: list[Fraction] = sorted((min(Fraction(x) + slack, own) for x in window.upper.tolist()), reverse=True)
    if sum(lows) > own or sum(highs) < own or min(highs) < 0:
        return None
    k = rules.num_blocks
    reach = [min(sum(highs[:j], Fraction(0)), own - sum(lows[: k - j], Fraction(0))) for j in range(k + 1)]
    return tuple(reach[j + 1] - reach[j] for j in range(k))


def bound_from_eigenvalues(eigenvalues: list[float], uneven: tuple[Fraction, ...]) -> float:
    """What λ_1 ≤ λ_2 ≤ … say about the cut of every legal partition, rounded down.

    With x_i the indicator of block i and a_i its area, the graph's cut is ½ Σ_i x_iᵀ L x_i.

    - x_i − (a_i/A) 1 is M-orthogonal to 1, so x_iᵀ L x_i ≥ λ_1 a_i (A − a_i)/A and the cut is at least
      (λ_1/2) Σ a_i (A − a_i)/A; for two blocks this is λ_1 a_1 a_2/A (unit areas: M. Fiedler, Czechoslovak Mathematical
      Journal 25, 1975).
    - The x_i/√a_i are M-orthonormal, so Σ x_iᵀ L x_i ≥ Σ a_(i) λ_(i−1) with areas falling and λ_0 = 0: the bound of
      W. E. Donath and A. J. Hoffman, IBM Journal of Research and Development 17, 1973, with areas. Eigenvalues that are
      not given are replaced by the largest one that is.

    Both are Schur-concave in the areas, hence smallest at the most uneven ones.
    """
    if not eigenvalues or eigenvalues[0] <= 0:
        return 0.0
    total = sum(uneven, Fraction(0))
    levels = [Fraction(0), *map(Fraction, np.maximum.accumulate(eigenvalues).tolist())]
    levels += [levels[-1]] * (len(uneven) - len(levels))
    first = levels[1] * sum((area * (total - area) for area in uneven), Fraction(0)) / total
    second = sum((level * area for level, area in zip(levels, uneven, strict=False)), Fraction(0))
    return _rounded_down(max(first, second) / 2)


def verify_spectral(problem: SpectralProblem, eigenvalues: list[float]) -> bool:
    """Prove that the eigenvalues of the problem's pencil, λ_1 on, are at least those claimed."""
    return all(
        verify_eigenvalue(problem.matrix, problem.areas, value, index) for index, value in enumerate(eigenvalues, start=1)
    )


def spectral_bound(
    netlist: Netlist, rules: Rules, objective: str = "cut-nets", max_operations: float = MAX_OPERATIONS
) -> Bound | None:
    """A verified lower bound on the cost of every legal partition, or None where none can be proved.

    Let λ_i be the eigenvalues of L x = λ diag(a) x on the clique expansion with `bounding_weights`. The cost of any
    partition is at least the graph's cut, which `bound_from_eigenvalues` bounds from below. Every eigenvalue used is
    proved by `verify_eigenvalue` after a small retreat (larger ones where that fails). Fixed cells are not looked at:
    they only make the optimum larger.

    Parameters
    ----------
    netlist : Netlist
    rules : Rules
    objective : str
        One of `netlist.OBJECTIVES`.
    max_operations : float
        Give up where a factorisation would take more multiplications.
    """
    started = time.monotonic()
    problem = SpectralProblem.from_netlist(netlist, rules, objective)
    if problem is None or problem.matrix.elimination.num_operations > max_operations:
        return None
    proved: list[float] = []
    estimates = problem.estimate_eigenvalues(min(rules.num_blocks - 1, _MOST_EIGENVALUES))
    for index, (estimate, retreat) in enumerate(estimates, start=1):
        claims = [estimate * (1 - retreat * 30**i) for i in range(_TRIES)]
        claim = next((x for x in claims if verify_eigenvalue(problem.matrix, problem.areas, x, index)), None)
        if claim is None:
            break
        proved.append(claim)
    value = bound_from_eigenvalues(proved, problem.uneven)
    if value <= 0:
        return None
    # Two blocks: terminals are twice the cut nets, so they rise in steps of twice the weights' common divisor.
    step = 2 if rules.num_blocks == 2 and objective == "terminals" else 1
    phrase = ", ".join(f"λ{i} ≥ {claim:.9g}" for i, claim in enumerate(proved, start=1))
    return Bound(
        kind="spectral",
        value=step * next_attainable(value / step, netlist),
        verified=True,
        seconds=time.monotonic() - started,
        certificate=f"{phrase} by factors with measured error",
    )


def _rounded_down(value: Fraction) -> float:
    nearest = float(value)
    return nearest if Fraction(nearest) <= value else math.nextafter(nearest, -math.inf)
