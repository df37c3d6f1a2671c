"""Taking a case apart into groups that share nothing, and putting plans together again."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.groups import binding, groups, joined, without_slack
from ledgersolve.lot_sizing.plan import plan_from_made
from tests.lot_textbook import FEATURES, random_case, textbook_cost


def six_items() -> Case:
    """Items 1 and 3 on resource A, 2 on B through family F on B, 4 in family F, 5 on C that never binds, 6 alone."""
    return plain_case(
        np.full((6, 3), 10.0), 30.0, 1.0, resources=("A", "B", "C"),
        capacity=np.array([[25.0] * 3, [25.0] * 3, [1000.0] * 3]), overtime_limit=np.zeros(3),
        overtime_cost=np.zeros(3), use_cost=np.zeros(3), item_resource=np.array([0, 1, 0, -1, 2, -1]),
        time_per_unit=np.ones(6), families=("F", "G"), family_cost=np.array([5.0, 0.0]),
        family_time=np.zeros(2), family_resource=np.array([-1, -1]), item_family=np.array([-1, 0, 1, 0, 1, -1]),
    )


def test_what_is_shared_stays_together() -> None:
    """A resource or a family with a cost ties items; capacity never reached and a free family do not."""
    found = groups(six_items())
    assert [group.items.tolist() for group in found] == [[0, 2], [1, 3], [4, 5]]
    assert [group.shared for group in found] == [True, True, False]
    assert [group.case.resources for group in found] == [("A",), ("B",), ()]
    assert found[1].case.families == ("F",)
    assert found[1].case.item_family.tolist() == [0, 0]


def test_only_what_can_bind_counts() -> None:
    """Capacity binds where all items together could exceed it in some period, or where use costs money."""
    case = six_items()
    assert binding(case).tolist() == [True, True, False]
    assert binding(replace(case, use_cost=np.array([0.0, 0.0, 1.0])))[2]
    assert not binding(replace(case, capacity=np.full((3, 3), 60.0))).any()


def test_plans_of_the_groups_make_the_whole_plan() -> None:
    """Plans cut by group and joined again are the plan of the case: same cost, every rule kept."""
    case = six_items()
    found = groups(case)
    plans = [plan_from_made(group.case, group.case.demand) for group in found]
    whole = joined(case, found, plans)
    assert audit(case, whole).ok
    assert audit(case, whole).total == pytest.approx(
        sum(audit(group.case, plan).total for group, plan in zip(found, plans, strict=True))
    )


@pytest.mark.parametrize("seed", range(30))
def test_costs_of_the_groups_add_up(seed: int) -> None:
    """The least cost of a case is the sum of its groups' (textbook model for both)."""
    rng = np.random.default_rng([9, seed])
    features = frozenset(name for name in FEATURES if rng.random() < 0.5)
    case = random_case(rng, 4, 4, features)
    apart = [textbook_cost(group.case) for group in groups(case)]
    whole = textbook_cost(case)
    if whole is None:
        assert None in apart
    else:
        assert sum(apart) == pytest.approx(whole, abs=1e-5)


@pytest.mark.parametrize("seed", range(20))
def test_letting_slack_go_changes_no_cost(seed: int) -> None:
    """Without the links that bind nothing the least cost is the same."""
    rng = np.random.default_rng([10, seed])
    case = random_case(rng, 3, 4, frozenset({"resource", "second resource", "setup time", "family", "backlog"}))
    case = replace(case, capacity=np.round(case.capacity * rng.uniform(1, 4)))
    wanted = textbook_cost(case)
    got = textbook_cost(without_slack(case))
    assert (wanted is None) == (got is None)
    if wanted is not None:
        assert got == pytest.approx(wanted, abs=1e-5)
