"""Gaps, verdicts and limits to the last figure: what may be called proven, and what may not."""

import math

import pytest

from ledgersolve.mip import Limits, Progress, Solved, Verdict
from ledgersolve.mip.run import Clock, judge, relative_gap

INF, NAN = math.inf, math.nan


@pytest.mark.parametrize(
    ("cost", "bound", "gap"),
    [
        (200.0, 150.0, 0.25), (200.0, 200.0, 0.0), (200.0, 201.0, 0.0), (200.0, -200.0, 2.0),
        (-100.0, -125.0, 0.25), (-100.0, -100.0, 0.0), (-100.0, -99.0, 0.0), (0.0, 0.0, 0.0), (0.0, 1.0, 0.0),
        (0.0, -1.0, INF), (INF, 5.0, INF), (5.0, -INF, INF), (INF, INF, INF), (-INF, -INF, INF),
        (5.0, INF, INF), (NAN, 5.0, INF), (5.0, NAN, INF),
    ],
)
def test_the_gap_is_measured_against_the_size_of_the_cost(cost: float, bound: float, gap: float) -> None:
    """Of a cost below 0 as well; nothing that is unknown, infinite or no number is ever close."""
    assert relative_gap(cost, bound) == gap


@pytest.mark.parametrize(
    ("cost", "bound", "accepted", "verdict"),
    [
        (10_000.0, 9_999.0, 0.0, Verdict.PROVEN_BEST),  # exactly 0.01 %
        (10_000.0, 9_998.999, 0.0, Verdict.BEST_FOUND), (10_000.0, 9_998.999, 0.01, Verdict.WITHIN_GAP),
        (4.0, 3.0, 0.25, Verdict.WITHIN_GAP), (4.0, 3.0, 0.2499, Verdict.BEST_FOUND),
        (4.0, 3.0, 0.0, Verdict.BEST_FOUND), (4.0, 4.5, 0.0, Verdict.PROVEN_BEST),
        (-10_000.0, -10_001.0, 0.0, Verdict.PROVEN_BEST), (-10_000.0, -10_002.0, 0.0, Verdict.BEST_FOUND),
        (0.0, 0.0, 0.0, Verdict.PROVEN_BEST), (0.0, -1e-9, 1.0, Verdict.BEST_FOUND),
        (4.0, -INF, 1.0, Verdict.BEST_FOUND), (4.0, NAN, 1.0, Verdict.BEST_FOUND),
        (4.0, INF, 1.0, Verdict.BEST_FOUND), (NAN, 4.0, 1.0, Verdict.BEST_FOUND),
    ],
)
def test_a_verdict_goes_by_the_figures(cost: float, bound: float, accepted: float, verdict: Verdict) -> None:
    """A gap of 0.01 % is proven and a hair more is not; an accepted gap counts up to itself."""
    assert judge(cost, bound, accepted) is verdict


@pytest.mark.parametrize("verdict", list(Verdict))
@pytest.mark.parametrize("plan", ["a plan", None])
@pytest.mark.parametrize("cost", [5.0, None])
def test_verdict_plan_and_cost_go_together(verdict: Verdict, plan: str | None, cost: float | None) -> None:
    """A verdict that has a plan comes with plan and cost, the others with neither; all else is refused."""
    with_plan = verdict in (Verdict.PROVEN_BEST, Verdict.WITHIN_GAP, Verdict.BEST_FOUND)
    if (plan is not None, cost is not None) == (with_plan, with_plan):
        assert Solved(verdict, plan, cost, None).verdict is verdict
        return
    with pytest.raises(ValueError, match="does not go with plan and cost"):
        Solved(verdict, plan, cost, None)


def test_the_gap_of_a_result_needs_cost_and_bound() -> None:
    """Without a plan, or without a bound, there is no gap to tell."""
    assert Solved(Verdict.BEST_FOUND, "plan", 4.0, 3.0).gap == 0.25
    assert Solved(Verdict.BEST_FOUND, "plan", 4.0, None).gap is None
    assert Solved(Verdict.NONE_FOUND, None, None, 3.0).gap is None


@pytest.mark.parametrize("seconds", [1e-9, 0.5, 1e6])
@pytest.mark.parametrize("gap", [0.0, 0.5, 1.0])
def test_limits_within_their_range(seconds: float, gap: float) -> None:
    """Any time above 0 up to a million seconds and any gap from 0 to 1, ends included."""
    limits = Limits(seconds=seconds, gap=gap)
    assert (limits.seconds, limits.gap) == (seconds, gap)


@pytest.mark.parametrize("seconds", [0.0, -1.0, 1_000_000.5, INF, NAN])
def test_times_out_of_range_are_refused(seconds: float) -> None:
    """No time, less than none, more than a million seconds, or no number."""
    with pytest.raises(ValueError, match="seconds must be above 0"):
        Limits(seconds=seconds)


@pytest.mark.parametrize("gap", [-1e-9, 1.0000001, INF, NAN])
def test_gaps_out_of_range_are_refused(gap: float) -> None:
    """Below 0, above 1, or no number."""
    with pytest.raises(ValueError, match="gap must be a fraction from 0 to 1"):
        Limits(gap=gap)


@pytest.mark.parametrize(
    ("accepted", "bound", "close"),
    [
        (0.25, 3.0, True), (0.25, 2.999, False), (0.0, 4.0 * (1 - 0.9e-9), True),
        (0.0, 4.0 * (1 - 1.1e-9), False), (1.0, -INF, False),
    ],
)
def test_a_run_is_close_enough_at_the_accepted_gap(accepted: float, bound: float, close: bool) -> None:
    """Up to the accepted gap itself; with none accepted a billionth, for rounding."""
    clock = Limits(gap=accepted).start()
    clock.note("search", best=4.0, bound=bound)
    assert clock.close_enough() is close


def test_the_clock_tells_what_is_known_and_keeps_the_best() -> None:
    """Unknown figures are told as None, never as infinite; worse ones change nothing."""
    told: list[Progress] = []
    clock = Clock(Limits(progress=told.append))
    clock.note("begin")
    clock.note("plan", best=9.0)
    clock.note("bound", bound=3.0)
    clock.note("worse", best=10.0, bound=2.0)
    clock.note("better", best=8.0, bound=4.0)
    assert [(step.stage, step.best, step.bound) for step in told] == [
        ("begin", None, None), ("plan", 9.0, None), ("bound", 9.0, 3.0), ("worse", 9.0, 3.0), ("better", 8.0, 4.0)]
