"""One case from checked arrays to a plan with a verdict: prepare, choose the engine, audit, judge."""

import math

from ledgersolve.mip import Clock, Limits, Solved, Verdict, judge
from ledgersolve.site_selection.answer import Answer
from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.case import Case
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.plan import Plan


def solve(case: Case, limits: Limits) -> Solved[Plan]:
    """Find the cheapest plan, or prove that there is none, within the limits.

    The cost is the audit's, the bound the engine's; the verdict follows from these two figures alone.
    """
    clock = limits.start()
    lanes = Lanes.of(case)
    reason = lanes.impossible()
    if reason is not None:
        clock.end_stage("prepare", reason)
        return Solved(Verdict.NO_PLAN_EXISTS, None, None, None, tuple(clock.stages), (reason,))
    clock.end_stage("prepare")
    return _ended(case, _run(lanes, clock), clock)


def _run(lanes: Lanes, clock: Clock) -> Answer:
    """Hand the case to the engine for it; only that one is loaded, for a small case it is half the time."""
    if not lanes.capacitated and lanes.near is None:
        from ledgersolve.site_selection.uncapacitated import solve_uncapacitated

        return solve_uncapacitated(lanes, clock)
    from ledgersolve.site_selection.capacitated import solve_capacitated

    return solve_capacitated(lanes, clock)


def _ended(case: Case, answer: Answer, clock: Clock) -> Solved[Plan]:
    stages = tuple(clock.stages)
    if answer.impossible:
        return Solved(Verdict.NO_PLAN_EXISTS, None, None, None, stages, answer.notes)
    bound = answer.bound if math.isfinite(answer.bound) else None
    if answer.plan is None:
        return Solved(Verdict.NONE_FOUND, None, None, bound, stages, answer.notes, answer.prices)
    cost = audit(case, answer.plan).total
    bound = None if bound is None else min(bound, cost)
    verdict = judge(cost, -math.inf if bound is None else bound, clock.limits.gap)
    return Solved(verdict, answer.plan, cost, bound, stages, answer.notes, answer.prices)
