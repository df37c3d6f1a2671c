"""Tied items: which method by size, the proof that no plan exists, and first plans where time is scarce."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case
from ledgersolve.lot_sizing.decompose import solve_decomposed
from ledgersolve.lot_sizing.elastic import short_of_time, shortfall
from ledgersolve.lot_sizing.groups import groups
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.lot_sizing.responses import first_plan
from ledgersolve.lot_sizing.start import find_start
from ledgersolve.lot_sizing.tied import solve_tied
from ledgersolve.lot_sizing.whole import solve_whole
from ledgersolve.mip import Limits, Solved, Verdict
from tests.bench.lot_cases import Recipe, generated
from tests.lot_textbook import FEATURES, random_case, textbook_cost


def scarce(factor: float) -> Case:
    """Thirty items over twelve periods with a share of the capacity that they were made for."""
    case = generated(Recipe(30, 12, 1, 0.95), 3)
    return replace(case, capacity=case.capacity * factor)


def names(case: Case, seconds: float) -> list[str]:
    """Names of the stages of a run."""
    return [stage.name for stage in solve_tied(case, Limits(seconds, gap=0.2)).stages]


def test_small_groups_go_to_the_whole_model_at_once() -> None:
    """Few setups need no decomposition."""
    assert names(generated(Recipe(5, 8, 1, 0.8), 1), 20.0) == ["whole model"]


def test_larger_groups_go_to_the_decomposition_first() -> None:
    """More setups begin with prices on capacity; where these suffice the whole model is not asked."""
    stages = names(generated(Recipe(40, 15, 1, 0.9), 1), 30.0)
    assert stages[0] == "ascent"
    assert "whole model" not in stages


@pytest.mark.parametrize("seed", range(24))
def test_the_decomposition_is_sound_on_any_features(seed: int) -> None:
    """Forced onto small mixed cases, the decomposition bounds from below and its plans pass the audit."""
    rng = np.random.default_rng([6, seed])
    features = frozenset(name for name in FEATURES if rng.random() < 0.4) | {"resource"}
    case = random_case(rng, int(rng.integers(2, 5)), int(rng.integers(3, 6)), features)
    for group in (group for group in groups(case) if group.shared):
        wanted = textbook_cost(group.case)
        answer = solve_decomposed(group.case, Limits(2.0, gap=1e-6))
        if wanted is None:
            assert answer.plan is None
            continue
        assert answer.verdict is not Verdict.NO_PLAN_EXISTS
        assert answer.bound <= wanted * (1 + 1e-6) + 1e-6
        if answer.plan is not None:
            assert audit(group.case, answer.plan).ok
            assert answer.cost >= wanted * (1 - 1e-6) - 1e-6


def test_a_small_group_uses_the_time_its_first_plan_leaves(monkeypatch: pytest.MonkeyPatch) -> None:
    """A plan that the whole model finds in its first share is improved by windows, and closed from there."""
    case = generated(Recipe(9, 10, 1, 0.9, overtime=0.5), 5)
    poor = first_plan(case, Limits(60.0).start(), 60.0)
    cost = audit(case, poor).total
    asked = []

    def decomposed(_: Case, limits: Limits, start: Plan | None = None) -> Solved[Plan]:
        return Solved(Verdict.NONE_FOUND, None, None, 0.0)

    def whole(_: Case, limits: Limits, start: Plan | None = None, floor: float | None = None) -> Solved[Plan]:
        asked.append((limits.seconds, start))
        return Solved(Verdict.BEST_FOUND, start or poor, cost if start is None else audit(case, start).total, 0.0)

    monkeypatch.setattr("ledgersolve.lot_sizing.tied.solve_decomposed", decomposed)
    monkeypatch.setattr("ledgersolve.lot_sizing.tied.solve_whole", whole)
    answer = solve_tied(case, Limits(40.0))
    assert asked[0][0] < 40.0
    assert asked[0][1] is None
    assert "windows" in [stage.name for stage in answer.stages]
    assert answer.cost < cost
    assert len(asked) == 1 or asked[1][1] is answer.plan


def test_impossible_by_adding_up() -> None:
    """Half the capacity is proven too little by running totals, without a search."""
    answer = solve_tied(scarce(0.5), Limits(20.0))
    assert answer.verdict is Verdict.NO_PLAN_EXISTS
    assert [stage.name for stage in answer.stages] == ["no plan exists"]
    assert "running totals" in answer.stages[0].note


def test_the_least_time_missing_is_proven_from_below() -> None:
    """The decomposition of the elastic case bounds the time missing; no plan of the case lacks less."""
    rng = np.random.default_rng(12)
    case = random_case(rng, 3, 4, frozenset({"resource", "setup time"}))
    elastic = short_of_time(replace(case, capacity=case.capacity * 0.4), held=0.0)
    answer = solve_whole(elastic, Limits(20.0))
    assert answer.cost == pytest.approx(textbook_cost(elastic), rel=1e-5)
    assert answer.cost > 0
    lacking = shortfall(replace(case, capacity=case.capacity * 0.4), answer.plan.made)
    assert lacking.sum() == pytest.approx(answer.cost, rel=1e-4)


def test_a_guess_that_does_not_fit_is_mended() -> None:
    """Lot for lot needs too much time for setups; mended it is a plan that the audit accepts."""
    case = generated(Recipe(8, 8, 1, 0.8), 5)
    guess = case.demand.copy()
    assert shortfall(case, guess).any()
    plan = find_start(case, guess, np.zeros(case.capacity.shape), Limits(60.0).start(), 60.0)
    assert plan is not None
    assert audit(case, plan).ok


def test_quantities_for_given_setups_are_the_best() -> None:
    """With the setups of a proven plan held, quantities cost no more than that plan; without any, no plan."""
    rng = np.random.default_rng(7)
    case = random_case(rng, 3, 5, frozenset({"resource", "overtime", "backlog", "lost", "least lot"}))
    case = replace(case, capacity=case.capacity * 2)
    best = solve_whole(case, Limits(20.0))
    again = best_quantities(case, best.plan.setup, 10.0)
    assert audit(case, again).ok
    assert audit(case, again).total == pytest.approx(best.cost, rel=1e-6)
    strict = replace(case, lost_cost=np.full(3, np.nan), backlog_cost=np.full(3, np.nan))
    assert best_quantities(strict, np.zeros((3, 5), dtype=bool), 10.0) is None


def test_a_start_is_never_made_worse() -> None:
    """The whole model begun from a plan ends with a cost no higher, and takes over a proven bound."""
    case = generated(Recipe(5, 8, 1, 0.7), 2)
    best = solve_whole(case, Limits(20.0))
    answer = solve_whole(case, Limits(0.3), plan_from_made(case, best.plan.made), best.bound)
    assert answer.cost <= best.cost * (1 + 1e-9)
    assert answer.bound >= best.bound * (1 - 1e-9)
