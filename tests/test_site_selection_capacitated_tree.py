"""Branch and bound on the sites: exact on its own, open without a plan, true to what is fixed for the whole case."""

import numpy as np
import pytest

from ledgersolve.mip import Clock, Limits
from ledgersolve.site_selection.capacitated.best import Best
from ledgersolve.site_selection.capacitated.knapsack import SiteItems
from ledgersolve.site_selection.capacitated.lagrangian import Climb, Effort, Relaxation
from ledgersolve.site_selection.capacitated.serving import Server
from ledgersolve.site_selection.capacitated.tree import Tree
from ledgersolve.site_selection.lanes import Lanes
from tests.site_reference import brute_force
from tests.site_strategies import random_case

FEATURES = {"capacity", "least volume", "lane most", "groups", "counts", "rules", "unmet", "missing lanes"}


def planted(lanes: Lanes) -> tuple[Tree, Best, Climb, Clock]:
    """A tree over all sets of sites, without a plan to begin with."""
    clock = Limits(seconds=60).start()
    items = SiteItems.of(lanes)
    relaxation = Relaxation(lanes, items)
    best = Best(lanes, Server(lanes, items), clock)
    state = lanes.rule.astype(np.int8)
    root = relaxation.climb(items, relaxation.first_prices(), state, Effort(30, 1.0, 8), clock)
    return Tree(relaxation, best, clock, 1e-8, root), best, root, clock


@pytest.mark.parametrize("seed", range(40))
def test_the_tree_alone_finds_and_proves_the_optimum(seed: int) -> None:
    """Without a dive, a move or the wrapper's help the best plan and the bound meet the enumeration."""
    random = np.random.default_rng(seed)
    case = random_case(random, 5, 6, {name for name in FEATURES if random.random() < 0.35} | {"capacity"})
    lanes = Lanes.of(case)
    optimum = brute_force(case)
    if lanes.impossible() is not None or not np.isfinite(optimum):
        return
    tree, best, _, _ = planted(lanes)
    tree.run(60)
    assert tree.closed()
    assert best.cost == pytest.approx(optimum, rel=1e-6, abs=1e-5)
    assert tree.bound() <= optimum + 1e-6
    assert tree.bound() >= optimum * (1 - 1e-6) - 1e-5


def test_without_a_plan_nothing_is_ruled_out() -> None:
    """The cost to beat is infinite, and the root stays open with its own bound."""
    lanes = Lanes.of(random_case(np.random.default_rng(3), 5, 6, {"capacity"}))
    tree, best, root, _ = planted(lanes)
    assert best.plan is None
    assert tree.cutoff() == np.inf
    assert not tree.closed()
    assert tree.bound() == root.bound


def test_what_is_fixed_for_the_case_is_fixed_in_every_node() -> None:
    """A node takes over open and closed sites, and one that contradicts them goes."""
    lanes = Lanes.of(random_case(np.random.default_rng(5), 5, 8, {"capacity"}))
    tree, _, root, _ = planted(lanes)
    free = np.flatnonzero(root.state == 0)
    assert free.size > 1
    fixed = root.state.copy()
    fixed[free[0]] = 1
    tree.adopt(fixed)
    lowest = tree.lowest()
    assert lowest is not None
    assert lowest.state[free[0]] == 1
    assert lowest.state[free[1]] == 0
    fixed[free[0]] = -1
    tree.adopt(fixed)
    assert tree.closed()
