"""The whole strong model as an engine: handed to the wrapper in one piece."""

import math

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case
from ledgersolve.lot_sizing.model import WholeModel, whole_model
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.mip import Clock, Limits, LinearResult, Solved, Verdict, judge

EXACT = 1e-9
"""Gap at which nothing is left to polish."""


def solve_whole(
    case: Case, limits: Limits, start: Plan | None = None, floor: float | None = None
) -> Solved[Plan]:
    """Run the whole model; ``start`` is a plan to begin with, ``floor`` a bound that is proven already.

    A run that ends within the accepted gap early is run on from its plan for a moment: small cases then come
    out exact, not merely within the gap.
    """
    clock = limits.start()
    whole = whole_model(case)
    best, cost = _better(case, start, None, math.inf)
    result = _run(whole, clock, clock.left(), limits.gap, best)
    bound = result.bound if floor is None else max(result.bound, floor)
    best, cost = _taken(whole, result, clock, best, cost)
    if result.status == "optimal" and bound < cost * (1 - EXACT):
        spare = min(clock.left(), 1.0 + clock.elapsed() / 2)
        result = _run(whole, clock, spare, 0.0, best)
        bound = max(bound, result.bound)
        best, cost = _taken(whole, result, clock, best, cost)
    clock.end_stage("whole model", f"{whole.model.variables} variables, {whole.model.rows} rows")
    return _ended(result, best, cost, bound, clock)


def _run(whole: WholeModel, clock: Clock, seconds: float, gap: float, start: Plan | None) -> LinearResult:
    hint = None if start is None else whole.hint(start)
    return whole.model.solve(seconds, gap=gap, hint=hint, cancelled=clock.limits.cancelled)


def _taken(
    whole: WholeModel, result: LinearResult, clock: Clock, best: Plan | None, cost: float
) -> tuple[Plan | None, float]:
    """Take the plan of a run, quantities re-optimised for its setups, if it is better and audited."""
    if result.values is not None:
        made = whole.quantities(result.values)
        again = best_quantities(whole.case, whole.setups(result.values), max(1.0, clock.left()), counts=made)
        best, cost = _better(whole.case, again, best, cost)
        best, cost = _better(whole.case, plan_from_made(whole.case, made), best, cost)
    clock.note("whole model", cost if best is not None else None, result.bound)
    return best, cost


def _better(case: Case, plan: Plan | None, best: Plan | None, cost: float) -> tuple[Plan | None, float]:
    if plan is None:
        return best, cost
    checked = audit(case, plan)
    return (plan, checked.total) if checked.ok and checked.total < cost else (best, cost)


def _ended(result: LinearResult, best: Plan | None, cost: float, bound: float, clock: Clock) -> Solved[Plan]:
    stages = tuple(clock.stages)
    if best is not None:
        known = min(bound, cost) if math.isfinite(bound) else None
        return Solved(judge(cost, bound, clock.limits.gap), best, cost, known, stages)
    if result.status == "infeasible":
        return Solved(Verdict.NO_PLAN_EXISTS, None, None, None, stages)
    return Solved(Verdict.NONE_FOUND, None, None, bound if math.isfinite(bound) else None, stages)
