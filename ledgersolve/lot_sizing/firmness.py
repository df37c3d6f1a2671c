"""Question 10: how firm the plan is, and which of its first lots can be released now."""

from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.findings import NOT_ANSWERED, Answered, Column
from ledgersolve.lot_sizing.case import Case
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.lot_sizing.why_lots import Row
from ledgersolve.mip import Clock, Limits, Solved, Verdict

FIRST = 4
"""Periods that count as "now" when the first lots are compared."""
MOST_LISTED = 200
AS_GOOD = 0.01
"""A changed case counts as answered where the gap of its plan is at most so much above the gap of the plan: its
search starts from the plan, and a plan that was hardly searched for would seem to keep every lot."""
LEVERS = (
    ("Demand 10 % lower", "demand", 0.9), ("Demand 10 % higher", "demand", 1.1),
    ("Setup cost a quarter lower", "setup", 0.75), ("Setup cost a quarter higher", "setup", 1.25),
    ("Holding cost a quarter lower", "holding", 0.75), ("Holding cost a quarter higher", "holding", 1.25),
)


@dataclass(frozen=True)
class _Outcome:
    """A changed case: its label, how its run ended (None = no time was left), and the gap that still counts."""

    label: str
    solved: Solved[Plan] | None
    accepted: float

    @property
    def impossible(self) -> bool:
        """Whether no plan exists for the case."""
        return self.solved is not None and self.solved.verdict is Verdict.NO_PLAN_EXISTS

    @property
    def plan(self) -> Plan | None:
        """The case's plan, if it is proven about as good as the plan in question; it started as a copy of that."""
        gap = None if self.solved is None else self.solved.gap
        return self.solved.plan if self.solved is not None and gap is not None and gap <= self.accepted else None


def how_firm(case: Case, solved: Solved[Plan], clock: Clock) -> tuple[Answered, ...]:
    """Re-plan for other setup costs, holding costs and demands, from the plan; compare the first lots."""
    question = "Which of the first lots are safe to release?"
    if solved.plan is None:
        return (Answered(question, "There is no plan."),)
    outcomes = [_outcome(case, solved, number, clock) for number in range(len(LEVERS))]
    columns = (Column("Case"), Column("Cost", "money"), Column("Gap", "percent"), Column("Setups", "number"),
               Column("First lots kept", "percent"), Column("How sure"))
    rows = tuple(_case_row(solved.plan, one) for one in outcomes)
    plans = [one.plan for one in outcomes if one.plan is not None]
    answered = any(one.plan is not None or one.impossible for one in outcomes)
    answers = [Answered(question, _words(case, solved.plan, outcomes), columns, rows, headline=answered)]
    if plans:
        answers.append(_first_lots(case, solved.plan, plans, len(outcomes)))
    return tuple(answers)


def _outcome(case: Case, solved: Solved[Plan], number: int, clock: Clock) -> _Outcome:
    label, lever, factor = LEVERS[number]
    seconds, plan = clock.left() / (len(LEVERS) - number), solved.plan
    if seconds <= 0.02 or plan is None:
        return _Outcome(label, None, 0.0)
    changed = moved(case, lever, factor)
    limits = Limits(seconds, 1e-4, clock.limits.cancelled)
    counts = plan.made if bool((case.lot_multiple > 0).any()) else None
    begun = best_quantities(changed, plan.setup, max(seconds / 4, 0.05), counts=counts)
    return _Outcome(label, solve(changed, limits, begun or plan_from_made(changed, plan.made)),
                    AS_GOOD + (solved.gap or 0.0))


def _case_row(plan: Plan, one: _Outcome) -> Row:
    if one.impossible:
        return (one.label, None, None, None, None, "no plan exists then")
    if one.plan is None or one.solved is None:
        return (one.label, None, None, None, None, NOT_ANSWERED)
    first = plan.setup[:, :FIRST]
    kept = float((first & one.plan.setup[:, :FIRST]).sum() / first.sum()) if first.any() else 1.0
    return (one.label, one.solved.cost, one.solved.gap, float(one.plan.setups), kept, one.solved.verdict.value)


def _words(case: Case, plan: Plan, outcomes: list[_Outcome]) -> str:
    """Name what has no plan first, then the lots that all plans found have, then what was not answered."""
    impossible = [one.label for one in outcomes if one.impossible]
    plans = [one.plan for one in outcomes if one.plan is not None]
    missing = [one.label for one in outcomes if one.plan is None and not one.impossible]
    first = plan.setup[:, :FIRST]
    always = np.logical_and.reduce([first, *(other.setup[:, :FIRST] for other in plans)])
    count, stay, span = int(first.sum()), int(always.sum()), min(FIRST, case.t)
    said = [f"{label}: no plan exists then." for label in impossible]
    if plans and not count:
        said.append(f"Nothing is made in the first {span} periods.")
    elif plans:
        which = f"all {len(plans)}" if len(plans) == len(outcomes) else f"the {len(plans)} of {len(outcomes)}"
        cases = f"{which} changed cases{'' if len(plans) == len(outcomes) else ' that have one'}"
        names = [f"{case.items[k]} in {case.periods[t]}" for k, t in zip(*np.nonzero(always), strict=True)]
        more = f" and {stay - 8} more" if stay > 8 else ""
        listed = f": {', '.join(names[:8])}{more}" if names else ""
        are = "is" if stay < 2 else "are"
        said.append(f"Of {count} lots in the first {span} periods, {stay or 'none'} {are} made in the plans found "
                    f"for {cases}{listed}.")
    if missing:
        said.append(f"{NOT_ANSWERED.capitalize()}: {', '.join(label.lower() for label in missing)}.")
    return " ".join(said)


def _first_lots(case: Case, plan: Plan, plans: list[Plan], asked: int) -> Answered:
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
    every = "every case" if len(plans) == asked else f"each of the {len(plans)} of {asked} cases that have a plan"
    words = (f"{firm} of {len(rows)} first lots are made in {every}: the smallest quantity beside them is made in "
             "all of these plans.")
    if len(plans) == asked:
        words += " It can be released now."
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
