"""Questions 7 and 8: why this lot, and what rules of thumb or today's plan would cost instead."""

import time
from dataclasses import replace

import numpy as np

from ledgersolve.findings import Answered, Column
from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, Floats
from ledgersolve.lot_sizing.groups import part
from ledgersolve.lot_sizing.plan import Plan, plan_from_made, resource_need
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.lot_sizing.rules_of_thumb import RULES, quantities
from ledgersolve.mip import Clock

MOST_LOTS = 200
"""Lots asked about, the dearest first."""
HARDLY = 0.02
"""A lot hardly matters where dropping it costs less than this share of the item's own cost."""


def money(case: Case, value: float) -> str:
    """An amount in words, whole units of the currency."""
    return f"{case.currency} {value:,.0f}"


def why_this_lot(case: Case, plan: Plan, clock: Clock) -> Answered:
    """What each lot covers, and what it costs to do without its setup, everything else of the plan kept."""
    lots = [(int(k), int(t)) for k, t in zip(*np.nonzero(plan.setup), strict=True)]
    lots.sort(key=lambda lot: -plan.made[lot] * max(float(case.unit_cost[lot]), float(case.holding_cost[lot]), 1e-9))
    end = time.monotonic() + 0.25 * clock.left()
    rows: list[tuple[str | float | None, ...]] = []
    hardly: set[str] = set()
    alone = _ItemsAlone(case, plan)
    for item, period in lots[:MOST_LOTS]:
        if clock.over() or time.monotonic() > end:
            break
        extra = alone.without(item, period)
        meaning = "no other lot can take it over" if extra is None else "exact, other lots of the plan kept"
        if extra is not None and extra <= HARDLY * alone.cost(item):
            hardly.add(case.items[item])
        rows.append((case.items[item], case.periods[period], float(plan.made[item, period]),
                     _covers(case, plan, item, period), float(case.setup_cost[item, period]), extra, meaning))
    words = "No lot was asked about in the time given."
    if rows:
        words = f"{len(rows)} of {len(lots)} lots were tried without their setup."
        words += (f" Lots of {_names(sorted(hardly))} hardly matter: a neighbour can take one over for little."
                  if hardly else " Each of them earns its setup clearly.")
    columns = (Column("Item"), Column("Period"), Column("Lot", "number"), Column("Covers demand of"),
               Column("Setup cost", "money"), Column("Without this lot, dearer by", "money"), Column("How sure"))
    return Answered("Why this lot?", words, columns, tuple(rows))


class _ItemsAlone:
    """Each item against the time that the rest of the plan leaves."""

    def __init__(self, case: Case, plan: Plan) -> None:
        self.case, self.plan = case, plan
        need = resource_need(case, plan.made)
        self.spare = np.maximum(case.capacity + plan.overtime - need, 0.0) if case.resources else need
        self._cases: dict[int, tuple[Case, float]] = {}

    def cost(self, item: int) -> float:
        """Cost of the item as planned."""
        return self._alone(item)[1]

    def without(self, item: int, period: int) -> float | None:
        """Extra cost of the item when it has no setup in the period; None where that cannot be."""
        own, cost = self._alone(item)
        setup = self.plan.setup[[item]].copy()
        setup[0, period] = False
        if own.lot_multiple[0] > 0 or own.least_lot[0] > 0:
            return None if not self._could(item, period) else self._moved(own, cost, item, period)
        found = best_quantities(own, setup, 2.0)
        return None if found is None else self._difference(own, found, cost)

    def _alone(self, item: int) -> tuple[Case, float]:
        if item not in self._cases:
            case, plan = self.case, self.plan
            own = part(case, np.array([item])).case
            mine = np.zeros_like(plan.made)
            mine[item] = plan.made[item]
            if own.resources:
                room = self.spare + resource_need(case, mine)
                used = case.item_resource[item]
                numbers = [case.resources.index(code) for code in own.resources]
                capacity = room[numbers]
                # family time and use cost are paid by the rest of the plan
                own = replace(own, capacity=capacity, overtime_limit=np.zeros(len(numbers)),
                              use_cost=np.zeros(len(numbers)),
                              item_resource=np.array([numbers.index(int(used)) if used >= 0 else -1]))
            own = replace(own, families=(), family_cost=np.zeros(0), family_time=np.zeros(0),
                          family_resource=np.zeros(0, dtype=np.int64), item_family=np.array([-1]))
            self._cases[item] = (own, audit(own, plan_from_made(own, plan.made[[item]])).total)
        return self._cases[item]

    def _difference(self, own: Case, found: Plan, cost: float) -> float | None:
        checked = audit(own, found)
        return max(0.0, checked.total - cost) if checked.ok else None

    def _could(self, item: int, period: int) -> bool:
        return bool(self.plan.setup[item, :period].any())

    def _moved(self, own: Case, cost: float, item: int, period: int) -> float | None:
        """Hand the lot to the setup before it, as it is: lots with limits and multiples stay whole."""
        made: Floats = self.plan.made[[item]].copy()
        before = int(np.flatnonzero(self.plan.setup[item, :period])[-1])
        made[0, before] += made[0, period]
        made[0, period] = 0.0
        return self._difference(own, plan_from_made(own, made), cost)


def _covers(case: Case, plan: Plan, item: int, period: int) -> str:
    """Periods whose demand the lot meets: until the item's next lot."""
    later = np.flatnonzero(plan.setup[item, period + 1 :])
    last = period + int(later[0]) if later.size else case.t - 1
    first, final = case.periods[period], case.periods[last]
    return first if last == period else f"{first} to {final}"


def _names(codes: list[str]) -> str:
    return ", ".join(codes[:6]) + (f" and {len(codes) - 6} more" if len(codes) > 6 else "")


def against_rules(case: Case, plan: Plan, cost: float) -> Answered:
    """Cost and hours of rules of thumb and of today's plan on the same data, each audited."""
    plans = [("This plan", plan)]
    plans += [(name, plan_from_made(case, quantities(case, cover))) for name, cover in RULES]
    if case.compare_today and case.today is not None:
        plans.append(("Today's plan", plan_from_made(case, case.today)))
    rows: list[tuple[str | float | None, ...]] = []
    for name, other in plans:
        checked = audit(case, other)
        broken = sorted({check.rule for check in checked.broken()})
        fits = "yes" if checked.ok else "no: " + ", ".join(broken).lower()
        hours = float(resource_need(case, other.made).sum()) if case.resources else None
        rows.append((name, checked.total, checked.total - cost, float(other.setups), hours, fits))
    kept = [row for row in rows[1:] if row[5] == "yes"]
    words = "None of the rules of thumb keeps all rules of the workbook."
    if kept:
        best = min(kept, key=lambda row: float(str(row[1])))
        words = (f"The best rule of thumb that keeps every rule ({best[0]}) costs "
                 f"{money(case, float(str(best[2])))} more than this plan.")
    columns = (Column("Plan"), Column("Cost", "money"), Column("More than this plan", "money"),
               Column("Setups", "number"), Column("Time on resources", "number"), Column("Keeps every rule"))
    return Answered("What would rules of thumb cost?", words, columns, tuple(rows), headline=True)

