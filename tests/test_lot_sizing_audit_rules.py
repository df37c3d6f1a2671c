"""The audit of lot-sizing plans in small: costs of places and families, tolerances, and the words of checks."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.findings import Check
from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.plan import Plan

INF, NAN = np.inf, np.nan
LITTLE, ROUNDING = 1.2e-6, 0.9e-6
"""Just beyond the tolerance, and just within it."""

Change = dict[str, object]


def shared_case(**changes: object) -> Case:
    """Three items over two periods; a press, an oven; one family on the oven, one without a resource.

    The first item is on the press and in the oven's family, the second on the oven, the third on nothing.
    """
    case = plain_case(
        [[4, 0], [0, 3], [1, 1]], np.array([[10.0, 20], [30, 40], [50, 60]]), 1.0,
        unit_cost=np.array([[1.0, 2], [3, 4], [5, 6]]), item_resource=np.array([0, 1, -1]),
        time_per_unit=np.array([1.0, 2, 5]), setup_time=np.array([3.0, 4, 6]), item_family=np.array([0, 0, 1]),
        resources=("Press", "Oven"), capacity=np.array([[7.0, 20], [INF, 9]]),
        overtime_limit=np.array([0.0, 1.5]), overtime_cost=np.array([7.0, 9.0]), use_cost=np.array([11.0, 13]),
        families=("A", "B"), family_cost=np.array([50.0, 60]), family_time=np.array([0.5, 7]),
        family_resource=np.array([1, -1]),
    )
    return replace(case, **changes)


def shared_plan(**changes: object) -> Plan:
    """Everything made when it is wanted: 4 + 3 hours on the press, 0.5 and 6 + 4 + 0.5 in the oven."""
    made = np.array([[4.0, 0], [0, 3], [1, 1]])
    nothing = np.zeros((3, 2))
    plan = Plan(made, nothing, nothing, nothing, made > 0, np.array([[0.0, 0], [0, 1.5]]))
    return replace(plan, **changes)


def one_item(figures: list[float], **changes: object) -> Case:
    """One item, demand as given, nothing else."""
    return plain_case([figures], 10.0, 1.0, **changes)


def one_plan(made: list[float], stock: list[float], late: list[float] | None = None,
             lost: list[float] | None = None) -> Plan:
    """A plan of one item without resources."""
    rest = [0.0] * len(made)
    rows = [np.array([row]) for row in (made, stock, late or rest, lost or rest)]
    return Plan(*rows, rows[0] > 0, np.zeros((0, len(made))))


def broken(case: Case, plan: Plan) -> set[str]:
    """Names of the rules found broken."""
    return {check.rule for check in audit(case, plan).broken()}


def only(case: Case, plan: Plan) -> Check:
    """The one check that fails."""
    (check,) = audit(case, plan).broken()
    return check


def test_cost_of_places_and_families_by_hand() -> None:
    """Family A runs in both periods and so uses the oven in both; items and families without a place use none."""
    found = audit(shared_case(), shared_plan())
    assert [(part.name, part.amount) for part in found.parts] == [
        ("Setup cost", 10 + 40 + 50 + 60.0), ("Production cost", 4 + 12 + 5 + 6.0), ("Holding cost", 0.0),
        ("Backlog cost", 0.0), ("Lost sale cost", 0.0), ("Overtime cost", 9 * 1.5),
        ("Family setup cost", 2 * 50 + 2 * 60.0), ("Resource use cost", 11 + 2 * 13.0),
    ]
    assert found.ok, found.broken()
    assert found.total == 457.5


def test_a_cost_part_of_each_kind_takes_its_own_price() -> None:
    """2 in stock at 5, 3 late at 7, 1 lost at 11; an item without such a price pays none."""
    case = plain_case(
        [[3, 3], [3, 3]], 0.0, np.array([[5.0, 99], [99, 99]]), backlog_cost=np.array([7.0, NAN]),
        lost_cost=np.array([11.0, NAN]),
    )
    plan = Plan(
        np.zeros((2, 2)), np.array([[2.0, 0], [0, 0]]), np.array([[3.0, 0], [4, 0]]),
        np.array([[0.0, 1], [0, 1]]), np.zeros((2, 2), bool), np.zeros((0, 2)),
    )
    parts = {part.name: part.amount for part in audit(case, plan).parts}
    assert (parts["Holding cost"], parts["Backlog cost"], parts["Lost sale cost"]) == (10.0, 21.0, 11.0)


def test_every_rule_says_what_was_checked() -> None:
    """Where all holds each check names its rows, what is required, and for resources the fullest period."""
    found = audit(shared_case(), shared_plan()).checks
    own, holds, everything = "the item's own figure", "holds in every period", "all 3 items"
    assert [(c.rule, c.subject, c.required, c.got) for c in found] == [
        ("No negative quantity", everything, "0 or more", holds),
        ("Stock balance", everything, "stock follows from what comes and goes", holds),
        ("Setups", everything, "a setup exactly where something is made", holds),
        ("Safety stock", everything, own, holds), ("Closing stock", everything, own, holds),
        ("Most stock", everything, own, holds), ("Late only where allowed", everything, "0", holds),
        ("All met by the end", everything, "nothing late after the last period", holds),
        ("Lost sales within demand", everything, own, holds),
        ("Late no more than ordered", everything, own, holds),
        ("Setup allowed", everything, "nothing made", holds), ("Least lot", everything, own, holds),
        ("Most lot", everything, own, holds), ("Lot multiple", everything, own, holds),
        ("Capacity", "resource Press", "at most 7", "7 in period 1"),
        ("Overtime limit", "resource Press", "at most 0", "0 in period 1"),
        ("No negative overtime", "resource Press", "0 or more", "0 in period 1"),
        ("Capacity", "resource Oven", "at most 10.5", "10.5 in period 2"),
        ("Overtime limit", "resource Oven", "at most 1.5", "1.5 in period 2"),
        ("No negative overtime", "resource Oven", "0 or more", "0 in period 1"),
    ]
    assert {check.worst for check in found} == {0.0}


@pytest.mark.parametrize("fraction", [LITTLE, ROUNDING], ids=["just too much", "rounding"])
@pytest.mark.parametrize(
    ("rule", "worst", "change", "figures"),
    [
        ("Safety stock", 8.0, "safety_stock", 8.0), ("Closing stock", 8.0, "closing_stock", 8.0),
        ("Most stock", 8.0, "most_stock", 8.0), ("Least lot", 8.0, "least_lot", 8.0),
        ("Most lot", 8.0, "most_lot", 8.0), ("Lot multiple", 8.0, "lot_multiple", 8.0),
    ],
)
def test_a_limit_missed_by_a_little(
    fraction: float, rule: str, worst: float, change: str, figures: float
) -> None:
    """A little more than a millionth of the item's largest quantity breaks the one rule; less is forgiven."""
    case = one_item([0.0, 8, 0], opening_stock=np.array([8.0]))
    plan = one_plan([0.0, 8, 0], [8.0, 8, 8])
    away = figures * (1 - fraction if change.startswith("most") else 1 + fraction)
    found = audit(replace(case, **{change: np.array([away])}), plan)
    if fraction < LITTLE:
        assert found.ok, found.broken()
        return
    (check,) = found.broken()
    assert check.rule == rule
    assert check.worst == pytest.approx(worst * LITTLE, rel=1e-4)


