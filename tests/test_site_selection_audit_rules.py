"""The audit of site-selection plans: every cost part by hand, and every rule broken alone and by a little."""

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.findings import Check
from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.case import CLOSED, FREE, OPEN, Case, plain_case
from ledgersolve.site_selection.plan import Plan

INF, NAN = np.inf, np.nan


def full_case(**changes: object) -> Case:
    """Three sites, four customers, every rule of the workbook, each kept by ``full_plan`` with nothing to spare."""
    rules: dict[str, object] = {
        "capacity": np.array([15.0, 50.0, INF]), "least_volume": np.array([15.0, 0.0, 5.0]),
        "handling_cost": np.array([0.5, 0.25, 8.0]), "rule": np.array([OPEN, FREE, CLOSED]),
        "today": np.array([True, False, True]), "opening_cost": np.array([11.0, 13.0, 17.0]),
        "closing_cost": np.array([19.0, 23.0, 29.0]), "group": np.array([0, -1, 0]), "group_names": ("East",),
        "single_source": np.array([True, False, True, True]),
        "customer_longest": np.array([10.0, NAN, NAN, NAN]), "longest_distance": 70.0,
        "distance": np.array([[10.0, 20, 30, 40], [50, 60, 70, 80], [90, 90, 90, 90]]),
        "lane_most": np.array([[10.0, 5, INF, INF], [INF, 10, 40, INF], [INF, INF, INF, INF]]),
        "share_within": 15 / 70, "share_distance": 20.0, "unmet_cost": 3.0, "fewest_sites": 2, "most_sites": 2,
    }
    lane_cost = [[1.0, 2, 3, 4], [5, 6, 7, INF], [8, 9, 10, 11]]
    return replace(plain_case([100.0, 200, 400], lane_cost, [10.0, 20, 40, 0], **rules), **changes)


def full_plan(**changes: object) -> Plan:
    """S1 serves C1 and a quarter of C2, S2 half of C2 and all of C3; a quarter of C2 is unmet, C4 needs nothing.

    Volumes: S1 10 + 5 = 15, S2 10 + 40 = 50. Within 20 km: 10 + 5 = 15 of 70.
    """
    plan = Plan(
        open=np.array([True, True, False]), site=np.array([0, 0, 1, 1]), customer=np.array([0, 1, 1, 2]),
        share=np.array([1.0, 0.25, 0.5, 1.0]), unmet=np.array([0.0, 0.25, 0.0, 0.0]),
    )
    return replace(plan, **changes)


def broken(case: Case, plan: Plan) -> list[tuple[str, str]]:
    """Rules found broken, each with what it was checked on."""
    return [(check.rule, check.subject) for check in audit(case, plan).broken()]


def first_broken(case: Case, plan: Plan) -> Check:
    """The first check that fails."""
    return audit(case, plan).broken()[0]


def test_cost_parts_per_unit_by_hand() -> None:
    """Fixed 100 + 200, S2 opened 13, S3 closed 29, lanes 10 + 10 + 60 + 280, handling 7.5 + 12.5, unmet 5 x 3."""
    parts = [(part.name, part.amount) for part in audit(full_case(), full_plan()).parts]
    assert parts == [
        ("Fixed cost of open sites", 300.0), ("Opening cost", 13.0), ("Closing cost", 29.0),
        ("Lane cost", 360.0), ("Handling cost", 20.0), ("Unmet demand cost", 15.0),
    ]
    assert audit(full_case(), full_plan()).total == 737.0


def test_lane_cost_for_the_whole_demand_by_hand() -> None:
    """On whole-demand costs lanes cost their shares: 1 + 0.5 + 3 + 7; handling stays per unit."""
    parts = {part.name: part.amount for part in audit(full_case(cost_is_whole=True), full_plan()).parts}
    assert parts["Lane cost"] == 11.5
    assert parts["Handling cost"] == 20.0
    assert parts["Unmet demand cost"] == 15.0


