"""Items tied by resources or families: decomposition, whole model, or one after the other, by size.

Where no plan is found, the same decomposition looks for the least time missing in all: nothing missing is a
plan to go on from, and a proven bound above nothing is the proof that no plan exists.
"""

from dataclasses import replace

import numpy as np

from ledgersolve.lot_sizing.case import Case
from ledgersolve.lot_sizing.decompose import solve_decomposed
from ledgersolve.lot_sizing.elastic import TINY, short_of_time, shortfall
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.tight import tight_limits
from ledgersolve.lot_sizing.totals import overdrawn
from ledgersolve.lot_sizing.whole import solve_whole
from ledgersolve.lot_sizing.windows import Best, improve
from ledgersolve.mip import Clock, Limits, Progress, Solved, Stage, Verdict, judge

WHOLE_AT_ONCE = 60
"""Setups up to which the whole model needs no help."""
SMALL, FIRST_SHARE_SMALL = 250, 0.1
"""Setups up to which the whole model has most of the time, and the decomposition's share of it before."""
SMALL_SHARE, SMALL_BLIND_SHARE = 0.75, 0.5
"""Share of the time left for the whole model of a small group, and where no plan is known to it yet."""
WORTH_CLOSING = 0.3
"""Time left after windows, as a share of the first run's, from which another run of the whole model is worth it."""
WHOLE_AFTER, FIRST_SHARE = 400, 0.5
"""Setups up to which the whole model gets what time the decomposition leaves, and the latter's share."""
WHOLE_AT_LAST = 2000
"""Setups up to which the whole model is tried where nothing else has found a plan."""
START_SHARE, WINDOWS_SHARE = 0.3, 0.5
"""Shares of the time left for the whole model that has to find the first plan, and for windows after it."""
RESCUE_SHARE = 0.4
"""Share of the time left for the search of the least time missing, where the whole model comes after it."""


def solve_tied(case: Case, limits: Limits, start: Plan | None = None) -> Solved[Plan]:
    """Solve one group of tied items; ``Solved.prices`` are those of the decomposition's bound, if it ran.

    ``start`` is a plan to begin with.
    """
    clock = limits.start()
    if overdrawn(case).any():
        return _impossible(clock, "running totals of time exceed the capacity")
    cells = int(np.count_nonzero(tight_limits(case).most_made > 0))
    if cells <= WHOLE_AT_ONCE or case.n == 1:
        return solve_whole(case, limits, start)
    share = FIRST_SHARE_SMALL if cells <= SMALL else FIRST_SHARE if cells <= WHOLE_AFTER else 1.0
    first = solve_decomposed(case, replace(limits, seconds=limits.seconds * share), start)
    enough = first.gap is not None and first.gap <= limits.gap
    if first.verdict is Verdict.NO_PLAN_EXISTS or enough or clock.over():
        return first
    if cells <= SMALL:
        return _small(case, first, clock)
    return _large(case, first, clock, cells)


def _small(case: Case, first: Solved[Plan], clock: Clock) -> Solved[Plan]:
    """The whole model in one long run, then windows; the search for the least time missing only without a plan."""
    seconds = max(clock.left() * (SMALL_BLIND_SHARE if first.plan is None else SMALL_SHARE), 1e-3)
    limits = replace(clock.limits, seconds=seconds)
    first = _after(first, solve_whole(case, limits, first.plan, first.bound))
    if first.verdict is Verdict.NONE_FOUND and case.resources and not clock.over():
        first = _rescued(case, first, clock, RESCUE_SHARE)
    if first.verdict in (Verdict.NO_PLAN_EXISTS, Verdict.PROVEN_BEST, Verdict.WITHIN_GAP) or clock.over():
        return first
    first = _improved(case, first, clock, 1.0)
    return first if clock.left() < WORTH_CLOSING * limits.seconds else _closed(case, first, clock)


