"""The Lagrangian bound and its lanes: values by hand, and never above what any set of sites costs."""

import numpy as np
import pytest

from ledgersolve.mip import Limits
from ledgersolve.site_selection.case import Case, plain_case
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.uncapacitated import core as core_module
from ledgersolve.site_selection.uncapacitated.core import Core, NearLanes
from ledgersolve.site_selection.uncapacitated.volume import climb, price_value, start_prices
from tests.site_reference import brute_force
from tests.site_strategies import random_case

FEATURES = {"groups", "counts", "rules", "today", "unmet", "missing lanes", "whole demand", "zero fixed cost"}


def core_of(case: Case) -> Core:
    """The core of a case."""
    return Core.of(Lanes.of(case))


def all_lanes(core: Core) -> NearLanes:
    """Every lane of a core."""
    return NearLanes.below(core, np.full(core.n, np.inf), np.ones(core.m, dtype=bool))


def test_the_bound_by_hand() -> None:
    """Prices 8 and 10 on two sites at 10 with lanes 3, 5 and 4, 9: each saves 10 and 5, so 18 - 0."""
    core = core_of(plain_case([10, 10], [[3, 5], [4, 9]]))
    bound, value, picked, _ = price_value(core, all_lanes(core), core.selection, np.array([8.0, 10.0]))
    assert bound == pytest.approx(18.0)
    assert value.tolist() == [0.0, 5.0]
    assert picked.tolist() == [True, False]  # somebody to serve needs one site, and the cheaper one is free


@pytest.mark.parametrize("seed", range(60))
def test_the_bound_never_passes_the_optimum(seed: int) -> None:
    """Whatever prices are met on a climb, the bound stays below the optimum by enumeration."""
    random = np.random.default_rng(seed)
    case = random_case(random, 4, 4, {f for f in FEATURES if random.random() < 0.4})
    if Lanes.of(case).impossible():
        return
    optimum = brute_force(case)
    core = core_of(case)
    if core.m == 0 or core.n == 0:
        return
    near = all_lanes(core)
    for prices in (random.uniform(0, 60, core.n), core.lowest):
        start = np.where(np.isfinite(prices), prices, 0.0)
        dual = climb(core, near, core.selection, start, optimum if np.isfinite(optimum) else 500.0, 80,
                     Limits(seconds=60).start())
        assert dual.bound <= optimum + 1e-9


def test_a_climb_reaches_the_optimum_where_there_is_no_gap() -> None:
    """On a tight case (two clusters) the bound meets the cost of the best plan."""
    costs = [[1, 1, 9, 9], [9, 9, 1, 1], [4, 4, 4, 4]]
    core = core_of(plain_case([5.5, 5.5, 20], costs))
    dual = climb(core, all_lanes(core), core.selection, core.lowest, 15.0, 400, Limits(seconds=60).start())
    assert dual.bound == pytest.approx(15.0, rel=1e-4)
    assert dual.bound <= 15.0


def test_lanes_beyond_the_ceiling_do_not_matter(monkeypatch: pytest.MonkeyPatch) -> None:
    """The bound over near lanes equals the bound over all lanes at any prices below the ceilings."""
    monkeypatch.setattr(core_module, "ALL_LANES", 0)
    random = np.random.default_rng(3)
    core = core_of(plain_case(random.uniform(5, 50, 12), random.uniform(0, 30, (12, 40))))
    prices = core.lowest + random.uniform(0, 8, core.n)
    near = NearLanes.around(core, core.selection, prices, np.full(core.n, 2.0))
    assert near.size < core.m * core.n
    for given in (prices, prices + 1.9):
        part = price_value(core, near, core.selection, given)
        whole = price_value(core, all_lanes(core), core.selection, given)
        assert part[0] == pytest.approx(whole[0], rel=1e-12)
        assert part[1] == pytest.approx(whole[1], rel=1e-12)


def test_prices_held_back_by_a_ceiling_are_named(monkeypatch: pytest.MonkeyPatch) -> None:
    """A price at a ceiling of our own making is held; one at the cost of staying unmet is not."""
    monkeypatch.setattr(core_module, "ALL_LANES", 0)
    core = core_of(plain_case([1, 1], [[2, 2], [3, 3]], [1, 1], unmet_cost=4.0))
    near = NearLanes.around(core, core.selection, np.array([2.0, 3.9]), np.array([1.0, 1.0]))
    assert near.ceiling.tolist() == [3.0, 4.0]
    assert near.held(near.ceiling).tolist() == [True, False]


def test_start_prices_pay_for_the_sites_of_the_plan() -> None:
    """The fixed cost of 6 is shared by the gaps of 4 and 8 to the second cheapest site: 2 and 4."""
    core = core_of(plain_case([6, 50], [[1, 2], [5, 10]]))
    first, second, source = np.array([1.0, 2.0]), np.array([5.0, 10.0]), np.array([0, 0])
    assert start_prices(core, first, second, source).tolist() == [3.0, 6.0]
