"""The diagonal bound: a Laplacian with the best correction of its diagonal, found by semidefinite programming.

For a graph whose cut never exceeds the cost of a partition, let x be 1 on a set S of cells and −1 elsewhere. Then
cut(S) = ¼ xᵀ L x, and b·x = 2 a(S) − A − c for b = (a, −c) once a further entry x_0 = 1, without edges, carries the
middle c of the legal interval of 2 a(S) − A. If for some diagonal D and some α ≥ 0

    L + D + α b bᵀ  is positive semidefinite,                                                        (1)

then 4 cut(S) ≥ −Σ D − α (b·x)² ≥ −Σ D − α r², with r half the width of that interval. W. E. Donath and A. J. Hoffman (IBM
Journal of Research and Development 17, 1973) introduced the correction of the diagonal; the best D and α solve the dual of
a semidefinite program (S. Poljak and F. Rendl, "Nonpolyhedral relaxations of graph-bisection problems", SIAM J.
Optimization 5, 1995), whose primal asks for unit vectors v_i that minimise ¼ Σ L_ij v_i·v_j under |Σ b_i v_i| ≤ r.

`semidefinite` solves that primal, and its multipliers are D and α. Whatever comes out of it is only a claim; (1) is then
proved as in `eigenproof`, with the rank-one term as a border row, and the bound follows in exact arithmetic.

For k blocks the cut of the graph is half the sum over the blocks of what lies between each and the rest, so half the sum of
the blocks' bounds holds; blocks with equal limits share one.
"""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from netpart.bounds.bound import Bound, next_attainable
from netpart.bounds.certificate import Certificate, CertificateError
from netpart.bounds.eigenproof import StarMatrix
from netpart.bounds.netgraph import NetParts
from netpart.bounds.semidefinite import GraphEnergy, NetEnergy, Vectors, find_shift, minimize_energy
from netpart.bounds.spectral import MAX_OPERATIONS
from netpart.expand import CliqueGraph
from netpart.netlist import OBJECTIVES, Netlist, Rules

__all__ = [
    "Band",
    "DiagonalProof",
    "DiagonalResult",
    "check_diagonal",
    "diagonal_bound",
    "legal_band",
    "verify_diagonal",
]

BORDER_SCALE = 1 / 16
"""The border is this multiple of b: rows of like size round alike."""

_STAIRS = 3
_POWERS = (4.0, 16.0)
_LEAST = 1e-11


@dataclass(frozen=True, slots=True, eq=False)
class Band:
    """The legal interval of 2 a(S) − A, in areas scaled by a power of two to a mean near 1.

    Attributes
    ----------
    row : (n,) or (n + 1,) float64
        b: scaled areas, and −c at the end where c ≠ 0.
    radius : Fraction
        r: |b·x| ≤ r for every legal S.
    """

    row: NDArray[np.float64]
    radius: Fraction


@dataclass(frozen=True, slots=True, eq=False)
class DiagonalProof:
    """What is claimed and can be checked: (1) holds for `diagonal` and α = 1/(256 `resistance`), both exact as given.

    `shares` say how the nets spread over their parts (`NetParts`); None where the graph was given from outside.
    """

    diagonal: NDArray[np.float64]
    resistance: float
    shares: NDArray[np.float64] | None = None


@dataclass(frozen=True, slots=True, eq=False)
class DiagonalResult:
    """A diagonal bound with its certificate, which `check_diagonal` follows; None where the caller gave the graph."""

    bound: Bound
    certificate: Certificate | None


