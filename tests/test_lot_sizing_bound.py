"""The Lagrangian bound: never above the proven optimum, for any prices, with every feature."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.ascent import Ascent
from ledgersolve.lot_sizing.bound import Charges, Relaxation, price_bound
from ledgersolve.lot_sizing.case import plain_case
from tests.lot_oracle import random_shared, whole_big_m

FEATURES = [
    (), ("overtime",), ("family",), ("use",), ("family", "overtime", "use"), ("overtime", "late"),
    ("overtime", "lost", "opening"), ("family", "least lot", "overtime"), ("use", "multiple", "overtime"),
    ("overtime", "most stock", "most lot"), ("family", "use", "late", "lost", "receipts", "safety", "overtime"),
]


def never(_: object) -> bool:
    """Let the ascent run on."""
    return False


@pytest.mark.parametrize("features", FEATURES, ids="+".join)
@pytest.mark.parametrize("seed", [1, 2])
def test_bound_is_below_the_optimum(features: tuple[str, ...], seed: int) -> None:
    """At random prices and at those of the ascent the bound is no more than the proven optimum."""
    rng = np.random.default_rng(seed)
    case = random_shared(rng, 5, 5, *features)
    whole = whole_big_m(case)
    best = whole.objective if whole.status == "optimal" else np.inf
    for scale in (0.0, 1.0, 20.0):
        assert price_bound(case, scale * rng.random(case.capacity.shape)) <= best + 1e-6
    ascent = Ascent.begin(Relaxation(case))
    start = ascent.best.bound
    ascent.climb(150, np.inf, never)
    assert start <= ascent.best.bound <= best + 1e-6


def test_ascent_closes_most_of_the_gap() -> None:
    """On a case whose capacity binds, the ascent gains over no prices at all and comes near the optimum."""
    case = random_shared(np.random.default_rng(3), 12, 6, "overtime")
    best = whole_big_m(case, 60.0, 1e-4).objective
    ascent = Ascent.begin(Relaxation(case))
    start = ascent.best.bound
    ascent.climb(400, best, never)
    assert start < ascent.best.bound
    assert best - ascent.best.bound < 0.03 * best


def test_family_shares_reach_the_joint_cost() -> None:
    """Two equal items in a family: shares make the bound what both cost together, not twice the family."""
    demand = np.full((2, 4), 10.0)
    case = replace(
        plain_case(demand, 0.0, 100.0), families=("F",), item_family=np.zeros(2, dtype=np.int64),
        family_cost=np.array([50.0]), family_time=np.zeros(1), family_resource=np.array([-1]),
    )
    assert price_bound(case, np.zeros((0, 4))) == pytest.approx(200.0)


def test_overtime_caps_what_a_price_earns() -> None:
    """Above the overtime cost a price gains nothing where overtime has no limit."""
    case = replace(
        plain_case([[10.0, 10.0]], 0.0, 1.0), resources=("A",), item_resource=np.array([0]),
        time_per_unit=np.ones(1), capacity=np.full((1, 2), 5.0), overtime_limit=np.array([np.inf]),
        overtime_cost=np.array([3.0]), use_cost=np.zeros(1),
    )
    assert price_bound(case, np.full((1, 2), 3.0)) == pytest.approx(30.0)
    assert price_bound(case, np.full((1, 2), 99.0)) == pytest.approx(30.0)


def test_use_cost_is_paid_by_those_on_the_resource() -> None:
    """A rented resource without limit costs its rent once a period in use, whoever is on it."""
    case = replace(
        plain_case(np.full((3, 2), 4.0), 0.0, 50.0), resources=("A",), item_resource=np.zeros(3, dtype=np.int64),
        time_per_unit=np.ones(3), capacity=np.full((1, 2), np.inf), overtime_limit=np.zeros(1),
        overtime_cost=np.zeros(1), use_cost=np.array([70.0]),
    )
    assert price_bound(case, np.zeros((1, 2))) == pytest.approx(140.0)


def test_prices_of_unlimited_time_count_as_nothing() -> None:
    """A price on a period without a limit changes nothing, nor does a negative one."""
    case = random_shared(np.random.default_rng(5), 4, 4)
    free = replace(case, capacity=np.full((2, 4), np.inf))
    assert price_bound(free, np.full((2, 4), 7.0)) == pytest.approx(price_bound(free, np.zeros((2, 4))))
    assert price_bound(case, np.full((2, 4), -7.0)) == pytest.approx(price_bound(case, np.zeros((2, 4))))


def test_payments_fill_what_is_owed() -> None:
    """Whatever is proposed, members of a family pay its setup in full and nobody pays less than nothing."""
    case = random_shared(np.random.default_rng(6), 8, 5, "family", "use")
    relaxation = Relaxation(case)
    rng = np.random.default_rng(7)
    wild = Charges(
        rng.normal(size=(2, 5)), 50 * rng.normal(size=(8, 5)), 50 * rng.normal(size=(8, 5)),
        rng.normal(size=(2, 5)),
    )
    filled = relaxation.filled(wild)
    assert min(part.min() for part in (filled.prices, filled.family, filled.use, filled.family_use)) >= 0
    by_family = np.vstack([filled.prices, np.zeros((1, 5))])[case.family_resource]
    owed = case.family_cost[:, None] + case.family_time[:, None] * by_family + filled.family_use
    assert relaxation.kin @ filled.family == pytest.approx(owed)
