"""Deliveries for a given set of sites, and plans made tidy."""

import numpy as np
import pytest

from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.case import plain_case
from ledgersolve.site_selection.deliveries import cheapest, deliver, plan_cost, tidy, without_idle
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.plan import Plan

BOTH = np.array([True, True])


def test_everybody_goes_to_the_cheapest_open_site_or_stays_unmet() -> None:
    """A customer whose cheapest lane costs more than leaving it unmet is not served."""
    lanes = Lanes.of(plain_case([1, 1], [[2, 9], [5, 8]], unmet_cost=7.0))
    plan = cheapest(lanes, BOTH)
    assert plan is not None
    assert plan.site.tolist() == [0]
    assert plan.unmet.tolist() == [0.0, 1.0]


def test_no_plan_where_somebody_cannot_be_served() -> None:
    """Without a lane from an open site there are no deliveries to give."""
    lanes = Lanes.of(plain_case([1, 1], [[2, np.inf], [5, 8]]))
    assert cheapest(lanes, np.array([True, False])) is None


def test_a_capacity_splits_a_customer() -> None:
    """Ten units at the near site's capacity of 6: the rest comes from the far one."""
    case = plain_case([0, 0], [[1.0], [3.0]], [10.0], capacity=np.array([6.0, 99.0]))
    plan = deliver(Lanes.of(case), BOTH)
    assert plan is not None
    assert plan.share == pytest.approx([0.6, 0.4])
    assert audit(case, plan).total == pytest.approx(6 * 1 + 4 * 3)


def test_rounding_of_a_solver_is_no_delivery() -> None:
    """Shares of a hundred-millionth go, and the rest add up to 1 exactly."""
    lanes = Lanes.of(plain_case([0, 0], [[1.0, 1.0], [3.0, 3.0]]))
    plan = tidy(
        lanes, BOTH, np.array([0, 1, 1]), np.array([0, 0, 1]), np.array([0.99999999, 1e-8, 0.9999999]), np.zeros(2)
    )
    assert plan.site.tolist() == [0, 1]
    assert plan.share.tolist() == [1.0, 1.0]


def test_idle_sites_close_the_dearest_first_down_to_the_fewest() -> None:
    """With at least two sites asked for, the dearer one of two idle sites closes."""
    lanes = Lanes.of(plain_case([1, 5, 9], [[1], [2], [2]], fewest_sites=2))
    plan = Plan(np.array([True] * 3), np.array([0]), np.array([0]), np.ones(1), np.zeros(1))
    assert without_idle(lanes, plan).open.tolist() == [True, True, False]


def test_a_site_whose_closing_costs_more_stays_open() -> None:
    """A site in use today that is dearer to close than to run stays open, though idle."""
    case = plain_case(
        [1, 5], [[1], [2]], today=np.array([False, True]), closing_cost=np.array([0.0, 6.0])
    )
    lanes = Lanes.of(case)
    plan = Plan(BOTH, np.array([0]), np.array([0]), np.ones(1), np.zeros(1))
    kept = without_idle(lanes, plan)
    assert kept.open.tolist() == [True, True]
    assert plan_cost(lanes, kept) == audit(case, kept).total == 7.0
