"""Questions 9 and 10: bottlenecks and service, and how firm the first lots are."""

from dataclasses import replace

import numpy as np

from ledgersolve.findings import Answered, Column
from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, Flags
from ledgersolve.lot_sizing.plan import Plan, resource_need
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.lot_sizing.why_lots import money
from ledgersolve.mip import Clock, Limits, Solved, Verdict

FULL = 0.999
"""A resource is at its limit from this share of its time."""
MOST_PERIODS = 8
"""Full periods that are asked about, those first where an hour is worth most."""
FIRST = 4
"""Periods that count as "now" when the first lots are compared."""
LEVERS = (
    ("Demand 10 % lower", "demand", 0.9), ("Demand 10 % higher", "demand", 1.1),
    ("Setup cost a quarter lower", "setup", 0.75), ("Setup cost a quarter higher", "setup", 1.25),
    ("Holding cost a quarter lower", "holding", 0.75), ("Holding cost a quarter higher", "holding", 1.25),
)


def bottlenecks(case: Case, solved: Solved[Plan], clock: Clock) -> Answered:
    """What one more hour saves by resource and period with the same setups, and what more capacity saves."""
    columns = (Column("What"), Column("Saves at least", "money"), Column("and at most", "money"), Column("How sure"))
    question = "Where are the bottlenecks?"
    plan = solved.plan
    if plan is None or solved.cost is None or not case.resources:
        return Answered(question, "No resource limits the plan.", columns)
    cells = _full_cells(case, plan, solved)
    rows: list[tuple[str | float | None, ...]] = []
    counts = plan.made if bool((case.lot_multiple > 0).any()) else None
    base = best_quantities(case, plan.setup, max(clock.left() / 10, 1.0), counts=counts)
    start = solved.cost if base is None else audit(case, base).total
    for resource, period in cells[:MOST_PERIODS]:
        if clock.over():
            break
        capacity = case.capacity.copy()
        capacity[resource, period] += 1.0
        more = replace(case, capacity=capacity)
        found = best_quantities(more, plan.setup, max(clock.left() / 10, 1.0), counts=counts)
        label = f"one more time unit of {case.resources[resource]} in {case.periods[period]}"
        if found is not None:
            rows.append((label, max(0.0, start - audit(more, found).total), None, "with the same setups"))
    rows += [_more_capacity(case, solved, r, clock) for r in sorted({r for r, _ in cells})]
    words = f"{len(cells)} periods of resources are at their limit." if cells else "No resource is at its limit."
    gains = [row for row in rows if isinstance(row[1], float)]
    if gains:
        best = max(gains, key=lambda row: float(str(row[1])))
        words += f" Most is saved by {best[0]}: {money(case, float(str(best[1])))} at least."
    return Answered(question, words + _service(case, plan), columns, tuple(rows), headline=True)


def _full_cells(case: Case, plan: Plan, solved: Solved[Plan]) -> list[tuple[int, int]]:
    need = resource_need(case, plan.made)
    full = (need >= FULL * case.capacity) & (need > 0)
    price = solved.prices if solved.prices is not None and solved.prices.shape == need.shape else plan.overtime
    cells = [(int(r), int(t)) for r, t in zip(*np.nonzero(full), strict=True)]
    return sorted(cells, key=lambda cell: -float(price[cell]))


def _more_capacity(
    case: Case, solved: Solved[Plan], resource: int, clock: Clock
) -> tuple[str | float | None, ...]:
    """A tenth more capacity in every period, re-solved."""
    capacity = case.capacity.copy()
    capacity[resource] *= 1.1
    label = f"a tenth more capacity of {case.resources[resource]} in every period"
    if clock.left() <= 0.1:
        return (label, None, None, "not answered in the time given")
    found = solve(replace(case, capacity=capacity), Limits(clock.left() / 4, 1e-4, clock.limits.cancelled))
    cost = float(solved.cost or 0.0)
    low = None if found.cost is None else max(0.0, cost - found.cost)
    high = None if found.bound is None else max(0.0, cost - found.bound)
    return (label, low, high, "re-planned" if found.verdict is Verdict.PROVEN_BEST else "re-planned, a proven range")


def _service(case: Case, plan: Plan) -> str:
    """What is late and lost, for which items."""
    told = ""
    for name, amounts in (("late", plan.late), ("lost", plan.lost)):
        hit = np.flatnonzero(amounts.sum(axis=1) > 1e-9)
        if hit.size:
            worst = [case.items[k] for k in hit[np.argsort(-amounts[hit].sum(axis=1), kind="stable")][:5]]
            told += f" Demand is {name} for {hit.size} items, most for {', '.join(worst)}."
    return told


def how_firm(case: Case, solved: Solved[Plan], clock: Clock) -> Answered:
    """Which of the first lots stay the same when setup cost, holding cost or demand turn out otherwise."""
    columns = (Column("Case"), Column("Cost", "money"), Column("Setups", "number"),
               Column("First lots kept", "percent"), Column("How sure"))
    plan, question = solved.plan, "Which of the first lots are safe to release?"
    if plan is None:
        return Answered(question, "There is no plan.", columns)
    first = plan.setup[:, :FIRST]
    always: Flags = first.copy()
    rows: list[tuple[str | float | None, ...]] = []
    asked = 0
    for number, (label, lever, factor) in enumerate(LEVERS):
        if clock.left() <= 0.1:
            rows.append((label, None, None, None, "not answered in the time given"))
            continue
        limits = Limits(clock.left() / (len(LEVERS) - number), 1e-4, clock.limits.cancelled)
        found = solve(_moved(case, lever, factor), limits)
        if found.plan is None:
            rows.append((label, None, None, None, found.verdict.value))
            continue
        asked += 1
        same = first & found.plan.setup[:, :FIRST]
        always &= same
        kept = float(same.sum() / first.sum()) if first.any() else 1.0
        rows.append((label, found.cost, float(found.plan.setups), kept, found.verdict.value))
    count, stay = int(first.sum()), int(always.sum())
    names = [f"{case.items[k]} in {case.periods[t]}" for k, t in zip(*np.nonzero(always), strict=True)]
    words = (f"Of {count} lots in the first {min(FIRST, case.t)} periods, {stay} are made in each of the {asked} "
             f"changed cases that have a plan: {', '.join(names[:8])}"
             f"{f' and {stay - 8} more' if stay > 8 else ''}." if asked and stay else
             f"None of the {count} first lots is made in all changed cases." if asked else
             "No changed case could be solved in the time given.")
    return Answered(question, words, columns, tuple(rows), headline=True)


def _moved(case: Case, lever: str, factor: float) -> Case:
    if lever == "demand":
        return replace(case, demand=case.demand * factor)
    if lever == "setup":
        return replace(case, setup_cost=case.setup_cost * factor, family_cost=case.family_cost * factor)
    return replace(case, holding_cost=case.holding_cost * factor)
