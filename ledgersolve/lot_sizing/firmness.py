"""Question 10: how firm the plan is, and which of its first lots can be released now."""

from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.findings import Answered, Column
from ledgersolve.lot_sizing.case import Case
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.lot_sizing.why_lots import Row
from ledgersolve.mip import Clock, Limits, Solved

FIRST = 4
"""Periods that count as "now" when the first lots are compared."""
MOST_LISTED = 200
LEVERS = (
    ("Demand 10 % lower", "demand", 0.9), ("Demand 10 % higher", "demand", 1.1),
    ("Setup cost a quarter lower", "setup", 0.75), ("Setup cost a quarter higher", "setup", 1.25),
    ("Holding cost a quarter lower", "holding", 0.75), ("Holding cost a quarter higher", "holding", 1.25),
)


@dataclass(frozen=True)
class _Outcome:
    """A changed case: its label, and how its run ended (None = no time was left)."""

    label: str
    solved: Solved[Plan] | None


def how_firm(case: Case, solved: Solved[Plan], clock: Clock) -> tuple[Answered, ...]:
    """Re-plan for other setup costs, holding costs and demands, from the plan; compare the first lots."""
    question = "Which of the first lots are safe to release?"
    if solved.plan is None:
        return (Answered(question, "There is no plan."),)
    outcomes = [_outcome(case, solved.plan, number, clock) for number in range(len(LEVERS))]
    plans = [one.solved.plan for one in outcomes if one.solved is not None and one.solved.plan is not None]
    columns = (Column("Case"), Column("Cost", "money"), Column("Gap", "percent"), Column("Setups", "number"),
               Column("First lots kept", "percent"), Column("How sure"))
    rows = tuple(_case_row(solved.plan, one) for one in outcomes)
    answers = [Answered(question, _words(case, solved.plan, plans), columns, rows, headline=True)]
    if plans:
        answers.append(_first_lots(case, solved.plan, plans))
    return tuple(answers)


def _outcome(case: Case, plan: Plan, number: int, clock: Clock) -> _Outcome:
    label, lever, factor = LEVERS[number]
    seconds = clock.left() / (len(LEVERS) - number)
    if seconds <= 0.02:
        return _Outcome(label, None)
    changed = moved(case, lever, factor)
    limits = Limits(seconds, 1e-4, clock.limits.cancelled)
    counts = plan.made if bool((case.lot_multiple > 0).any()) else None
    begun = best_quantities(changed, plan.setup, max(seconds / 4, 0.05), counts=counts)
    return _Outcome(label, solve(changed, limits, begun or plan_from_made(changed, plan.made)))


def _case_row(plan: Plan, one: _Outcome) -> Row:
    if one.solved is None:
        return (one.label, None, None, None, None, "not answered in the time given")
    found = one.solved.plan
    if found is None:
        return (one.label, None, None, None, None, one.solved.verdict.value)
    first = plan.setup[:, :FIRST]
    kept = float((first & found.setup[:, :FIRST]).sum() / first.sum()) if first.any() else 1.0
    gap = one.solved.gap
    known = None if gap is None or not np.isfinite(gap) else gap
    return (one.label, one.solved.cost, known, float(found.setups), kept, one.solved.verdict.value)


def _words(case: Case, plan: Plan, plans: list[Plan]) -> str:
    if not plans:
        return "No changed case could be solved in the time given."
    first = plan.setup[:, :FIRST]
    always = np.logical_and.reduce([first, *(other.setup[:, :FIRST] for other in plans)])
    count, stay, span = int(first.sum()), int(always.sum()), min(FIRST, case.t)
    cases = f"{len(plans)} changed cases that have a plan"
    if not count:
        return f"Nothing is made in the first {span} periods."
    if not stay:
        return f"Of {count} lots in the first {span} periods, none is made in each of the {cases}."
    names = [f"{case.items[k]} in {case.periods[t]}" for k, t in zip(*np.nonzero(always), strict=True)]
    more = f" and {stay - 8} more" if stay > 8 else ""
    return (f"Of {count} lots in the first {span} periods, {stay} are made in each of the {cases}: "
            f"{', '.join(names[:8])}{more}.")


def _first_lots(case: Case, plan: Plan, plans: list[Plan]) -> Answered:
    """List the first lots with the cases that make them too, and the span of their sizes."""
    rows: list[Row] = []
    for k, t in zip(*np.nonzero(plan.setup[:, :FIRST]), strict=True):
        sizes = [float(other.made[k, t]) for other in plans if other.setup[k, t]]
        rows.append((case.items[k], case.periods[t], float(plan.made[k, t]), float(len(sizes)),
                     min(sizes, default=None), max(sizes, default=None)))
    rows.sort(key=lambda row: -float(str(row[3])))
    columns = (Column("Item"), Column("Period"), Column("Lot", "number"),
               Column(f"Made in so many of {len(plans)} cases", "number"), Column("Smallest then", "number"),
               Column("Largest then", "number"))
    firm = sum(row[3] == len(plans) for row in rows)
    words = (f"{firm} of {len(rows)} first lots are made in every case: the smallest quantity beside them is made in "
             "each case, and can be released now.")
    if len(rows) > MOST_LISTED:
        words += f" {MOST_LISTED} of {len(rows)} lots are listed."
    return Answered("How much of each first lot?", words, columns, tuple(rows[:MOST_LISTED]))


def moved(case: Case, lever: str, factor: float) -> Case:
    """Give the case with demand, setup costs or holding costs multiplied."""
    if lever == "demand":
        return replace(case, demand=case.demand * factor)
    if lever == "setup":
        return replace(case, setup_cost=case.setup_cost * factor, family_cost=case.family_cost * factor)
    return replace(case, holding_cost=case.holding_cost * factor)
