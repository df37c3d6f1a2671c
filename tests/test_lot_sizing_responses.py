"""First plans by responses: sound on any features, at once where they are easily found, never a lost coupling."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case
from ledgersolve.lot_sizing.plan import family_setups, resource_need
from ledgersolve.lot_sizing.responses import Responses, coarse_steps, first_plan
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.mip import Limits
from tests.bench.lot_cases import Recipe, generated
from tests.lot_textbook import FEATURES, random_case, textbook_cost


def with_rules(case: Case, *rules: str) -> Case:
    """Give the case with rules on half of its items, in sizes that plans meet often."""
    rng = np.random.default_rng(3)
    n, level = case.n, case.demand.mean(axis=1)
    some = {name: rng.random(n) < 0.5 for name in rules}
    changes: dict[str, object] = {}
    if "least" in some:
        changes["least_lot"] = np.where(some["least"], np.round(level * 2), 0.0)
    if "most lot" in some:
        changes["most_lot"] = np.where(some["most lot"], np.round(level * 4), np.inf)
    if "multiple" in some:
        changes["lot_multiple"] = np.where(some["multiple"], np.round(level / 2) + 1, 0.0)
    if "most stock" in some:
        room = np.round(level * 5) + case.opening_stock
        changes["most_stock"] = np.where(some["most stock"], room, np.inf)
    if "closing" in some:
        changes["closing_stock"] = np.round(level * rng.random(n) * 2)
    if "backlog" in some:
        changes["backlog_cost"] = np.where(some["backlog"], case.holding_cost.mean(axis=1) * 4, np.nan)
    if "lost" in some:
        changes["lost_cost"] = np.where(some["lost"], case.holding_cost.mean(axis=1) * 15, np.nan)
    return replace(case, **changes)


@pytest.mark.parametrize(
    "rules",
    [("most lot",), ("multiple",), ("least", "most lot", "lost", "most stock"),
     ("multiple", "least", "most stock", "closing", "backlog", "lost")],
    ids="+".join,
)
def test_mixed_rules_have_a_first_plan(rules: tuple[str, ...]) -> None:
    """Forty items over twenty periods on a resource 92 % full: a plan comes from responses alone."""
    case = with_rules(generated(Recipe(40, 20, 1, 0.92, overtime=0.1), 2), *rules)
    plan = first_plan(case, Limits(60.0).start(), 60.0)
    assert plan is not None
    assert audit(case, plan).ok


def test_families_and_rent_have_a_first_plan() -> None:
    """Families with setup times, overtime, least lots and rented resources have one too."""
    case = generated(Recipe(48, 16, 2, 0.9, families=6, overtime=0.2, least_lots=0.3, use_cost=500.0), 4)
    plan = first_plan(case, Limits(60.0).start(), 60.0)
    assert plan is not None
    assert audit(case, plan).ok


@pytest.mark.parametrize("seed", range(30))
def test_plans_are_sound_on_any_features(seed: int) -> None:
    """On small mixed cases a first plan passes the audit and costs no less than the optimum."""
    rng = np.random.default_rng([13, seed])
    features = frozenset(name for name in FEATURES if rng.random() < 0.4) | {"resource"}
    case = random_case(rng, int(rng.integers(2, 5)), int(rng.integers(3, 6)), features)
    plan = first_plan(case, Limits(20.0).start(), 20.0)
    if plan is not None:
        checked = audit(case, plan)
        assert checked.ok
        wanted = textbook_cost(case)
        assert wanted is not None
        assert checked.total >= wanted * (1 - 1e-6) - 1e-6


def test_the_play_keeps_count() -> None:
    """After many answers, time, families and uses counted on the way are those of the quantities."""
    rng = np.random.default_rng(5)
    features = frozenset({"resource", "second resource", "family", "family on resource", "setup time", "use cost"})
    case = random_case(rng, 6, 5, features)
    responses = Responses(case, np.zeros((6, 5)), np.zeros(case.capacity.shape))
    clock = Limits(20.0).start()
    for seed in range(3):
        responses.round(clock, 20.0, seed)
    made = responses.made
    assert made.any()
    assert responses.need == pytest.approx(resource_need(case, made), abs=1e-9)
    runs = family_setups(case, made > 0)
    assert ((responses.kin[:-1] > 0) == runs).all()
    users = np.zeros((len(case.resources) + 1, 5), dtype=np.int64)
    np.add.at(users, case.item_resource, made > 0)
    np.add.at(users, case.family_resource, runs)
    assert (responses.users[:-1] == users[:-1]).all()


def test_steps_follow_the_rules() -> None:
    """Steps are whole multiples of the lot multiple or common step, and fine enough for lots and stock."""
    case = with_rules(generated(Recipe(30, 26, 1, 0.9), 1), "multiple", "most stock", "most lot")
    step = coarse_steps(case)
    by = case.lot_multiple > 0
    assert (step[by] == case.lot_multiple[by]).all()
    assert (step[~by] == np.round(step[~by])).all()
    limited = ~by & np.isfinite(case.most_lot)
    assert (case.most_lot[limited] >= 3 * step[limited]).all()


def test_every_group_has_a_plan_before_any_is_solved_at_length() -> None:
    """Cancelled once the first plans are there, a case of four groups comes back with a plan."""
    case = generated(Recipe(60, 26, 4, 0.9, families=5, overtime=0.2), 2)
    seen: list[str] = []
    answer = solve(
        case, Limits(600.0, cancelled=lambda: "first plans" in seen, progress=lambda step: seen.append(step.stage))
    )
    assert answer.plan is not None
    assert audit(case, answer.plan).ok
    assert answer.stages[-1].name == "first plans"
