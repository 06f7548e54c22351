"""Bounds as the commands find and recheck them: never above the optimum, proved again from certificates alone."""

from __future__ import annotations

import numpy as np
import pytest

from netpart.netlist import OBJECTIVES, Rules, UsageError
from netpart.solve import Budget, Journal, find_bounds, recheck_bounds
from tests.solve.test_split import exact_optimum, random_netlist


@pytest.mark.parametrize("seed", range(12))
def test_all_kinds_hold_and_are_proved_again(seed: int) -> None:
    rng = np.random.default_rng(seed)
    netlist = random_netlist(rng, 12, 22)
    objective = OBJECTIVES[seed % 3]
    rules = Rules.from_request(2 + seed % 2, tolerance="25%")
    optimum = exact_optimum(netlist, rules, objective)
    if optimum is None:
        pytest.fail("the instance has no legal partition; choose another")
    found = find_bounds(netlist, rules, objective, work=0.02, diagonal=True, journal=Journal(), budget=Budget())
    assert found.bounds[0].value == max(bound.value for bound in found.bounds)
    assert all(bound.verified and bound.value <= optimum + 1e-9 for bound in found.bounds)
    claims = [bound.to_dict() for bound in found.bounds]
    proved = recheck_bounds(netlist, rules, objective, claims, found.certificates)
    assert proved == {bound.kind: bound.value for bound in found.bounds}
    without = recheck_bounds(netlist, rules, objective, claims, ())
    assert all(without[kind] == "no certificate" for kind in without if kind in ("diagonal", "spreading"))


def test_unknown_objectives_and_kinds() -> None:
    netlist = random_netlist(np.random.default_rng(0), 6, 6)
    rules = Rules.from_request(2, tolerance="50%")
    with pytest.raises(UsageError):
        find_bounds(netlist, rules, "beauty", journal=Journal(), budget=Budget())
    assert isinstance(recheck_bounds(netlist, rules, "cut-nets", [{"kind": "oracle"}], ())["oracle"], str)