def test_a_lane_that_does_not_exist_costs_nothing_and_fails() -> None:
    """The total stays a figure that can be shown: the missing lane is told by its check, not by its cost."""
    found = audit(full_case(lane_cost=np.array([[INF, 2.0, 3, 4], [5, 6, 7, 8], [8, 9, 10, 11]])), full_plan())
    assert not found.ok
    assert found.total == 727.0


def test_without_an_unmet_cost_nothing_is_charged_for_unmet_demand() -> None:
    """Where all demand must be met, unmet demand has no price and breaks its rule instead."""
    case = full_case(unmet_cost=None)
    assert audit(case, full_plan()).parts[-1].amount == 0.0
    assert broken(case, full_plan()) == [("Unmet demand", "customer C2")]


def test_a_plan_that_uses_up_every_rule_passes() -> None:
    """All rules hold with nothing to spare, and each says on how many rows it was checked."""
    found = audit(full_case(), full_plan())
    assert found.ok
    assert [(check.rule, check.subject) for check in found.checks] == [
        ("Open site", "all 4 deliveries"), ("Lane", "all 4 deliveries"),
        ("Lane named once", "all 4 deliveries"), ("Delivered share", "all 4 deliveries"),
        ("Demand", "all 4 customers"), ("Unmet demand", "all 4 customers"),
        ("Longest distance", "all 4 deliveries under a promise"),
        ("Share within distance", "all demand (70 unit)"),
        ("Single source", "all 3 customers with a single source"),
        ("Capacity", "all 2 sites with a capacity"), ("Least volume", "the only open site with a least volume"),
        ("Most on a lane", "all 4 deliveries"), ("Site rule", "all 2 sites with a rule"),
        ("Fewest sites", "all sites"), ("Most sites", "all sites"), ("Group", "the only group"),
    ]
    assert {check.worst for check in found.checks} == {0.0}
    own = "each its own figure"
    assert [(check.required, check.got) for check in found.checks] == [
        ("from an open site", "holds"), ("a lane that exists and is allowed", "holds"), ("once", "holds"),
        ("above 0", "holds"), ("delivered and unmet together the whole demand", "holds"),
        ("from none to all of the demand", "holds"), (own, "holds"),
        ("at least 21.4286 % within 20 km", "21.4286 %"), ("one site", "holds"), (own, "holds"), (own, "holds"),
        (own, "holds"), (own, "holds"), ("at least 2", "2 open"), ("at most 2", "2 open"),
        ("at most one site open", "holds"),
    ]


def test_rules_that_the_workbook_does_not_ask_for_are_not_listed() -> None:
    """A plain case is checked for its deliveries and its demand only."""
    plan = Plan(np.array([True]), np.array([0]), np.array([0]), np.ones(1), np.zeros(1))
    found = audit(plain_case([5], [[3]]), plan)
    assert found.ok and found.total == 8.0
    assert [check.rule for check in found.checks] == [
        "Open site", "Lane", "Lane named once", "Delivered share", "Demand", "Unmet demand"]


Change = dict[str, object]
LITTLE, ROUNDING = 1.2e-6, 0.9e-6
"""Just beyond the tolerance, and just within it."""


