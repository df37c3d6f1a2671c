"""Time that is missing on a resource: where, how much, and the capacity that would be enough, found by solving."""

import math
from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from ledgersolve.findings import Conflict, Subject
from ledgersolve.lot_sizing.case import Case, Floats
from ledgersolve.lot_sizing.elastic import with_time
from ledgersolve.lot_sizing.plan import Plan, resource_need
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.lot_sizing.totals import least_time, overdrawn
from ledgersolve.mip import Clock, Limits, Verdict

MOST_NAMED = 4
"""Periods named in one sentence; the rest is counted."""
DIGITS = 3
"""Digits to which a capacity that would be enough is rounded, upwards."""


def figure(value: float) -> str:
    """A quantity in words: at most two decimals, thousands apart."""
    return f"{value:,.2f}".rstrip("0").rstrip(".")


def missing_time(case: Case, plan: Plan | None, short: Floats, clock: Clock) -> Iterator[Conflict]:
    """Name every resource that lacks time: where the closest plan lacks it, or else by running totals.

    Parameters
    ----------
    plan, short
        The closest plan and the time (R, T) that it lacks; None and zeros where none was found.
    """
    excess = overdrawn(case)
    lacking = np.flatnonzero((short > 0).any(axis=1) | excess.any(axis=1)).tolist()
    for number, r in enumerate(lacking):
        if plan is None or not short[r].any():
            yield _by_totals(case, r, float(excess[r].max()))
            continue
        one_figure = bool((case.capacity[r] == case.capacity[r, 0]).all())
        share = clock.left() / (len(lacking) - number + 1)
        enough = _enough(case, r, short, clock, share) if one_figure and case.t > 1 else None
        if enough is not None:
            yield _in_one(case, plan, short, r, enough)
        else:
            yield from _by_period(case, plan, short, r)


def _by_totals(case: Case, r: int, excess: float) -> Conflict:
    period = f"{case.period_unit} {case.periods[_worst(case, r)]}"
    return Conflict(
        f"{case.resources[r]} is at least {figure(excess)} time units short: {_totals(case, r)}.",
        f"Give {case.resources[r]} {figure(excess)} more up to {period}, or ask for less until then.",
        excess, _cells(case, r, _worst(case, r)),
    )


def _by_period(case: Case, plan: Plan, short: Floats, r: int) -> Iterator[Conflict]:
    """One row a period, each with its own cell."""
    need = resource_need(case, plan.made)[r]
    periods, name = np.flatnonzero(short[r] > 0), case.resources[r]
    together = "" if periods.size == 1 else (
        f" The {periods.size} rows on {name} belong together: {figure(float(short[r].sum()))} in all.")
    for t in periods.tolist():
        missing, period = figure(float(short[r, t])), f"{case.period_unit} {case.periods[t]}"
        yield Conflict(
            f"Capacity of {name} is {missing} short in {period}: needs {figure(float(need[t]))}, "
            f"has {_has(case, r, t)}.{_at_least(case, r)}",
            f"Give {name} {missing} more in {period}, or ask for less until then.{together}",
            float(short[r, t]), _cells(case, r, t),
        )


