"""The thin layer on the wrapper: models from arrays, limits, verdicts."""

import math
import threading
import time

import numpy as np
import pytest

from ledgersolve.mip import Clock, Limits, LinearModel, Solved, Verdict, judge, relative_gap


def knapsack() -> LinearModel:
    """Three things, room for 7: best is to take the second and third (worth 9)."""
    model = LinearModel()
    take = model.add_variables(3, upper=1, cost=[-4, -5, -4], whole=True)
    model.add_row(take, [5, 4, 3], upper=7)
    return model


def test_a_whole_number_model_is_solved_to_proof() -> None:
    """SCIP finds the pencil optimum and proves it."""
    result = knapsack().solve(10)
    assert result.status == "optimal"
    assert result.objective == pytest.approx(-9)
    assert result.bound == pytest.approx(-9)
    assert result.values is not None
    assert result.values.tolist() == [0, 1, 1]


def test_a_linear_model_gives_prices() -> None:
    """GLOP gives duals: one more unit wanted costs what the dearest used source costs."""
    model = LinearModel(offset=100.0)
    amount = model.add_variables(3, upper=5, cost=[1, 2, 3])
    model.add_row(amount, [1, 1, 1], lower=7)
    result = model.solve(10)
    assert result.objective == pytest.approx(100 + 5 + 4)
    assert result.duals is not None
    assert result.duals.tolist() == pytest.approx([2])


def test_entries_named_twice_are_summed() -> None:
    """A pair (row, variable) that occurs twice counts as the sum of both."""
    model = LinearModel()
    amount = model.add_variables(1, cost=1)
    model.add_rows(1, [0, 0], [amount[0], amount[0]], [1, 1], lower=6)
    assert model.solve(10).objective == pytest.approx(3)


def test_contradiction_and_runaway_are_told_apart() -> None:
    """No plan and no limit each get their own status."""
    model = LinearModel()
    amount = model.add_variables(1, upper=1, whole=True)
    model.add_row(amount, [1], lower=2)
    assert model.solve(10).status == "infeasible"
    free = LinearModel()
    free.add_variables(1, cost=-1)
    assert free.solve(10).status == "unbounded"


@pytest.mark.parametrize("poison", [math.nan, math.inf, -math.inf])
def test_figures_that_crash_a_solver_never_reach_it(poison: float) -> None:
    """A coefficient or cost that is not finite is refused before any solver sees it."""
    model = LinearModel()
    amount = model.add_variables(2, upper=1, whole=True)
    model.add_row(amount, [1, poison], upper=1)
    with pytest.raises(ValueError, match="not finite"):
        model.solve(1)
    dear = LinearModel()
    dear.add_variables(1, cost=poison)
    with pytest.raises(ValueError, match="not"):
        dear.solve(1)


def test_a_right_hand_side_that_is_not_a_number_is_refused() -> None:
    """A NaN right-hand side would come back as a false optimum."""
    model = LinearModel()
    amount = model.add_variables(1, whole=True)
    model.add_row(amount, [1], lower=math.nan)
    with pytest.raises(ValueError, match="not finite"):
        model.solve(1)


def test_a_hint_is_a_start() -> None:
    """With a node limit of one, the hinted plan is at hand."""
    result = knapsack().solve(10, hint=[0, 1, 1], parameters=["limits/nodes = 1"])
    assert result.objective == pytest.approx(-9)


def test_a_parameter_scip_does_not_know_is_refused() -> None:
    """A misspelt parameter is an error, not a silent default."""
    with pytest.raises(ValueError, match="does not take"):
        knapsack().solve(10, parameters=["limits/nodez = 1"])