@pytest.mark.parametrize("fraction", [LITTLE, ROUNDING], ids=["just too much", "rounding"])
@pytest.mark.parametrize(
    ("rule", "subject", "worst", "change"),
    [
        ("Capacity", "site S2", 50.0, lambda e: {"capacity": np.array([15.0, 50 * (1 - e), INF])}),
        ("Least volume", "site S1", 15.0, lambda e: {"least_volume": np.array([15 * (1 + e), 0, 5])}),
        ("Most on a lane", "site S2 to customer C3", 40.0,
         lambda e: {"lane_most": np.array([[INF] * 4, [INF, INF, 40 * (1 - e), INF], [INF] * 4])}),
        ("Longest distance", "site S2 to customer C3", 70.0, lambda e: {"longest_distance": 70 * (1 - e)}),
        ("Longest distance", "site S1 to customer C1", 10.0,
         lambda e: {"customer_longest": np.array([10 * (1 - e), NAN, NAN, NAN])}),
        ("Share within distance", "all demand (70 unit)", 1.0, lambda e: {"share_within": 15 / 70 + e}),
    ],
)
def test_a_figure_of_the_case_missed_by_a_little(
    fraction: float, rule: str, subject: str, worst: float, change: Callable[[float], Change]
) -> None:
    """A little more than a millionth of the figure breaks exactly that rule, by that much; less is forgiven."""
    found = audit(full_case(**change(fraction)), full_plan())
    if fraction < LITTLE:
        assert found.ok
        assert {check.worst for check in found.checks} == {0.0}
        return
    assert [(check.rule, check.subject) for check in found.broken()] == [(rule, subject)]
    assert found.broken()[0].worst == pytest.approx(worst * LITTLE, rel=1e-4)


@pytest.mark.parametrize(
    ("rules", "change"),
    [
        ([("Site rule", "site S2")], {"rule": np.array([OPEN, CLOSED, CLOSED])}),
        ([("Site rule", "site S3")], {"rule": np.array([FREE, FREE, OPEN])}),
        ([("Fewest sites", "all sites")], {"fewest_sites": 3, "most_sites": 3}),
        ([("Most sites", "all sites")], {"most_sites": 1, "fewest_sites": None}),
        ([("Group", "group East")], {"group": np.array([0, 0, -1])}),
        ([("Group", "group 1")], {"group": np.array([0, 0, -1]), "group_names": ()}),
        ([("Single source", "customer C2")], {"single_source": np.array([False, True, False, False])}),
        ([("Lane", "site S1 to customer C1")],
         {"lane_cost": np.array([[INF, 2, 3, 4], [5, 6, 7, 8], [8, 9, 10, 11]])}),
        ([("Longest distance", "site S1 to customer C1")],
         {"distance": np.array([[NAN, 20, 30, 40], [50, 60, 70, 80], [90, 90, 90, 90]]),
          "share_within": 5 / 70}),
        ([("Demand", "customer C4")], {"cost_is_whole": True}),
    ],
)
def test_a_rule_of_the_case_that_the_plan_does_not_keep(rules: list[tuple[str, str]], change: Change) -> None:
    """Each rule that cannot be missed by a little is the one found broken, on the row that breaks it."""
    assert broken(full_case(**change), full_plan()) == rules


@pytest.mark.parametrize(
    ("rules", "change"),
    [
        ([("Demand", "customer C3")], {"share": np.array([1.0, 0.25, 0.5, 1 - LITTLE])}),
        ([("Demand", "customer C2")], {"unmet": np.array([0.0, 0.25 - LITTLE, 0, 0])}),
        ([("Demand", "customer C2")], {"unmet": np.array([0.0, 0.25 + LITTLE, 0, 0])}),
        ([("Demand", "customer C3"), ("Unmet demand", "customer C3")], {"unmet": np.array([0, 0.25, -LITTLE, 0])}),
        ([("Unmet demand", "customer C4")], {"unmet": np.array([0, 0.25, 0, LITTLE])}),
        ([("Open site", "site S1 to customer C1"), ("Open site", "site S1 to customer C2"),
          ("Site rule", "site S1"), ("Fewest sites", "all sites")], {"open": np.array([False, True, False])}),
        ([("Site rule", "site S3"), ("Most sites", "all sites"), ("Group", "group East"),
          ("Least volume", "site S3")], {"open": np.array([True, True, True])}),
    ],
)
def test_a_figure_of_the_plan_that_is_wrong(rules: list[tuple[str, str]], change: Change) -> None:
    """A single wrong figure in the plan breaks the rules that concern it, and no other."""
    assert sorted(broken(full_case(), full_plan(**change))) == sorted(rules)


