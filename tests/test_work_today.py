"""Why today's network cannot keep the rules, in one sentence for the first page."""

import time
from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.mip import Limits, Solved, Verdict
from ledgersolve.site_selection.case import Case, plain_case
from ledgersolve.site_selection.solve import solve
from ledgersolve.work.shared import Budget
from ledgersolve.work.sites import _why

INF = np.inf
CASE = plain_case([10.0, 10.0], [[1.0, 9.0], [9.0, 1.0]], [10.0, 20.0], today=np.array([True, False]))
FAR = {"distance": np.array([[10.0, 80.0], [80.0, 10.0]])}


def why(case: Case) -> str:
    """The sentence for today's network of the case, which the engine must have found impossible."""
    today = case.as_today()
    found = solve(today, Limits(10.0))
    return _why(today, found, Budget(Limits(20.0), time.monotonic()))


@pytest.mark.parametrize(("changes", "said"), [
    ({"capacity": np.array([25.0, 40.0])}, "apacity"),
    (FAR | {"longest_distance": 50.0}, "C2 has no allowed site within 50 km"),
    (FAR | {"share_within": 0.9, "share_distance": 50.0}, "can be served within 50 km"),
    ({"lane_cost": np.array([[1.0, INF], [9.0, 1.0]])}, "C2"),
])
def test_the_rule_is_named(changes: dict[str, object], said: str) -> None:
    """Room, distance, share or a missing lane is named; that other sites are closed is no reason."""
    told = why(replace(CASE, **changes))  # type: ignore[arg-type]
    assert said in told
    assert "closed" not in told
    assert not told.endswith(".")


def test_where_today_can_be_nothing_is_said() -> None:
    """A network that keeps the rules needs no reason, nor does one that the time did not suffice for."""
    assert why(CASE) == ""
    waiting = Solved(Verdict.NONE_FOUND, None, None, None)
    assert _why(CASE.as_today(), waiting, Budget(Limits(20.0), time.monotonic())) == ""
