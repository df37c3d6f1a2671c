"""A plan without one of its lots, or with one in two setups: as brute force and the textbook model say."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.lot_moves import LotMoves
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.mip import Limits
from tests.lot_textbook import random_case, textbook_cost

LIMITS = Limits(seconds=30, gap=1e-6)


def moves(case: Case, plan: Plan) -> LotMoves:
    """The changes of a plan, with time enough."""
    return LotMoves(case, plan, LIMITS.start())


def with_plans(seed: int, features: frozenset[str], n: int, t: int, count: int) -> list[tuple[Case, Plan]]:
    """Random small cases that have a plan, with their best plans."""
    found = []
    for k in range(200):
        case = random_case(np.random.default_rng([seed, k]), n, t, features)
        plan = solve(case, LIMITS).plan
        if plan is not None and plan.setups > 1:
            found.append((case, plan))
        if len(found) == count:
            return found
    raise AssertionError("too few cases with a plan")


@pytest.mark.parametrize("features", [
    frozenset({"opening", "safety", "backlog"}), frozenset({"resource", "opening", "unit cost"}),
    frozenset({"resource", "overtime", "most lot", "receipts"}), frozenset({"resource", "lost", "most stock"}),
])
def test_doing_without_a_lot_costs_what_every_setup_pattern_says(features: frozenset[str]) -> None:
    """Between the best plan of any pattern of the other setups, and the best one that pays all of them.

    Both ends by the textbook model in another solver. A lot that no pattern can do without is told so.
    """
    tight = 0
    for case, plan in with_plans(5, features, 2, 5, 6):
        cost = audit(case, plan).total
        for k, t in zip(*np.nonzero(plan.setup), strict=True):
            allowed = plan.setup.copy()
            allowed[k, t] = False
            low = textbook_cost(replace(case, setup_allowed=allowed))
            free = replace(case, setup_allowed=allowed, setup_cost=np.zeros_like(case.setup_cost))
            paid = textbook_cost(free)
            found = moves(case, plan).without(int(k), int(t))
            assert (found is None) == (low is None)
            if found is None or low is None or paid is None:
                continue
            high = paid + float(case.setup_cost[allowed].sum())
            assert low - cost - 1e-6 <= found.extra <= high - cost + 1e-6
            tight += low == pytest.approx(high, abs=1e-6)
    assert tight >= 2  # with equal ends the figure is settled by brute force


@pytest.mark.parametrize("features", [frozenset({"resource", "setup time", "family", "use cost", "overtime"}),
                                      frozenset({"multiple", "resource"}), frozenset({"least lot", "resource"})])
def test_a_changed_plan_is_sound_and_its_figure_is_its_audit(features: frozenset[str]) -> None:
    """Whatever is shared: the plan without the lot, or with it split, keeps every rule at the cost told."""
    told = 0
    for case, plan in with_plans(6, features, 3, 5, 8):
        cost = audit(case, plan).total
        own = moves(case, plan)
        for k, t in zip(*np.nonzero(plan.setup), strict=True):
            without, split = own.without(int(k), int(t)), own.split(int(k), int(t))
            for change in (without, split):
                if change is None or change.plan is None:
                    continue
                told += 1
                checked = audit(case, change.plan)
                assert checked.ok
                assert checked.total - cost == pytest.approx(change.extra)
                assert change.extra >= -1e-4 * cost  # the plan is the best one
            if without is not None and without.plan is not None:
                assert not without.plan.setup[k, t]
            if split is not None and split.plan is not None and split.period is not None:
                assert split.plan.setup[k, t] and split.plan.setup[k, split.period]
                assert split.plan.setups == plan.setups + 1
    assert told >= 10


@pytest.mark.parametrize("features", [frozenset({"resource", "opening"}), frozenset({"unit cost", "safety"})])
def test_a_split_is_the_cheapest_of_all_periods_and_quantities(features: frozenset[str]) -> None:
    """Every later period before the next lot, every whole quantity, by audit: none costs less."""
    splits = 0
    for case, plan in with_plans(7, features, 2, 6, 10):
        case = replace(case, holding_cost=np.maximum(case.holding_cost, 0.5 + case.unit_cost.max()))
        plan = plan_from_made(case, np.round(plan.made))
        if not audit(case, plan).ok:
            continue
        for k, t in zip(*np.nonzero(plan.setup), strict=True):
            found = moves(case, plan).split(int(k), int(t))
            best = every_split(case, plan, int(k), int(t))
            assert (found is None) == (best is None)
            if found is not None and best is not None:
                splits += 1
                assert found.extra == pytest.approx(best - audit(case, plan).total, abs=1e-6)
    assert splits >= 8


def every_split(case: Case, plan: Plan, item: int, period: int) -> float | None:
    """Least cost of making a lot in two, over whole quantities and the periods before the item's next lot."""
    later = np.flatnonzero(plan.setup[item, period + 1:])
    until = period + 1 + int(later[0]) if later.size else case.t
    costs = []
    for s in range(period + 1, until):
        made = plan.made.copy()
        made[item, s], made[item, period] = made[item, period], 0.0
        if audit(case, plan_from_made(case, made)).ok:
            continue  # the whole lot may come later: nothing to split there
        for units in range(1, int(plan.made[item, period])):
            made = plan.made.copy()
            made[item, period] -= units
            made[item, s] += units
            checked = audit(case, plan_from_made(case, made))
            if checked.ok:
                costs.append(checked.total)
    return min(costs, default=None)


def test_dropping_the_only_member_saves_its_family_s_setup() -> None:
    """Lots 4 and 6, holding 1, setups 5 and family 3 each: the second lot dropped costs 6 - 5 - 3 = -2."""
    case = plain_case([[4, 6]], 5.0, 1.0, families=("F",), family_cost=np.array([3.0]), family_time=np.zeros(1),
                      family_resource=np.array([-1]), item_family=np.zeros(1, dtype=np.int64))
    found = moves(case, plan_from_made(case, [[4, 6]])).without(0, 1)
    assert found is not None
    assert found.extra == pytest.approx(-2)


def test_other_items_give_way_where_they_can() -> None:
    """A's lot of period 2 fits into period 1 only once B, made ahead there, moves to where it has a setup too."""
    line = {"resources": ("L",), "capacity": np.full((1, 2), 10.0), "overtime_limit": np.zeros(1),
            "overtime_cost": np.zeros(1), "use_cost": np.zeros(1), "item_resource": np.zeros(2, dtype=np.int64),
            "time_per_unit": np.ones(2)}
    case = plain_case([[3, 4], [2, 6]], 1.0, [[1.0, 1.0], [2.0, 2.0]], **line)
    plan = plan_from_made(case, [[3, 4], [6, 2]])
    assert audit(case, plan).ok
    found = moves(case, plan).without(0, 1)
    assert found is not None
    assert found.free == "sizes of all other lots free"
    # A holds 4 over one period and saves a setup; B, 4 ahead at 2 each, goes back to nothing ahead
    assert found.extra == pytest.approx(4 - 1 - 2 * 4)
