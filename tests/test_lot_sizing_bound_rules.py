"""The price bound of lot sizing by hand: prices, overtime, uses, families, and the allowance for rounding."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.bound import Charges, Relaxation, price_bound
from ledgersolve.lot_sizing.case import Case, plain_case
from tests.lot_oracle import random_shared

INF = np.inf


def one_item(**changes: object) -> Case:
    """10 wanted in each of two periods; setup 5 and 2 hours, an hour a unit, holding 1, on a press of 12 hours.

    3 hours of overtime at 4. Made apart the item costs 10 and 24 hours; made at once 15 and 22 hours.
    """
    case = plain_case(
        [[10, 10]], 5.0, 1.0, item_resource=np.array([0]), time_per_unit=np.ones(1), setup_time=np.array([2.0]),
        resources=("Press",), capacity=np.array([[12.0, 12]]), overtime_limit=np.array([3.0]),
        overtime_cost=np.array([4.0]), use_cost=np.zeros(1),
    )
    return replace(case, **changes)


def near(figure: float) -> object:
    """A bound by hand: the allowance takes a little off and never adds."""
    return pytest.approx(figure - 5e-7, abs=5.1e-7)


@pytest.mark.parametrize(
    ("prices", "bound"),
    [
        ([0.0, 0.0], 10.0),
        ([0.5, 0.0], 10 + 0.5 * 12 - 0.5 * 12),  # 12 hours at 0.5 in the first lot, all capacity charged
        ([6.0, 0.0], 10 + 6 * 12 - 6 * 12 - (6 - 4) * 3),  # above the overtime cost overtime is sold too
        ([4.0, 0.0], 10 + 4 * 12 - 4 * 12),
        ([0.0, 6.0], 15 - 6 * 12 - (6 - 4) * 3),  # all in the first period, the second one's time is left
        ([-7.0, 0.0], 10.0),
        ([3.0, 3.0], 15 + 3 * 22 - 3 * 24),  # 81 at once against 82 apart
        ([2.0, 2.5], 15 + 2 * 22 - 2 * 12 - 2.5 * 12),  # 59 at once against 10 + 24 + 30 = 64 apart
    ],
)
def test_prices_by_hand(prices: list[float], bound: float) -> None:
    """Least cost under the prices, less the worth of all time there is; negative prices count as 0."""
    assert price_bound(one_item(), np.array([prices])) == near(bound)


def test_production_costs_and_prices_add_up() -> None:
    """Made in the first period for 1 a unit or in the second for 4: holding 1 decides for the first."""
    case = one_item(unit_cost=np.array([[1.0, 4.0]]))
    assert price_bound(case, np.zeros((1, 2))) == near(5 + 20 + 10)
    assert price_bound(case, np.array([[2.5, 0.0]])) == near(10 + 10 + 40 + 2.5 * 12 - 2.5 * 12)


def test_unlimited_overtime_caps_the_price() -> None:
    """A price above the cost of overtime without limit counts as that cost: 4 in place of 99."""
    case = one_item(overtime_limit=np.array([INF]))
    assert price_bound(case, np.array([[99.0, 0]])) == near(10 + 4 * 12 - 4 * 12)
    assert price_bound(case, np.array([[0.0, 99.0]])) == near(15 - 4 * 12)
    assert price_bound(case, np.array([[0.0, 3.0]])) == near(15 - 3 * 12)


def test_unlimited_time_has_no_price() -> None:
    """Only periods with a limit are priced: one without, whether overtime has a limit or not, counts 0."""
    case = one_item(capacity=np.array([[INF, 12.0]]))
    assert price_bound(case, np.array([[99.0, 0.0]])) == near(10.0)
    assert price_bound(case, np.array([[99.0, 6.0]])) == near(15 - 6 * 12 - 2 * 3)
    capped = replace(case, overtime_limit=np.array([INF]))
    assert price_bound(capped, np.array([[99.0, 0.0]])) == near(10.0)


def test_each_item_pays_for_its_own_resource() -> None:
    """Two equal items, on the oven and on none: a price on the press touches neither, one on the oven the first."""
    case = plain_case(
        [[10, 10], [10, 10]], 5.0, 1.0, item_resource=np.array([1, -1]), time_per_unit=np.ones(2),
        setup_time=np.array([2.0, 2]), resources=("Press", "Oven"), capacity=np.full((2, 2), 12.0),
        overtime_limit=np.zeros(2), overtime_cost=np.zeros(2), use_cost=np.zeros(2),
    )
    assert price_bound(case, np.array([[3.0, 3], [0, 0]])) == near(20 - 3 * 24)
    assert price_bound(case, np.array([[0.0, 0], [0, 3]])) == near(15 + 10 - 3 * 12)
    assert price_bound(case, np.array([[0.0, 0], [3, 3]])) == near(15 + 3 * 22 + 10 - 3 * 24)


def test_the_allowance_is_a_billionth_of_what_is_added_up() -> None:
    """Item cost 82 and time worth 78 make 4, less a billionth of 160."""
    found = price_bound(one_item(), np.array([[6.0, 0.0]]))
    assert 4.0 - found == pytest.approx(160e-9, rel=1e-4)


@pytest.mark.parametrize("rent", [0.5, 5.0, 50.0, 500.0])
def test_a_rented_press_by_hand(rent: float) -> None:
    """Without prices rent is due in each period of use; holding all of the second lot costs 10 less a setup.

    Apart 10 + 2 x rent, at once 15 + rent.
    """
    case = one_item(use_cost=np.array([rent]))
    assert price_bound(case, np.zeros((1, 2))) == near(min(10 + 2 * rent, 15 + rent))


def test_only_the_rented_resource_takes_rent() -> None:
    """Press and oven, an item on each, rent 4 on the oven only: 10 and 10 + 2 x 4; a price on the press as ever."""
    case = plain_case(
        [[10, 10], [10, 10]], 5.0, 1.0, item_resource=np.array([0, 1]), time_per_unit=np.ones(2),
        setup_time=np.array([2.0, 2]), resources=("Press", "Oven"), capacity=np.full((2, 2), 12.0),
        overtime_limit=np.zeros(2), overtime_cost=np.zeros(2), use_cost=np.array([0.0, 4]),
    )
    assert price_bound(case, np.zeros((2, 2))) == near(10 + 18)
    assert price_bound(case, np.array([[0.0, 3], [0, 0]])) == near(15 - 3 * 12 + 18)
    assert price_bound(case, np.array([[0.0, 0], [0, 3]])) == near(10 + (15 + 4) + (4 - 3 * 12))


def test_time_of_a_rented_press_is_worth_its_price_where_it_is_used() -> None:
    """Rent 50 and a price of 6 in the first period: its time is worth 72 + 6, so its use earns 28 and is free.

    In the second period time is worth nothing and the item pays the rent. Apart it costs 10 + 72 + 50, at once
    15 + 6 x 22 = 147: 132 - 28 = 104.
    """
    case = one_item(use_cost=np.array([50.0]))
    assert price_bound(case, np.array([[6.0, 0.0]])) == near(104.0)


def family(**changes: object) -> Case:
    """One item in a family with a setup of 20 and 3 hours on an oven of 10 hours; the item is on no resource."""
    case = plain_case(
        [[10, 10]], 5.0, 1.0, resources=("Oven",), capacity=np.full((1, 2), 10.0), overtime_limit=np.zeros(1),
        overtime_cost=np.zeros(1), use_cost=np.zeros(1), families=("A",), item_family=np.zeros(1, np.int64),
        family_cost=np.array([20.0]), family_time=np.array([3.0]), family_resource=np.zeros(1, np.int64),
    )
    return replace(case, **changes)


@pytest.mark.parametrize(
    ("prices", "bound"),
    [
        ([0.0, 0.0], 5 + 10 + 20.0),  # both lots at once: 10 of stock in place of 25 of setups
        ([2.0, 0.0], 5 + 10 + 20 + 2 * 3 - 2 * 10.0),
        ([0.0, 2.0], 5 + 10 + 20 - 2 * 10.0),
        ([9.0, 0.0], 5 + 10 + 20 + 9 * 3 - 9 * 10.0),
    ],
)
def test_a_family_pays_its_setup_and_its_time(prices: list[float], bound: float) -> None:
    """The only member pays the family's setup in full, and the family's hours at the price of its resource."""
    assert price_bound(family(), np.array([prices])) == near(bound)


def test_a_family_pays_the_rent_of_its_resource() -> None:
    """Rent 7 on the family's oven: the member pays 20 + 7 with its setup of 5."""
    assert price_bound(family(use_cost=np.array([7.0])), np.zeros((1, 2))) == near(5 + 10 + 20 + 7)


