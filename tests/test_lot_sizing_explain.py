"""Explaining why no plan exists: periods, amounts, cells and the plan that comes closest."""

import re
from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.findings import Subject
from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.elastic import item_slack, shortfall, stranded
from ledgersolve.lot_sizing.explain import explain
from ledgersolve.lot_sizing.plan import plan_from_made
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.mip import Limits, Verdict
from tests.lot_textbook import FEATURES, random_case, textbook_cost

NAHMIAS = [20, 40, 100, 35, 80, 75, 25]


def press(capacity: float, **changes: object) -> Case:
    """LS-14 (Nahmias): one item on one press, one time unit a unit."""
    case = plain_case(
        NAHMIAS, 0.0, 1.0, resources=("Press",), capacity=np.full((1, 7), capacity), overtime_limit=np.zeros(1),
        overtime_cost=np.zeros(1), use_cost=np.zeros(1), item_resource=np.zeros(1, dtype=np.int64),
        time_per_unit=np.ones(1),
    )
    return replace(case, **changes)


def test_the_cumulative_check_names_the_period() -> None:
    """LS-14 with capacity 55: up to period 6 the demand needs 350 and 330 are there."""
    found = explain(press(55.0), Limits(10.0))
    words = [conflict.words for conflict in found.conflicts]
    assert any("up to period 6" in text and "350" in text and "330" in text for text in words)
    assert words == [
        "Capacity of Press is 20 short in period 6: needs 75, has 55. Sure in any case: up to period 6 the demand "
        "needs at least 350 of its time, and there are 330."]
    assert found.conflicts[0].remedy == (
        "Raise Capacity of Press from 55 to 58.4 (with 58.3 there is still no plan); or give it more in single "
        "periods by the sheet Capacity: 20 in 6; or ask for less.")
    assert found.conflicts[0].amount == pytest.approx(20.0, rel=1e-4)
    assert found.conflicts[0].subjects == (
        Subject("Capacity", ("Press", "6"), ""), Subject("Resources", ("Press",), "Capacity"),
    )
    assert found.closest_words == "needs 20 more time units in 1 period (Press)"


def test_the_closest_plan_breaks_only_what_is_named() -> None:
    """The closest plan of LS-14 with capacity 55 keeps every rule but the capacity, by 20 in all."""
    case = press(55.0)
    plan = explain(case, Limits(10.0)).closest
    assert plan is not None
    assert {check.rule for check in audit(case, plan).broken()} == {"Capacity"}
    assert shortfall(case, plan.made).sum() == pytest.approx(20.0, rel=1e-4)


def test_overtime_counts_as_time_that_is_there() -> None:
    """With 4 hours of overtime only 350 - 6 x 59 = -4 are short: a plan exists; with 3 there are 2 short."""
    enough = press(55.0, overtime_limit=np.array([4.0]))
    assert solve(enough, Limits(10.0)).verdict is Verdict.PROVEN_BEST
    short = press(55.0, overtime_limit=np.array([3.0]))
    found = explain(short, Limits(10.0))
    assert found.conflicts[0].words.startswith(
        "Capacity of Press is 2 short in period 6: needs 60, has 58 with all overtime.")


@pytest.mark.parametrize("seed", range(12))
def test_what_is_said_to_be_enough_is_enough(seed: int) -> None:
    """The capacity told has a plan and the one below it none, by the textbook model; single periods as well."""
    rng = np.random.default_rng([8, seed])
    case = random_case(rng, 3, 4, frozenset({"resource", "setup time"}))
    case = replace(case, capacity=np.round(np.full((1, 4), 0.6 * case.capacity.max())) + 1.0)
    if textbook_cost(case) is not None:
        case = replace(case, capacity=np.round(case.capacity * 0.6))
    if textbook_cost(case) is not None:
        pytest.skip("this case has a plan")
    found = explain(case, Limits(20.0, gap=1e-6))
    conflict = found.conflicts[-1]
    to, below = re.search(r"to ([\d.]+) \(with ([\d.]+) there", conflict.remedy).groups()
    assert textbook_cost(replace(case, capacity=np.full((1, 4), float(to)))) is not None
    assert textbook_cost(replace(case, capacity=np.full((1, 4), float(below)))) is None
    given = case.capacity.copy()
    for amount, period in re.findall(r"([\d.]+) in (\d+)", conflict.remedy):
        given[0, case.periods.index(period)] += float(amount) + 0.005
    assert textbook_cost(replace(case, capacity=given)) is not None


