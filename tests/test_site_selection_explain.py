"""Why no site-selection plan exists: the right rule, the right amount, the right cell."""

import numpy as np
import pytest

from ledgersolve.findings import Explanation, Subject
from ledgersolve.mip import Limits, Verdict
from ledgersolve.site_selection.case import CLOSED, OPEN, Case, plain_case
from ledgersolve.site_selection.explain import explain
from ledgersolve.site_selection.plan import Plan
from ledgersolve.site_selection.solve import solve

LIMITS = Limits(seconds=20)


def three_by_four(**changes: object) -> Case:
    """Three sites, four customers with 10 units each."""
    return plain_case([10, 10, 10], np.ones((3, 4)), [10, 10, 10, 10], **changes)


def why(case: Case) -> Explanation[Plan]:
    """Explain a case, after making sure that it has no plan."""
    assert solve(case, LIMITS).verdict is Verdict.NO_PLAN_EXISTS
    return explain(case, LIMITS)


def test_capacity_below_demand_is_counted_in_units() -> None:
    """Three sites of 12 hold 36, wanted are 40: 4 short, and the closest plan leaves 4 unmet."""
    found = why(three_by_four(capacity=np.full(3, 12.0)))
    assert len(found.conflicts) == 1
    assert found.conflicts[0].amount == pytest.approx(4)
    assert "4 units short" in found.conflicts[0].words
    assert found.conflicts[0].subjects[0].title == "Capacity"
    assert found.closest is not None
    assert found.closest.unmet @ np.full(4, 10.0) == pytest.approx(4)
    assert "leaves 4 units unmet" in found.closest_words


def test_closed_sites_that_take_the_capacity_are_named() -> None:
    """With S3 closed the others hold 30 of 40; opening it mends that."""
    rule = np.array([0, 0, CLOSED])
    found = why(three_by_four(capacity=np.full(3, 15.0), rule=rule))
    assert "closed" in found.conflicts[0].words
    assert found.conflicts[0].subjects[0] == Subject("Sites", ("S3",), "Rule")


def test_a_customer_beyond_every_promise_is_told_its_nearest_site() -> None:
    """C4 is 93 from its nearest site and promised 80."""
    distance = np.full((3, 4), 50.0)
    distance[:, 3] = [120, 93, 200]
    found = why(three_by_four(distance=distance, longest_distance=80.0))
    assert len(found.conflicts) == 1
    assert found.conflicts[0].amount == pytest.approx(13)
    assert "C4" in found.conflicts[0].words
    assert "S2, is 93 km away" in found.conflicts[0].words
    assert found.conflicts[0].subjects[0] == Subject("Settings", ("Longest distance",), "Value")


def test_an_own_promise_is_marked_at_the_customer() -> None:
    """A customer's own longest distance is the cell to mend, not the setting."""
    own = np.array([np.nan, np.nan, np.nan, 20.0])
    found = why(three_by_four(distance=np.full((3, 4), 50.0), customer_longest=own))
    assert found.conflicts[0].subjects[0] == Subject("Customers", ("C4",), "Longest distance")


def test_a_customer_without_a_lane_is_told_apart_from_one_whose_sites_are_closed() -> None:
    """C1 has no lane at all; C2 only to a closed site."""
    costs = np.ones((3, 4))
    costs[:, 0] = np.inf
    costs[:2, 1] = np.inf
    case = plain_case([1, 1, 1], costs, [10] * 4, rule=np.array([0, 0, CLOSED]))
    first, second = why(case).conflicts
    assert "C1 has no lane from any site" in first.words
    assert "C2 could be served from S3 only" in second.words


def test_too_many_forced_sites_meet_the_count() -> None:
    """Three sites must be open and two may be."""
    found = why(three_by_four(rule=np.full(3, OPEN), most_sites=2))
    assert found.conflicts[0].subjects == (Subject("Settings", ("Most sites",), "Value"),)
    assert found.conflicts[0].amount == 1


def test_a_group_with_two_forced_sizes_is_named() -> None:
    """Two sizes of one site cannot both be open."""
    found = why(three_by_four(
        rule=np.array([OPEN, OPEN, 0]), group=np.array([0, 0, -1]), group_names=("Kassel",)))
    assert "Kassel" in found.conflicts[0].words


def test_a_promise_and_a_count_that_only_clash_together_give_both_ways_out() -> None:
    """Each customer is near one site only; one site may be open: loosen the count by 2 or the distance."""
    distance = np.array([[10, 90, 90], [90, 10, 90], [90, 90, 10]], dtype=float)
    case = plain_case([1, 1, 1], np.ones((3, 3)), [1, 1, 1], distance=distance, longest_distance=50.0,
                      most_sites=1)
    found = why(case)
    kinds = {conflict.subjects[-1].key[0]: conflict for conflict in found.conflicts}
    assert kinds["Most sites"].amount == pytest.approx(2)
    assert kinds["Longest distance"].amount == pytest.approx(80)
    assert found.conflicts[0].amount == pytest.approx(2)


def test_least_volume_is_the_smallest_change() -> None:
    """A site that must be open wants 45 units, all demand is 40."""
    found = why(three_by_four(least_volume=np.array([45.0, 0, 0]), rule=np.array([OPEN, 0, 0])))
    assert found.conflicts[0].amount == pytest.approx(5)


def test_unsplittable_customers_are_told() -> None:
    """Three sites of 14 hold 42 of 40, yet four whole customers of 10 do not fit: one a site."""
    case = three_by_four(capacity=np.full(3, 14.0), single_source=np.ones(4, dtype=bool))
    found = why(case)
    titles = [conflict.subjects[-1].key[0] for conflict in found.conflicts]
    assert "Single sourcing" in titles
    capacity = next(c for c in found.conflicts if c.subjects[0].title == "Capacity")
    assert capacity.amount == pytest.approx(6)


def test_a_share_within_distance_that_is_out_of_reach() -> None:
    """Half the demand is near; three quarters are asked for: 10 units too little."""
    distance = np.array([[5, 5, 50, 50]] * 3, dtype=float)
    found = why(three_by_four(distance=distance, share_within=0.75, share_distance=10.0))
    assert found.conflicts[0].amount == pytest.approx(10)