def diagonal_bound(
    netlist: Netlist,
    rules: Rules,
    objective: str = "cut-nets",
    *,
    graph: CliqueGraph | None = None,
    max_calls: int = 1000,
    max_operations: float = MAX_OPERATIONS,
) -> DiagonalResult | None:
    """A verified lower bound on the cost of every legal partition by diagonal correction, or None where none is proved.

    It is usually two to four times the spectral bound, and takes ten times as long to find. Netlists in several parts
    need no special care. Fixed cells are not looked at.

    Parameters
    ----------
    netlist : Netlist
    rules : Rules
    objective : str
        One of `netlist.OBJECTIVES`.
    graph : CliqueGraph, optional
        A graph over the cells whose cut is known never to exceed the cost, for every partition into as many blocks.
        Default: the best mixture of the nets' parts that is found, see `netgraph`.
    max_calls : int
        Evaluations that the optimisation may take, about, for each block with limits of its own.
    max_operations : float
        Give up where a factorisation would take more multiplications.
    """
    started = time.monotonic()
    parts = NetParts.from_netlist(netlist, rules.num_blocks, objective) if graph is None else None
    whole = CliqueGraph.from_netlist(netlist, parts.whole_costs) if parts is not None else graph
    if whole is None or not whole.degrees.any():
        return None
    proofs: dict[int, DiagonalProof] = {}

    def prove(block: int, band: Band) -> Fraction | None:
        found = bound_band(whole, parts, band, max_calls, max_operations)
        if found is not None:
            proofs[block] = found[0]
        return None if found is None else found[1]

    value = _combine(netlist, rules, objective, prove)
    if value <= 0:
        return None
    bound = Bound("diagonal", value, True, time.monotonic() - started, "semidefinite by factors with measured error")
    if parts is None:
        return DiagonalResult(bound, None)
    diagonals = np.zeros((len(proofs), netlist.num_cells + 1))
    shares = np.zeros((len(proofs), parts.num_shares))
    for i, proof in enumerate(proofs.values()):
        diagonals[i, : len(proof.diagonal)] = proof.diagonal
        shares[i] = proof.shares
    arrays = {
        "objective": np.array([OBJECTIVES.index(objective)]),
        "blocks": np.array(list(proofs), dtype=np.int64),
        "shares": shares,
        "diagonals": diagonals,
        "resistances": np.array([proof.resistance for proof in proofs.values()]),
    }
    return DiagonalResult(bound, Certificate("diagonal", arrays))


def check_diagonal(netlist: Netlist, rules: Rules, certificate: Certificate) -> tuple[str, float]:
    """The objective that a certificate is about, and the bound it proves: found from it alone, without optimising.

    Raises
    ------
    CertificateError
        If it does not hold what it should, or a proof fails.
    """
    which = int(certificate.array("objective", "i", (1,))[0])
    blocks = certificate.array("blocks", "i", (None,)).tolist()
    diagonals = certificate.array("diagonals", "f", (len(blocks), netlist.num_cells + 1))
    resistances = certificate.array("resistances", "f", (len(blocks),))
    if not 0 <= which < len(OBJECTIVES):
        raise CertificateError(f"diagonal certificate: there is no objective {which}")
    parts = NetParts.from_netlist(netlist, rules.num_blocks, OBJECTIVES[which])
    shares = certificate.array("shares", "f", (len(blocks), parts.num_shares))

    def prove(block: int, band: Band) -> Fraction | None:
        if block not in blocks:
            return None
        i, size = blocks.index(block), len(band.row)
        graph = parts.build_graph(shares[i]).widen(size)
        matrix = StarMatrix.from_graph(graph).with_border(band.row * BORDER_SCALE)
        found = verify_diagonal(matrix, band, DiagonalProof(diagonals[i, :size], float(resistances[i])))
        if found is None:
            raise CertificateError(f"diagonal certificate: the proof for block {rules.block_names[block]} does not hold")
        return found

    return OBJECTIVES[which], _combine(netlist, rules, OBJECTIVES[which], prove)


def legal_band(netlist: Netlist, rules: Rules, block: int) -> Band | None:
    """The band of one block against all others, in exact arithmetic; None where nothing is legal or there is no area."""
    window = rules.window(netlist)
    whole = sum(map(Fraction, netlist.areas.tolist()), Fraction(0))
    if whole == 0:
        return None
    # Sums of areas that are not whole are correctly rounded where partitions are judged, to one part in 2^53.
    slack = Fraction(window.slack) + whole / 2**50 if window.slack else Fraction(0)
    lows = [Fraction(x) - slack for x in window.lower.tolist()]
    highs = [Fraction(x) + slack for x in window.upper.tolist()]
    low = max(lows[block], whole - sum(highs) + highs[block], Fraction(0))
    high = min(highs[block], whole - sum(lows) + lows[block], whole)
    if low > high:
        return None
    unit = Fraction(2) ** round(math.log2(float(whole) / netlist.num_cells))
    areas = netlist.areas / float(unit)
    middle = (low + high - whole) / unit
    centre = float(middle) if abs(middle) > Fraction(float(areas.sum())) / 10**9 else 0.0
    radius = (high - low) / unit + abs(middle - Fraction(centre))
    return Band(areas if centre == 0 else np.append(areas, -centre), radius)