def test_a_capacity_of_its_own_a_period_has_a_row_a_period() -> None:
    """Where periods differ, each short period has its row and cell, and the rows say that they belong together."""
    case = replace(press(55.0), capacity=np.array([[15.0, 40, 90, 30, 70, 75, 25]]))
    found = explain(case, Limits(10.0))
    assert len(found.conflicts) > 1
    given = case.capacity.copy()
    for conflict in found.conflicts:
        given[0, case.periods.index(conflict.subjects[0].key[1])] += conflict.amount * (1 + 1e-6)
    assert textbook_cost(replace(case, capacity=given)) is not None
    assert all("belong together" in conflict.remedy for conflict in found.conflicts)


def test_the_closest_plan_is_shown_lot_by_lot() -> None:
    """Its lots, with the resource that lacks time beside those of the short period, and unmet demand."""
    (shown,) = explain(press(55.0), Limits(10.0)).shown
    assert sum(row[2] for row in shown.rows) == sum(NAHMIAS)
    assert {row[0] for row in shown.rows if row[3] == "Press lacks time"} == {"6"}
    (unmet,) = explain(plain_case(NAHMIAS, 0.0, 1.0, most_lot=np.array([55.0])), Limits(10.0)).shown
    assert [row[:2] + row[3:] for row in unmet.rows if row[3]] == [("6", "I1", "20 of demand unmet")]


def test_setup_times_make_the_shortfall() -> None:
    """Two items of 6 hours each with setup in periods of 10 hours: 2 short in each, and no way is shorter."""
    case = plain_case(
        [[4, 4], [4, 4]], 0.0, 1.0, resources=("Line",), capacity=np.full((1, 2), 10.0),
        overtime_limit=np.zeros(1), overtime_cost=np.zeros(1), use_cost=np.zeros(1),
        item_resource=np.zeros(2, dtype=np.int64), time_per_unit=np.ones(2), setup_time=np.full(2, 2.0),
    )
    found = explain(case, Limits(10.0))
    assert found.closest is not None
    assert shortfall(case, found.closest.made)[0] == pytest.approx([2.0, 2.0], rel=1e-4)
    assert "2 periods together: 1 needs 12, 2 needs 12; each has 10." in found.conflicts[0].words
    assert "from 10 to 12 (with 11.9 there is still no plan)" in found.conflicts[0].remedy


def test_a_most_lot_that_is_too_small_is_named() -> None:
    """LS-14 as a most lot of 55: the item is 20 short by period 6, and lifting Most lot would be enough."""
    case = plain_case(NAHMIAS, 0.0, 1.0, most_lot=np.array([55.0]))
    found = explain(case, Limits(10.0))
    assert len(found.conflicts) == 1
    conflict = found.conflicts[0]
    assert conflict.words == "Item I1 is 20 short by period 6: 350 are needed up to then, 330 can be there at most."
    assert "Most lot" in conflict.remedy
    assert conflict.subjects == (Subject("Demand", ("I1", "6"), ""), Subject("Items", ("I1",), "Most lot"))
    assert found.closest is not None
    assert found.closest.lost.sum() == pytest.approx(20.0)
    assert found.closest_words == "leaves 20 of demand unmet"


def test_a_period_without_setups_is_named() -> None:
    """Demand in the first period, in which nothing may be made: that period, and the row to change."""
    case = plain_case([[7, 5]], 1.0, 1.0, setup_allowed=np.array([[False, True]]))
    conflict = explain(case, Limits(10.0)).conflicts[0]
    assert "Item I1 is 7 short by period 1" in conflict.words
    assert conflict.subjects[1] == Subject("Period costs", ("I1", "1"), "Setup allowed")


