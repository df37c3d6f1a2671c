"""The least slack: enough once it is given, and no less would do, by every set of sites."""

import itertools
from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.mip import Limits, Verdict
from ledgersolve.site_selection import elastic
from ledgersolve.site_selection.case import CLOSED, FREE, OPEN, Case, plain_case
from ledgersolve.site_selection.elastic import Loosened, loosen, loosen_all
from ledgersolve.site_selection.explain import explain
from ledgersolve.site_selection.solve import solve

LIMITS = Limits(seconds=20)


def tight_case(seed: int) -> Case:
    """A random case whose rules often clash."""
    rng = np.random.default_rng([12, seed])
    m, n = 4, 6
    distance = rng.integers(5, 100, (m, n)).astype(float)
    changes: dict[str, object] = {"distance": distance}
    if rng.random() < 0.7:
        changes["longest_distance"] = float(rng.integers(20, 70))
    if rng.random() < 0.7:
        changes["capacity"] = rng.integers(8, 22, m).astype(float)
    if rng.random() < 0.7:
        changes["most_sites"] = int(rng.integers(1, 3))
    if rng.random() < 0.3:
        changes["single_source"] = np.ones(n, dtype=bool)
    if rng.random() < 0.4:
        changes["share_within"], changes["share_distance"] = 0.8, 25.0
    changes["rule"] = rng.choice([FREE, FREE, CLOSED, OPEN], m)
    return plain_case(np.ones(m), distance, rng.integers(3, 12, n).astype(float), **changes)


def given(case: Case, part: Loosened) -> Case:
    """Give the case with the slack of one kind."""
    if part.kind == "capacity":
        capacity = case.capacity.copy()
        capacity[part.where] += part.amounts * (1 + 1e-6)
        return replace(case, capacity=capacity)
    if part.kind == "most sites":
        return replace(case, most_sites=(case.most_sites or 0) + round(part.total))
    if part.kind in ("closed", "open"):
        rule = case.rule.copy()
        rule[part.where] = FREE
        return replace(case, rule=rule)
    if part.kind == "promise":
        longest = case.promised()
        longest[part.where] += part.amounts * (1 + 1e-6)
        return replace(case, longest_distance=None, customer_longest=np.where(np.isinf(longest), np.nan, longest))
    if part.kind == "share within":
        return replace(case, share_within=(case.share_within or 0.0) - part.total * (1 + 1e-6) / case.demand.sum())
    assert part.kind == "single source"
    return replace(case, single_source=np.zeros(case.n, dtype=bool))


@pytest.mark.parametrize("seed", range(60))
def test_the_slack_of_one_kind_is_enough_alone(seed: int) -> None:
    """Every change named on its own makes a plan possible; so do all of them together where none does alone."""
    case = tight_case(seed)
    if solve(case, LIMITS).verdict is not Verdict.NO_PLAN_EXISTS:
        pytest.skip("this case has a plan")
    clock = LIMITS.start()
    alone = loosen(case, clock)
    for part in alone:
        assert part.enough
        assert solve(given(case, part), LIMITS).verdict is not Verdict.NO_PLAN_EXISTS, part
    if not alone:
        changed = case
        for part in loosen_all(case, clock):
            changed = given(changed, part)
        assert solve(changed, LIMITS).verdict is not Verdict.NO_PLAN_EXISTS


@pytest.mark.parametrize("seed", range(20))
def test_the_least_capacity_is_that_of_every_set_of_sites(seed: int) -> None:
    """With lanes everywhere: demand less what the largest allowed set holds; and the sites that may open on top."""
    rng = np.random.default_rng([13, seed])
    m, most = 5, int(rng.integers(1, 4))
    case = plain_case(np.ones(m), np.ones((m, 4)), rng.integers(20, 40, 4).astype(float), most_sites=most,
                      capacity=rng.integers(10, 30, m).astype(float))
    held = max(case.capacity[list(chosen)].sum() for chosen in itertools.combinations(range(m), most))
    short = case.demand.sum() - held
    if short <= 0:
        pytest.skip("this case has a plan")
    found = {part.kind: part for part in loosen(case, LIMITS.start())}
    assert found["capacity"].exact
    assert found["capacity"].total == pytest.approx(short)
    order = np.cumsum(np.sort(case.capacity)[::-1])
    if order[-1] >= case.demand.sum():
        needed = int(np.argmax(order >= case.demand.sum())) + 1
        assert found["most sites"].total == needed - most
    else:
        assert "most sites" not in found


