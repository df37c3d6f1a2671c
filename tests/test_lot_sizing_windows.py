"""Windows: cases cut out of a plan fit back into it, and improving never spoils a plan."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.plan import plan_from_made
from ledgersolve.lot_sizing.windows import Best, improve, items_apart, periods_apart
from ledgersolve.mip import Limits
from tests.bench.lot_cases import Recipe, generated
from tests.lot_oracle import random_shared, whole_big_m


def lot_for_lot(seed: int, *features: str):
    """Give a case with room for making everything when it is needed, and that plan."""
    case = random_shared(np.random.default_rng(seed), 6, 6, *features)
    case = replace(case, capacity=case.capacity * 4)
    return case, plan_from_made(case, case.demand)


@pytest.mark.parametrize("features", [(), ("family",), ("family", "use", "overtime")])
def test_items_apart_carry_their_share_of_the_cost(features: tuple[str, ...]) -> None:
    """A window's optimum, put back, gives a sound plan that is no dearer than the one it came from."""
    case, plan = lot_for_lot(1, *features)
    before = audit(case, plan)
    assert before.ok
    items = np.array([0, 2, 5])
    window = items_apart(case, plan, items)
    assert audit(window, plan_from_made(window, plan.made[items])).ok
    made = plan.made.copy()
    best = whole_big_m(window)
    assert best.values is not None
    made[items] = best.values[: 3 * 6].reshape(3, 6)
    after = audit(case, plan_from_made(case, np.where(made > 1e-7, made, 0.0)))
    assert after.ok
    assert after.total <= before.total + 1e-6


def test_periods_apart_fit_back() -> None:
    """Stocks at the ends of a run of periods tie it to the rest: its optimum fits back and saves cost."""
    case, plan = lot_for_lot(3, "opening", "safety")
    before = audit(case, plan)
    window = periods_apart(case, plan, 2, 5)
    assert window.t == 3
    assert audit(window, plan_from_made(window, plan.made[:, 2:5])).ok
    best = whole_big_m(window)
    made = plan.made.copy()
    made[:, 2:5] = np.where(best.values[: 6 * 3] > 1e-7, best.values[: 6 * 3], 0.0).reshape(6, 3)
    after = audit(case, plan_from_made(case, made))
    assert after.ok
    assert after.total <= before.total + 1e-6


def test_improve_comes_to_the_optimum_of_a_small_case() -> None:
    """From lot for lot, windows that grow end at the proven optimum of a small case."""
    case, plan = lot_for_lot(4)
    best = Best(case, plan, audit(case, plan).total)
    improve(best, Limits(60.0).start())
    assert best.cost == pytest.approx(whole_big_m(case).objective, rel=1e-4)
    assert audit(case, best.plan).total == pytest.approx(best.cost)


def test_improve_keeps_to_the_clock() -> None:
    """A run that is cancelled tries no window and keeps the plan."""
    case = generated(Recipe(6, 8, 1, 0.5), 2)
    plan = plan_from_made(case, case.demand)
    best = Best(case, plan, 1e9)
    assert improve(best, Limits(60.0, cancelled=lambda: True).start()) == 0
    assert best.plan is plan


def test_best_takes_only_what_is_sound_and_cheaper() -> None:
    """A plan that breaks a rule or costs more is not taken."""
    case, plan = lot_for_lot(5)
    best = Best(case, plan, audit(case, plan).total)
    assert not best.take(plan)
    assert not best.take(plan_from_made(case, np.zeros_like(plan.made)))
    assert not best.take(None)