@pytest.mark.parametrize("change", [
    {"share": np.array([1.0, 0.25, 0.5, 1 - ROUNDING])}, {"unmet": np.array([0.0, 0.25, -ROUNDING, 0.0])},
    {"unmet": np.array([0.0, 0.25, 0.0, ROUNDING])},
])
def test_rounding_in_the_plan_is_forgiven(change: Change) -> None:
    """A share off by less than a millionth passes, whether too small, negative or without demand."""
    assert audit(full_case(), full_plan(**change)).ok


def test_unmet_demand_is_between_none_and_all() -> None:
    """More than the whole demand unmet breaks the rule even where a negative share makes up for it."""
    case = plain_case([1], [[1]], [4], unmet_cost=1.0)
    plan = Plan(np.array([True]), np.array([0]), np.array([0]), np.array([-0.5]), np.array([1.5]))
    assert broken(case, plan) == [
        ("Delivered share", "site S1 to customer C1"), ("Unmet demand", "customer C1")]
    all_unmet = Plan(np.array([True]), np.zeros(0, int), np.zeros(0, int), np.zeros(0), np.ones(1))
    assert audit(case, all_unmet).ok


def test_a_demand_that_must_be_met_allows_rounding_only() -> None:
    """Without an unmet cost less than a millionth unmet passes; more, of either sign, does not."""
    def unmet(amount: float) -> list[tuple[str, str]]:
        share = np.array([1 - amount])
        return broken(plain_case([1], [[1]]), Plan(
            np.array([True]), np.zeros(1, int), np.zeros(1, int), share, np.array([amount])))

    assert unmet(ROUNDING) == unmet(-ROUNDING) == []
    assert unmet(LITTLE) == unmet(-LITTLE) == [("Unmet demand", "customer C1")]


def test_deliveries_are_positive_and_named_once() -> None:
    """A delivery of nothing, and a lane named a second time, are each found on their row."""
    case = plain_case([0, 0], [[1, 1], [1, 1]])
    plan = Plan(np.array([True, True]), np.array([0, 0, 1, 1]), np.array([0, 0, 1, 0]),
                np.array([0.5, 0.5, 1.0, 0.0]), np.zeros(2))
    assert broken(case, plan) == [
        ("Lane named once", "site S1 to customer C1"), ("Delivered share", "site S2 to customer C1")]
    assert audit(case, plan).total == 2.0


def test_lanes_of_different_sites_are_not_the_same_lane() -> None:
    """Site 1 to customer 3 and site 2 to customer 2 are two lanes, whatever their numbers add up to."""
    wide = Plan(np.array([True, True]), np.array([0, 1, 0]), np.array([2, 1, 0]), np.ones(3), np.zeros(3))
    assert audit(plain_case([0, 0], np.ones((2, 3))), wide).ok
    tall = Plan(np.ones(3, bool), np.array([2, 0]), np.array([0, 1]), np.ones(2), np.zeros(2))
    assert audit(plain_case([0, 0, 0], np.ones((3, 2))), tall).ok


def test_a_customer_without_demand_may_be_left_out_but_not_served_twice() -> None:
    """On costs per unit a customer with demand 0 needs nothing; more than its whole is still wrong."""
    case = plain_case([0, 0], [[1], [1]], [0])
    nothing = Plan(np.array([True, False]), np.zeros(0, int), np.zeros(0, int), np.zeros(0), np.zeros(1))
    assert audit(case, nothing).ok
    twice = Plan(np.array([True, True]), np.array([0, 1]), np.array([0, 0]), np.array([1.0, LITTLE]), np.zeros(1))
    assert broken(case, twice) == [("Demand", "customer C1")]


def test_a_promise_without_distances_is_not_kept() -> None:
    """Where no distance is known at all, a promise counts as broken without limit, and nothing is near."""
    plan = full_plan()
    found = audit(full_case(distance=None, longest_distance=None, share_within=0.1), plan).broken()
    assert [(check.rule, check.worst) for check in found] == [
        ("Longest distance", INF), ("Share within distance", pytest.approx(0.1))]


