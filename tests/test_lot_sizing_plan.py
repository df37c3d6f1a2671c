"""Completing quantities to a plan: stock, late, lost and overtime as cheap as the rules allow."""

import numpy as np
import pytest
from scipy.optimize import linprog

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.groups import part
from ledgersolve.lot_sizing.plan import family_setups, plan_from_made, resource_need
from tests.lot_textbook import random_case

SERVICE = frozenset({"opening", "receipts", "safety", "closing", "backlog", "lost", "most stock"})


def service_cost(case: Case, made: np.ndarray) -> float | None:
    """Least cost of stock, late and lost of one item for given quantities, by scipy's linear programming."""
    t = case.t
    waits, loses = not np.isnan(case.backlog_cost[0]), not np.isnan(case.lost_cost[0])
    cost = np.concatenate([
        case.holding_cost[0], np.full(t, case.backlog_cost[0] if waits else 0.0),
        np.full(t, case.lost_cost[0] if loses else 0.0),
    ])
    step = np.eye(t) - np.eye(t, k=-1)
    balance = np.hstack([step, -step, -np.eye(t)])
    rest = case.receipts[0] + made - case.demand[0]
    rest[0] += case.opening_stock[0]
    ordered = np.hstack([np.zeros((t, t)), step, np.eye(t)])
    least = case.least_stock()[0]
    bounds = [(low, max(low, case.most_stock[0])) for low in least]
    bounds += [(0, None if waits and p < t - 1 else 0) for p in range(t)]
    bounds += [(0, d if loses else 0) for d in case.demand[0]]
    answer = linprog(cost, A_ub=ordered, b_ub=case.demand[0], A_eq=balance, b_eq=rest, bounds=bounds)
    return float(answer.fun) if answer.status == 0 else None


@pytest.mark.parametrize("seed", range(80))
def test_service_is_the_cheapest_for_the_quantities(seed: int) -> None:
    """Where the quantities allow a plan, it costs what a linear programme written apart says."""
    rng = np.random.default_rng(seed)
    features = frozenset(name for name in sorted(SERVICE) if rng.random() < 0.6)
    case = random_case(rng, 1, 6, features)
    made = rng.integers(0, 12, 6) * (rng.random(6) < 0.6) * 1.0
    least = service_cost(case, made)
    checked = audit(case, plan_from_made(case, [made]))
    assert checked.ok == (least is not None)
    if least is not None:
        service = {p.name: p.amount for p in checked.parts}
        total = service["Holding cost"] + service["Backlog cost"] + service["Lost sale cost"]
        assert total == pytest.approx(least, abs=1e-6)


def test_many_items_come_out_as_each_alone() -> None:
    """Items with both late and lost demand are treated in batches; a batch does not mix them up."""
    rng = np.random.default_rng(5)
    case = random_case(rng, 40, 8, frozenset({"opening", "backlog", "lost"}))
    made = rng.integers(0, 9, (40, 8)) * 1.0
    together = plan_from_made(case, made)
    total = 0.0
    for item in range(40):
        alone = part(case, np.array([item])).case
        total += audit(alone, plan_from_made(alone, made[[item]])).total
    assert audit(case, together).total == pytest.approx(total)


def test_losing_is_as_late_and_as_little_as_can_be() -> None:
    """Demand is lost only where stock cannot last, in the period in which it runs out."""
    case = plain_case([[4, 4, 4]], 1.0, 1.0, lost_cost=np.array([5.0]), opening_stock=np.array([9.0]))
    plan = plan_from_made(case, np.zeros((1, 3)))
    assert plan.lost[0] == pytest.approx([0, 0, 3])
    assert plan.stock[0] == pytest.approx([5, 1, 0])


def test_losing_early_where_only_that_saves_later_stock() -> None:
    """Closing stock can force an earlier loss: the loss moves forward only as far as it must."""
    case = plain_case([[4, 4, 1]], 1.0, 1.0, lost_cost=np.array([5.0]), opening_stock=np.array([9.0]),
                      closing_stock=np.array([3.0]))
    plan = plan_from_made(case, np.zeros((1, 3)))
    assert plan.lost[0] == pytest.approx([0, 2, 1])
    assert audit(case, plan).ok


def test_too_little_is_shown_not_hidden() -> None:
    """Quantities that do not cover the demand leave negative stock, which the audit names."""
    case = plain_case([[10, 10]], 1.0, 1.0)
    plan = plan_from_made(case, [[10.0, 4.0]])
    assert plan.stock[0] == pytest.approx([0, -6])
    assert {c.rule for c in audit(case, plan).broken()} >= {"No negative quantity"}


def test_overtime_is_what_the_quantities_need_up_to_the_limit() -> None:
    """Overtime fills capacity up to its limit; what is beyond stays a broken capacity."""
    case = plain_case(
        [[10, 30, 40]], 1.0, 1.0, resources=("M",), capacity=np.array([[20.0, 20, 20]]),
        overtime_limit=np.array([12.0]), overtime_cost=np.array([2.0]), use_cost=np.zeros(1),
        item_resource=np.zeros(1, dtype=np.int64), time_per_unit=np.ones(1), setup_time=np.array([1.0]),
    )
    plan = plan_from_made(case, [[10.0, 30.0, 40.0]])
    assert plan.overtime[0] == pytest.approx([0, 11, 12])
    assert {c.rule for c in audit(case, plan).broken()} == {"Capacity"}
    given = plan_from_made(case, [[10.0, 30.0, 40.0]], [[1.0, 11.0, 12.0]])
    assert given.overtime[0] == pytest.approx([1, 11, 12])


def test_time_of_families_counts_once_a_period() -> None:
    """A family's setup time loads its resource once in each period in which any member is made."""
    case = plain_case(
        [[1, 1], [1, 1], [1, 1]], 1.0, 1.0, resources=("A", "B"), capacity=np.full((2, 2), 99.0),
        overtime_limit=np.zeros(2), overtime_cost=np.zeros(2), use_cost=np.zeros(2),
        item_resource=np.array([0, 0, -1]), time_per_unit=np.array([2.0, 3.0, 5.0]),
        setup_time=np.array([1.0, 1.0, 1.0]), item_family=np.array([0, 0, 0]), families=("F",),
        family_cost=np.zeros(1), family_time=np.array([10.0]), family_resource=np.array([1]),
    )
    made = np.array([[2.0, 0], [1.0, 0], [0, 4.0]])
    assert family_setups(case, made > 0).tolist() == [[True, True]]
    assert resource_need(case, made).tolist() == [[2 * 2 + 1 + 3 + 1, 0], [10, 10]]
