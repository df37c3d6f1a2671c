"""The audit of lot-sizing plans: costs by hand, and every rule broken on purpose."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.plan import Plan, plan_from_made


def rich_case() -> Case:
    """Two items, four periods, one press with overtime and use cost, one family with a setup on it."""
    return plain_case(
        [[10, 0, 20, 10], [5, 5, 5, 5]], [[100], [40]], [[1], [2]],
        unit_cost=np.array([[3.0, 3, 3, 4], [1, 1, 1, 1]]),
        opening_stock=np.array([4.0, 2.0]), safety_stock=np.array([0.0, 1.0]),
        closing_stock=np.array([2.0, 1.0]), most_stock=np.array([40.0, 30.0]),
        least_lot=np.array([5.0, 0.0]), most_lot=np.array([50.0, np.inf]), lot_multiple=np.array([0.0, 2.0]),
        backlog_cost=np.array([6.0, np.nan]), lost_cost=np.array([np.nan, 9.0]),
        receipts=np.array([[0.0, 0, 6, 0], [0, 0, 0, 0]]),
        setup_allowed=np.array([[True, True, True, False], [True] * 4]),
        item_resource=np.zeros(2, dtype=np.int64), time_per_unit=np.array([1.0, 2.0]),
        setup_time=np.array([3.0, 1.0]), item_family=np.array([0, 0]), resources=("Press",),
        capacity=np.array([[30.0, 20.0, 40.0, 20.0]]), overtime_limit=np.array([10.0]),
        overtime_cost=np.array([7.0]), use_cost=np.array([11.0]), families=("Steel",),
        family_cost=np.array([50.0]), family_time=np.array([4.0]), family_resource=np.array([0]),
    )


def rich_plan() -> Plan:
    """By hand: item 1 is 6 late in periods 1 and 2, then 6 + 32 - 20 - 6 = 12 stay; item 2 loses 1 in period 2.

    Time in period 3: 32 + 3 and 2 x 12 + 1 and 4 for the family make 64, which is 40 and 24 overtime.
    """
    return Plan(
        made=np.array([[0.0, 0, 32, 0], [8.0, 0, 12, 0]]),
        stock=np.array([[0.0, 0, 12, 2], [5.0, 1, 8, 3]]),
        late=np.array([[6.0, 6, 0, 0], [0, 0, 0, 0]]),
        lost=np.array([[0.0, 0, 0, 0], [0, 1, 0, 0]]),
        setup=np.array([[False, False, True, False], [True, False, True, False]]),
        overtime=np.array([[0.0, 0, 24, 0]]),
    )


def broken(case: Case, plan: Plan) -> set[str]:
    """Names of the rules that the audit finds broken."""
    return {check.rule for check in audit(case, plan).broken()}


def good() -> tuple[Case, Plan]:
    """The rich case with an overtime limit under which the rich plan keeps every rule."""
    return replace(rich_case(), overtime_limit=np.array([30.0])), rich_plan()


def test_cost_parts_by_hand() -> None:
    """Every part of the cost comes out as written down by hand."""
    parts = {part.name: part.amount for part in audit(*good()).parts}
    assert parts == pytest.approx({
        "Setup cost": 100 + 2 * 40, "Production cost": 3 * 32 + 20, "Holding cost": 14 + 2 * 17,
        "Backlog cost": 6 * 12, "Lost sale cost": 9, "Overtime cost": 7 * 24, "Family setup cost": 2 * 50,
        "Resource use cost": 2 * 11,
    })
    assert audit(*good()).total == pytest.approx(sum(parts.values()))


def test_a_good_plan_keeps_every_rule() -> None:
    """The plan written down by hand passes: capacity 40 + 24 overtime in period 3 is exactly used."""
    checked = audit(*good())
    assert checked.ok, checked.broken()
    capacity = next(check for check in checked.checks if check.rule == "Capacity")
    assert capacity.subject == "resource Press"


@pytest.mark.parametrize(
    ("rule", "changes"),
    [
        ("Capacity", {"capacity": np.array([[30.0, 20.0, 39.9, 20.0]])}),
        ("Overtime limit", {"overtime_limit": np.array([23.9])}),
        ("Capacity", {"family_time": np.array([4.1])}),
        ("Safety stock", {"safety_stock": np.array([0.0, 1.1])}),
        ("Closing stock", {"closing_stock": np.array([2.1, 1.0])}),
        ("Most stock", {"most_stock": np.array([11.9, 30.0])}),
        ("Least lot", {"least_lot": np.array([32.1, 0.0])}),
        ("Most lot", {"most_lot": np.array([31.9, np.inf])}),
        ("Lot multiple", {"lot_multiple": np.array([0.0, 8.0])}),
        ("Setup allowed", {"setup_allowed": np.array([[True, True, False, True], [True] * 4])}),
        ("Late only where allowed", {"backlog_cost": np.full(2, np.nan)}),
        ("Lost sales within demand", {"lost_cost": np.full(2, np.nan)}),
        ("Stock balance", {"demand": np.array([[10.0, 0, 20, 10], [5, 5, 5, 4.9]])}),
        ("Stock balance", {"opening_stock": np.array([4.1, 2.0])}),
        ("Stock balance", {"receipts": np.zeros((2, 4))}),
    ],
)
def test_a_rule_of_the_case_that_does_not_hold_is_named(rule: str, changes: dict[str, np.ndarray]) -> None:
    """Each rule of the workbook is checked: changed by a little, it is the one rule found broken."""
    case, plan = good()
    assert broken(replace(case, **changes), plan) == {rule}


@pytest.mark.parametrize(
    ("rules", "field", "place", "figure"),
    [
        ({"Stock balance", "Setups", "Setup allowed"}, "made", (0, 3), 5.0),
        ({"Setups"}, "setup", (0, 0), True),
        ({"Stock balance", "No negative quantity", "Safety stock"}, "stock", (0, 0), -1.0),
        ({"Stock balance", "All met by the end"}, "late", (0, 3), 1.0),
        ({"Stock balance", "Lost sales within demand", "Late no more than ordered"}, "lost", (1, 1), 6.0),
        ({"Capacity", "No negative overtime"}, "overtime", (0, 2), -1.0),
    ],
)
def test_a_figure_of_the_plan_that_is_wrong_is_found(rules, field, place, figure) -> None:
    """A single wrong figure in the plan breaks the rules that concern it."""
    case, plan = good()
    array = getattr(plan, field).copy()
    array[place] = figure
    assert broken(case, replace(plan, **{field: array})) == rules


def test_stock_cannot_be_made_from_late_orders() -> None:
    """Being late on orders that do not exist does not count as stock: late is at most what was ordered."""
    case = plain_case([[0, 10]], 10.0, 1.0, safety_stock=np.array([5.0]), closing_stock=np.array([0.0]),
                      backlog_cost=np.array([1.0]))
    plan = Plan(
        np.array([[0.0, 10.0]]), np.array([[5.0, 0.0]]), np.array([[5.0, 0.0]]), np.zeros((1, 2)),
        np.array([[False, True]]), np.zeros((0, 2)),
    )
    assert broken(case, plan) == {"Late no more than ordered"}


def test_figures_that_are_no_numbers_fail() -> None:
    """A plan that holds NaN is never right, and the audit does not stumble over it."""
    case, plan = good()
    made = plan.made.copy()
    made[1, 1] = np.nan
    checked = audit(case, replace(plan, made=made))
    assert not checked.ok
    assert checked.broken()[0].rule == "Figures"


def test_shapes_are_checked() -> None:
    """A plan of another case is refused."""
    case, plan = good()
    with pytest.raises(ValueError, match="late has shape"):
        audit(case, replace(plan, late=np.zeros((2, 3))))
    with pytest.raises(ValueError, match="overtime has shape"):
        audit(case, replace(plan, overtime=np.zeros((2, 4))))


def test_rounding_is_forgiven_and_more_is_not() -> None:
    """Differences of a billionth of the item's size pass; a thousandth does not."""
    case = plain_case([[1000.0, 1000.0]], 10.0, 1.0)
    plan = plan_from_made(case, [[2000.0, 0.0]])
    stock = plan.stock.copy()
    stock[0, 0] += 1e-6
    assert audit(case, replace(plan, stock=stock)).ok
    stock[0, 0] += 1.0
    assert not audit(case, replace(plan, stock=stock)).ok
