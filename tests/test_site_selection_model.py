"""The strong model: its relaxation, its parts fixed, and the way from its figures back to a plan."""

import numpy as np
import pytest

from ledgersolve.mip import Limits
from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.case import plain_case
from ledgersolve.site_selection.deliveries import cheapest
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.model import build
from ledgersolve.site_selection.whole import solve_whole

COSTS = [[1.0, 2.0, 9.0], [9.0, 2.0, 1.0]]


def test_the_model_is_strong() -> None:
    """Its relaxation equals the optimum here; with summed rows a third of each fixed cost would do."""
    lanes = Lanes.of(plain_case([6.0, 6.0], COSTS))
    relaxed = build(lanes, relaxed=True).model.solve(10.0)
    assert relaxed.status == "optimal"
    assert relaxed.objective == pytest.approx(16.0)
    assert build(lanes).model.solve(10.0).objective == pytest.approx(16.0)


def test_fixed_sites_leave_the_deliveries() -> None:
    """With site 1 alone open everybody is served from it, and the closed site has no lanes in the model."""
    built = build(Lanes.of(plain_case([6.0, 6.0], COSTS)), open_sites=np.array([True, False]))
    result = built.model.solve(10.0)
    assert built.x.size == 3
    assert result.objective == pytest.approx(18.0)


def test_a_part_of_the_lanes_can_be_used() -> None:
    """A model of some lanes knows no others."""
    pairs = (np.array([0, 1, 1]), np.array([0, 1, 2]))
    built = build(Lanes.of(plain_case([6.0, 6.0], COSTS)), pairs)
    result = built.model.solve(10.0)
    assert result.objective == pytest.approx(12.0 + 4.0)


def test_the_hint_of_a_plan_is_the_plan() -> None:
    """Figures handed to the solver as a hint cost what the plan costs, and read back as its sites."""
    case = plain_case([6.0, 6.0], COSTS, [1.0, 2.0, 1.0], unmet_cost=3.0)
    lanes = Lanes.of(case)
    plan = cheapest(lanes, np.array([True, False]))
    assert plan is not None
    built = build(lanes)
    figures = built.hint(plan.open, plan.site, plan.customer, plan.share)
    assert np.isfinite(figures).all()
    cost = built.model.columns()[2] @ figures + built.model.offset
    assert cost == pytest.approx(audit(case, plan).total)
    assert built.read_open(figures).tolist() == [True, False]


def test_a_single_source_is_read_from_its_choice() -> None:
    """With unmet demand allowed the choice of the source is a variable of its own."""
    case = plain_case(
        [0.0, 0.0], [[1.0, 5.0], [2.0, 1.0]], [4.0, 4.0], capacity=np.array([3.0, 4.0]),
        single_source=np.array([True, True]), unmet_cost=6.0,
    )
    lanes = Lanes.of(case)
    built = build(lanes)
    result = built.model.solve(10.0)
    assert result.values is not None
    assert built.chosen.size == 4
    assert built.read_sources(result.values, lanes.single).tolist() == [0, 1]
    # Three of four units from the first site, one unmet, and all four from the second.
    assert result.objective == pytest.approx(3 * 1 + 6 + 4 * 1)


def test_the_whole_model_says_that_no_plan_exists() -> None:
    """A capacity too small for the demand is proven, not a run without result."""
    case = plain_case([1.0], [[1.0]], [10.0], capacity=np.array([9.0]))
    answer = solve_whole(Lanes.of(case), Limits(seconds=10.0).start())
    assert answer.impossible
    assert answer.plan is None


def test_the_whole_model_keeps_its_hint_when_there_is_no_time() -> None:
    """Out of time, the plan given as a hint comes back, without a bound it has not proven."""
    lanes = Lanes.of(plain_case([6.0, 6.0], COSTS))
    hint = cheapest(lanes, np.array([True, True]))
    answer = solve_whole(lanes, Limits(seconds=10.0, cancelled=lambda: True).start(), hint)
    assert answer.plan is hint
    assert answer.bound == -np.inf
