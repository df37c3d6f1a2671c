"""Preparing a case: which lanes exist, what they cost whole, which rules are settled before any engine starts."""

import numpy as np
import pytest

from ledgersolve.site_selection.case import CLOSED, OPEN, plain_case
from ledgersolve.site_selection.lanes import Lanes

COSTS = [[2.0, 3.0], [4.0, 5.0]]


def test_unit_costs_and_handling_are_multiplied_by_demand() -> None:
    """Per unit: (lane + handling) x demand."""
    lanes = Lanes.of(plain_case([1, 1], COSTS, [10, 20], handling_cost=np.array([1.0, 0.0])))
    assert lanes.cost.tolist() == [[30.0, 80.0], [40.0, 100.0]]


def test_whole_costs_are_not_multiplied_but_handling_is() -> None:
    """On whole-demand costs a lane costs what the sheet says, handling counts by unit."""
    case = plain_case([1, 1], COSTS, [10, 20], handling_cost=np.array([1.0, 0.0]), cost_is_whole=True)
    assert Lanes.of(case).cost.tolist() == [[12.0, 23.0], [4.0, 5.0]]


def test_the_cases_own_costs_are_never_written_to() -> None:
    """Preparing changes nothing in the case, even where its array is used as it stands."""
    case = plain_case([1, 1], COSTS, rule=np.array([CLOSED, 0]))
    lanes = Lanes.of(case)
    assert np.isinf(lanes.cost[0]).all()
    assert case.lane_cost.tolist() == COSTS


def test_customers_without_demand_need_nothing_per_unit_and_service_on_whole_costs() -> None:
    """Demand 0: no lanes are needed per unit; on whole-demand costs the customer is served and never unmet."""
    unit = Lanes.of(plain_case([1, 1], COSTS, [0, 1], unmet_cost=9.0))
    whole = Lanes.of(plain_case([1, 1], COSTS, [0, 1], unmet_cost=9.0, cost_is_whole=True))
    assert unit.needs.tolist() == [False, True]
    assert np.isinf(unit.cost[:, 0]).all()
    assert whole.needs.all()
    assert whole.unmet_cost.tolist() == [np.inf, 9.0]


def test_a_promise_forbids_longer_lanes_and_forgives_rounding() -> None:
    """A computed 50.00000001 keeps a promise of 50; a customer's own promise replaces the general one."""
    distance = np.array([[50.00000001, 60.0], [50.1, 70.0]])
    case = plain_case(
        [1, 1], COSTS, distance=distance, longest_distance=50.0, customer_longest=np.array([np.nan, 65.0])
    )
    assert np.isfinite(Lanes.of(case).cost).tolist() == [[True, True], [False, False]]


def test_an_unknown_distance_keeps_no_promise() -> None:
    """A lane whose distance is not known is not used for a promised customer."""
    case = plain_case([1], [[1.0, 1.0]], distance=np.array([[np.nan, 3.0]]), longest_distance=5.0)
    assert np.isfinite(Lanes.of(case).cost).tolist() == [[False, True]]


@pytest.mark.parametrize(("unmet", "usable"), [(None, False), (5.0, True)])
def test_a_single_source_needs_a_lane_that_carries_all(unmet: float | None, usable: bool) -> None:
    """A lane for half the demand is none for a single-source customer, unless the rest may stay unmet."""
    case = plain_case(
        [1], [[1.0]], [10.0], lane_most=np.array([[5.0]]), single_source=np.array([True]), unmet_cost=unmet
    )
    assert bool(np.isfinite(Lanes.of(case).cost[0, 0])) is usable


def test_limits_that_limit_nothing_are_forgotten() -> None:
    """Lane limits above the demand, or of 0, leave no limit behind: the lane is free, or gone."""
    lanes = Lanes.of(plain_case([1, 1], COSTS, [10, 20], lane_most=np.array([[10.0, np.inf], [0.0, 99.0]])))
    assert lanes.limit is None
    assert np.isinf(lanes.cost[1, 0])
    assert not lanes.capacitated


def test_a_capacity_that_holds_everything_is_forgotten() -> None:
    """Only what a site can ever be asked for counts against its capacity."""
    costs = [[1.0, np.inf], [1.0, 1.0]]
    lanes = Lanes.of(plain_case([1, 1], costs, [10, 20], capacity=np.array([10.0, 29.0])))
    assert lanes.capacity.tolist() == [np.inf, 29.0]


def test_network_cost_counts_opening_and_closing() -> None:
    """Closing what is in use today costs once, opening what is not costs once."""
    case = plain_case(
        [100, 200], COSTS, today=np.array([True, False]), opening_cost=np.array([7.0, 7.0]),
        closing_cost=np.array([30.0, 30.0]),
    )
    lanes = Lanes.of(case)
    assert lanes.network_cost(np.array([True, False])) == 100.0
    assert lanes.network_cost(np.array([False, True])) == 237.0
    assert lanes.network_cost(np.array([True, True])) == 307.0


def test_group_mates_of_a_site_that_must_open_are_closed() -> None:
    """At most one of a group opens, so a rule for one settles the others."""
    case = plain_case([1, 1], COSTS, rule=np.array([OPEN, 0]), group=np.array([0, 0]), group_names=("north",))
    assert Lanes.of(case).rule.tolist() == [OPEN, CLOSED]


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"rule": np.array([OPEN, OPEN]), "most_sites": 1}, "at most 1"),
        ({"rule": np.array([OPEN, OPEN]), "group": np.array([0, 0])}, "one group"),
        ({"rule": np.array([CLOSED, 0]), "fewest_sites": 2}, "at least 2"),
        ({"rule": np.array([CLOSED, CLOSED])}, "no lane"),
        ({"most_sites": 0}, "no site may open"),
    ],
)
def test_contradictions_are_named(changes: dict[str, object], words: str) -> None:
    """Rules that cannot hold together are found by counting, and said in words."""
    reason = Lanes.of(plain_case([1, 1], COSTS, **changes)).impossible()
    assert reason is not None and words in reason
