"""Running totals of time: what must have been spent by when, and where that exceeds the time there has been."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.totals import least_time, must_be_made, overdrawn
from tests.lot_textbook import FEATURES, random_case, textbook_cost


def line(demand: list[list[float]], capacity: float, **changes: object) -> Case:
    """Items of one time unit a unit on one line."""
    n, t = len(demand), len(demand[0])
    case = plain_case(
        demand, 1.0, 1.0, resources=("Line",), capacity=np.full((1, t), capacity), overtime_limit=np.zeros(1),
        overtime_cost=np.zeros(1), use_cost=np.zeros(1), item_resource=np.zeros(n, dtype=np.int64),
        time_per_unit=np.ones(n),
    )
    return replace(case, **changes)


def test_needs_by_period_and_kind_of_item() -> None:
    """On time: the net need; late allowed: at the end only; lost allowed: what stock asks beyond demand."""
    case = line([[4, 4], [4, 4], [4, 4]], 99.0, backlog_cost=np.array([np.nan, 1.0, np.nan]),
                lost_cost=np.array([np.nan, np.nan, 9.0]), closing_stock=np.array([0.0, 0.0, 3.0]),
                opening_stock=np.array([1.0, 1.0, 1.0]))
    assert must_be_made(case).tolist() == [[3, 7], [0, 7], [0, 2]]


def test_time_counts_fewest_setups_and_a_family_once() -> None:
    """Seven units in lots of at most 3 need three setups; the family is set up at least once."""
    case = line([[3, 4]], 99.0, most_lot=np.array([3.0]), setup_time=np.array([2.0]), item_family=np.array([0]),
                families=("F",), family_cost=np.zeros(1), family_time=np.array([5.0]),
                family_resource=np.array([0]))
    assert least_time(case)[0].tolist() == [3 + 2 + 5, 7 + 3 * 2 + 5]


def test_overdrawn_time_is_found_with_overtime_counted() -> None:
    """LS-14 (Nahmias) at capacity 55 lacks 20 up to period 6; with 4 hours of overtime it lacks nothing."""
    case = line([[20, 40, 100, 35, 80, 75, 25]], 55.0)
    assert overdrawn(case)[0].tolist() == [0, 0, 0, 0, 0, 20, 0]
    assert not overdrawn(replace(case, overtime_limit=np.array([4.0]))).any()


@pytest.mark.parametrize("seed", range(60))
def test_overdrawn_time_means_that_no_plan_exists(seed: int) -> None:
    """Wherever running totals exceed the time there is, the textbook model has no plan either."""
    rng = np.random.default_rng([41, seed])
    features = frozenset(name for name in FEATURES if rng.random() < 0.4) | {"resource", "setup time"}
    case = random_case(rng, 3, 4, features)
    case = replace(case, capacity=np.round(case.capacity * 0.5))
    if overdrawn(case).any():
        assert textbook_cost(case) is None