def test_a_family_without_a_resource_pays_no_time() -> None:
    """Its hours are on nothing, so prices do not touch them."""
    case = family(family_resource=np.array([-1]))
    assert price_bound(case, np.array([[4.0, 0.0]])) == near(5 + 10 + 20 - 4 * 10)


def test_rent_of_a_resource_without_limit_is_still_due() -> None:
    """Unlimited hours are worth nothing, and the rent is shared by item and family alike."""
    case = one_item(capacity=np.full((1, 2), INF), use_cost=np.array([8.0]))
    assert price_bound(case, np.full((1, 2), 5.0)) == near(15 + 8)


def test_an_item_that_cannot_be_planned_has_no_bound() -> None:
    """Where no schedule exists the bound is infinite, without an allowance that would make it no number."""
    case = one_item(setup_allowed=np.zeros((1, 2), bool))
    assert price_bound(case, np.zeros((1, 2))) == INF


@pytest.mark.parametrize("seed", range(4))
def test_payments_are_the_nearest_that_add_up(seed: int) -> None:
    """What members pay is the projection onto what is owed: checked by its optimality condition.

    Of a projection those who pay have all been moved by the same amount, and nobody who pays nothing was
    proposed more than that level; a group that owes nothing is paid nothing.
    """
    random = np.random.default_rng(seed)
    n, t = 7, 5
    case = plain_case(
        np.ones((n, t)), 1.0, 1.0, families=("A", "B", "C"), item_family=np.array([0, 0, 1, -1, 0, 1, 0]),
        family_cost=np.array([20.0, 5, 30]), family_time=np.zeros(3), family_resource=np.full(3, -1),
    )
    asked = random.normal(0, 15, (n, t))
    nothing = np.zeros((n, t))
    paid = Relaxation(case).filled(Charges(np.zeros((0, t)), asked, nothing, np.zeros((3, t)))).family
    assert (paid[3] == 0).all()
    for group, owed in ((0, 20.0), (1, 5.0)):
        members = np.flatnonzero(case.item_family == group)
        for period in range(t):
            before, after = asked[members, period], paid[members, period]
            assert after.min() >= 0.0
            assert after.sum() == pytest.approx(owed)
            paying = after > 1e-12
            level = (before - after)[paying]
            assert np.ptp(level) < 1e-9
            assert before[~paying].max(initial=-INF) <= level[0] + 1e-9