def test_a_customers_own_promise_replaces_the_general_one() -> None:
    """An own promise longer than the general one is enough; one without limit is no promise."""
    far = np.array([[10.0, 20, 30, 40], [50, 60, 71, 80], [90, 90, 90, 90]])
    own = np.array([NAN, NAN, 71.0, NAN])
    assert audit(full_case(distance=far, customer_longest=own), full_plan()).ok
    unlimited = full_case(distance=far, customer_longest=np.array([10.0, NAN, INF, NAN]))
    found = next(c for c in audit(unlimited, full_plan()).checks if c.rule == "Longest distance")
    assert found.ok and found.subject == "all 3 deliveries under a promise"


def test_a_promise_of_no_distance_allows_the_same_place_only() -> None:
    """With a longest distance of 0 a delivery over 0 km holds and one over any distance does not."""
    plan = Plan(np.array([True]), np.zeros(1, int), np.zeros(1, int), np.ones(1), np.zeros(1))
    case = plain_case([0], [[1]], distance=np.array([[0.0]]), longest_distance=0.0)
    assert audit(case, plan).ok
    assert broken(replace(case, distance=np.array([[1e-9]])), plan) == [
        ("Longest distance", "site S1 to customer C1")]


def test_near_is_up_to_the_distance_and_unmet_demand_is_not_near() -> None:
    """The distance itself counts as near within rounding; the share is of all demand, met or not."""
    def share(distance: float) -> str:
        case = full_case(share_distance=distance)
        return next(c.got for c in audit(case, full_plan()).checks if c.rule == "Share within distance")

    assert share(20.0) == share(20.0 * (1 - ROUNDING)) == "21.4286 %"
    assert share(20.0 * (1 - LITTLE)) == "14.2857 %"
    assert share(70.0) == "92.8571 %"


def test_no_demand_is_all_within_any_distance() -> None:
    """Where nothing is demanded the share rule holds."""
    case = plain_case([0], [[1]], [0], share_within=1.0, share_distance=5.0, distance=np.array([[9.0]]))
    plan = Plan(np.array([True]), np.zeros(0, int), np.zeros(0, int), np.zeros(0), np.zeros(1))
    found = audit(case, plan)
    assert found.ok
    assert next(c.got for c in found.checks if c.rule == "Share within distance") == "100 %"


def test_figures_below_one_unit_count_like_others() -> None:
    """A demand of half a unit is to be served, may stay unmet at a price and is part of the share within."""
    half = {"distance": np.array([[9.0]]), "share_within": 1.0, "share_distance": 5.0, "unmet_cost": 2.0}
    case = plain_case([0], [[1]], [0.5], **half)
    one, none = np.zeros(1, int), np.zeros(0, int)
    nothing = Plan(np.array([True]), none, none, np.zeros(0), np.zeros(1))
    assert broken(case, nothing) == [("Demand", "customer C1"), ("Share within distance", "all demand (0.5 unit)")]
    unmet = replace(nothing, unmet=np.ones(1))
    assert broken(replace(case, share_within=None), unmet) == []
    served = Plan(np.array([True]), one, one, np.ones(1), np.zeros(1))
    assert broken(case, served) == [("Share within distance", "all demand (0.5 unit)")]
    asked = replace(case, share_within=None, least_volume=np.array([0.75]))
    assert broken(asked, served) == [("Least volume", "site S1")]


@pytest.mark.parametrize("half", [{"share_within": None}, {"share_distance": None}])
def test_half_a_share_rule_is_no_rule(half: Change) -> None:
    """A share without a distance, or a distance without a share, is not checked."""
    assert "Share within distance" not in {c.rule for c in audit(full_case(**half), full_plan()).checks}


def test_a_closed_site_owes_no_least_volume_and_a_full_one_no_more() -> None:
    """Least volumes bind open sites only, and are checked against units, not shares."""
    case = full_case(least_volume=np.array([0.0, 50.0, 1e9]))
    assert audit(case, full_plan()).ok
    closed = replace(case, least_volume=np.array([0.0, 0, 1e9]))
    found = next(c for c in audit(closed, full_plan()).checks if c.rule == "Least volume")
    assert found.ok and found.subject == "all 0 open sites with a least volume"


