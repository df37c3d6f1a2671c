"""The site knapsacks: by hand, against a linear program for every site, and their reduced costs."""

import numpy as np
import pytest
from scipy.optimize import linprog

from ledgersolve.site_selection.capacitated.knapsack import Prices, SiteItems
from ledgersolve.site_selection.case import Case, plain_case
from ledgersolve.site_selection.lanes import Lanes
from tests.site_strategies import random_case

FEATURES = {"capacity", "least volume", "lane most", "missing lanes", "whole demand", "zero demand", "share within"}


def by_program(lanes: Lanes, j: int, prices: Prices, forced: tuple[int, float] | None = None) -> float:
    """Value of site j by scipy's linear program; inf where it cannot reach its least volume.

    ``forced`` puts at least a share on one lane.
    """
    on = np.flatnonzero(np.isfinite(lanes.cost[j]))
    near = np.zeros(on.size) if lanes.near is None else lanes.near[j, on] * lanes.demand[on] * prices.near
    worth = lanes.cost[j, on] - prices.customer[on] - near
    top = np.ones(on.size) if lanes.limit is None else lanes.limit[j, on]
    low = np.zeros(on.size)
    if forced is not None:
        low[on == forced[0]] = forced[1]
    room = min(float(lanes.capacity[j]), 1e9)
    units = lanes.demand[on]
    if on.size == 0:
        return float(lanes.site_cost[j]) if lanes.least[j] <= 0 else np.inf
    found = linprog(
        worth, A_ub=np.array([units, -units]), b_ub=[room, -lanes.least[j]],
        bounds=np.column_stack([low, top]),
    )
    return float(lanes.site_cost[j] + found.fun) if found.status == 0 else np.inf


def drawn(seed: int) -> tuple[Case, Prices]:
    """A case with volumes, and prices."""
    random = np.random.default_rng(seed)
    chosen = {name for name in FEATURES if random.random() < 0.5} | {"capacity"}
    case = random_case(random, int(random.integers(1, 6)), int(random.integers(1, 8)), chosen)
    return case, Prices(random.uniform(-5, 60, case.n), float(random.uniform(0, 3)))


def test_the_value_of_a_full_site_by_hand() -> None:
    """Room 5 takes the customer that saves 4 a unit whole and 3 of the 6 units that save 2: 10 - 8 - 6."""
    lanes = Lanes.of(plain_case([10], [[1, 3]], [2, 6], capacity=np.array([5.0])))
    items = SiteItems.of(lanes)
    values = items.evaluate(Prices(np.array([10.0, 30.0])))
    assert values.value.tolist() == pytest.approx([10 - 8 - 6])
    assert values.share.tolist() == pytest.approx([1.0, 0.5])
    assert items.room_prices(Prices(np.array([10.0, 30.0])), values).tolist() == pytest.approx([2.0])


@pytest.mark.parametrize("seed", range(60))
def test_every_site_is_filled_at_best(seed: int) -> None:
    """The values are those of one linear program a site, with limits, least volumes and near lanes."""
    case, prices = drawn(seed)
    lanes = Lanes.of(case)
    items = SiteItems.of(lanes)
    values = items.evaluate(prices)
    for j in range(lanes.m):
        if min(items.reach[j], lanes.capacity[j]) < lanes.least[j]:
            continue
        assert values.value[j] == pytest.approx(by_program(lanes, j, prices), abs=1e-6)


@pytest.mark.parametrize("seed", range(40))
def test_a_lane_costs_at_least_its_penalty(seed: int) -> None:
    """Putting a share on a lane raises the value of the site by the lane's penalty times the share at least."""
    case, prices = drawn(seed)
    lanes = Lanes.of(case)
    items = SiteItems.of(lanes)
    values = items.evaluate(prices)
    penalty = items.penalties(prices, values)
    for k in range(items.site.size):
        j, i = int(items.site[k]), int(items.customer[k])
        if min(items.reach[j], lanes.capacity[j]) < lanes.least[j]:
            continue
        share = 0.7 if items.limit is None else 0.7 * float(items.limit[k])
        with_share = by_program(lanes, j, prices, (i, share))
        assert with_share >= values.value[j] + share * penalty[k] - 1e-6


def test_a_customer_too_big_for_a_site_that_must_serve_it_whole_has_no_lane_there() -> None:
    """Demand 6 with a single source does not go to a site with room for 5, and split demand does."""
    case = plain_case([1, 1], [[1, 1], [1, 1]], [6, 2], capacity=np.array([5.0, 7.0]))
    whole = plain_case(
        [1, 1], [[1, 1], [1, 1]], [6, 2], capacity=np.array([5.0, 7.0]), single_source=np.array([True, True])
    )
    assert SiteItems.of(Lanes.of(case)).site.tolist() == [0, 0, 1, 1]
    assert SiteItems.of(Lanes.of(whole)).site.tolist() == [0, 1, 1]
