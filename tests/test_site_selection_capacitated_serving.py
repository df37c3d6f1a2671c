"""Deliveries on few lanes first: as cheap as the whole program, with a bound that says so."""

import numpy as np
import pytest

from ledgersolve.mip import Limits
from ledgersolve.site_selection.capacitated import serving
from ledgersolve.site_selection.capacitated.knapsack import SiteItems
from ledgersolve.site_selection.capacitated.serving import Server
from ledgersolve.site_selection.case import plain_case
from ledgersolve.site_selection.deliveries import deliver, plan_cost
from ledgersolve.site_selection.lanes import Lanes
from tests.site_strategies import random_case

FEATURES = {"capacity", "least volume", "lane most", "missing lanes", "unmet", "share within", "zero demand"}


@pytest.mark.parametrize("seed", range(60))
def test_few_lanes_first_end_where_all_lanes_end(seed: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """With two lanes a customer to begin with, cost and bound are those of the program over all lanes."""
    monkeypatch.setattr(serving, "FEW", 0)
    monkeypatch.setattr(serving, "NEAREST", 2)
    random = np.random.default_rng(seed)
    chosen = {name for name in FEATURES if random.random() < 0.4} | {"capacity"}
    lanes = Lanes.of(random_case(random, 5, 9, chosen))
    opened = (lanes.rule >= 0) & (random.random(5) < 0.8)
    served = Server(lanes, SiteItems.of(lanes)).serve(opened, Limits(seconds=60).start())
    reference = deliver(lanes, opened)
    if reference is None:
        assert served.plan is None
        assert served.bound == np.inf
        return
    assert served.cost == pytest.approx(plan_cost(lanes, reference), rel=1e-6, abs=1e-4)
    assert served.bound <= served.cost + 1e-6 * abs(served.cost) + 1e-4
    assert served.bound >= served.cost - 1e-5 * abs(served.cost) - 1e-4


def test_single_sourcing_is_left_aside() -> None:
    """A customer too big for either site is split here, even where it may not be."""
    case = plain_case(
        [1, 1], [[1], [2]], [8], capacity=np.array([5.0, 5.0]), single_source=np.array([False])
    )
    lanes = Lanes.of(case)
    served = Server(lanes, SiteItems.of(lanes)).serve(np.array([True, True]), Limits(seconds=9).start())
    assert served.cost == pytest.approx(2 + 5 * 1 + 3 * 2)
