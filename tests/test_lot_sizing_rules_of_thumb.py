"""Rules of thumb give the plans that textbooks print."""

import numpy as np
import pytest

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import plain_case
from ledgersolve.lot_sizing.plan import plan_from_made
from ledgersolve.lot_sizing.rules_of_thumb import (
    least_period_cost,
    lot_for_lot,
    net_needs,
    order_quantity,
    quantities,
)


@pytest.mark.parametrize(
    ("demand", "setup", "holding", "cost"),
    [
        # LS-03, Silver & Peterson: the rule finds the optimum
        ([10, 62, 12, 130, 154, 129, 88, 52, 124, 160, 238, 41], 54, 0.4, 501.20),
        # LS-04, Axsater, example 4.5
        ([50, 60, 90, 70, 30, 100, 60, 40, 80, 20], 300, 1, 1630),
        # LS-10 and LS-11, Nahmias (the second from memory)
        ([18, 30, 42, 5, 20], 80, 2, 310),
        ([10, 40, 30], 50, 1, 140),
    ],
)
def test_silver_meal_as_printed(demand, setup, holding, cost) -> None:
    """The Silver-Meal rule reaches the printed cost, not the optimum."""
    case = plain_case([demand], setup, holding)
    plan = plan_from_made(case, quantities(case, least_period_cost))
    checked = audit(case, plan)
    assert checked.ok
    assert checked.total == pytest.approx(cost)


@pytest.mark.parametrize(
    ("demand", "setup", "holding", "cost"),
    [([20, 50, 10, 50, 50, 10, 20, 40, 20, 30], 100, 1, 1000),
     ([10, 62, 12, 130, 154, 129, 88, 52, 124, 160, 238, 41], 54, 0.4, 648)],
)
def test_lot_for_lot_as_printed(demand, setup, holding, cost) -> None:
    """LS-02 (Hopp & Spearman) 1,000 and LS-03 (Silver & Peterson) 648."""
    case = plain_case([demand], setup, holding)
    assert audit(case, plan_from_made(case, quantities(case, lot_for_lot))).total == pytest.approx(cost)


def test_order_quantity_of_a_steady_need() -> None:
    """ECO-01, Heizer & Render (from memory): 1,000 a year, 10 an order, 0.50 a year to hold: 200."""
    assert order_quantity(np.full(1, 1000.0), 0, 10.0, 0.5) == 1000.0
    assert order_quantity(np.full(250, 4.0), 0, 10.0, 0.5 / 250) == pytest.approx(200)


def test_opening_stock_and_receipts_are_netted_before_any_rule() -> None:
    """30 in stock and 25 arriving leave 0, 5 and 40 to make."""
    receipts = np.array([[0.0, 25.0, 0.0]])
    case = plain_case([[20, 40, 40]], 10, 1, opening_stock=np.array([30.0]), receipts=receipts)
    assert net_needs(case).tolist() == [[0.0, 5.0, 40.0]]


@pytest.mark.parametrize("rule", [lot_for_lot, order_quantity, least_period_cost])
def test_least_lots_multiples_and_closed_periods_are_kept(rule) -> None:
    """A rule's plan keeps the item's own lot rules, so that only capacity can break it."""
    rng = np.random.default_rng(3)
    allowed = np.ones((4, 12), dtype=bool)
    allowed[:, [3, 7, 8]] = False
    case = plain_case(
        rng.integers(0, 50, (4, 12)), 100, 1, setup_allowed=allowed, safety_stock=np.array([0.0, 5, 0, 9]),
        least_lot=np.array([0.0, 30, 0, 40]), lot_multiple=np.array([0.0, 0, 12, 7]),
    )
    checked = audit(case, plan_from_made(case, quantities(case, rule)))
    assert [check.rule for check in checked.broken()] == []