def _in_one(case: Case, plan: Plan, short: Floats, r: int, enough: tuple[float, float | None]) -> Conflict:
    """One row for a resource with one capacity for all periods: the figure that is enough in its one cell."""
    need, name = resource_need(case, plan.made)[r], case.resources[r]
    periods = np.flatnonzero(short[r] > 0)
    first = int(periods[0])
    if periods.size == 1:
        words = (f"Capacity of {name} is {figure(float(short[r].sum()))} short in {case.period_unit} "
                 f"{case.periods[first]}: needs {figure(float(need[first]))}, has {_has(case, r, first)}.")
    else:
        parts = [f"{case.periods[t]} needs {figure(float(need[t]))}" for t in periods[:MOST_NAMED].tolist()]
        more = f" and {periods.size - MOST_NAMED} more" if periods.size > MOST_NAMED else ""
        words = (f"Capacity of {name} is {figure(float(short[r].sum()))} short in {periods.size} periods together: "
                 f"{', '.join(parts)}{more}; each has {_has(case, r, first)}.")
    figures, least = enough
    sure = "" if least is None else f" (with {figure(least)} there is still no plan)"
    single = ", ".join(f"{figure(float(short[r, t]))} in {case.periods[t]}" for t in periods[:MOST_NAMED].tolist())
    rest = f" and in {periods.size - MOST_NAMED} more" if periods.size > MOST_NAMED else ""
    return Conflict(
        words + _at_least(case, r),
        f"Raise Capacity of {name} from {figure(float(case.capacity[r, 0]))} to {figure(figures)}{sure}; or give it "
        f"more in single periods by the sheet Capacity: {single}{rest}; or ask for less.",
        float(short[r].sum()), _cells(case, r, first),
    )


def _has(case: Case, r: int, t: int) -> str:
    have = figure(float(case.capacity[r, t] + case.overtime_limit[r]))
    return f"{have} with all overtime" if case.overtime_limit[r] > 0 else have


def _at_least(case: Case, r: int) -> str:
    """The proof that anyone can check, where running totals give one."""
    return f" Sure in any case: {_totals(case, r)}." if overdrawn(case)[r].any() else ""


def _worst(case: Case, r: int) -> int:
    return int(np.argmax(overdrawn(case)[r]))


def _totals(case: Case, r: int) -> str:
    t, need, excess = _worst(case, r), least_time(case)[r], overdrawn(case)[r]
    extra = " with all overtime" if case.overtime_limit[r] > 0 else ""
    return (f"up to {case.period_unit} {case.periods[t]} the demand needs at least {figure(float(need[t]))} of its "
            f"time, and there are {figure(float(need[t] - excess[t]))}{extra}")


def _enough(case: Case, r: int, short: Floats, clock: Clock, seconds: float) -> tuple[float, float | None] | None:
    """Give the least single capacity of a resource with which a plan exists, and the step below without one.

    The other resources have what they lack. Found by halving between what running totals ask for and what the
    closest plan needs in its worst period, on a grid of three digits; the second figure is None where the time
    did not suffice to prove it.
    """
    others = short.copy()
    others[r] = 0.0
    free, own = with_time(case, others), float(case.capacity[r, 0])
    if not own > 0:
        return None
    top = own + float(short[r].max()) * (1 + 1e-6)
    step = 10.0 ** (math.floor(math.log10(top)) - DIGITS + 1)
    low, high = math.floor(own / step), math.ceil(top / step - 1e-9)
    proven = not others.any()  # the case itself has no plan; with time given to others it might have
    end = clock.elapsed() + seconds
    while high - low > 1 and clock.elapsed() < end and not clock.over():
        middle = (low + high) // 2
        answer = _has_plan(_with_capacity(free, r, middle * step), end - clock.elapsed(), clock)
        if answer is None:
            proven = False
            break
        low, high, proven = (low, middle, proven) if answer else (middle, high, True)
    return high * step, max(low * step, own) if proven and high - low == 1 else None


def _with_capacity(case: Case, r: int, figures: float) -> Case:
    capacity = case.capacity.copy()
    capacity[r] = figures
    return replace(case, capacity=capacity)


def _has_plan(case: Case, seconds: float, clock: Clock) -> bool | None:
    """Whether a case has a plan; None where the time did not suffice to tell."""
    if overdrawn(case).any():
        return False
    found = solve(case, Limits(max(seconds / 2, 0.05), 1.0, clock.limits.cancelled))
    if found.plan is not None:
        return True
    return False if found.verdict is Verdict.NO_PLAN_EXISTS else None


def _cells(case: Case, resource: int, period: int) -> tuple[Subject, ...]:
    name = case.resources[resource]
    return Subject("Capacity", (name, case.periods[period]), ""), Subject("Resources", (name,), "Capacity")