def test_stock_that_cannot_be_kept_down() -> None:
    """A receipt above the most stock: the limit is 12 too low, and the cell is Most stock."""
    case = plain_case([[5, 5]], 1.0, 1.0, receipts=np.array([[27.0, 0.0]]), most_stock=np.array([10.0]))
    conflict = explain(case, Limits(10.0)).conflicts[0]
    assert conflict.amount == pytest.approx(12.0)
    assert conflict.subjects[0] == Subject("Items", ("I1",), "Most stock")


def test_safety_stock_that_cannot_be_there_in_time() -> None:
    """Safety stock in the first period without a way to have it is lowered by what is missing."""
    case = plain_case(
        [[0, 5]], 1.0, 1.0, safety_stock=np.array([8.0]), closing_stock=np.array([8.0]),
        opening_stock=np.array([3.0]), setup_allowed=np.array([[False, True]]),
    )
    found = explain(case, Limits(10.0))
    assert found.conflicts[0].amount == pytest.approx(5.0)
    assert found.conflicts[0].subjects[0] == Subject("Items", ("I1",), "Safety stock")
    assert "breaks limits of stock" in found.closest_words


def test_smallest_change_first() -> None:
    """Conflicts are listed by the size of the change that mends them."""
    case = plain_case([[7, 5], [3, 5], [20, 1]], 1.0, 1.0, setup_allowed=np.array([[False, True]] * 3))
    found = explain(case, Limits(10.0))
    assert [conflict.amount for conflict in found.conflicts] == pytest.approx([3.0, 7.0, 20.0])


@pytest.mark.parametrize("seed", range(25))
def test_items_that_cannot_be_served_alone_are_exactly_those_with_slack(seed: int) -> None:
    """An item needs slack exactly where the textbook model finds no plan for it; mended it has one."""
    rng = np.random.default_rng([3, seed])
    features = frozenset(name for name in FEATURES if rng.random() < 0.5) - {"resource", "family", "lost"}
    case = random_case(rng, 1, 5, features | {"most lot", "setup allowed"})
    slacks = stranded(case, Limits(20.0).start())
    assert bool(slacks) == (textbook_cost(case) is None)
    if not slacks:
        assert item_slack(case, 5.0).total == 0


def test_the_shortfall_is_the_least_and_mends_the_case() -> None:
    """Given the time that the closest plan lacks, the case has a plan; and no plan lacks less in all."""
    tried = 0
    for seed in range(30):
        rng = np.random.default_rng([4, seed])
        case = random_case(rng, 3, 4, frozenset({"resource", "setup time", "family", "opening"}))
        case = replace(case, capacity=np.round(case.capacity * 0.6))
        if textbook_cost(case) is not None:
            continue
        tried += 1
        short = shortfall(case, explain(case, Limits(20.0, gap=1e-6)).closest.made)
        assert short.sum() > 0
        assert textbook_cost(replace(case, capacity=case.capacity + short * (1 + 1e-6))) is not None
        assert short.sum() == pytest.approx(least_shortfall(case), rel=1e-3)
    assert tried >= 10


def least_shortfall(case: Case) -> float:
    """Least time missing in all, by the textbook model with overtime as the only cost."""
    free = np.zeros((case.n, case.t))
    return textbook_cost(replace(
        case, setup_cost=free, unit_cost=free, holding_cost=free, family_cost=np.zeros(len(case.families)),
        use_cost=np.zeros(len(case.resources)), overtime_limit=np.full(len(case.resources), 1e4),
        overtime_cost=np.ones(len(case.resources)),
    ))


def test_a_plan_that_is_whole_is_not_touched() -> None:
    """Quantities that fit have no shortfall."""
    case = press(60.0)
    plan = plan_from_made(case, [[50, 60, 60, 60, 60, 60, 25]])
    assert not shortfall(case, plan.made).any()
