"""From a lot-sizing case to a plan with an honest bound: which method for which group of items."""

import math
from dataclasses import dataclass

import numpy as np

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case
from ledgersolve.lot_sizing.groups import Group, groups, joined
from ledgersolve.lot_sizing.model import whole_model
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.mip import Clock, Limits, Solved, Verdict, judge


@dataclass(frozen=True)
class Outcome:
    """What came of one group: its plan if any, cost and proven bound; ``impossible`` = proven to have none."""

    plan: Plan | None
    cost: float
    bound: float
    impossible: bool = False


def solve(case: Case, limits: Limits) -> Solved[Plan]:
    """Solve a case within the limits; the verdict follows from the audited cost and the proven bound."""
    clock = limits.start()
    parts = groups(case)
    outcomes: list[Outcome] = []
    for number, group in enumerate(parts):
        share = clock.left() / (len(parts) - number)
        outcome = _whole(group, clock, share)
        if outcome.impossible:
            clock.end_stage("whole model", f"items {', '.join(group.case.items[:5])}: no plan exists")
            return Solved(Verdict.NO_PLAN_EXISTS, None, None, None, tuple(clock.stages))
        outcomes.append(outcome)
    clock.end_stage("whole model")
    return _finish(case, parts, outcomes, clock)


def _finish(case: Case, parts: list[Group], outcomes: list[Outcome], clock: Clock) -> Solved[Plan]:
    bound = sum(outcome.bound for outcome in outcomes)
    known = bound if math.isfinite(bound) else None
    plans = [outcome.plan for outcome in outcomes if outcome.plan is not None]
    if len(plans) < len(outcomes):
        return Solved(Verdict.NONE_FOUND, None, None, known, tuple(clock.stages))
    plan = joined(case, parts, plans)
    cost = audit(case, plan).total
    clock.note("done", cost, bound)
    return Solved(judge(cost, bound, clock.limits.gap), plan, cost, known, tuple(clock.stages))


def _whole(group: Group, clock: Clock, seconds: float) -> Outcome:
    """The whole strong model through the wrapper."""
    case = group.case
    whole = whole_model(case)
    result = whole.model.solve(seconds, gap=clock.limits.gap, cancelled=clock.limits.cancelled)
    if result.status == "infeasible":
        return Outcome(None, math.inf, math.inf, impossible=True)
    if result.values is None:
        return Outcome(None, math.inf, result.bound)
    setup, made = whole.setups(result.values), whole.quantities(result.values)
    candidates = [best_quantities(case, setup, max(1.0, clock.left()), counts=made), plan_from_made(case, made)]
    best: Plan | None = None
    cost = math.inf
    for plan in candidates:
        if plan is None:
            continue
        checked = audit(case, plan)
        if checked.ok and checked.total < cost:
            best, cost = plan, checked.total
    return Outcome(best, cost, min(result.bound, cost) if np.isfinite(cost) else result.bound)