@pytest.mark.parametrize("fraction", [LITTLE, ROUNDING], ids=["just too much", "rounding"])
@pytest.mark.parametrize(
    ("rule", "resource", "change"),
    [
        ("Capacity", "Press", lambda e: {"capacity": np.array([[7.0 - 20 * e, 20], [INF, 9]])}),
        ("Capacity", "Oven", lambda e: {"capacity": np.array([[7.0, 20], [INF, 9 - 9 * e]])}),
        ("Overtime limit", "Oven", lambda e: {"overtime_limit": np.array([0.0, 1.5 - 9 * e])}),
        ("Capacity", "Press", lambda e: {"setup_time": np.array([3.0 + 20 * e, 4, 6])}),
        ("Capacity", "Press", lambda e: {"time_per_unit": np.array([1.0 + 5 * e, 2, 5])}),
        ("Capacity", "Oven", lambda e: {"family_time": np.array([0.5 + 9 * e, 7])}),
    ],
)
def test_time_missed_by_a_little(fraction, rule, resource, change) -> None:
    """Time counts to a millionth of the resource's largest capacity, on the resource that lacks it."""
    found = audit(shared_case(**change(fraction)), shared_plan())
    expected = [(rule, f"resource {resource}")] if fraction == LITTLE else []
    assert [(check.rule, check.subject) for check in found.broken()] == expected
    if expected:
        assert found.broken()[0].worst == pytest.approx((20 if resource == "Press" else 9) * LITTLE, rel=1e-4)