def test_cancelling_ends_a_run() -> None:
    """A cancelled run comes back long before its limit with an honest status."""
    rng = np.random.default_rng(5)
    model = LinearModel()
    take = model.add_variables(60, upper=1, cost=-rng.integers(50, 99, 60).astype(float), whole=True)
    for _ in range(30):
        model.add_row(take, rng.integers(20, 99, 60).astype(float), upper=1000)
    stop = threading.Event()
    threading.Timer(0.5, stop.set).start()
    began = time.monotonic()
    result = model.solve(200, cancelled=stop.is_set)
    assert time.monotonic() - began < 100
    assert result.status in ("feasible", "unknown")
    assert result.bound <= result.objective


def test_a_cancelled_clock_has_no_time_left() -> None:
    """The clock of a cancelled run is over at once."""
    clock = Clock(Limits(seconds=100, cancelled=lambda: True))
    assert clock.over()


def test_the_clock_keeps_the_best_figures_and_tells_them() -> None:
    """Best and bound only ever improve; each is passed on with its stage."""
    seen = []
    clock = Limits(seconds=10, progress=seen.append).start()
    clock.note("start", best=10.0, bound=4.0)
    clock.note("worse", best=12.0, bound=3.0)
    clock.end_stage("search")
    assert (clock.best, clock.bound) == (10.0, 4.0)
    assert [progress.stage for progress in seen] == ["start", "worse", "search"]
    assert clock.stages[0].best == 10.0


def test_a_run_stopped_without_a_plan_claims_no_bound() -> None:
    """Splitting a market five ways is out of reach of one node; with negative costs 0 would be a false bound."""
    random = np.random.default_rng(1)
    model = LinearModel()
    x = model.add_variables(40, upper=1, cost=-1.0, whole=True)
    for _ in range(5):
        weights = random.integers(1, 100, 40)
        half = float(weights.sum() // 2)
        model.add_row(x, weights, lower=half, upper=half)
    result = model.solve(20, parameters=["limits/nodes = 1"])
    assert result.status == "unknown"
    assert result.values is None
    assert result.bound == -math.inf


@pytest.mark.parametrize(
    ("cost", "bound", "accepted", "verdict"),
    [
        (100.0, 100.0, 0.0, Verdict.PROVEN_BEST),
        (100.0, 99.9901, 0.0, Verdict.PROVEN_BEST),
        (100.0, 99.98, 0.0, Verdict.BEST_FOUND),
        (100.0, 99.98, 0.01, Verdict.WITHIN_GAP),
        (100.0, 98.0, 0.01, Verdict.BEST_FOUND),
        (0.0, 0.0, 0.0, Verdict.PROVEN_BEST),
        (0.0, -1.0, 0.5, Verdict.BEST_FOUND),
        (5.0, -math.inf, 1.0, Verdict.BEST_FOUND),
    ],
)
def test_a_verdict_is_never_better_than_its_figures(
    cost: float, bound: float, accepted: float, verdict: Verdict
) -> None:
    """0.01 % is proven; anything above needs an accepted gap that allows it."""
    assert judge(cost, bound, accepted) is verdict


def test_a_gap_is_measured_against_the_cost() -> None:
    """(cost - bound) / cost, and none where the bound is reached."""
    assert relative_gap(200.0, 150.0) == pytest.approx(0.25)
    assert relative_gap(200.0, 201.0) == 0.0


@pytest.mark.parametrize("verdict", list(Verdict))
def test_a_result_cannot_contradict_itself(verdict: Verdict) -> None:
    """A verdict with a plan needs plan and cost; one without must have neither."""
    plan, cost = ("plan", 1.0) if not verdict.has_plan else (None, None)
    with pytest.raises(ValueError, match="does not go with"):
        Solved(verdict, plan, cost, None)


@pytest.mark.parametrize("bad", [{"seconds": 0}, {"seconds": math.nan}, {"gap": -0.1}, {"gap": 1.5}])
def test_limits_outside_their_range_are_refused(bad: dict[str, float]) -> None:
    """Limits check themselves when they are made."""
    with pytest.raises(ValueError, match="must be"):
        Limits(**bad)
