"""The Lagrangian bound with volumes: below the optimum at any prices, and what it fixes is right."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.mip import Limits
from ledgersolve.site_selection.capacitated.choice import Pool
from ledgersolve.site_selection.capacitated.knapsack import Prices, SiteItems
from ledgersolve.site_selection.capacitated.lagrangian import Climb, Effort, Relaxation
from ledgersolve.site_selection.case import Case
from ledgersolve.site_selection.lanes import Lanes
from tests.site_reference import brute_force
from tests.site_strategies import FEATURES, random_case


def drawn(seed: int) -> Case:
    """A small case with some of all features."""
    random = np.random.default_rng(seed)
    chosen = {name for name in FEATURES if random.random() < 0.35} | {"capacity"}
    return random_case(random, int(random.integers(2, 5)), int(random.integers(2, 6)), chosen)


def climbed(lanes: Lanes, upper: float = np.inf) -> Climb:
    """A climb from the first prices."""
    items = SiteItems.of(lanes)
    relaxation = Relaxation(lanes, items)
    state = lanes.rule.astype(np.int8)
    clock = Limits(seconds=60).start()
    return relaxation.climb(items, relaxation.first_prices(), state, Effort(60, 1.0, 8), clock, upper=upper)


@pytest.mark.parametrize("seed", range(60))
def test_the_bound_never_passes_the_optimum(seed: int) -> None:
    """At the prices of a climb and at random ones the bound stays below the optimum by enumeration."""
    case = drawn(seed)
    lanes = Lanes.of(case)
    optimum = brute_force(case)
    if not np.isfinite(optimum):
        return
    assert climbed(lanes).bound <= optimum + 1e-6
    random = np.random.default_rng(seed)
    items = SiteItems.of(lanes)
    relaxation = Relaxation(lanes, items)
    for _ in range(10):
        customer = np.minimum(random.uniform(0, 80, lanes.n), lanes.unmet_cost)
        prices = Prices(customer, float(random.uniform(0, 5)))
        values = items.evaluate(prices)
        choice = Pool(lanes, items.reach, lanes.rule.astype(np.int8)).choose(values.value)
        assert relaxation.bound_at(prices, values, choice) <= optimum + 1e-6


@pytest.mark.parametrize("seed", range(60))
def test_fixed_sites_leave_the_better_plans(seed: int) -> None:
    """With a target above the optimum the best plan's cost survives among the sites left."""
    case = drawn(seed)
    lanes = Lanes.of(case)
    optimum = brute_force(case)
    if not np.isfinite(optimum):
        return
    climb = climbed(lanes, upper=optimum * (1 + 1e-3) + 0.01)
    rule = np.where(climb.state == 1, 1, np.where(climb.state == -1, -1, 0)).astype(np.int64)
    assert climb.bound <= optimum + 1e-6
    assert brute_force(replace(case, rule=rule)) == pytest.approx(optimum, abs=1e-6)


def test_a_wrong_bound_would_be_seen() -> None:
    """The comparison has teeth: sites with a tenth too little room give bounds above some optimum."""
    passed = 0
    for seed in range(12):
        random = np.random.default_rng(seed)
        case = random_case(random, 4, 5, {"capacity"})
        optimum = brute_force(case)
        wrong = replace(case, capacity=case.capacity * 0.9)
        passed += bool(np.isfinite(optimum) and climbed(Lanes.of(wrong)).bound > optimum + 1e-6)
    assert passed > 0