def test_who_owes_nothing_pays_nothing() -> None:
    """A group that owes in one period only is paid in that one only; without prices nobody pays for use."""
    case = one_item(use_cost=np.array([50.0]))
    zero = np.zeros((1, 2))
    wild = Charges(np.array([[9.0, 0.0]]), zero, np.full((1, 2), 33.0), np.zeros((0, 2)))
    filled = Relaxation(case).filled(wild)
    # 9 x 12 hours and 5 x 3 of overtime are worth more than the rent in the first period
    assert filled.use.tolist() == [[0.0, 50.0]]
    assert filled.prices.tolist() == [[9.0, 0.0]]


def at(case: Case, prices: list[float], family: float = 0.0, use: float = 0.0, family_use: float = 0.0) -> float:
    """The bound of a case with one item at charges given outright, the same in both periods."""
    shares = [np.full((1, 2), share) for share in (family, use)]
    charges = Charges(np.array([prices]), *shares, np.full((len(case.families), 2), family_use))
    return Relaxation(case).at(charges).bound


@pytest.mark.parametrize(("paid", "bound"), [(12.0, 15 + 12.0), (20.0, 15 + 20.0), (23.0, 15 + 23 - 2 * 3.0)])
def test_what_a_family_is_paid_beyond_its_setup_is_given_back(paid: float, bound: float) -> None:
    """Paid too little the bound is lower, paid too much the surplus of both periods is taken off."""
    assert at(family(), [0.0, 0.0], family=paid) == near(bound)


