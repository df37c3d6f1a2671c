"""Local and tabu search: every cost they report is that of their set, every set is an allowed one."""

import numpy as np
import pytest

from ledgersolve.mip import Limits
from ledgersolve.site_selection.case import Case, plain_case
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.uncapacitated.core import Core
from ledgersolve.site_selection.uncapacitated.engine import cost_of_sites
from ledgersolve.site_selection.uncapacitated.search import Search
from ledgersolve.site_selection.uncapacitated.tabu import Tabu
from tests.site_strategies import random_case

FEATURES = {"groups", "counts", "rules", "today", "unmet", "missing lanes", "zero fixed cost"}


def possible(seed: int) -> Core | None:
    """Core of a random case of 7 x 15; None where counting shows that no plan exists."""
    random = np.random.default_rng(seed)
    lanes = Lanes.of(random_case(random, 7, 15, {f for f in FEATURES if random.random() < 0.4}))
    return None if lanes.impossible() else Core.of(lanes)


def keeps_rules(core: Core, opened: np.ndarray) -> bool:
    """Whether a set of sites is allowed."""
    selection = core.selection
    groups = [g for g in selection.group[opened].tolist() if g >= 0]
    return (
        bool(opened[selection.forced].all()) and not opened[selection.shut].any()
        and len(set(groups)) == len(groups) and selection.fewest <= opened.sum() <= selection.most
    )


@pytest.mark.parametrize("seed", range(60))
def test_search_keeps_the_rules_and_knows_its_cost(seed: int) -> None:
    """After greedy start, moves and restarts the fast figures equal a recount, and all rules hold."""
    core = possible(seed)
    if core is None or core.m == 0:
        return
    search, clock = Search(core), Limits(seconds=60).start()
    random = np.random.default_rng(seed)
    search.greedy()
    costs = [search.cost()]
    for _ in range(3):
        search.improve(np.arange(core.m), clock)
        costs.append(search.cost())
        found = search.found()
        assert keeps_rules(core, found.opened)
        if np.isfinite(found.cost):
            assert found.cost == pytest.approx(cost_of_sites(core, found.opened), rel=1e-9, abs=1e-9)
        else:
            assert np.isinf(cost_of_sites(core, found.opened))
        search.restart(random.random(core.m) < 0.5)
    assert costs[1] <= costs[0] + 1e-9


@pytest.mark.parametrize("seed", range(40))
def test_tabu_search_keeps_the_rules_and_knows_its_cost(seed: int) -> None:
    """The cost a walk carries along equals a recount after many moves, and all rules hold on the way."""
    core = possible(seed)
    if core is None or core.m < 2:
        return
    search = Search(core)
    search.greedy()
    if not search.opened.any():
        return
    tabu = Tabu(core, search.base, search.opened, np.random.default_rng(seed))
    for _ in range(30):
        tabu.run(10.0, 1, Limits(seconds=60).start())
        assert keeps_rules(core, tabu.opened)
        recount = Search(core, search.base)
        recount.opened = tabu.opened.copy()
        recount.restart(tabu.opened)
        assert tabu.now == pytest.approx(recount.cost(), rel=1e-9, abs=1e-9)


def test_tabu_search_leaves_a_local_optimum() -> None:
    """Two sites cover everybody, three are a trap: no single move from the trap saves, the walk still finds two."""
    far = 1000.0
    cover = np.full((5, 6), far)
    cover[0, :3] = cover[1, 3:] = 1.0  # the best pair
    cover[2, [0, 3]] = cover[3, [1, 4]] = cover[4, [2, 5]] = 1.0  # the trap
    core = Core.of(Lanes.of(plain_case([100.0] * 5, cover)))
    trap = np.array([False, False, True, True, True])
    search = Search(core)
    search.restart(trap)
    search.improve(np.arange(5), Limits(seconds=60).start())
    assert search.cost() == 306.0
    found = Tabu(core, search.base, trap, np.random.default_rng(0)).run(30.0, 500, Limits(seconds=60).start())
    assert found is not None and found.tolist() == [True, True, False, False, False]


def test_greedy_serves_those_who_must_be_served() -> None:
    """A site that only costs opens all the same where somebody has no other."""
    case: Case = plain_case([0.0, 500.0], [[1.0, np.inf], [np.inf, 1.0]])
    search = Search(Core.of(Lanes.of(case)))
    search.greedy()
    assert search.opened.tolist() == [True, True]
