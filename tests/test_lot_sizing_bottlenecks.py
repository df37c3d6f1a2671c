"""What more time, overtime and an earlier start bring agrees with re-solving by the whole model."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.findings import Answered
from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.bottlenecks import bottlenecks
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.earlier import started_earlier
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.service import late_and_lost
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.lot_sizing.whole import solve_whole
from ledgersolve.mip import Limits, Solved, Verdict
from tests.lot_textbook import textbook_cost

LIMITS = Limits(seconds=60, gap=1e-6)


def on_one_line(capacity: float, seed: int = 4, n: int = 3, t: int = 6, **changes: object) -> Case:
    """Items that share one line."""
    rng = np.random.default_rng(seed)
    case = plain_case(
        rng.integers(5, 25, (n, t)), rng.integers(40, 90, (n, 1)) * np.ones((1, t)), 1.0,
        resources=("line",), capacity=np.full((1, t), capacity), overtime_limit=np.zeros(1),
        overtime_cost=np.zeros(1), use_cost=np.zeros(1), item_resource=np.zeros(n, dtype=np.int64),
        time_per_unit=np.ones(n),
    )
    return replace(case, **changes)


def load(seed: int) -> float:
    """Time that has to be spent in a period on average, up to the worst period."""
    need = np.cumsum(on_one_line(0.0, seed).demand.sum(axis=0))
    return float((need / np.arange(1, need.size + 1)).max())


def planned(case: Case) -> Solved[Plan]:
    """The best plan of a case that has one."""
    solved = solve(case, LIMITS)
    assert solved.verdict is Verdict.PROVEN_BEST
    return solved


def asked(case: Case, solved: Solved[Plan] | None = None) -> Answered:
    """Ask for the bottlenecks with time enough."""
    return bottlenecks(case, solved or planned(case), LIMITS.start())


def row(answer: Answered, start: str) -> tuple[str | float | None, ...]:
    """The first row whose label starts so."""
    return next(row for row in answer.rows if str(row[0]).startswith(start))


@pytest.mark.parametrize("seed", [0, 1, 4, 6])
def test_one_more_hour_is_worth_what_re_solving_says(seed: int) -> None:
    """Every row on an hour holds the saving by the textbook model between its ends; the first three exactly."""
    case = on_one_line(1.04 * load(seed), seed)
    solved = planned(case)
    hours = [row for row in asked(case, solved).rows if str(row[0]).startswith("one more")]
    for number, (what, low, high, how) in enumerate(hours):
        capacity = case.capacity.copy()
        capacity[0, case.periods.index(str(what).rsplit(" ", 1)[1])] += 1
        saved = solved.cost - textbook_cost(replace(case, capacity=capacity))
        assert -1e-6 <= low <= saved + 1e-3
        assert high is None or high >= saved - 1e-3
        if number < 3:
            assert how == "all re-planned, exact"
            assert low == pytest.approx(saved, abs=1e-3)


@pytest.mark.parametrize("seed", range(3))
def test_more_time_and_an_earlier_start_are_re_planned(seed: int) -> None:
    """Both savings are those of the textbook model on the changed case."""
    case = on_one_line(1.0 * load(seed), seed, opening_stock=np.array([9.0, 0.0, 4.0]))
    solved = planned(case)
    answer = asked(case, solved)
    better = textbook_cost(replace(case, capacity=case.capacity * 1.1))
    assert row(answer, "a tenth more time")[1] == pytest.approx(solved.cost - better, abs=1e-3)
    changed, anyway = started_earlier(case)
    saved = solved.cost - (textbook_cost(changed) - anyway)
    assert saved >= -1e-6
    assert row(answer, "an earlier start")[1] == pytest.approx(saved, abs=1e-3)


def test_an_earlier_start_saves_overtime() -> None:
    """15 wanted of 10 in the first period: 5 hours of overtime at 7, or a setup of 2 and 5 held once: 28 less."""
    case = plain_case(
        [[15, 5]], 2.0, 1.0, resources=("line",), capacity=np.full((1, 2), 10.0), overtime_limit=np.array([5.0]),
        overtime_cost=np.array([7.0]), use_cost=np.zeros(1), item_resource=np.zeros(1, dtype=np.int64),
        time_per_unit=np.ones(1),
    )
    answer = asked(case)
    assert row(answer, "an earlier start")[1:3] == (pytest.approx(28), pytest.approx(28))
    assert "before 1" in str(row(answer, "an earlier start")[0])
    # a tenth more time is one hour in the first period, which saves one hour of overtime
    assert row(answer, "a tenth more time")[1] == pytest.approx(7)
    assert "1.0 time units of it are used, worth EUR 7.00 each" in str(row(answer, "a tenth more time")[3])
    assert row(answer, "overtime of line allowed")[1] == pytest.approx(0)


def test_a_better_plan_of_the_case_as_it_is_is_no_saving_of_more_time() -> None:
    """Lot for lot where time is plenty: more of it finds the better plan, and claims nothing by that."""
    case = on_one_line(200.0, 5)
    best = planned(case)
    worse = plan_from_made(case, case.demand)
    cost = audit(case, worse).total
    assert cost > best.cost + 1
    case_known = Solved(Verdict.BEST_FOUND, worse, cost, best.cost)
    rows = bottlenecks(case, case_known, LIMITS.start()).rows
    assert rows
    for what, low, high, how in rows:
        assert low is None or low <= 1e-3, what
        assert high >= cost - best.cost - 1e-3
        assert "may be due to more search" in how


def test_more_overtime_at_its_price() -> None:
    """A second lot costs 9 while 2 hours of overtime cost 6; one is allowed: with one more the lot goes."""
    case = plain_case(
        [[6, 6]], 9.0, 0.0, resources=("line",), capacity=np.full((1, 2), 10.0), overtime_limit=np.array([1.0]),
        overtime_cost=np.array([3.0]), use_cost=np.zeros(1), item_resource=np.zeros(1, dtype=np.int64),
        time_per_unit=np.ones(1),
    )
    case = replace(case, demand=np.array([[10.0, 2.0]]))
    answer = asked(case)
    assert row(answer, "overtime of line allowed")[1:3] == (pytest.approx(3), pytest.approx(3))


def test_a_loan_stands_for_safety_stock_that_is_not_there_yet() -> None:
    """Stock 2 at the start, safety 5: the period before need not reach it, and nothing is won by the loan."""
    case = plain_case([[4, 4]], 3.0, 1.0, opening_stock=np.array([2.0]), safety_stock=np.array([5.0]),
                      closing_stock=np.array([5.0]))
    changed, anyway = started_earlier(case)
    assert textbook_cost(changed) - anyway == pytest.approx(textbook_cost(case))
    assert started_earlier(replace(case, backlog_cost=np.ones(1))) is None
    assert started_earlier(replace(case, opening_stock=np.array([20.0]), most_stock=np.array([9.0]))) is None


def test_a_plan_with_time_to_spare_has_no_bottleneck() -> None:
    """Nothing full, nothing asked."""
    answer = asked(on_one_line(500.0))
    assert answer.rows == ()
    assert answer.words == "There is time enough for every plan: more of it would save nothing."


@pytest.mark.slow
def test_a_middle_case_against_the_whole_model() -> None:
    """Eight items over nine periods, by decomposition: what the whole model can save lies in every range."""
    case = on_one_line(135.0, 11, n=8, t=9)
    solved = solve(case, Limits(4, gap=1e-4))
    answer = bottlenecks(case, solved, Limits(8).start())
    capacity = case.capacity * 1.1
    changed, anyway = started_earlier(case)
    for label, other, paid in (("a tenth more time", replace(case, capacity=capacity), 0.0),
                               ("an earlier start", changed, anyway)):
        whole = solve_whole(other, Limits(4, gap=1e-6))
        told = row(answer, label)
        assert told[2] >= solved.cost - (whole.cost - paid) - 1e-3
        assert told[1] <= solved.cost - (whole.bound - paid) + 1e-3


# ------------------------------------------------------------------ service


def test_late_stretches_and_losses_are_listed_with_their_cost() -> None:
    """5 units late over two periods at 2 each and 3 lost at 4: 20 and 12, the dearer one first."""
    case = plain_case([[5, 0, 0, 9], [3, 1, 0, 0]], 1.0, 1.0, backlog_cost=np.array([2.0, np.nan]),
                      lost_cost=np.array([np.nan, 4.0]))
    plan = plan_from_made(case, [[0, 0, 14, 0], [0, 1, 0, 0]])
    answer = late_and_lost(case, plan)
    assert answer.rows == (
        ("I1", "I1", "late", "1", "2", 5.0, pytest.approx(5 / 14), 20.0),
        ("I2", "I2", "lost", "1", "1", 3.0, pytest.approx(3 / 4), 12.0),
    )
    assert answer.words == ("Demand is late for 1 item (I1), at a cost of 20.00\u00a0EUR. "
                            "Demand is lost for 1 item (I2), at a cost of 12.00\u00a0EUR.")
    assert answer.headline


def test_nothing_late_is_said_in_words() -> None:
    """Where the workbook allows neither, it says so; no table."""
    case = plain_case([[5, 5]], 1.0, 1.0)
    answer = late_and_lost(case, plan_from_made(case, [[5, 5]]))
    assert (answer.rows, answer.headline) == ((), False)
    assert answer.words == "Nothing is late and nothing is lost. The workbook allows neither."