@pytest.mark.parametrize(("paid", "bound"), [(3.0, 10 + 6.0), (4.0, 10 + 8.0), (4.5, 10 + 9 - 2 * 0.5)])
def test_what_a_resource_is_paid_beyond_its_rent_is_given_back(paid: float, bound: float) -> None:
    """Rent 4: what the item pays beyond it is taken off in both periods."""
    assert at(one_item(use_cost=np.array([4.0])), [0.0, 0.0], use=paid) == near(bound)


@pytest.mark.parametrize(("paid", "bound"), [(6.0, 35 + 6.0), (7.0, 35 + 7.0), (9.0, 35 + 9 - 2 * 2.0)])
def test_what_a_family_pays_for_rent_is_counted_like_what_items_pay(paid: float, bound: float) -> None:
    """Rent 7 on the family's oven: the family's share is in what its member pays, a surplus is taken off."""
    assert at(family(use_cost=np.array([7.0])), [0.0, 0.0], family=20 + paid, family_use=paid) == near(bound)


def test_rent_and_time_are_set_against_what_is_paid() -> None:
    """Rent 50, a price of 2 on 12 hours: 26 are due; the item pays 30 and its time, 4 come back in each period."""
    case = one_item(use_cost=np.array([50.0]))
    assert at(case, [2.0, 2.0], use=30.0) == near(5 + 30 + 10 + 2 * 22 - 2 * 4)


def test_shares_move_to_those_who_are_set_up() -> None:
    """An item wanted once does not pay for the later lots of its family: shares reach the joint cost of 4 x 50.

    Shared equally the second item's half of three setups would be lost: 125.
    """
    case = plain_case(
        [[10.0, 10, 10, 10], [10, 0, 0, 0]], 0.0, 100.0, families=("F",), item_family=np.zeros(2, dtype=np.int64),
        family_cost=np.array([50.0]), family_time=np.zeros(1), family_resource=np.array([-1]),
    )
    found = price_bound(case, np.zeros((0, 4)))
    assert 199.0 < found <= 200.0
    assert Relaxation(case).at(Relaxation(case).start()).bound == pytest.approx(125.0)


@pytest.mark.parametrize("features", [("overtime",), ("family", "overtime"), ("use", "overtime"), ("family", "use")])
def test_the_excess_is_a_supergradient_in_the_prices(features: tuple[str, ...]) -> None:
    """Time asked for beyond what is given bounds how the bound moves with any prices, payments held.

    Along each price alone and along all together, at random prices below and above the overtime cost.
    """
    random = np.random.default_rng(len(features[0]))
    case = random_shared(random, 4, 4, *features)
    relaxation = Relaxation(case)
    shape = case.capacity.shape
    for _ in range(6):
        point = relaxation.at(relaxation.start(random.uniform(0, 30, shape)))
        for _ in range(12):
            step = random.normal(0, 8, shape) * (random.random(shape) < random.choice([0.15, 1.0]))
            prices = relaxation.filled(replace(point.charges, prices=point.charges.prices + step)).prices
            moved = relaxation.at(replace(point.charges, prices=prices)).bound
            slope = float((point.excess * (prices - point.charges.prices)).sum())
            assert moved <= point.bound + slope + 1e-6 * (1.0 + abs(point.bound) + abs(slope))