def test_a_capacity_of_nothing_carries_nothing() -> None:
    """Capacity 0 has no tolerance: the smallest volume is too much."""
    plan = Plan(np.array([True]), np.zeros(1, int), np.zeros(1, int), np.ones(1), np.zeros(1))
    assert broken(plain_case([0], [[1]], [1e-9], capacity=np.zeros(1)), plan) == [("Capacity", "site S1")]
    assert audit(plain_case([0], [[1]], [0], capacity=np.zeros(1)), plan).ok


def test_a_single_source_may_stay_unserved() -> None:
    """At most one site: a customer with a single source and nothing delivered keeps the rule."""
    case = plain_case([0, 0], [[1], [1]], [4], single_source=np.array([True]), unmet_cost=1.0)
    plan = Plan(np.array([True, True]), np.zeros(0, int), np.zeros(0, int), np.zeros(0), np.ones(1))
    assert audit(case, plan).ok


def test_counts_say_by_how_many() -> None:
    """Two sites too few and two too many are told as such."""
    few = first_broken(full_case(fewest_sites=4, most_sites=None), full_plan())
    many = first_broken(full_case(fewest_sites=None, most_sites=0), full_plan())
    assert (few.rule, few.required, few.got, few.worst) == ("Fewest sites", "at least 4", "2 open", 2.0)
    assert (many.rule, many.required, many.got, many.worst) == ("Most sites", "at most 0", "2 open", 2.0)


@pytest.mark.parametrize(
    ("change", "required", "got"),
    [
        ({"capacity": np.array([15.0, 49.0, INF])}, "at most 49 unit", "50 unit"),
        ({"least_volume": np.array([16.0, 0, 0])}, "at least 16 unit", "15 unit"),
        ({"lane_most": np.array([[9.0, INF, INF, INF], [INF] * 4, [INF] * 4])}, "at most 9 unit", "10 unit"),
        ({"longest_distance": 69.5}, "at most 69.5 km", "70 km"),
        ({"share_within": 0.5}, "at least 50 % within 20 km", "21.4286 %"),
        ({"rule": np.array([CLOSED, FREE, FREE])}, "closed", "open"),
        ({"rule": np.array([FREE, FREE, OPEN])}, "open", "closed"),
        ({"group": np.array([0, 0, -1])}, "at most one site open", "2 open"),
        ({"single_source": np.array([False, True, False, False])}, "one site", "2 sites"),
        ({"cost_is_whole": True}, "delivered and unmet together the whole demand", "0 %"),
        ({"unmet_cost": None}, "none", "25 % unmet"),
        ({"lane_cost": np.array([[INF, 2, 3, 4], [5, 6, 7, 8], [8, 9, 10, 11]])},
         "a lane that exists and is allowed", "no such lane"),
    ],
)
def test_the_words_say_what_was_required_and_what_the_plan_does(
    change: Change, required: str, got: str
) -> None:
    """Figures come with their unit, as the workbook has them."""
    check = first_broken(full_case(**change), full_plan())
    assert (check.required, check.got, check.ok) == (required, got, False)
    if check.rule in ("Site rule", "Group", "Single source", "Demand", "Lane"):
        assert check.worst == 1.0


@pytest.mark.parametrize(
    ("change", "required", "got"),
    [
        ({"open": np.array([False, True, False])}, "from an open site", "the site is closed"),
        ({"site": np.array([0, 1, 1, 1])}, "once", "again"),
        ({"share": np.array([1.0, -0.25, 0.5, 1])}, "above 0", "-0.25"),
        ({"unmet": np.array([0.0, 0.25, 0, 1])}, "from none to all of the demand", "100 % unmet"),
    ],
)
def test_the_words_for_a_wrong_delivery(change: Change, required: str, got: str) -> None:
    """A wrong delivery is told by what it should be and what it is."""
    check = first_broken(full_case(), full_plan(**change))
    assert (check.required, check.got) == (required, got)
    assert check.worst == 1.0


