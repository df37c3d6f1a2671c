"""A plan without one of its lots, and a plan with one lot made in two setups; each audited in whole.

Without a lot, what it made goes to the item's other lots: first with all other items as they are; where that
does not fit, or the case is small, with the sizes of other lots free (their setups kept). A lot is split by
leaving what later periods need to a second setup in one of them, the cheapest. Costs are differences of
audits, so that families, uses and overtime count as they fall.
"""

from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.groups import part
from ledgersolve.lot_sizing.plan import Plan, plan_from_made, resource_need
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.mip import Clock

SMALL = 2500
"""Items x periods up to which the sizes of all lots are free when a lot is left out."""
HELPERS = 15
"""Other items whose lots may change in size where the case is larger."""
TINY = 1e-9
SECONDS = 5.0
"""Most that one linear programme may take."""


@dataclass(frozen=True)
class Change:
    """A changed plan: what it costs more (below 0: less), what it was free to change, and where it splits."""

    extra: float
    free: str
    period: int | None = None
    plan: Plan | None = None


class LotMoves:
    """Changes of single lots of a plan; the plan keeps every rule of its case."""

    def __init__(self, case: Case, plan: Plan, clock: Clock) -> None:
        self.case, self.plan, self.clock = case, plan, clock
        self.cost = audit(case, plan).total
        self.need = resource_need(case, plan.made)
        self.room = case.capacity + case.overtime_limit[:, None] - self.need
        self.plain = not case.families and not (case.use_cost > 0).any() and not plan.overtime.any()

    def without(self, item: int, period: int) -> Change | None:
        """Do without one lot: the item has no setup in the period; None where no way was found."""
        found: list[Change | None] = [self._handed_over(item, period)]
        if self.case.lot_multiple[item] == 0:
            found.append(self._alone(item, period))
            if self.case.n * self.case.t <= SMALL or not any(found):
                found.append(self._with_others(item, period))
        known = [change for change in found if change is not None]
        return min(known, key=lambda change: change.extra, default=None)

    def split(self, item: int, period: int) -> Change | None:
        """Make a lot in two setups, the part for later periods in the cheapest later one; None where none fits."""
        plan, case = self.plan, self.case
        ahead = np.flatnonzero(plan.setup[item, period + 1:])
        until = period + 1 + int(ahead[0]) if ahead.size else case.t
        ways = [(self._guess(item, period, s, units), s, units) for s in range(period + 1, until)
                if case.setup_allowed[item, s] and (units := self._later_part(item, period, s)) > 0]
        best: Change | None = None
        for _, s, units in sorted(ways):
            made = plan.made[item].copy()
            made[period] -= units
            made[s] += units
            change = self._changed({item: made}, "", s)
            if change is not None and (best is None or change.extra < best.extra):
                best = change
            if best is not None and (self.plain or self.clock.over()):
                break  # where nothing is shared but time, the order of the guesses is the order of the costs
        return best

    def _later_part(self, item: int, period: int, s: int) -> float:
        """Units of the lot that are there for period ``s`` and later, as far as they fit there."""
        case, plan = self.case, self.plan
        spare = plan.stock[item] - case.least_stock()[item]
        units = float(min(spare[period:s].min(), plan.made[item, period]))
        r = int(case.item_resource[item])
        if r >= 0 and case.time_per_unit[item] > 0:
            units = min(units, float((self.room[r, s] - case.setup_time[item]) / case.time_per_unit[item]))
        units = min(units, float(case.most_lot[item]), float(plan.made[item, period] - case.least_lot[item]))
        multiple = float(case.lot_multiple[item])
        if multiple > 0:
            units = float(np.floor(units / multiple + TINY) * multiple)
        whole = units >= float(plan.made[item, period]) * (1 - TINY)
        return 0.0 if whole or units < max(float(case.least_lot[item]), TINY) else units

    def _guess(self, item: int, period: int, s: int, units: float) -> float:
        """What the split costs as far as the item alone goes; only the order of trying rests on it."""
        case = self.case
        dearer = float(case.unit_cost[item, s] - case.unit_cost[item, period])
        held = float(case.holding_cost[item, period:s].sum())
        return float(case.setup_cost[item, s]) + units * (dearer - held)

    def _changed(self, rows: dict[int, Floats], free: str, period: int | None = None) -> Change | None:
        """Audit the plan with the quantities of some items changed."""
        made = self.plan.made.copy()
        for item, row in rows.items():
            made[item] = row
        plan = plan_from_made(self.case, made)
        checked = audit(self.case, plan)
        return Change(checked.total - self.cost, free, period, plan) if checked.ok else None

    def _handed_over(self, item: int, period: int) -> Change | None:
        """Hand the lot as it is to the item's lot before, or after it."""
        lots = np.flatnonzero(self.plan.setup[item])
        at = int(np.searchsorted(lots, period))
        best: Change | None = None
        for taker in (*lots[max(at - 1, 0):at], *lots[at + 1:at + 2]):
            if not self._fits(item, int(taker), float(self.plan.made[item, period])):
                continue
            made = self.plan.made[item].copy()
            made[taker] += made[period]
            made[period] = 0.0
            change = self._changed({item: made}, "all other lots as they are")
            if change is not None and (best is None or change.extra < best.extra):
                best = change
        return best

    def _fits(self, item: int, period: int, units: float) -> bool:
        """Whether so many more units find time in a period; spares audits that are bound to fail."""
        r = int(self.case.item_resource[item])
        time = units * float(self.case.time_per_unit[item])
        return r < 0 or time <= float(self.room[r, period]) * (1 + TINY) + TINY

    def _alone(self, item: int, period: int) -> Change | None:
        """Re-optimise the item's own quantities in the time that the rest of the plan leaves."""
        return self._re_planned(np.array([item]), item, period, "sizes of this item's other lots free")

    def _with_others(self, item: int, period: int) -> Change | None:
        """Let other items' lots change in size too: all of them in a small case, else those that can give way."""
        case = self.case
        if case.n * case.t <= SMALL:
            return self._re_planned(np.arange(case.n), item, period, "sizes of all other lots free")
        before = np.flatnonzero(self.plan.setup[item, :period])
        if case.item_resource[item] < 0 or not before.size:
            return None
        give = self._giving_way(item, int(before[-1]), period)
        if not give.size:
            return None
        words = f"sizes of the lots of {give.size} other items free"
        return self._re_planned(np.append(give, item), item, period, words)

    def _giving_way(self, item: int, taker: int, period: int) -> Ints:
        """Items that make stock where the lot is to go and have a lot of their own up to its old place."""
        case, plan = self.case, self.plan
        later = plan.setup[:, taker + 1:period + 1].any(axis=1)
        spare = np.minimum(plan.made[:, taker], plan.stock[:, taker] - case.least_stock()[:, taker])
        able = (case.item_resource == case.item_resource[item]) & later & (spare > TINY) & (case.lot_multiple == 0)
        able[item] = False
        most = np.flatnonzero(able)
        return most[np.argsort(-(spare * case.time_per_unit)[most], kind="stable")][:HELPERS]

    def _re_planned(self, items: Ints, item: int, period: int, free: str) -> Change | None:
        own = self._within(items)
        setup: Flags = self.plan.setup[items].copy()
        setup[np.flatnonzero(items == item)[0], period] = False
        counts = self.plan.made[items] if (own.lot_multiple > 0).any() else None
        found = best_quantities(own, setup, min(SECONDS, max(self.clock.left(), 0.1)), counts=counts)
        if found is None:
            return None
        return self._changed(dict(zip(items.tolist(), found.made, strict=True)), free)

    def _within(self, items: Ints) -> Case:
        """Give the case of some items in the time that the rest of the plan, with its families, leaves them."""
        if items.size == self.case.n:
            return self.case
        group = part(self.case, items)
        own = replace(
            group.case, families=(), family_cost=np.zeros(0), family_time=np.zeros(0),
            family_resource=np.zeros(0, dtype=np.int64), item_family=np.full(items.size, -1, dtype=np.int64),
        )
        if not group.resources.size:
            return own
        mine = np.zeros_like(self.plan.made)
        mine[items] = self.plan.made[items]
        # families and rented time are left as they are; a lot that goes can only free them
        bare = replace(self.case, item_family=np.full(self.case.n, -1, dtype=np.int64))
        given = (self.case.capacity + self.plan.overtime - self.need + resource_need(bare, mine))[group.resources]
        nothing = np.zeros(group.resources.size)
        return replace(own, capacity=np.maximum(given, 0.0), overtime_limit=nothing, use_cost=nothing)