def test_overtime_below_nothing() -> None:
    """Negative overtime is found even where it is not needed, and its period is named."""
    check = only(shared_case(), shared_plan(overtime=np.array([[0.0, -0.5], [0, 1.5]])))
    assert (check.rule, check.subject, check.required, check.got, check.worst) == (
        "No negative overtime", "resource Press", "0 or more", "-0.5 in period 2", 0.5)


def test_a_resource_without_any_limit_still_keeps_its_overtime() -> None:
    """Unlimited time is never short; overtime on it counts to the billionth of an hour."""
    case = shared_case(capacity=np.full((2, 2), INF))
    assert audit(case, shared_plan()).ok
    over = shared_plan(overtime=np.array([[0.0, 0], [0, 1.5 + 1e-8]]))
    assert broken(case, over) == {"Overtime limit"}
    assert audit(case, shared_plan(overtime=np.array([[0.0, 0], [0, 1.5 + 1e-10]]))).ok


@pytest.mark.parametrize("overtime", [1e-8, 1e-10])
def test_no_time_at_all_is_kept_to_the_billionth(overtime: float) -> None:
    """A resource with capacity 0 everywhere forgives a billionth of an hour, not a hundred-millionth."""
    case = shared_case(capacity=np.zeros((2, 2)), overtime_limit=np.array([7.0, 10.5]))
    plan = shared_plan(overtime=np.array([[7.0 - overtime, 0], [0.5, 10.5]]))
    assert broken(case, plan) == ({"Capacity"} if overtime > 1e-9 else set())


@pytest.mark.parametrize("name", ["made", "stock", "late", "lost"])
def test_each_quantity_is_nowhere_negative(name: str) -> None:
    """A quantity below 0 by a little is found in whichever table it stands, with item and period."""
    case = one_item([8.0, 8], backlog_cost=np.ones(1), lost_cost=np.ones(1))
    plan = one_plan([16.0, 0], [8.0, 0])
    wrong = getattr(plan, name).copy()
    wrong[0, 1] = -0.00024
    check = next(c for c in audit(case, replace(plan, **{name: wrong})).broken() if c.rule.startswith("No neg"))
    assert (check.subject, check.required, check.got) == ("item I1, period 2", "0 or more", "-0.00024")
    assert check.worst == pytest.approx(0.00024)


def test_the_balance_counts_every_flow() -> None:
    """Opening 5, receipts 2 and 1, made 10, demand 9 and 7, lost 1, late 2: stock 8 less nothing, then 1 less 0.

    By hand: 5 + 2 + 10 - 9 = 8 and 8 + 1 - 7 + 1 = 3; with 2 late there must be 5 in stock.
    """
    case = one_item(
        [9.0, 7, 2], opening_stock=np.array([5.0]), receipts=np.array([[2.0, 1, 0]]), lost_cost=np.ones(1),
        backlog_cost=np.ones(1),
    )
    plan = one_plan([10.0, 0, 0], [8.0, 5, 1], [0.0, 2, 0], [0.0, 1, 0])
    assert audit(case, plan).ok
    for place, amount in ((0, 1e-4), (1, -1e-4), (2, 1e-4)):
        stock = plan.stock.copy()
        stock[0, place] += amount
        check = only(case, replace(plan, stock=stock))
        assert (check.rule, check.subject) == ("Stock balance", f"item I1, period {place + 1}")
        assert float(check.got) == pytest.approx(amount, rel=1e-6)


@pytest.mark.parametrize("quantity", [1.0, 1e6, 1e9])
@pytest.mark.parametrize("place", [0, 1])
def test_a_setup_that_does_not_go_with_the_quantities(quantity: float, place: int) -> None:
    """A setup without a lot, or a lot without one, is found however large the item's quantities are."""
    plan = one_plan([2 * quantity, 0], [quantity, 0])
    setup = plan.setup.copy()
    setup[0, place] = not setup[0, place]
    check = only(one_item([quantity, quantity]), replace(plan, setup=setup))
    assert (check.rule, check.subject) == ("Setups", f"item I1, period {place + 1}")
    assert check.required == "a setup exactly where something is made"