def test_what_is_missing_is_told_in_percent() -> None:
    """A quarter of C2 missing: 75 % are delivered or unmet together, short by 0.25 of the demand."""
    check = first_broken(full_case(), full_plan(share=np.array([1.0, 0.25, 0.25, 1.0])))
    assert (check.subject, check.got, check.worst) == ("customer C2", "75 %", 0.25)


@pytest.mark.parametrize("count", [10, 11, 14])
def test_of_many_broken_rows_the_ten_worst_are_named(count: int) -> None:
    """The worst come first; the rest are one line that says how many and by how much at most."""
    over = np.arange(1.0, count + 1)
    n = np.arange(count)
    case = plain_case(np.zeros(count), np.ones((count, count)), over, capacity=np.full(count, 0.5))
    found = audit(case, Plan(np.ones(count, bool), n, n, np.ones(count), np.zeros(count))).broken()
    named = found[:10]
    assert [check.worst for check in named] == [count - 0.5 - k for k in range(10)]
    assert [check.subject for check in named] == [f"site S{count - k}" for k in range(10)]
    assert [(c.rule, c.subject, c.required, c.got, c.worst) for c in found[10:]] == (
        [("Capacity", f"{count - 10} more", "each its own figure", "broken", count - 10.5)] if count > 10 else [])


def test_rows_that_are_equally_wrong_are_named_in_sheet_order() -> None:
    """Of forty sites over their capacity, every other one by more, the first ten of those are named."""
    n = np.arange(40)
    case = plain_case(np.zeros(40), np.ones((40, 40)), capacity=np.tile([0.5, 0.25], 20))
    found = audit(case, Plan(np.ones(40, bool), n, n, np.ones(40), np.zeros(40))).broken()
    assert [check.subject for check in found] == [*(f"site S{2 * k + 2}" for k in range(10)), "30 more"]


def test_large_figures_are_told_to_the_unit() -> None:
    """Below a million six digits, from a million on every unit."""
    def said(volume: float) -> str:
        plan = Plan(np.array([True]), np.zeros(1, int), np.zeros(1, int), np.ones(1), np.zeros(1))
        return first_broken(plain_case([0], [[1]], [volume], capacity=np.ones(1)), plan).got

    assert said(999_999.4) == "999,999 unit"
    assert said(1_234_567.0) == "1,234,567 unit"
    assert said(1_000_000.0) == "1,000,000 unit"
    assert said(1234.5678) == "1,234.57 unit"


@pytest.mark.parametrize("change", [
    {"open": np.ones(2, bool)}, {"unmet": np.zeros(3)}, {"customer": np.array([0, 1, 1])},
    {"share": np.ones(5)}, {"site": np.array([[0, 0, 1, 1]]), "customer": np.array([[0, 1, 1, 2]]),
                            "share": np.ones((1, 4))},
])
def test_a_plan_of_another_shape_is_refused(change: Change) -> None:
    """A plan that does not fit the case is told so, not half checked."""
    with pytest.raises(ValueError, match="do not fit the case"):
        audit(full_case(), full_plan(**change))


@pytest.mark.parametrize("change", [
    {"site": np.array([0, 0, 1, 3])}, {"site": np.array([-1, 0, 1, 1])}, {"customer": np.array([0, 1, 1, 4])},
    {"customer": np.array([-1, 1, 1, 2])}, {"share": np.array([1.0, 0.25, 0.5, NAN])},
    {"share": np.array([1.0, 0.25, 0.5, INF])}, {"unmet": np.array([0, NAN, 0, 0])},
])
def test_a_plan_with_unknown_numbers_is_refused(change: Change) -> None:
    """Sites and customers that do not exist, and shares that are no numbers, never pass as a plan."""
    with pytest.raises(ValueError, match="unknown site or customer"):
        audit(full_case(), full_plan(**change))
