"""The check of spreading certificates, against a plain one that walks every path, and against tampering."""

from __future__ import annotations

import copy
import heapq
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from netpart.bounds.certificate import Certificate, CertificateError
from netpart.bounds.spreading import spreading_bound
from netpart.bounds.verify import check_spreading
from netpart.netlist import Netlist, Rules
from tests.bounds.circuits import clustered, grid, path, random_netlist
from tests.strategies import enumerate_optimum, make_netlist


def walk_every_path(netlist: Netlist, certificate: Certificate) -> tuple[list[int], list[int], int]:
    """Loads, rates and flow left out, one path after the other, in Python integers with a heap."""
    arrays = {name: array.tolist() for name, array in certificate.arrays.items()}
    loads, rates, left_out = [0] * netlist.num_nets, [0] * netlist.num_cells, 0
    marks = arrays["first_marks"]
    change, tree = 0, 0
    for stage, limit in enumerate(arrays["limits"]):
        net = 0
        for _ in range(arrays["change_counts"][stage]):
            net += arrays["change_gaps"][change]
            marks[net] = arrays["change_marks"][change]
            change += 1
        for _ in range(arrays["tree_counts"][stage]):
            root, rate = arrays["roots"][tree], arrays["rates"][tree]
            tree += 1
            parents = grow(netlist, [arrays["lengths"][mark] for mark in marks], root, limit)
            senders = [v for v in parents if arrays["groups"][v] == arrays["groups"][root] and arrays["shares"][v]]
            for s in senders:
                sent = rate * arrays["shares"][s]
                rates[s] += sent
                for u in range(netlist.num_cells):
                    if u not in parents:
                        left_out += sent * arrays["demands"][u]
                        continue
                    for e in nets_between(parents, s, u):
                        loads[e] += sent * arrays["demands"][u]
    return loads, rates, left_out


def grow(netlist: Netlist, lengths: list[int], root: int, limit: int) -> dict[int, tuple[int, int]]:
    """Cell → (net that brought it, cell it came from)."""
    parents = {root: (-1, -1)}
    heap: list[tuple[int, int, int, int]] = []
    met: set[int] = set()

    def meet(cell: int, distance: int) -> None:
        for e in netlist.nets_of(cell).tolist():
            if e not in met:
                met.add(e)
                heapq.heappush(heap, (distance + lengths[e], -len(met), e, cell))

    meet(root, 0)
    while heap:
        distance, _, net, entry = heapq.heappop(heap)
        if distance > limit:
            break
        brought = [u for u in netlist.cells_of(net).tolist() if u not in parents]
        parents.update(dict.fromkeys(brought, (net, entry)))
        for u in brought:
            meet(u, distance)
    return parents


def nets_between(parents: dict[int, tuple[int, int]], a: int, b: int) -> set[int]:
    """The nets on the path of the tree: those on one way to the root only, or that both enter by different cells."""

    def upward(cell: int) -> dict[int, int]:
        steps = {}
        while parents[cell][0] >= 0:
            steps[parents[cell][0]] = cell
            cell = parents[cell][1]
        return steps

    first, second = upward(a), upward(b)
    return {e for e in first.keys() | second.keys() if first.get(e) != second.get(e)}


def plain_bound(netlist: Netlist, rules: Rules, certificate: Certificate) -> Fraction:
    """The bound for two blocks and whole areas in units of 1, minimised over the area of the smaller block.

    For a smaller block of area x it holds at least A(x) = min Σ δ_s y_s over Σ d(s) y_s ≥ x, 0 ≤ y ≤ 1, of the rates,
    and A(x) (D − x) + (Δ − A(x)) x crosses; between the breakpoints of A this is concave.
    """
    loads, rates, left_out = walk_every_path(netlist, certificate)
    demands = certificate.arrays["demands"].tolist()
    total, rate = sum(demands), sum(rates)
    window = rules.window(netlist)
    lost = int(netlist.total_area) - total
    low = max(int(window.lower.min()) - lost, total - int(window.upper.max()))
    points = sorted((Fraction(r, d), d, r) for r, d in zip(rates, demands, strict=True) if d)
    breaks, area, least = {Fraction(low), Fraction(total, 2)}, 0, 0
    for _, d, _ in points:
        area += d
        if low < area < total / 2:
            breaks.add(Fraction(area))

    def smallest(x: Fraction) -> Fraction:
        left, sum_rates = x, Fraction(0)
        for ratio, d, _ in points:
            part = min(left, Fraction(d))
            sum_rates += ratio * part
            left -= part
        return sum_rates

    flow = min(smallest(x) * (total - 2 * x) + rate * x for x in breaks) - left_out + least
    worst = max(Fraction(load) / Fraction(float(w)) for load, w in zip(loads, netlist.net_weights, strict=True))
    return max(flow / worst, Fraction(0)) if worst else Fraction(0)


