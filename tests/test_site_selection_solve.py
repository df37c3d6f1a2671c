"""The whole job of site selection from case to judged plan, against enumeration and a textbook model."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ledgersolve.mip import Limits, Verdict
from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.case import Case, plain_case
from ledgersolve.site_selection.solve import solve
from tests.site_reference import brute_force, textbook
from tests.site_strategies import FEATURES, cases, random_case

LIMITS = Limits(seconds=60.0, gap=0.0)


def check(case: Case) -> None:
    """Compare with enumeration: cost, verdict, bound and audit."""
    expected = brute_force(case)
    solved = solve(case, LIMITS)
    if math.isinf(expected):
        assert solved.verdict is Verdict.NO_PLAN_EXISTS
        return
    assert solved.verdict is Verdict.PROVEN_BEST
    assert solved.plan is not None and solved.cost is not None and solved.bound is not None
    found = audit(case, solved.plan)
    assert found.ok, found.broken()
    assert solved.cost == pytest.approx(found.total, rel=1e-12, abs=1e-9)
    assert solved.cost == pytest.approx(expected, rel=1e-6, abs=1e-6)
    assert solved.bound <= expected + 1e-6 * max(1.0, abs(expected))


@settings(max_examples=150, deadline=None)
@given(cases())
def test_random_features_agree_with_enumeration(case: Case) -> None:
    """Whatever features a small case combines, cost and verdict are those of trying every set of sites."""
    check(case)


@pytest.mark.parametrize("feature", FEATURES)
def test_each_feature_alone_agrees_with_enumeration(feature: str) -> None:
    """Each feature on its own is honoured: fifteen seeded cases of 3 sites and 4 customers."""
    for seed in range(15):
        check(random_case(np.random.default_rng(seed), 3, 4, {feature}))


@pytest.mark.parametrize("seed", range(4))
def test_middle_sized_cases_agree_with_the_textbook_model(seed: int) -> None:
    """Uncapacitated, capacitated and counted cases of 8 x 20 cost what scipy's solver finds."""
    random = np.random.default_rng(seed)
    features = [set(), {"capacity"}, {"counts", "missing lanes"}, {"capacity", "whole demand"}][seed]
    case = random_case(random, 8, 20, features)
    expected = textbook(case)
    solved = solve(case, LIMITS)
    assert (solved.cost is None) == math.isinf(expected)
    if solved.cost is not None:
        assert solved.cost == pytest.approx(expected, rel=1e-6)


def test_pencil_case_by_hand() -> None:
    """Two sites, three customers: B alone costs 30 + 1 + 1 + 4 = 36, A alone 40, both 52."""
    solved = solve(plain_case([20, 30], [[2, 8, 10], [1, 1, 4]]), LIMITS)
    assert solved.cost == 36.0
    assert solved.plan is not None
    assert solved.plan.open_codes(("A", "B")) == ["B"]


def test_idle_sites_are_closed_unless_a_rule_or_a_count_keeps_them() -> None:
    """A site without deliveries closes, but a rule or a count of sites keeps it open."""
    costs = [[1, 1], [5, 5], [9, 9]]
    free = solve(plain_case([0, 0, 0], costs), LIMITS)
    ruled = solve(plain_case([0, 0, 0], costs, rule=np.array([0, 1, 0])), LIMITS)
    counted = solve(plain_case([0, 3, 2], costs, fewest_sites=2), LIMITS)
    assert free.plan is not None and free.plan.open.tolist() == [True, False, False]
    assert ruled.plan is not None and ruled.plan.open.tolist() == [True, True, False]
    assert counted.plan is not None and counted.plan.open.tolist() == [True, False, True]


def test_contradicting_counts_prove_that_no_plan_exists() -> None:
    """Three sites that must open and at most two that may: proven impossible, without a plan or a bound."""
    case = plain_case([1, 1, 1], np.ones((3, 2)), rule=np.ones(3, dtype=np.int64), most_sites=2)
    solved = solve(case, LIMITS)
    assert solved.verdict is Verdict.NO_PLAN_EXISTS
    assert solved.plan is None and solved.bound is None and solved.notes


def test_a_cancelled_run_claims_nothing() -> None:
    """A run cancelled before it starts gives no false verdict: no plan, or a plan under an honest bound."""
    case = random_case(np.random.default_rng(5), 6, 12, set())
    solved = solve(case, Limits(seconds=10.0, cancelled=lambda: True))
    assert solved.verdict in (Verdict.NONE_FOUND, Verdict.BEST_FOUND, Verdict.PROVEN_BEST)
    if solved.bound is not None:
        assert solved.bound <= textbook(case) * (1 + 1e-9)


@settings(max_examples=25, deadline=None)
@given(cases(), st.randoms(use_true_random=False))
def test_the_order_of_rows_changes_nothing(case: Case, random: object) -> None:
    """Sites and customers listed the other way round cost the same (check case relation 4)."""
    turned = reverse(case)
    first, second = solve(case, LIMITS), solve(turned, LIMITS)
    assert first.verdict is second.verdict
    if first.cost is not None and second.cost is not None:
        assert first.cost == pytest.approx(second.cost, rel=1e-9, abs=1e-9)


def reverse(case: Case) -> Case:
    """Give the case with its sites and customers in reverse order."""
    sites = (
        "sites", "site_names", "fixed_cost", "capacity", "least_volume", "handling_cost", "rule", "today",
        "opening_cost", "closing_cost", "group",
    )
    customers = ("customers", "customer_names", "demand", "single_source", "customer_longest")
    changes = {name: getattr(case, name)[::-1] for name in (*sites, *customers)}
    for name in ("lane_cost", "distance", "lane_most"):
        table = getattr(case, name)
        changes[name] = None if table is None else np.ascontiguousarray(table[::-1, ::-1])
    return replace(case, **changes)


@settings(max_examples=25, deadline=None)
@given(cases(features=("capacity", "counts", "unmet", "today", "handling")))
def test_costs_times_k_cost_k_times_as_much(case: Case) -> None:
    """Multiplying every cost by 8 multiplies the least cost by 8 (check case relation 2)."""
    names = ("fixed_cost", "handling_cost", "opening_cost", "closing_cost", "lane_cost")
    dearer = replace(
        case, unmet_cost=None if case.unmet_cost is None else 8 * case.unmet_cost,
        **{name: 8 * getattr(case, name) for name in names},
    )
    first, second = solve(case, LIMITS), solve(dearer, LIMITS)
    assert (first.cost is None) == (second.cost is None)
    if first.cost is not None and second.cost is not None:
        assert 8 * first.cost == pytest.approx(second.cost, rel=1e-9, abs=1e-9)