@pytest.mark.parametrize("large", ["opening_stock", "safety_stock", "closing_stock", "demand", "receipts", "made"])
def test_the_tolerance_goes_by_the_items_largest_quantity(large: str) -> None:
    """An excess of 0.5 over the most lot is rounding only beside a quantity of a million of the same item."""
    def excess_found(size: float) -> bool:
        figures = np.array([[0.0, size]]) if large in ("demand", "receipts") else np.array([size])
        changes = {} if large == "made" else {large: figures}
        case = replace(one_item([0.0, 0], most_stock=np.array([1.0])), **changes)
        made = [size if large == "made" else 0.0, 0]
        return "Most stock" in broken(case, one_plan(made, [1.5, 0]))

    assert excess_found(1e5)
    assert not excess_found(1e6)


def test_the_tolerance_is_the_items_own() -> None:
    """A large item beside it makes a small one no laxer, and the worse of two is named by its own size."""
    case = plain_case([[1e9, 0], [1, 0]], 0.0, 0.0, most_lot=np.array([1e9 - 10, 0.9]))
    plan = Plan(np.array([[1e9, 0], [1.0, 0]]), *(np.zeros((2, 2)) for _ in range(3)),
                np.array([[True, False]] * 2), np.zeros((0, 2)))
    check = only(case, plan)
    assert (check.rule, check.subject, check.required, check.got) == ("Most lot", "item I2, period 1", "0.9", "1")
    assert check.worst == pytest.approx(0.1)


def test_an_item_with_no_quantity_at_all_is_measured_in_units() -> None:
    """Where nothing is wanted and made, a millionth of a unit is the tolerance."""
    case = one_item([0.0, 0], most_stock=np.zeros(1), opening_stock=np.zeros(1))
    assert "Most stock" in broken(case, one_plan([0.0, 0], [LITTLE, 0]))
    assert audit(case, one_plan([0.0, 0], [ROUNDING, 0])).ok


def test_a_small_item_is_measured_by_its_own_quantity() -> None:
    """Half a unit wanted: the tolerance is a millionth of that half."""
    case = one_item([0.5, 0], most_stock=np.zeros(1))
    assert "Most stock" in broken(case, one_plan([0.5, 0], [LITTLE / 2, 0]))
    assert audit(case, one_plan([0.5, 0], [ROUNDING / 2, 0])).ok


def test_closing_stock_and_late_orders_look_at_the_last_period_only() -> None:
    """Nothing in stock before the last period keeps a closing stock; late in the last of three is named so."""
    closing = one_item([1.0, 1, 1], closing_stock=np.array([5.0]))
    assert audit(closing, one_plan([1.0, 1, 6], [0.0, 0, 5])).ok
    waiting = one_item([1.0, 1, 1], backlog_cost=np.ones(1))
    check = only(waiting, one_plan([1.0, 1, 0], [0.0, 0, 0], [0.0, 0, 1]))
    assert (check.rule, check.subject) == ("All met by the end", "item I1, period 3")


def test_stock_limits_hold_in_their_own_periods() -> None:
    """Safety stock binds before the last period, closing stock in it, most stock in all; figures are named."""
    case = one_item([2.0, 2, 2], opening_stock=np.array([9.0]))
    plan = one_plan([0.0, 0, 0], [7.0, 5, 3])
    assert audit(replace(case, safety_stock=np.array([5.0]), closing_stock=np.array([3.0])), plan).ok
    safety = only(replace(case, safety_stock=np.array([6.0])), plan)
    closing = only(replace(case, closing_stock=np.array([4.0])), plan)
    most = only(replace(case, most_stock=np.array([6.0])), plan)
    said = [(c.rule, c.subject, c.required, c.got, c.worst) for c in (safety, closing, most)]
    assert said == [
        ("Safety stock", "item I1, period 2", "6", "5", 1.0),
        ("Closing stock", "item I1, period 3", "4", "3", 1.0),
        ("Most stock", "item I1, period 1", "6", "7", 1.0),
    ]