def _large(case: Case, first: Solved[Plan], clock: Clock, cells: int) -> Solved[Plan]:
    """First of all a plan; then windows, and the whole model where its size allows."""
    if first.plan is None and case.resources:
        first = _rescued(case, first, clock, RESCUE_SHARE if cells <= WHOLE_AT_LAST else 1.0)
    fits = cells <= WHOLE_AFTER or (first.plan is None and cells <= WHOLE_AT_LAST)
    if first.verdict is Verdict.NO_PLAN_EXISTS or not fits or clock.over():
        return first
    if first.plan is None:
        limits = replace(clock.limits, seconds=START_SHARE * clock.left())
        first = _after(first, solve_whole(case, limits, floor=first.bound))
        if first.verdict in (Verdict.NO_PLAN_EXISTS, Verdict.PROVEN_BEST) or clock.over():
            return first
    first = _improved(case, first, clock)
    return first if cells > WHOLE_AFTER or clock.over() else _closed(case, first, clock)


def _closed(case: Case, found: Solved[Plan], clock: Clock) -> Solved[Plan]:
    """The whole model from the plan found, in all the time that is left."""
    limits = replace(clock.limits, seconds=max(clock.left(), 1e-3))
    return _after(found, solve_whole(case, limits, found.plan, found.bound))


def _improved(case: Case, found: Solved[Plan], clock: Clock, share: float = WINDOWS_SHARE) -> Solved[Plan]:
    """Improve a plan window by window in a share of the time that is left."""
    if found.plan is None or found.cost is None or found.verdict is Verdict.PROVEN_BEST:
        return found
    bound = -np.inf if found.bound is None else found.bound
    limits = replace(clock.limits, seconds=max(share * clock.left(), 1e-3))
    best, windows = Best(case, found.plan, found.cost), limits.start()
    windows.note("windows", best.cost, bound)
    tried = improve(best, windows)
    windows.end_stage("windows", f"{tried} tried")
    known = None if found.bound is None else min(found.bound, best.cost)
    return replace(found, verdict=judge(best.cost, bound, clock.limits.gap), plan=best.plan, cost=best.cost,
                   bound=known, stages=(*found.stages, *windows.stages))


def _rescued(case: Case, first: Solved[Plan], clock: Clock, share: float) -> Solved[Plan]:
    """Look for the least time missing in a share of the time left; go on from a plan that lacks none."""
    seconds = max(share * clock.left(), 1e-3)
    limits = replace(clock.limits, seconds=0.7 * seconds, gap=0.5, progress=_unheard)
    least = solve_decomposed(short_of_time(case, held=0.0), limits)
    size = float(np.where(np.isfinite(case.capacity), case.capacity, 0.0).max(initial=0.0))
    if least.bound is not None and least.bound > TINY * max(size, 1e-3):
        return _after(first, _impossible(clock, f"at least {least.bound:.6g} time units are missing"))
    if least.plan is None or shortfall(case, least.plan.made).any() or clock.over():
        return replace(first, stages=first.stages + least.stages)
    plan = plan_from_made(case, least.plan.made)
    limits = replace(clock.limits, seconds=min(0.3 * seconds, clock.left()))
    return _after(first, solve_decomposed(case, limits, plan))


def _unheard(_: Progress) -> None:
    """Keep figures in time units out of a progress stream of costs."""


def _after(first: Solved[Plan], second: Solved[Plan]) -> Solved[Plan]:
    """Give the second run's answer with the stages of both, and the prices of the first."""
    prices = first.prices if second.prices is None else second.prices
    notes = tuple(dict.fromkeys(first.notes + second.notes))
    return replace(second, stages=first.stages + second.stages, notes=notes, prices=prices)


def _impossible(clock: Clock, reason: str) -> Solved[Plan]:
    stage = Stage("no plan exists", clock.elapsed(), note=reason)
    return Solved(Verdict.NO_PLAN_EXISTS, None, None, None, (*clock.stages, stage))