def verify_diagonal(matrix: StarMatrix, band: Band, proof: DiagonalProof) -> Fraction | None:
    """The bound on the graph's cut that a claim proves, exact, or None where the proof does not work out.

    Parameters
    ----------
    matrix : StarMatrix
        Of the graph, with as many cells as the band has entries, and the band's row times `BORDER_SCALE` as border.
    """
    resistance = proof.resistance
    if not (np.all(np.isfinite(proof.diagonal)) and math.isfinite(resistance) and resistance > 0):
        return None
    load = np.zeros(matrix.laplacian.shape[0])
    load[: len(proof.diagonal)] = -proof.diagonal
    load[-1] = resistance
    # The border's own negative eigenvalue is the only one exactly if (1) holds (Haynsworth).
    if not matrix.prove_at_most(1, load):
        return None
    total = sum(map(Fraction, proof.diagonal.tolist()), Fraction(0))
    return -(total + band.radius**2 * Fraction(BORDER_SCALE) ** 2 / Fraction(resistance)) / 4


def bound_band(
    whole: CliqueGraph, parts: NetParts | None, band: Band, max_calls: int, max_operations: float
) -> tuple[DiagonalProof, Fraction] | None:
    """A proof, and the bound it gives, on the cut between a legal set and the rest; None where none is found.

    Parameters
    ----------
    whole : CliqueGraph
        Where to start.
    parts : NetParts or None
        Whose best mixture is to take the place of that graph.
    """
    size, radius = len(band.row), float(band.radius)
    graph, shares = whole.widen(size), None
    state = Vectors.start(graph.degrees, band.row, radius)
    minimize_energy(GraphEnergy(graph), band.row, radius, state, max_calls // 2)
    if parts is not None:
        for power in _POWERS:
            energy = NetEnergy(parts, power, graph.degrees)
            minimize_energy(energy, band.row, radius, state, max_calls // 4)
        energy(state.units)
        shares = energy.shares
        graph = parts.build_graph(shares).widen(size)
        minimize_energy(GraphEnergy(graph), band.row, radius, state, max_calls // 4, 1e-4)
    matrix = StarMatrix.from_graph(graph)
    if matrix.elimination.num_operations > max_operations:
        return None
    matrix = matrix.with_border(band.row * BORDER_SCALE)
    for _ in range(_STAIRS):
        resistance = BORDER_SCALE**2 / max(
            state.weight, _LEAST * float(graph.degrees.mean()) / float(np.abs(band.row).sum())
        )
        shift, direction = find_shift(matrix, state.diagonal, resistance)
        if direction is None or shift * size <= 1e-3 * abs(float(state.diagonal.sum())):
            break
        # Too few dimensions: the vectors are stuck at a saddle that this direction leads away from (N. Boumal, V. Voroninski
        # and A. Bandeira, Advances in Neural Information Processing Systems 29, 2016).
        state.turn(direction)
        minimize_energy(GraphEnergy(graph), band.row, radius, state, max_calls // 4, 1e-4)
    if not math.isfinite(shift):
        return None
    room = matrix.usual_margin * (matrix.laplacian.diagonal()[:size] + np.abs(state.diagonal))
    for factor in (6.0, 60.0, 600.0):
        proof = DiagonalProof(state.diagonal + shift + factor * room, resistance, shares)
        found = verify_diagonal(matrix, band, proof)
        if found is not None:
            return proof, found
    return None


def _combine(netlist: Netlist, rules: Rules, objective: str, prove: Callable[[int, Band], Fraction | None]) -> float:
    """Half the sum of the blocks' bounds, rounded down and then up to what a cost can be; 0 where there are none."""
    window = rules.window(netlist)
    limits = list(zip(window.lower.tolist(), window.upper.tolist(), strict=True))
    if rules.num_blocks == 2:
        limits = limits[:1] * 2  # either block's limits say the same of the cut between them
    shared: dict[tuple[float, float], Fraction] = {}
    for block, limit in enumerate(limits):
        if limit not in shared:
            band = legal_band(netlist, rules, block)
            found = None if band is None else prove(block, band)
            shared[limit] = max(found or Fraction(0), Fraction(0))
    total = sum((shared[limit] for limit in limits), Fraction(0)) / 2
    value = float(total)
    value = value if Fraction(value) <= total else math.nextafter(value, -math.inf)
    # Two blocks: terminals are twice the cut nets, so they rise in steps of twice the weights' common divisor.
    step = 2 if rules.num_blocks == 2 and objective == "terminals" else 1
    return step * next_attainable(value / step, netlist) if value > 0 else 0.0
