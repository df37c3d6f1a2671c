"""The engine for volumes: optimal on every mix of features, honest at the limit, quick to stop."""

import time
from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.mip import PROVEN_GAP, Limits, Progress
from ledgersolve.site_selection.answer import Answer
from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.capacitated import solve_capacitated
from ledgersolve.site_selection.case import Case, plain_case
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.whole import solve_whole
from tests.site_benchmarks import from_coordinates
from tests.site_reference import brute_force
from tests.site_strategies import FEATURES, VOLUME_FEATURES, random_case


def answered(case: Case, seconds: float = 60.0, gap: float = PROVEN_GAP) -> Answer:
    """The engine's answer."""
    return solve_capacitated(Lanes.of(case), Limits(seconds=seconds, gap=gap).start())


def drawn(seed: int, m: int, n: int) -> Case:
    """A case of at most this size in which volumes or a share rule matter, with some of all features."""
    random = np.random.default_rng(seed)
    sites, customers = int(random.integers(1, m + 1)), int(random.integers(1, n + 1))
    chosen = {name for name in FEATURES if random.random() < 0.35}
    if not chosen & {*VOLUME_FEATURES, "share within"}:
        chosen.add("capacity")
    return random_case(random, sites, customers, chosen)


def check(case: Case, answer: Answer, optimum: float) -> None:
    """Plan, bound and words against the optimum."""
    if not np.isfinite(optimum):
        assert answer.plan is None
        assert answer.impossible
        return
    assert answer.plan is not None
    found = audit(case, answer.plan)
    assert found.ok, found.broken()
    assert found.total == pytest.approx(optimum, rel=1e-5, abs=1e-4)
    assert answer.bound <= optimum + 1e-6 * abs(optimum) + 1e-6
    assert answer.bound >= optimum * (1 - PROVEN_GAP) - 1e-4


@pytest.mark.parametrize("seed", range(120))
def test_every_mix_of_features_is_solved_to_the_optimum(seed: int) -> None:
    """Cost and bound meet the optimum by enumeration, and a case without a plan is called one."""
    case = drawn(seed, 5, 5)
    if Lanes.of(case).impossible() is None:
        check(case, answered(case), brute_force(case))


@pytest.mark.parametrize("seed", range(1000, 1030))
def test_larger_mixes_agree_with_the_whole_model(seed: int) -> None:
    """Up to nine sites and fourteen customers, the whole strong model gives the same cost."""
    case = drawn(seed, 9, 14)
    lanes = Lanes.of(case)
    if lanes.impossible() is not None:
        return
    whole = solve_whole(lanes, Limits(seconds=60, gap=0.0).start())
    check(case, answered(case), np.inf if whole.plan is None else audit(case, whole.plan).total)


def with_room(m: int, n: int, seed: int, *, spare: float = 3.0) -> Case:
    """Points in a square; the sites together hold ``spare`` times the demand, unevenly."""
    case = from_coordinates(m, n, seed)
    random = np.random.default_rng(seed)
    return replace(case, capacity=np.round(random.uniform(0.5, 1.5, m) * spare * case.demand.sum() / m))


@pytest.mark.parametrize("single", [False, True])
def test_a_medium_case_agrees_with_the_whole_model(single: bool) -> None:
    """15 sites and 60 customers with uneven room, split and with single sources."""
    case = replace(with_room(15, 60, 4), single_source=np.full(60, single))
    whole = solve_whole(Lanes.of(case), Limits(seconds=100, gap=0.0).start())
    assert whole.plan is not None
    check(case, answered(case), audit(case, whole.plan).total)


def test_the_limit_leaves_an_honest_plan_and_bound() -> None:
    """After a moment on a case that takes longer, the plan keeps all rules and the bound is below the optimum."""
    case = with_room(40, 200, 1)
    full = answered(case, seconds=100)
    short = answered(case, seconds=0.15)
    assert full.plan is not None
    optimum = audit(case, full.plan).total
    assert short.bound <= optimum + 1e-6 * optimum
    if short.plan is not None:
        assert audit(case, short.plan).ok
        assert audit(case, short.plan).total >= full.bound - 1e-6 * optimum


def test_cancelling_ends_the_run() -> None:
    """Once cancelled the engine comes back with what it has; figures only ever improved on the way."""
    case = with_room(60, 600, 2)
    asked = time.monotonic() + 0.5
    seen: list[Progress] = []
    limits = Limits(
        seconds=300, gap=0.0, cancelled=lambda: time.monotonic() > asked, progress=seen.append
    )
    answer = solve_capacitated(Lanes.of(case), limits.start())
    best = [step.best for step in seen if step.best is not None]
    bound = [step.bound for step in seen if step.bound is not None]
    assert bound == sorted(bound)
    assert best == sorted(best, reverse=True)
    assert not best or answer.plan is not None


def test_room_for_too_little_is_called_impossible() -> None:
    """Two sites with room for 8 together cannot serve 9."""
    case = plain_case([1, 1], [[1, 1], [1, 1]], [4, 5], capacity=np.array([4.0, 4.0]))
    answer = answered(case)
    assert answer.impossible
    assert answer.plan is None


def test_single_sources_that_fit_nowhere_together_are_called_impossible() -> None:
    """Three customers of 3 into two sites of 5: enough room in all, and no way to place them whole."""
    case = plain_case(
        [1, 1], np.ones((2, 3)), [3, 3, 3], capacity=np.array([5.0, 5.0]), single_source=np.ones(3, dtype=bool)
    )
    assert answered(case).impossible


def test_today_is_costed_with_all_sites_fixed() -> None:
    """With every site decided only deliveries are left, and single sources are kept among them."""
    case = replace(
        with_room(12, 40, 3, spare=1.6), today=np.ones(12, dtype=bool), single_source=np.ones(40, dtype=bool)
    ).as_today()
    answer = answered(case)
    assert answer.plan is not None
    assert audit(case, answer.plan).ok
    assert answer.plan.open.all()
    assert answer.bound >= audit(case, answer.plan).total * (1 - PROVEN_GAP)


def test_an_accepted_gap_is_kept() -> None:
    """With a gap of 3 % the run may end early, and the bound says how far it got."""
    case = with_room(30, 150, 5)
    answer = answered(case, gap=0.03)
    assert answer.plan is not None
    cost = audit(case, answer.plan).total
    assert answer.bound >= cost * (1 - 0.03)
    assert answer.bound <= audit(case, answered(case).plan or answer.plan).total * (1 + 1e-6)


def test_a_share_that_no_set_of_sites_reaches_is_called_impossible() -> None:
    """Half of the demand has a near site; nine tenths within that distance cannot be."""
    case = plain_case(
        [1, 1], np.ones((2, 2)), [5, 5], distance=np.array([[1.0, 9.0], [9.0, 9.0]]),
        share_within=0.9, share_distance=2.0,
    )
    answer = answered(case)
    assert answer.impossible
    assert "share within distance" in answer.notes[0]
