"""The item programmes against published cases, and against the textbook model on random cases."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.groups import part
from ledgersolve.lot_sizing.wagner_whitin import Schedules, WagnerWhitin, carries, needs
from tests.lot_oracle import random_items, whole_big_m

# Wagner & Whitin (1958), Management Science 5(1), 89-96, worked example: data, and the least cost of the
# first 1..12 periods taken alone.
CLASSIC_DEMAND = [69, 29, 36, 61, 61, 26, 34, 67, 45, 67, 79, 56]
CLASSIC_SETUP = [85, 102, 102, 101, 98, 114, 105, 86, 119, 110, 98, 114]
CLASSIC_COSTS = [85, 114, 186, 277, 348, 400, 469, 555, 600, 710, 789, 864]


def best(case: Case) -> Schedules:
    """Run the recursion on every item under its own costs."""
    return WagnerWhitin(case, np.arange(case.n)).schedule(case.setup_cost, case.unit_cost)


def cost_of(case: Case, made: np.ndarray, lost: np.ndarray) -> np.ndarray:
    """Cost an item from the balance alone: net stock below its least is late."""
    net = case.opening_stock[:, None] + np.cumsum(case.receipts + made + lost - case.demand, axis=1)
    stock = np.maximum(net, case.least_stock())
    late = stock - net
    assert late[:, -1].max() <= 1e-7
    assert (late[np.isnan(case.backlog_cost)] <= 1e-7).all()
    assert (lost <= case.demand + 1e-9).all()
    assert not (made[~case.setup_allowed] > 0).any()
    return (
        case.setup_cost * (made > 0) + case.unit_cost * made + case.holding_cost * stock
        + np.nan_to_num(case.backlog_cost)[:, None] * late + np.nan_to_num(case.lost_cost)[:, None] * lost
    ).sum(axis=1)


def test_classic_plan() -> None:
    """The plan of the worked example of 1958 is found, at its published cost of 864."""
    answer = best(plain_case(CLASSIC_DEMAND, CLASSIC_SETUP, 1.0))
    assert answer.cost[0] == pytest.approx(864)
    assert answer.made[0].tolist() == [98, 0, 97, 0, 121, 0, 0, 112, 0, 67, 135, 0]


def test_classic_horizons() -> None:
    """Every shorter horizon of the worked example has its published cost."""
    got = [best(plain_case(CLASSIC_DEMAND[:k], CLASSIC_SETUP[:k], 1.0)).cost[0] for k in range(1, 13)]
    assert got == pytest.approx(CLASSIC_COSTS)


def test_opening_stock_and_backlog() -> None:
    """Pochet & Wolsey (2006), section 1.1: 736,000 without and 733,800 (our variant, proven) with backlog."""
    holding = np.array([5.0] * 7 + [2.5])
    case = plain_case([400, 400, 800, 800, 1200, 1200, 1200, 1200], 5000, holding)
    case = replace(case, unit_cost=np.full((1, 8), 100.0), opening_stock=np.array([200.0]))
    assert best(case).cost[0] == pytest.approx(736_000)
    late = replace(case, backlog_cost=np.array([6.0]))
    assert best(late).cost[0] == pytest.approx(733_800)
    assert best(late).made[0].tolist() == [0, 0, 2200, 0, 1200, 1200, 1200, 1200]


def test_lots_of_zero_demand() -> None:
    """No setup falls in a period only to serve zero demand (Tersine's data; 258 by enumeration)."""
    answer = best(plain_case([75, 0, 33, 28, 0, 10], 100, 1.0))
    assert answer.cost[0] == pytest.approx(258)
    assert answer.made[0].tolist() == [75, 0, 71, 0, 0, 0]


@pytest.mark.parametrize(
    "features",
    [
        (), ("opening",), ("safety", "opening"), ("receipts", "opening"), ("allowed",), ("late",), ("lost",),
        ("closing", "receipts"), ("late", "opening", "allowed"), ("lost", "opening", "allowed"),
        ("lost", "late"), ("lost", "late", "allowed", "opening"), ("lost", "receipts"), ("late", "safety"),
    ],
)
def test_random_items_against_whole_model(features: tuple[str, ...]) -> None:
    """Whatever is carried costs what the textbook model proves, and the plan shown costs that much."""
    rng = np.random.default_rng(len("/".join(features)))
    case = random_items(rng, 12, 7, *features)
    carried = np.flatnonzero(carries(case))
    assert carried.size
    answer = best(case)
    for i in carried:
        single = part(case, np.array([i])).case
        whole = whole_big_m(single)
        if whole.status == "infeasible":
            assert np.isinf(answer.cost[i])
        else:
            assert answer.cost[i] == pytest.approx(whole.objective, rel=1e-6, abs=1e-5)
    served = carried[np.isfinite(answer.cost[carried])]
    shown = cost_of(part(case, served).case, answer.made[served], answer.lost[served])
    assert shown == pytest.approx(answer.cost[served])


@pytest.mark.parametrize("features", [("late", "receipts"), ("lost", "late", "receipts"), ("lost", "safety")])
def test_relaxation_where_not_carried(features: tuple[str, ...]) -> None:
    """Where ``carries`` says no for needs that fall or cannot be lost, the figure is still a lower bound."""
    case = random_items(np.random.default_rng(5), 14, 6, *features)
    answer = best(case)
    outside = np.flatnonzero(~carries(case))
    assert outside.size
    for i in outside:
        whole = whole_big_m(part(case, np.array([i])).case)
        assert answer.cost[i] <= whole.objective + 1e-5


def test_carries_names_what_leaves() -> None:
    """Limits that bind leave the recursion, limits that cannot bind stay in it."""
    case = plain_case(np.full((6, 4), 10.0), 50, 1.0)
    changed = replace(
        case,
        most_lot=np.array([39, 40, np.inf, np.inf, np.inf, np.inf]),
        least_lot=np.array([0, 10, 11, 0, 0, 0]),
        lot_multiple=np.array([0, 0, 0, 5.0, 0, 0]),
        most_stock=np.array([np.inf, np.inf, np.inf, np.inf, 29, 40]),
    )
    assert carries(changed).tolist() == [False, True, False, False, False, True]


def test_needs_net_stock_and_receipts() -> None:
    """Opening stock, safety, closing stock and receipts give the stair that pencil and paper give."""
    case = replace(
        plain_case([[10, 10, 10, 10]], 5, 1.0), opening_stock=np.array([12.0]), safety_stock=np.array([3.0]),
        closing_stock=np.array([8.0]), receipts=np.array([[0.0, 0.0, 25.0, 0.0]]),
    )
    assert needs(case).raw[0].tolist() == [1, 11, -4, 11]
    assert needs(case).stair[0].tolist() == [1, 11, 11, 11]


def test_long_horizon_agrees_with_its_parts() -> None:
    """A horizon put together from classics with a forbidden bridge costs the sum of its parts."""
    demand = np.tile(np.array(CLASSIC_DEMAND, dtype=float), 40)
    holding = np.ones(demand.size)
    holding[11::12] = 1000.0
    answer = best(plain_case(demand, np.tile(np.array(CLASSIC_SETUP, dtype=float), 40), holding))
    assert answer.cost[0] == pytest.approx(40 * 864)


def test_impossible_item() -> None:
    """An item whose first need falls before the first period in which it may be made costs inf."""
    case = plain_case([[5, 5], [0, 5]], 10, 1.0)
    answer = best(replace(case, setup_allowed=np.array([[False, True], [False, True]])))
    assert np.isinf(answer.cost[0])
    assert not answer.made[0].any()
    assert answer.cost[1] == 10