def test_late_orders_are_served_by_the_end_and_where_allowed() -> None:
    """Late in the last period, or without a price for it, is wrong by what is late."""
    case = one_item([4.0, 4], backlog_cost=np.ones(1))
    waiting = one_plan([0.0, 8], [0.0, 0], [4.0, 0])
    assert audit(case, waiting).ok
    never = only(one_item([4.0, 4]), waiting)
    assert (never.rule, never.subject, never.required, never.got, never.worst) == (
        "Late only where allowed", "item I1, period 1", "0", "4", 4.0)
    at_end = only(case, one_plan([4.0, 2], [0.0, 0], [0.0, 2]))
    assert (at_end.rule, at_end.subject, at_end.got, at_end.worst) == (
        "All met by the end", "item I1, period 2", "2", 2.0)


def test_late_is_at_most_what_was_ordered_and_not_lost() -> None:
    """Ordered 4, of which 1 is lost, and 3 were late before: at most 3, then 3 + 4 may be late."""
    case = one_item([4.0, 4, 0], backlog_cost=np.ones(1), lost_cost=np.ones(1))
    assert audit(case, one_plan([0.0, 0, 7], [0.0, 0, 0], [3.0, 7, 0], [1.0, 0, 0])).ok
    first = only(case, one_plan([0.0, 0, 7], [0.5, 0, 0], [3.5, 7, 0], [1.0, 0, 0]))
    second = only(case, one_plan([0.0, 0, 7], [0.0, 0.5, 0], [3.0, 7.5, 0], [1.0, 0, 0]))
    assert [(c.rule, c.subject, c.required, c.got) for c in (first, second)] == [
        ("Late no more than ordered", "item I1, period 1", "3", "3.5"),
        ("Late no more than ordered", "item I1, period 2", "7", "7.5"),
    ]


def test_lost_sales_are_at_most_the_periods_demand() -> None:
    """All of a period's demand may be lost at a price, more may not, and nothing without a price."""
    case = one_item([4.0, 2], lost_cost=np.ones(1))
    assert audit(case, one_plan([0.0, 0], [0.0, 0], None, [4.0, 2])).ok
    check = only(one_item([4.0, 2]), one_plan([4.0, 0], [0.0, 0], None, [0.0, 2]))
    assert (check.rule, check.subject, check.required, check.got, check.worst) == (
        "Lost sales within demand", "item I1, period 2", "0", "2", 2.0)
    more = one_plan([4.0, 0], [1.0, 0], None, [1.0, 1])
    assert broken(replace(case, demand=np.array([[4.0, 2]])), more) == set()
    assert "Lost sales within demand" in broken(case, one_plan([4.0, 0], [0.0, 0.5], None, [0.0, 2.5]))


def test_lots_keep_their_limits_where_something_is_made() -> None:
    """Least lot, most lot, multiples and allowed periods bind lots only; item, period and figures are named."""
    case = one_item([0.0, 6], lot_multiple=np.array([3.0]), least_lot=np.array([6.0]), most_lot=np.array([6.0]))
    plan = one_plan([6.0, 0], [6.0, 0])
    assert audit(case, plan).ok
    wrong = [
        only(replace(case, least_lot=np.array([7.0]), most_lot=np.array([7.0])), plan),
        only(replace(case, most_lot=np.array([5.0])), plan),
        only(replace(case, lot_multiple=np.array([4.0])), plan),
        only(replace(case, setup_allowed=np.array([[False, True]])), plan),
    ]
    assert [(c.rule, c.subject, c.required, c.got, c.worst) for c in wrong] == [
        ("Least lot", "item I1, period 1", "7", "6", 1.0), ("Most lot", "item I1, period 1", "5", "6", 1.0),
        ("Lot multiple", "item I1, period 1", "4", "6", 2.0),
        ("Setup allowed", "item I1, period 1", "nothing made", "6", 6.0),
    ]
    assert audit(replace(case, lot_multiple=np.array([0.5])), plan).ok


def test_without_a_multiple_any_lot_will_do() -> None:
    """A lot that is no whole number is right where no multiple is asked for."""
    assert audit(one_item([2.5]), one_plan([2.5], [0.0])).ok
    assert audit(one_item([2.5], lot_multiple=np.array([0.5])), one_plan([2.5], [0.0])).ok


