"""The whole engine without volumes: exact, anytime, honest, and told apart from a wrong bound."""

import time
from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.mip import Limits, Progress, Verdict
from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.bound import price_bound
from ledgersolve.site_selection.case import plain_case
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.solve import solve
from ledgersolve.site_selection.uncapacitated import branch, engine
from ledgersolve.site_selection.uncapacitated import core as core_module
from ledgersolve.site_selection.uncapacitated.incumbent import Incumbent
from ledgersolve.site_selection.whole import solve_whole
from tests.site_benchmarks import from_coordinates
from tests.site_strategies import random_case

FEATURES = (
    "groups", "counts", "rules", "today", "handling", "distances", "unmet", "missing lanes", "whole demand",
    "zero demand", "zero fixed cost",
)


@pytest.mark.parametrize("seed", range(40))
def test_the_engine_agrees_with_the_whole_model(seed: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Cases of up to 15 x 40 with mixed features: same cost as the wrapper's, bound and prices below it.

    Every second case runs with ceilings on the prices, which only large cases have otherwise.
    """
    monkeypatch.setattr(core_module, "ALL_LANES", 0 if seed % 2 else 50_000)
    random = np.random.default_rng(seed)
    m, n = int(random.integers(3, 16)), int(random.integers(3, 41))
    case = random_case(random, m, n, {f for f in FEATURES if random.random() < 0.35})
    solved = solve(case, Limits(seconds=60.0, gap=0.0))
    whole = solve_whole(Lanes.of(case), Limits(seconds=60.0, gap=0.0).start())
    assert (solved.plan is None) == (whole.plan is None)
    if solved.plan is None or whole.plan is None or solved.bound is None or solved.prices is None:
        assert solved.verdict is Verdict.NO_PLAN_EXISTS
        return
    cost = audit(case, whole.plan).total
    slack = 1e-6 * max(1.0, abs(cost))
    assert solved.verdict is Verdict.PROVEN_BEST
    assert solved.cost == pytest.approx(cost, abs=slack)
    assert solved.bound <= cost + slack
    assert price_bound(case, solved.prices) <= cost + slack


def test_a_bound_deliberately_wrong_is_seen(monkeypatch: pytest.MonkeyPatch) -> None:
    """The comparison has teeth: an engine whose dual is a tenth too high passes the optimum of a gap case."""
    case = random_case(np.random.default_rng(1), 12, 40, {"whole demand"})
    whole = solve_whole(Lanes.of(case), Limits(60.0, 0.0).start())
    assert whole.plan is not None
    cost = audit(case, whole.plan).total
    honest = engine.climb

    def boasting(*args: object) -> object:
        dual = honest(*args)
        return replace(dual, bound=1.1 * dual.bound)

    monkeypatch.setattr(engine, "climb", boasting)
    monkeypatch.setattr(branch, "climb", boasting)
    monkeypatch.setattr(Incumbent, "raise_bound", lambda self, bound, stage: setattr(self, "bound", bound))
    wrong = engine.solve_uncapacitated(Lanes.of(case), Limits(60.0, 0.0).start())
    assert wrong.bound > cost


def test_a_case_from_coordinates_is_proven_and_reports_its_way() -> None:
    """100 x 1000 from coordinates: proven, with stages, a rising bound and a falling best in the stream."""
    seen: list[Progress] = []
    case = from_coordinates(100, 1000, seed=4)
    solved = solve(case, Limits(seconds=60.0, progress=seen.append))
    assert solved.verdict is Verdict.PROVEN_BEST
    assert solved.prices is not None and solved.bound is not None
    assert price_bound(case, solved.prices) <= solved.bound * (1 + 1e-9)
    assert {"first plan", "bound and search"} <= {stage.name for stage in solved.stages}
    bounds = [step.bound for step in seen if step.bound is not None]
    costs = [step.best for step in seen if step.best is not None]
    assert bounds == sorted(bounds)
    assert costs == sorted(costs, reverse=True)
    assert bounds[-1] <= costs[-1]


def test_an_accepted_gap_ends_the_run_early() -> None:
    """With 5 % accepted the run may end within the gap, and says no more than that."""
    solved = solve(from_coordinates(100, 1000, seed=4, level=0.3), Limits(seconds=60.0, gap=0.05))
    assert solved.verdict in (Verdict.WITHIN_GAP, Verdict.PROVEN_BEST)
    assert solved.gap is not None and solved.gap <= 0.05


def test_cancelling_ends_the_run_with_plan_and_bound() -> None:
    """A run cancelled while it branches keeps its best plan and an honest bound."""
    random = np.random.default_rng(2)
    case = plain_case(np.full(60, 3000.0), np.where(random.random((60, 60)) < 0.1, random.integers(0, 5, (60, 60)),
                                                   30_000.0))
    began = time.monotonic()
    solved = solve(case, Limits(seconds=200.0, gap=0.0, cancelled=lambda: time.monotonic() - began > 1.0))
    assert solved.plan is not None and solved.bound is not None and solved.cost is not None
    assert audit(case, solved.plan).ok
    assert solved.bound <= solved.cost


def test_a_plan_that_costs_nothing_is_proven() -> None:
    """Where everything is free the bound is 0 exactly, not a rounding below it."""
    solved = solve(plain_case([0.0, 0.5], [[0.0, 0.0], [0.25, 0.0]]), Limits(seconds=10.0))
    assert solved.verdict is Verdict.PROVEN_BEST
    assert solved.cost == solved.bound == 0.0


def test_nobody_to_serve() -> None:
    """Without demand a rule or a count alone decides what opens."""
    case = plain_case([3.0, 2.0], [[1.0], [1.0]], [0.0], fewest_sites=1)
    solved = solve(case, Limits(seconds=10.0))
    assert solved.cost == 2.0
    assert solved.verdict is Verdict.PROVEN_BEST


def test_few_sites_for_many_is_proven_impossible() -> None:
    """Three customers each on its own site, at most two sites: no counting shows it, the engine proves it."""
    lanes = np.where(np.eye(3, dtype=bool), 1.0, np.inf)
    solved = solve(plain_case([1.0] * 3, lanes, most_sites=2), Limits(seconds=10.0))
    assert solved.verdict is Verdict.NO_PLAN_EXISTS
