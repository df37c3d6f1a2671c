"""Answers about a lot plan agree with plans made by hand and with re-solving."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.against_rules import against_rules
from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.firmness import LEVERS, how_firm, moved
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.questions import answer_questions
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.lot_sizing.why_lots import why_this_lot
from ledgersolve.mip import Limits, Solved, Verdict

LIMITS = Limits(seconds=60)
# Wagner & Whitin (1958), worked example: 864, lots in 1, 3, 5, 8, 10 and 11
WW = plain_case(
    [[69, 29, 36, 61, 61, 26, 34, 67, 45, 67, 79, 56]],
    np.array([[85, 102, 102, 101, 98, 114, 105, 86, 119, 110, 98, 114]]), 1,
)


def on_one_line(capacity: float, seed: int = 4, n: int = 3, t: int = 6) -> Case:
    """Items that share one line."""
    rng = np.random.default_rng(seed)
    return plain_case(
        rng.integers(5, 25, (n, t)), rng.integers(40, 90, (n, 1)) * np.ones((1, t)), 1.0,
        resources=("line",), capacity=np.full((1, t), capacity), overtime_limit=np.zeros(1),
        overtime_cost=np.zeros(1), use_cost=np.zeros(1), item_resource=np.zeros(n, dtype=np.int64),
        time_per_unit=np.ones(n),
    )


def planned(case: Case) -> Solved[Plan]:
    """The best plan of a case that has one."""
    solved = solve(case, LIMITS)
    assert solved.verdict is Verdict.PROVEN_BEST
    return solved


def by_hand(demand: list[float], setup: list[float], lots: list[int]) -> float:
    """Cost of one item made in these periods, each demand from the last lot before it, holding 1."""
    cost = sum(setup[t] for t in lots)
    for t, wanted in enumerate(demand):
        made = max(lot for lot in lots if lot <= t)
        cost += (t - made) * wanted
    return cost


def test_the_cost_of_doing_without_a_lot() -> None:
    """Each lot of the Wagner-Whitin plan: the next lot before it takes it over, at the cost by hand."""
    solved = planned(WW)
    answer = why_this_lot(WW, solved.plan, LIMITS.start())
    demand, setup = WW.demand[0].tolist(), WW.setup_cost[0].tolist()
    lots = np.flatnonzero(solved.plan.setup[0]).tolist()
    assert lots == [0, 2, 4, 7, 9, 10]
    told = {int(row[1]) - 1: row[5] for row in answer.rows}
    assert told.pop(0) is None  # nothing before it can take it over
    for lot, extra in told.items():
        assert extra == pytest.approx(by_hand(demand, setup, [x for x in lots if x != lot]) - 864)


def test_a_lot_made_in_two_costs_a_setup_and_saves_stock() -> None:
    """Each lot of the Wagner-Whitin plan over two periods or more: the cheapest later second lot, by hand."""
    solved = planned(WW)
    demand, setup = WW.demand[0].tolist(), WW.setup_cost[0].tolist()
    lots = np.flatnonzero(solved.plan.setup[0]).tolist()
    ends = dict(zip(lots, [*lots[1:], 12], strict=True))
    for row in why_this_lot(WW, solved.plan, LIMITS.start()).rows:
        lot = int(row[1]) - 1
        ways = {by_hand(demand, setup, sorted([*lots, s])) - 864: s for s in range(lot + 1, ends[lot])}
        if not ways:
            assert (row[7], row[8]) == (None, "one period only")
            continue
        assert row[7] == pytest.approx(min(ways))
        assert row[8] == WW.periods[ways[min(ways)]]


def test_items_whose_lots_hardly_matter_are_named() -> None:
    """Two lots whose setup is worth a cent more than the stock it saves hardly matter; dear stock does."""
    case = plain_case([[10, 10], [10, 10]], [[9.99, 9.99], [1, 1]], 1.0)
    answer = why_this_lot(case, planned(case).plan, LIMITS.start())
    assert "Lots of I1 hardly matter" in answer.words


def test_a_plan_that_is_not_the_best_is_told_what_a_dropped_lot_saves() -> None:
    """A needless second setup of 8 against 3 of stock: the words say that 5 could be saved, and where."""
    case = plain_case([[10, 3]], 8.0, 1.0)
    answer = why_this_lot(case, plan_from_made(case, [[10, 3]]), LIMITS.start())
    assert "5.00\u00a0EUR less without the lot of I1 in 2: it is not yet the best" in answer.words
    assert answer.rows[0][5] == pytest.approx(-5)


def test_a_lot_says_what_it_covers() -> None:
    """The lot of period 3 covers 3 and 4, the one of period 10 itself."""
    answer = why_this_lot(WW, planned(WW).plan, LIMITS.start())
    covers = {row[1]: row[3] for row in answer.rows}
    assert covers["3"] == "3 to 4"
    assert covers["10"] == "10"


def test_rules_of_thumb_are_audited_for_capacity() -> None:
    """Lot for lot breaks a line that its peak period exceeds, and says so."""
    case = on_one_line(60.0)
    case = replace(case, demand=case.demand + np.array([0, 0, 0, 12, 0, 0]))
    solved = planned(case)
    rows = {row[0]: row for row in against_rules(case, solved.plan, solved.cost).rows}
    assert rows["This plan"][1] == pytest.approx(solved.cost)
    assert rows["This plan"][5] == "yes"
    lot_for_lot = audit(case, plan_from_made(case, case.demand))
    assert rows["Lot for lot"][1] == pytest.approx(lot_for_lot.total)
    assert (rows["Lot for lot"][5] == "yes") == lot_for_lot.ok
    assert not lot_for_lot.ok


def test_today_s_plan_stands_beside_the_rules() -> None:
    """Today's plan is costed as it is."""
    today = WW.demand.copy()
    case = replace(WW, today=today, compare_today=True)
    rows = {row[0]: row for row in against_rules(case, planned(WW).plan, 864.0).rows}
    assert rows["Today's plan"][1] == pytest.approx(float(WW.setup_cost.sum()))


def test_first_lots_that_stay() -> None:
    """The share of first lots kept is that of re-solving each changed case."""
    answer, lots = how_firm(WW, planned(WW), LIMITS.start())
    assert len(answer.rows) == 6
    dearer = planned(replace(WW, holding_cost=WW.holding_cost * 1.25))
    row = next(row for row in answer.rows if row[0] == "Holding cost a quarter higher")
    assert row[1] == pytest.approx(dearer.cost)
    first = planned(WW).plan.setup[:, :4]
    assert row[4] == pytest.approx((first & dearer.plan.setup[:, :4]).sum() / first.sum())
    changed = [planned(moved(WW, lever, factor)).plan for _, lever, factor in LEVERS]
    for _, period, lot, cases, least, most in lots.rows:
        t = WW.periods.index(period)
        sizes = [plan.made[0, t] for plan in changed if plan.setup[0, t]]
        assert lot == planned(WW).plan.made[0, t]
        assert (cases, least, most) == (len(sizes), pytest.approx(min(sizes)), pytest.approx(max(sizes)))


def test_no_time_leaves_figures_empty() -> None:
    """With the clock over, what needs re-solving says so."""
    solved = planned(WW)
    answers = answer_questions(WW, solved, Limits(seconds=1, cancelled=lambda: True))
    firm = answers[-1]
    assert {row[5] for row in firm.rows} == {"not answered in the time given"}
    assert all(row[1] is None for row in firm.rows)
