"""The engine as a whole: right on random cases, honest verdicts, and the relations that must hold."""

import time
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.groups import part
from ledgersolve.lot_sizing.plan import plan_from_made
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.mip import Limits, Progress, Solved, Verdict
from tests.lot_textbook import FEATURES, random_case, textbook_cost, walk_cost

TOLERANCE = 1e-5
ITEM_FEATURES = [name for name in FEATURES if name not in {
    "resource", "setup time", "second resource", "overtime", "use cost", "family", "family on resource",
}]
QUIET = settings(
    max_examples=40, deadline=None, derandomize=True, suppress_health_check=[HealthCheck.too_slow]
)


def solved(case: Case, seconds: float = 30.0, gap: float = 1e-6) -> Solved:
    """Solve and check what must hold for every answer: audit, bound below cost, verdict by the gap."""
    answer = solve(case, Limits(seconds, gap=gap))
    if answer.plan is not None:
        checked = audit(case, answer.plan)
        assert checked.ok, checked.broken()
        assert answer.cost == pytest.approx(checked.total)
        assert answer.bound is None or answer.bound <= answer.cost
    return answer


def assert_cost(answer: Solved, wanted: float | None) -> None:
    """The answer is proven, at the wanted cost, or proven to have no plan."""
    if wanted is None:
        assert answer.verdict is Verdict.NO_PLAN_EXISTS
        assert answer.plan is None and answer.cost is None
        return
    assert answer.verdict is Verdict.PROVEN_BEST
    assert answer.cost == pytest.approx(wanted, rel=TOLERANCE, abs=TOLERANCE)
    assert answer.bound <= wanted * (1 + 1e-7) + 1e-7


@QUIET
@given(st.integers(0, 10**6), st.sets(st.sampled_from(ITEM_FEATURES)))
def test_one_item_against_a_walk_over_all_states(seed: int, features: set[str]) -> None:
    """One item with any features of its own costs what a walk over every whole quantity finds."""
    case = random_case(np.random.default_rng(seed), 1, 4, frozenset(features))
    assert_cost(solved(case), walk_cost(case))


@QUIET
@given(st.integers(0, 10**6), st.sets(st.sampled_from(FEATURES)))
def test_several_items_against_the_textbook_model(seed: int, features: set[str]) -> None:
    """Several items with any features at all cost what the textbook model finds in another solver."""
    rng = np.random.default_rng(seed)
    case = random_case(rng, int(rng.integers(2, 5)), int(rng.integers(2, 6)), frozenset(features))
    assert_cost(solved(case), textbook_cost(case))


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(6))
def test_middle_sized_against_the_textbook_model(seed: int) -> None:
    """Eight items over ten periods on two resources cost what the textbook model finds."""
    rng = np.random.default_rng([21, seed])
    features = frozenset(name for name in FEATURES if rng.random() < 0.3) | {"resource", "setup time"}
    case = random_case(rng, 8, 8, features)
    assert_cost(solved(case, 60.0), textbook_cost(case))


def base_case() -> Case:
    """A case with a tight resource, setup times, a least lot and backlog, small enough to prove at once."""
    rng = np.random.default_rng(3)
    demand = rng.integers(0, 9, (4, 6)) * 1.0
    return plain_case(
        demand, rng.integers(10, 40, (4, 1)), 1.0, resources=("M",), capacity=np.full((1, 6), 22.0),
        overtime_limit=np.array([5.0]), overtime_cost=np.array([4.0]), use_cost=np.array([3.0]),
        item_resource=np.zeros(4, dtype=np.int64), time_per_unit=np.ones(4), setup_time=np.full(4, 2.0),
        least_lot=np.array([0.0, 6.0, 0.0, 6.0]), backlog_cost=np.array([3.0, np.nan, np.nan, np.nan]),
        opening_stock=np.array([3.0, 0.0, 2.0, 5.0]), most_lot=np.array([20.0, np.inf, np.inf, np.inf]),
    )


@pytest.mark.parametrize(
    "changes",
    [
        {"capacity": np.full((1, 6), 26.0)}, {"overtime_limit": np.array([9.0])}, {"use_cost": np.zeros(1)},
        {"backlog_cost": np.array([3.0, 3.0, 3.0, 3.0])}, {"least_lot": np.zeros(4)},
        {"most_lot": np.full(4, np.inf)}, {"lost_cost": np.full(4, 9.0)},
    ],
)
def test_loosening_a_rule_never_costs_more(changes: dict[str, np.ndarray]) -> None:
    """More capacity or overtime, backlog, lost sales, or lots without limits never raise the least cost."""
    case = base_case()
    assert solved(replace(case, **changes)).cost <= solved(case).cost + 1e-6


def test_costs_scale() -> None:
    """All costs times seven: the least cost is seven times as much, and the same setups are best."""
    case = base_case()
    names = ("setup_cost", "unit_cost", "holding_cost", "backlog_cost", "overtime_cost", "use_cost")
    dear = replace(case, **{name: getattr(case, name) * 7 for name in names})
    assert solved(dear).cost == pytest.approx(7 * solved(case).cost)


def test_quantities_scale() -> None:
    """All quantities times ten, money and time a unit a tenth: the cost stays, and so do the setups' costs."""
    case = base_case()
    big = ("demand", "receipts", "opening_stock", "safety_stock", "closing_stock", "most_stock", "least_lot",
           "most_lot")
    small = ("unit_cost", "holding_cost", "backlog_cost", "time_per_unit")
    scaled = replace(
        case, **{n: getattr(case, n) * 10 for n in big}, **{n: getattr(case, n) / 10 for n in small}
    )
    assert solved(scaled).cost == pytest.approx(solved(case).cost)