def test_large_cases_say_between_which_figures_the_least_lies(monkeypatch) -> None:
    """Without whole-number conditions one site too many is half a site: a lower figure, and one that is enough."""
    distance = np.array([[10, 90, 90], [90, 10, 90], [90, 90, 10]], dtype=float)
    case = plain_case([1, 1, 1], np.ones((3, 3)), [1, 1, 1], distance=distance, longest_distance=50.0, most_sites=1)
    monkeypatch.setattr(elastic, "LARGE", 0)
    found = {part.kind: part for part in loosen(case, LIMITS.start())}
    assert found["most sites"].enough
    assert found["most sites"].total == 2
    assert 0 < found["most sites"].least <= 2
    assert found["promise"].total == pytest.approx(80)


def test_rules_that_only_clash_together_are_said_to_belong_together() -> None:
    """A case that no single change mends: every row says so, names its figures, and all together are enough."""
    case = tight_case(305)
    assert not loosen(case, LIMITS.start())
    found = explain(case, LIMITS)
    assert {conflict.subjects[0].title for conflict in found.conflicts} == {"Value", "Capacity", "Longest distance"}
    assert all(conflict.remedy.endswith("No single change is enough: these 3 rows belong together.")
               for conflict in found.conflicts)
    assert any(conflict.remedy.startswith("Raise Capacity: S1 from ") for conflict in found.conflicts)


def test_what_still_clashes_once_a_far_customer_is_let_in_is_told_at_once() -> None:
    """C3 is 60 from its nearest site and promised 50; even then one site cannot reach all three within theirs."""
    distance = np.array([[10, 90, 90], [90, 10, 90], [90, 90, 60]], dtype=float)
    case = plain_case([1, 1, 1], np.ones((3, 3)), [1, 1, 1], distance=distance, longest_distance=50.0, most_sites=1)
    far, *still = explain(case, LIMITS).conflicts
    assert far.words == "Customer C3 has no allowed site within 50 km; the nearest, S3, is 60 km away."
    assert "raise the setting from 50 to 60" in far.remedy
    assert still[0].words == (
        "Even then: 1 site cannot serve all customers under the other rules.")
    assert still[0].remedy == "Raise Most sites from 1 to 3. Any one of these 2 changes is enough."
    alone = explain(replace(case, most_sites=3), LIMITS).conflicts
    assert len(alone) == 1


def test_where_other_rules_clash_the_closest_plan_bends_them_least() -> None:
    """Sites that must open and a share within distance that nothing reaches: the share is bent, by its amount."""
    distance = np.full((2, 4), 50.0)
    case = plain_case([1, 1], np.ones((2, 4)), [10] * 4, distance=distance, share_within=0.5, share_distance=20.0)
    found = explain(case, LIMITS)
    assert found.closest_words == "bends rules: 20 too little within distance"
    assert "from 50 to 0" in found.conflicts[0].remedy
    assert [row[1] for row in found.shown[0].rows] == pytest.approx([40.0])


def test_the_words_say_how_sure_an_amount_is() -> None:
    """Least and enough: the figure; enough only: between two figures, or at most; neither: at least."""
    site = np.array([0])
    from ledgersolve.site_selection.explain import _said

    def one(enough: bool, least: float) -> str:
        return _said(Loosened("capacity", site, np.array([10.0]), enough, least))

    assert (one(True, 10.0), one(True, 8.0), one(True, 0.0), one(False, 10.0)) == (
        "", "between 8 and ", "at most ", "at least ")


def test_the_closest_plan_is_shown_with_whom_it_leaves_short() -> None:
    """Three sites of 12 for 40 wanted: all open and full, 4 unmet, by customer."""
    case = plain_case([10, 10, 10], np.ones((3, 4)), [10, 10, 10, 10], capacity=np.full(3, 12.0))
    sites, unmet = explain(case, LIMITS).shown
    assert [row[1] for row in sites.rows] == pytest.approx([12.0, 12.0, 12.0])
    assert {row[3] for row in sites.rows} == {"full"}
    assert sum(row[1] for row in unmet.rows) == pytest.approx(4)