def test_a_lot_of_half_a_unit_is_a_lot() -> None:
    """However small, what is made is set up, paid, timed and uses its resource and its family."""
    made = np.array([[0.5, 0], [0, 0], [0, 0]])
    case = shared_case(demand=made, capacity=np.array([[3.5, 20], [INF, 9]]), least_lot=np.array([0.5, 0, 0]))
    plan = shared_plan(made=made, setup=made > 0, overtime=np.zeros((2, 2)))
    found = audit(case, plan)
    assert found.ok, found.broken()
    assert found.total == 10 + 0.5 + 50 + 11 + 13
    assert broken(replace(case, least_lot=np.array([0.75, 0, 0])), plan) == {"Least lot"}
    assert broken(replace(case, lot_multiple=np.array([0.375, 0, 0])), plan) == {"Lot multiple"}
    assert broken(replace(case, capacity=np.array([[3.4, 20], [INF, 9]])), plan) == {"Capacity"}


def test_room_to_spare_is_not_told_as_an_amount() -> None:
    """Where time is left the rule is broken by 0, and the period with the least left is named."""
    found = audit(shared_case(capacity=np.array([[9.0, 20], [INF, 12]])), shared_plan()).checks
    said = [(c.subject, c.required, c.got, c.worst) for c in found if c.rule == "Capacity"]
    assert said == [
        ("resource Press", "at most 9", "7 in period 1", 0.0),
        ("resource Oven", "at most 13.5", "10.5 in period 2", 0.0),
    ]


def test_a_multiple_is_missed_from_above_and_below() -> None:
    """A lot of 7 or of 8 is 1 away from threes, whichever is nearer."""
    for lot in (7.0, 8.0):
        check = only(one_item([lot], lot_multiple=np.array([3.0])), one_plan([lot], [0.0]))
        assert (check.rule, check.worst) == ("Lot multiple", 1.0)


@pytest.mark.parametrize("name", ["made", "stock", "late", "lost", "overtime"])
@pytest.mark.parametrize("figure", [NAN, INF])
def test_a_figure_that_is_no_number_is_the_one_check(name: str, figure: float) -> None:
    """Nothing else can be checked then, so nothing else is said to hold."""
    wrong = getattr(shared_plan(), name).copy()
    wrong[1, 1] = figure
    found = audit(shared_case(), shared_plan(**{name: wrong}))
    assert [(c.rule, c.subject, c.required, c.got, c.worst, c.ok) for c in found.checks] == [
        ("Figures", name, "numbers", "a figure that is not a number", INF, False)]


@pytest.mark.parametrize("name", ["made", "stock", "late", "lost", "setup", "overtime"])
def test_every_table_has_the_shape_of_the_case(name: str) -> None:
    """A table with a period too few is refused by name."""
    cut = getattr(shared_plan(), name)[:, :1]
    with pytest.raises(ValueError, match=f"^{name} has shape"):
        audit(shared_case(), shared_plan(**{name: cut}))


def test_a_case_without_items_or_periods_holds() -> None:
    """Nothing to plan: every rule holds, and the checks say that there was nothing to look at."""
    no_items = plain_case(np.zeros((0, 2)), np.zeros((0, 2)), np.zeros((0, 2)))
    nothing = np.zeros((0, 2))
    found = audit(no_items, Plan(nothing, nothing, nothing, nothing, nothing > 0, nothing))
    assert found.ok and found.total == 0.0
    assert {(c.subject, c.required, c.got, c.worst) for c in found.checks} == {("no items", "-", "-", 0.0)}
    no_periods = plain_case(
        np.zeros((1, 0)), 0.0, 0.0, resources=("Press",), capacity=np.zeros((1, 0)), overtime_limit=np.zeros(1),
        overtime_cost=np.zeros(1), use_cost=np.zeros(1),
    )
    empty = np.zeros((1, 0))
    found = audit(no_periods, Plan(empty, empty, empty, empty, empty > 0, empty))
    assert found.ok and found.total == 0.0
    assert [(c.rule, c.required, c.got, c.worst) for c in found.checks if c.subject == "resource Press"] == [
        (rule, "-", "-", 0.0) for rule in ("Capacity", "Overtime limit", "No negative overtime")]