def test_the_order_of_rows_does_not_matter() -> None:
    """Items in another order cost the same."""
    case = base_case()
    assert solved(part(case, np.array([2, 0, 3, 1])).case).cost == pytest.approx(solved(case).cost)


def test_nothing_is_made_while_stock_is_left() -> None:
    """Wagner & Whitin's property: the plan without capacity makes an item only when its stock has run out."""
    rng = np.random.default_rng(8)
    case = plain_case(rng.integers(1, 50, (20, 15)), rng.integers(20, 200, (20, 1)), 1.0)
    plan = solved(case).plan
    before = np.hstack([np.zeros((20, 1)), plan.stock[:, :-1]])
    assert (before * plan.made == 0).all()


def test_a_horizon_splits_where_stock_is_zero() -> None:
    """Cut where the best plan holds no stock, the two halves cost what the whole does."""
    demand = [69, 29, 36, 61, 61, 26, 34, 67, 45, 67, 79, 56]
    setup = [85, 102, 102, 101, 98, 114, 105, 86, 119, 110, 98, 114]
    whole = solved(plain_case(demand, [setup], 1.0))
    cut = int(np.flatnonzero(whole.plan.stock[0, 2:-2] < 1e-9)[0]) + 3
    halves = (plain_case(demand[:cut], [setup[:cut]], 1.0), plain_case(demand[cut:], [setup[cut:]], 1.0))
    assert sum(solved(half).cost for half in halves) == pytest.approx(whole.cost)


def hard_case(items: int = 15, periods: int = 30) -> Case:
    """A tight case with setup times that is not proven in a second."""
    rng = np.random.default_rng(4)
    demand = rng.integers(0, 120, (items, periods)) * (rng.random((items, periods)) < 0.8)
    demand[:, :3] //= 3
    setup_time = rng.integers(20, 60, items) * 1.0
    capacity = demand.sum(axis=0).mean() * 1.05 + 0.5 * setup_time.sum()
    return plain_case(
        demand, rng.integers(100, 900, (items, 1)), rng.integers(1, 5, (items, 1)), resources=("M",),
        capacity=np.full((1, periods), capacity), overtime_limit=np.zeros(1), overtime_cost=np.zeros(1),
        use_cost=np.zeros(1), item_resource=np.zeros(items, dtype=np.int64), time_per_unit=np.ones(items),
        setup_time=setup_time,
    )


def test_a_stopped_run_gives_its_plan_and_an_honest_bound() -> None:
    """Cancelled early, the run ends with what it has; the verdict claims no more than the figures."""
    began = time.monotonic()
    seen: list[Progress] = []
    limits = Limits(60.0, gap=0.0, cancelled=lambda: time.monotonic() - began > 4.0, progress=seen.append)
    case = hard_case()
    answer = solve(case, limits)
    assert seen
    assert answer.verdict in (Verdict.BEST_FOUND, Verdict.NONE_FOUND, Verdict.PROVEN_BEST)
    if answer.plan is not None:
        assert audit(case, answer.plan).ok
        assert answer.bound <= answer.cost


def test_progress_only_improves() -> None:
    """Over the whole run the best cost never rises and the bound never falls, and the bound stays below."""
    seen: list[Progress] = []
    case = hard_case(8, 12)
    solve(case, Limits(6.0, gap=0.001, progress=seen.append))
    best = [step.best for step in seen if step.best is not None]
    bound = [step.bound for step in seen if step.bound is not None]
    assert best == sorted(best, reverse=True)
    assert bound == sorted(bound)
    assert bound[-1] <= best[-1] * (1 + 1e-9)


def test_the_accepted_gap_is_within_gap() -> None:
    """With a wide accepted gap the verdict is within gap or better, and the figures bear it out."""
    answer = solve(hard_case(), Limits(60.0, gap=0.2))
    assert answer.verdict in (Verdict.WITHIN_GAP, Verdict.PROVEN_BEST)
    assert answer.gap <= 0.2


def test_no_plan_anywhere_is_said_for_the_whole() -> None:
    """One item that cannot be served makes the whole case impossible, whatever the others do."""
    case = plain_case([[5, 5], [5, 5]], 1.0, 1.0, setup_allowed=np.array([[True, True], [False, True]]))
    assert solved(case).verdict is Verdict.NO_PLAN_EXISTS


def test_nothing_to_do_costs_nothing() -> None:
    """Without demand nothing is made, and that is proven."""
    answer = solved(plain_case(np.zeros((3, 4)), 10.0, 1.0))
    assert (answer.cost, answer.verdict) == (0.0, Verdict.PROVEN_BEST)


def test_a_plan_to_begin_with_is_never_lost() -> None:
    """With no time for a search, the plan given comes back; one that breaks a rule does not."""
    rng = np.random.default_rng(8)
    case = plain_case(
        rng.integers(5, 25, (12, 30)), rng.integers(40, 90, (12, 1)) * np.ones((1, 30)), 1.0, resources=("line",),
        capacity=np.full((1, 30), 230.0), overtime_limit=np.zeros(1), overtime_cost=np.zeros(1),
        use_cost=np.zeros(1), item_resource=np.zeros(12, dtype=np.int64), time_per_unit=np.ones(12),
    )
    begun = plan_from_made(case, case.demand)
    over = Limits(seconds=0.001)
    kept = solve(case, over, begun)
    assert kept.cost is not None
    assert kept.cost <= audit(case, begun).total
    broken = plan_from_made(case, 0.9 * case.demand)
    found = solve(case, over, broken)
    assert found.plan is None or audit(case, found.plan).ok