@pytest.mark.parametrize("seed", range(8))
def test_equals_the_plain_check(seed: int) -> None:
    rng = np.random.default_rng(seed)
    netlist = [grid(4, 5), path(9), clustered(3, 8, 2, seed)][seed % 3]
    if seed >= 4:
        nets = [netlist.cells_of(e).tolist() for e in range(netlist.num_nets)]
        areas = rng.integers(0, 4, netlist.num_cells).astype(float)
        netlist = make_netlist(nets, netlist.num_cells, areas=areas.tolist())
    rules = Rules.from_request(2, tolerance="20%")
    found = spreading_bound(netlist, rules, num_trees=90, seed=seed)
    assert found is not None
    proof = check_spreading(netlist, rules, found.certificate)
    plain = plain_bound(netlist, rules, found.certificate)
    assert proof.exact > 0
    assert proof.exact <= plain  # the check's formula may give away a little, never take
    assert float(proof.exact) == pytest.approx(float(plain), rel=1e-3)


def small_case() -> tuple[Netlist, Rules, Certificate, float, float]:
    netlist = random_netlist(np.random.default_rng(3), 9)
    rules = Rules.from_request(2, tolerance="25%")
    found = spreading_bound(netlist, rules, num_trees=60)
    optimum = enumerate_optimum(netlist, rules)
    assert found is not None
    assert optimum is not None
    return netlist, rules, found.certificate, found.exact, optimum


NETLIST, RULES, CERTIFICATE, EXACT, OPTIMUM = small_case()


@given(st.data())
@settings(max_examples=250, deadline=None)
def test_one_changed_number_proves_nothing_false(data: st.DataObject) -> None:
    """Whatever single number is changed, the check refuses, or the bound still holds."""
    certificate = copy.deepcopy(CERTIFICATE)
    name = data.draw(st.sampled_from(sorted(name for name, array in certificate.arrays.items() if array.size)))
    array = certificate.arrays[name] = certificate.arrays[name].astype(np.int64)
    index = data.draw(st.integers(0, array.size - 1))
    array[index] = data.draw(
        st.one_of(
            st.integers(-(2**63), 2**63 - 1),
            st.integers(int(array[index]) - 3, int(array[index]) + 3),
            st.sampled_from([0, 1, 2**31, 2**40, 2**62]),
        )
    )
    try:
        proof = check_spreading(NETLIST, RULES, certificate)
    except CertificateError:
        return
    assert proof.value <= OPTIMUM * (1 + 1e-12)


@given(st.randoms(use_true_random=False))
@settings(max_examples=100, deadline=None)
def test_made_up_certificates_prove_nothing_false(random: object) -> None:
    """Any lengths, groups, shares, demands and rates make a valid certificate, only a weak one."""
    rng = np.random.default_rng(random.getrandbits(32))  # type: ignore[attr-defined]
    netlist = random_netlist(rng, 8)
    rules = Rules.from_request(int(rng.integers(2, 4)), tolerance=f"{rng.integers(0, 31)}%")
    unit = int(rng.integers(-6, 1))
    trees = int(rng.integers(1, 20))
    counts = rng.multinomial(trees, [0.5, 0.5])
    arrays = {
        "unit_exponent": np.array([unit]),
        "demands": np.floor(netlist.areas / 2.0**unit * rng.choice([1, 1, 0.5], 8)).astype(np.int64),
        "shares": rng.integers(0, 5, 8),
        "groups": rng.integers(0, 8, 8),
        "lengths": np.array([1, 2, 3, 9]),
        "first_marks": rng.integers(0, 4, netlist.num_nets),
        "limits": rng.integers(0, 30, 2),
        "tree_counts": counts,
        "roots": rng.integers(0, 8, trees),
        "rates": rng.integers(0, 50, trees),
        "change_counts": np.array([0, 2]),
        "change_gaps": np.array([0, 1]),
        "change_marks": rng.integers(0, 4, 2),
    }
    proof = check_spreading(netlist, rules, Certificate("spreading", arrays))
    optimum = enumerate_optimum(netlist, rules)
    if optimum is not None:
        assert proof.value <= optimum * (1 + 1e-12)


@pytest.mark.parametrize("name", sorted(CERTIFICATE.arrays))
def test_missing_short_or_odd_arrays_are_refused(name: str) -> None:
    for change in (None, "short", "float", "matrix"):
        arrays = dict(CERTIFICATE.arrays)
        if change is None:
            del arrays[name]
        elif change == "short":
            arrays[name] = np.append(arrays[name], arrays[name][:1] if arrays[name].size else 0)
        elif change == "float":
            arrays[name] = arrays[name].astype(float)
        else:
            arrays[name] = arrays[name].reshape(-1, 1)
        if change == "short" and name == "lengths":
            continue  # a longer table of lengths is as good
        with pytest.raises(CertificateError):
            check_spreading(NETLIST, RULES, Certificate("spreading", arrays))


def test_another_kind_is_refused() -> None:
    with pytest.raises(CertificateError, match="spreading"):
        check_spreading(NETLIST, RULES, Certificate("spectral", CERTIFICATE.arrays))


def test_value_is_rounded_down_and_threads_do_not_matter() -> None:
    proofs = [check_spreading(NETLIST, RULES, CERTIFICATE, threads) for threads in (1, 2, 5)]
    assert len({proof.exact for proof in proofs}) == 1
    assert Fraction(proofs[0].value) <= proofs[0].exact
    assert proofs[0].value == EXACT
