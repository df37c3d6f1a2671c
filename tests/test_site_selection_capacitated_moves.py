"""Local search on the set of open sites: never worse, all rules kept, and its bounds are bounds."""

import numpy as np
import pytest

from ledgersolve.mip import Limits
from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.capacitated.best import Best
from ledgersolve.site_selection.capacitated.knapsack import SiteItems
from ledgersolve.site_selection.capacitated.moves import Moves
from ledgersolve.site_selection.capacitated.serving import Server
from ledgersolve.site_selection.case import Case, plain_case
from ledgersolve.site_selection.lanes import Lanes
from tests.site_strategies import random_case

FEATURES = {"capacity", "least volume", "lane most", "groups", "counts", "rules", "unmet", "share within", "today"}


def moves_of(case: Case) -> Moves:
    """Local search with nothing known yet."""
    clock = Limits(seconds=60).start()
    lanes = Lanes.of(case)
    items = SiteItems.of(lanes)
    return Moves(lanes, items, Best(lanes, Server(lanes, items), clock), clock, lanes.rule.astype(np.int8))


def test_one_swap_reaches_the_near_site() -> None:
    """From the far site alone the search moves to the near one: 10 + 2 in place of 10 + 20."""
    moves = moves_of(plain_case([10, 10], [[1, 1], [10, 10]], [1, 1], capacity=np.array([2.0, 2.0])))
    moves.improve(np.array([False, True]), 10.0)
    assert moves.best.cost == pytest.approx(12.0)
    assert moves.best.plan is not None
    assert moves.best.plan.open.tolist() == [True, False]


@pytest.mark.parametrize("seed", range(50))
def test_plans_found_keep_all_rules_and_are_never_worse(seed: int) -> None:
    """From any set that has deliveries the best plan costs at most what that set costs, and passes the audit."""
    random = np.random.default_rng(seed)
    case = random_case(random, 6, 8, {name for name in FEATURES if random.random() < 0.35} | {"capacity"})
    moves = moves_of(case)
    start = moves.lanes.rule >= 0
    served = moves.best.server.serve(start, moves.clock)
    if served.plan is None or not audit(case, served.plan).ok:
        return
    moves.improve(start, 10.0)
    assert moves.best.plan is not None
    assert audit(case, moves.best.plan).ok
    assert audit(case, moves.best.plan).total <= served.cost + 1e-6 * abs(served.cost) + 1e-6


@pytest.mark.parametrize("seed", range(50))
def test_a_move_is_only_turned_down_if_its_deliveries_cost_as_much(seed: int) -> None:
    """The quick bound of a set never passes what its deliveries cost."""
    random = np.random.default_rng(seed)
    case = random_case(random, 6, 8, {"capacity", "lane most"} if seed % 2 else {"capacity", "unmet"})
    moves = moves_of(case)
    opened = random.random(6) < 0.7
    served = moves.best.server.serve(opened, moves.clock)
    if served.plan is None:
        return
    room = random.uniform(0, 3, 6) * opened
    assert not moves._bounded(opened, room, served.cost + 1e-6 * abs(served.cost) + 1e-6)
