"""The choice of sites for given values, against all sets that rules, groups, counts and room allow."""

import itertools

import numpy as np
import pytest

from ledgersolve.site_selection.capacitated.choice import Pool, State
from ledgersolve.site_selection.capacitated.knapsack import SiteItems
from ledgersolve.site_selection.case import plain_case
from ledgersolve.site_selection.lanes import Lanes


def allowed_sets(lanes: Lanes, reach: np.ndarray, state: State) -> list[np.ndarray]:
    """All sets the rules allow whose sites hold the demand that must be met."""
    must = float(lanes.demand[np.isinf(lanes.unmet_cost)].sum())
    holds = np.minimum(lanes.capacity, reach)
    sets = []
    for flags in itertools.product([False, True], repeat=lanes.m):
        chosen = np.array(flags)
        groups = lanes.group[chosen & (lanes.group >= 0)]
        if (
            (chosen | (state != 1)).all() and (~chosen | (state != -1)).all()
            and np.unique(groups).size == groups.size and lanes.fewest <= chosen.sum() <= lanes.most
            and holds[chosen].sum() >= must - 1e-9 and lanes.least[chosen].sum() <= lanes.demand.sum() + 1e-9
        ):
            sets.append(chosen)
    return sets


def drawn(seed: int) -> tuple[Lanes, np.ndarray, State, np.ndarray]:
    """Lanes, reach, a state of the sites and values."""
    random = np.random.default_rng(seed)
    m = int(random.integers(1, 8))
    changes: dict[str, object] = {"capacity": random.uniform(2, 14, m)}
    if seed % 3 == 0:
        changes["capacity"] = np.full(m, 6.0)
    if seed % 4 == 1:
        changes["group"] = random.integers(-1, 3, m).astype(np.int64)
        changes["group_names"] = ("a", "b", "c")
    if seed % 5 < 3:
        low = int(random.integers(0, m + 1))
        changes["fewest_sites"], changes["most_sites"] = low, int(random.integers(low, m + 1))
    if seed % 7 == 2:
        changes["unmet_cost"] = 5.0
    if seed % 6 == 3:
        changes["least_volume"] = random.uniform(0, 6, m)
    lanes = Lanes.of(plain_case(np.ones(m), np.ones((m, 6)), random.integers(1, 5, 6), **changes))
    state = random.choice([0, 0, 0, 0, 1, -1], m).astype(np.int8)
    return lanes, SiteItems.of(lanes).reach, state, random.uniform(-10, 20, m)


@pytest.mark.parametrize("seed", range(240))
def test_no_allowed_set_is_worth_less(seed: int) -> None:
    """The value found is below that of every allowed set, and only where no set is left the pool is impossible."""
    lanes, reach, state, value = drawn(seed)
    sets = allowed_sets(lanes, reach, state)
    pool = Pool(lanes, reach, state)
    if pool.impossible:
        assert not sets
        return
    choice = pool.choose(value)
    least = min((float(value[chosen].sum()) for chosen in sets), default=np.inf)
    assert choice.value <= least + 1e-9
    for j in np.flatnonzero(pool.state == 0):
        other_way = [float(value[s].sum()) for s in sets if bool(s[j]) != bool(choice.picked[j])]
        assert choice.value + choice.flip[j] <= min(other_way, default=np.inf) + 1e-7


@pytest.mark.parametrize("seed", range(240))
def test_what_follows_from_the_fixed_sites_holds_in_every_allowed_set(seed: int) -> None:
    """Sites the pool opens or closes on its own are open or closed in all sets allowed."""
    lanes, reach, state, _ = drawn(seed)
    pool = Pool(lanes, reach, state)
    if pool.impossible:
        return
    for chosen in allowed_sets(lanes, reach, state):
        assert chosen[pool.state == 1].all()
        assert not chosen[pool.state == -1].any()


def test_equal_sites_are_counted() -> None:
    """Demand 14 needs three sites with room 6 each: values 5, 7 and 9 give 21, not 14 / 6 of them."""
    lanes = Lanes.of(plain_case(np.ones(4), np.ones((4, 2)), [7, 7], capacity=np.full(4, 6.0)))
    choice = Pool(lanes, SiteItems.of(lanes).reach, np.zeros(4, dtype=np.int8)).choose(np.array([9.0, 5, 7, 30]))
    assert choice.value == pytest.approx(21.0)
    assert choice.roomy.tolist() == [True, True, True, False]


def test_unequal_sites_are_priced_by_room() -> None:
    """Demand 9 on rooms 10 and 3 at values 20 and 3: all of the cheap one and 6 of 10 parts of the other."""
    lanes = Lanes.of(plain_case(np.ones(2), np.ones((2, 3)), [2, 3, 4], capacity=np.array([9.0, 3.0])))
    choice = Pool(lanes, SiteItems.of(lanes).reach, np.zeros(2, dtype=np.int8)).choose(np.array([18.0, 3.0]))
    assert choice.picked[0] or choice.degree[0] > 0
    assert choice.value <= 18.0 + 1e-9
