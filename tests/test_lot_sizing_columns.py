"""Columns, choice and couplings: the master meets the bound, and what is picked fits."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.bound import Charges, Relaxation
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.columns import Pool, generate
from ledgersolve.lot_sizing.couplings import Runs, choose, held
from ledgersolve.lot_sizing.decompose import climb
from ledgersolve.lot_sizing.pick import picks
from ledgersolve.lot_sizing.plan import family_setups, resource_need
from ledgersolve.mip import Limits
from tests.bench.lot_cases import Recipe, generated
from tests.lot_oracle import random_shared, whole_big_m


def climbed(case: Case) -> tuple[Relaxation, Pool, Charges]:
    """Ascend a little and keep what was met."""
    relaxation, pool = Relaxation(case), Pool(case)
    ascent = climb(relaxation, pool, None, 200, np.inf, Limits(60.0).start(), 60.0)
    return relaxation, pool, ascent.best.charges


def test_pool_keeps_each_schedule_once() -> None:
    """A schedule met twice is one column; the cheapest under given charges come first."""
    case = plain_case(np.full((2, 3), 5.0), 10.0, 1.0)
    pool = Pool(case)
    made = np.array([[15.0, 0, 0], [5.0, 10.0, 0]])
    assert pool.add(made, np.array([20.0, 30.0])) == 2
    assert pool.add(made, np.array([20.0, 30.0])) == 0
    assert pool.add(np.array([[5.0, 5.0, 5.0], [5.0, 10.0, 0]]), np.array([30.0, 30.0])) == 1
    pool.gather()
    charges = Relaxation(case).start()
    assert pool.items[pool.promising(charges, 1)].tolist() == [0, 1]
    assert sorted(pool.costs[pool.promising(charges, 1)].tolist()) == [20.0, 30.0]


def test_columns_cost_what_they_cost_in_the_case() -> None:
    """The cost of a column is that of its schedule at the case's own figures, whatever the prices were."""
    case = generated(Recipe(6, 12, 1, 0.9), 4)
    relaxation = Relaxation(case)
    point = relaxation.at(relaxation.start(np.random.default_rng(1).random((1, 12)) * 40))
    made = point.schedules.made
    stock = case.opening_stock[:, None] + np.cumsum(made - case.demand, axis=1)
    cost = (case.setup_cost * (made > 0) + case.holding_cost * stock).sum(axis=1)
    assert relaxation.column_costs(point) == pytest.approx(cost)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_generation_meets_the_bound(seed: int) -> None:
    """At the end of generation master and Lagrangian bound agree: both are the optimum of the master."""
    case = generated(Recipe(4, 5, 1, 0.9, overtime=0.3), seed)
    relaxation, pool, charges = climbed(case)
    point, mix = generate(relaxation, pool, relaxation.at(charges), Limits(60.0).start(), 1e4)
    assert mix is not None
    assert mix.short == pytest.approx(0.0, abs=1e-6)
    assert mix.cost == pytest.approx(point.bound, rel=1e-4)
    whole = whole_big_m(case, 60.0, 1e-3)
    assert point.bound <= whole.objective


@pytest.mark.parametrize("features", [("overtime",), ("overtime", "family"), ("overtime", "use", "family")])
def test_pick_is_one_schedule_an_item_within_the_time(features: tuple[str, ...]) -> None:
    """Whatever is picked serves every item and keeps the capacities, couplings included."""
    case = random_shared(np.random.default_rng(11), 8, 6, *features)
    case = replace(case, overtime_limit=np.full(2, 200.0))
    relaxation, pool, charges = climbed(case)
    clock = Limits(60.0).start()
    point, mix = generate(relaxation, pool, relaxation.at(charges), clock, 1e4)
    assert mix is not None
    picked = list(picks(relaxation, pool, point, mix, 1e4, 20.0, clock, 1e-4))
    assert picked
    for made in picked:
        short = np.maximum(np.cumsum(case.demand - made, axis=1), 0.0)
        assert short.max() <= 1e-6
        assert (resource_need(case, made) <= case.capacity + case.overtime_limit[:, None] + 1e-6).all()


def test_held_choice_is_a_case_without_couplings() -> None:
    """With all runs held open, families and uses are gone and their time is off the capacity."""
    case = random_shared(np.random.default_rng(2), 6, 5, "family", "use")
    everything = Runs(np.ones((2, 5), dtype=bool), np.ones((2, 5), dtype=bool))
    left = held(case, everything)
    assert left.capacity[0] == pytest.approx(case.capacity[0] - case.family_time[0])
    assert left.capacity[1] == pytest.approx(case.capacity[1])
    assert not left.families
    assert not left.use_cost.any()
    closed = held(case, replace(everything, family=np.zeros((2, 5), dtype=bool)))
    assert not closed.setup_allowed[case.item_family >= 0].any()
    assert closed.setup_allowed[case.item_family < 0].all()


def test_choice_of_runs_is_near_the_joint_optimum() -> None:
    """Without capacity the choice of family periods costs within 2 % of the proven best."""
    rng = np.random.default_rng(8)
    demand = rng.integers(5, 40, (9, 12)).astype(float)
    case = replace(
        plain_case(demand, rng.integers(10, 60, (9, 1)), 1.0), families=("F", "G", "H"),
        item_family=np.arange(9) % 3, family_cost=np.array([150.0, 60.0, 300.0]), family_time=np.zeros(3),
        family_resource=np.full(3, -1),
    )
    relaxation, _, charges = climbed(case)
    runs = choose(relaxation, charges, np.full((3, 12), 0.5), Limits(60.0).start(), 0.1)
    left = Relaxation(held(case, runs))
    made = left.at(left.start()).schedules.made
    cost = left.programmes.best().cost.sum() + (case.family_cost[:, None] * family_setups(case, made > 0)).sum()
    assert cost <= 1.02 * whole_big_m(case, 60.0, 1e-3).objective
