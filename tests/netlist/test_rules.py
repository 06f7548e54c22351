"""Area windows against exact fractions, and the proofs that nothing can meet the rules."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from netpart.netlist import FREE, InfeasibleError, Netlist, Rules, UsageError
from tests.strategies import enumerate_optimum, make_netlist, netlists

TOLERANCES = st.fractions(0, 1, max_denominator=200)


@st.composite
def rules(draw: st.DrawFn) -> Rules:
    shares = draw(st.lists(st.integers(1, 9), min_size=1, max_size=4))
    return Rules.from_request(len(shares), shares, draw(TOLERANCES))


@given(netlists(areas="whole"), rules(), st.data())
def test_whole_areas_have_an_exact_window(netlist: Netlist, asked: Rules, data: st.DataObject) -> None:
    """Block i is legal when (1 − t) f A ≤ a ≤ (1 + t) f A, in exact arithmetic."""
    window = asked.window(netlist)
    assert window.slack == 0
    total = Fraction(netlist.total_area)
    for i, share in enumerate(asked.shares):
        low, high = (1 - asked.tolerance) * share * total, (1 + asked.tolerance) * share * total
        assert (window.lower[i], window.upper[i]) == (math.ceil(low), math.floor(high))
        areas = np.zeros(asked.num_blocks)
        area = data.draw(st.integers(0, int(total)))
        areas[i] = area
        assert (window.violation(areas)[i] == 0) == (low <= area <= high)


@given(netlists(areas="any"), rules(), st.floats(0, 1))
def test_decimal_areas_are_rounded_inwards_with_a_slack_of_a_billionth(netlist: Netlist, asked: Rules, part: float) -> None:
    window = asked.window(netlist)
    total = Fraction(netlist.total_area)
    assert window.slack in (0, float(total) * 1e-9)
    for i, share in enumerate(asked.shares):
        low, high = (1 - asked.tolerance) * share * total, (1 + asked.tolerance) * share * total
        if window.slack:
            assert Fraction(window.lower[i]) >= low > Fraction(math.nextafter(window.lower[i], -math.inf))
            assert Fraction(window.upper[i]) <= high < Fraction(math.nextafter(window.upper[i], math.inf))
        area = part * float(total)
        legal = window.violation(np.full(asked.num_blocks, area))[i] == 0
        if low <= Fraction(area) <= high and window.slack:
            assert legal
        if legal:
            assert low - total / 10**8 <= Fraction(area) <= high + total / 10**8


def test_the_windows_of_the_literature() -> None:
    """C. J. Alpert, Proc. ISPD 1998: blocks of 45 % to 55 %, and of 49 % to 51 %, of the cells."""
    netlist = make_netlist([], 1952)
    assert Rules.from_request(2, tolerance=0.1).window(netlist)[:2] == (
        pytest.approx([879, 879]),
        pytest.approx([1073, 1073]),
    )
    assert Rules.from_request(2, tolerance="2%").window(netlist)[:2] == (
        pytest.approx([957, 957]),
        pytest.approx([995, 995]),
    )
    assert Fraction(879, 1952) >= Fraction(45, 100) > Fraction(878, 1952)
    assert Fraction(995, 1952) <= Fraction(51, 100) < Fraction(996, 1952)


def test_requests_are_taken_as_written() -> None:
    asked = Rules.from_request(2, shares=["60%", 0.4], tolerance=0.1, block_names=["a", "b"])
    assert asked.shares == (Fraction(3, 5), Fraction(2, 5))
    assert asked.tolerance == Fraction(1, 10)
    assert asked.block_names == ("a", "b")
    assert Rules.from_request(3).shares == (Fraction(1, 3),) * 3
    assert Rules.from_request(2, shares=[3, 1]).shares == (Fraction(3, 4), Fraction(1, 4))
    assert Rules.from_request(3).block_names == ("B0", "B1", "B2")
    assert Rules.from_request(2, tolerance=" 2.5 % ").tolerance == Fraction(1, 40)
    assert Rules.from_request(2, tolerance="1/3").tolerance == Fraction(1, 3)


@pytest.mark.parametrize(
    ("request_", "message"),
    [
        ({"blocks": 0}, "blocks must be at least 1, found 0"),
        ({"blocks": 2, "shares": [1]}, "2 blocks need 2 shares, found 1"),
        ({"blocks": 2, "shares": [1, 0]}, "every share must be above zero"),
        ({"blocks": 2, "shares": [1, "much"]}, "share: expected a number or a percentage, found 'much'"),
        ({"blocks": 2, "shares": [1, float("nan")]}, "share: expected a number or a percentage, found nan"),
        ({"tolerance": -0.1}, "the tolerance must lie within 0 % and 100 %, found -0.1"),
        ({"tolerance": "101%"}, "the tolerance must lie within 0 % and 100 %, found 1.01"),
        ({"tolerance": "1/0"}, "tolerance: expected a number or a percentage, found '1/0'"),
        ({"blocks": 2, "block_names": ["a", "a"]}, "2 blocks need 2 different names, found a, a"),
        ({"blocks": 2, "block_names": ["a"]}, "2 blocks need 2 different names, found a"),
    ],
)
def test_requests_that_make_no_sense(request_: dict[str, Any], message: str) -> None:
    with pytest.raises(UsageError, match=f"^{message}$"):
        Rules.from_request(**request_)


def fixed(*blocks: int) -> dict[str, Any]:
    return {"fixed": np.array(blocks, np.int32)}


@pytest.mark.parametrize(
    ("areas", "request_", "message"),
    [
        ([1, 1, 1], {}, "block B0: no whole number of area units lies within 1.35 and 1.65; a wider tolerance would do"),
        ([1] * 10, {"blocks": 3}, "the blocks hold at most 9 together, but the netlist has area 10"),
        ([1] * 11, {"blocks": 3}, "the blocks need at least 12 together, but the netlist has area 11"),
        (
            [1, 10, 1],
            {},
            "cell 'c1' has area 10 of 12 in all, but no block may hold more than 6; a tolerance of 66.7 % would admit it",
        ),
        (
            [1, 10, 1],
            {"blocks": 4, "tolerance": "50%"},
            "cell 'c1' has area 10 of 12 in all, but no block may hold more than 4; no tolerance up to 100 % would admit it",
        ),
        ([4, 3, 2, 1], fixed(0, 0, -1, -1), "block B0: its fixed cells have area 7, 2 more than it may hold"),
        (
            [4, 3, 2, 1],
            {"shares": [9, 1], "tolerance": 0, **fixed(-1, 1, -1, -1)},
            "block B0: its fixed cells and all free cells have area 7, 2 less than it must hold (9)",
        ),
        (
            [4, 4, 1, 1],
            {"blocks": 3, "shares": [8, 1, 1], "tolerance": 0, **fixed(-1, -1, 1, 1)},
            "block B1: its fixed cells have area 2, 1 more than it may hold",
        ),
    ],
)
def test_proofs_that_nothing_can_meet_the_rules(areas: list[float], request_: dict[str, Any], message: str) -> None:
    netlist = make_netlist([], len(areas), areas=areas)
    asked = Rules.from_request(**request_)
    with pytest.raises(InfeasibleError) as caught:
        asked.check_feasible(netlist)
    assert message in str(caught.value)
    assert caught.value.exit_code == 3
    if len(areas) < 9:
        assert enumerate_optimum(netlist, asked) is None


def test_fixed_cells_that_do_not_fit_the_netlist() -> None:
    netlist = make_netlist([], 4)
    for wrong in ([0, 1], [0, 1, 2, 0], [0, 0, 1, -2]):
        with pytest.raises(UsageError, match=r"fixed needs 4 entries within -1\.\.1"):
            Rules.from_request(2, fixed=np.array(wrong, np.int32)).check_feasible(netlist)


@given(netlists(max_cells=6), rules(), st.data())
def test_what_is_refused_has_no_legal_partition(netlist: Netlist, asked: Rules, data: st.DataObject) -> None:
    """Against trying all partitions; the reverse does not hold, as the proofs are cheap ones."""
    places = st.integers(FREE, asked.num_blocks - 1)
    places = data.draw(st.lists(places, min_size=netlist.num_cells, max_size=netlist.num_cells))
    asked = Rules(asked.block_names, asked.shares, asked.tolerance, np.array(places, np.int32))
    try:
        window = asked.check_feasible(netlist)
    except InfeasibleError:
        assert enumerate_optimum(netlist, asked) is None
    else:
        np.testing.assert_array_equal(window.lower, asked.window(netlist).lower)


@given(st.lists(st.integers(0, 60), min_size=2, max_size=8).filter(any), st.integers(2, 3), TOLERANCES)
def test_the_tolerance_that_would_admit_a_large_cell_does(areas: list[float], num_blocks: int, tolerance: Fraction) -> None:
    netlist = make_netlist([], len(areas), areas=[float(area) for area in areas])
    try:
        Rules.from_request(num_blocks, tolerance=tolerance).check_feasible(netlist)
    except InfeasibleError as fault:
        told = str(fault)
        if "would admit it" in told and "no tolerance" not in told:
            wider = told.rsplit("a tolerance of ", 1)[1].split(" would admit")[0]
            assert Rules.from_request(num_blocks, tolerance=wider).window(netlist).upper[0] >= max(areas)
