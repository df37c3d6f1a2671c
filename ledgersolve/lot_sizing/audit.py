"""The audit of a lot-sizing plan: cost and every rule recomputed from the case, by formulas of its own.

Nothing here is shared with the models: what the engine believes about a plan is not asked. Figures count
as equal within ``TOLERANCE`` of the size of the row (the item's largest quantity, the resource's largest
capacity).
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from ledgersolve.findings import Audit, Check, CostPart
from ledgersolve.lot_sizing.case import Case, Flags, Floats
from ledgersolve.lot_sizing.plan import Plan

TOLERANCE = 1e-6


def audit(case: Case, plan: Plan) -> Audit:
    """Recompute the cost of ``plan`` by parts and check every rule of the case.

    Parts are in money; amounts by which rules are broken are in units, time units for resources.

    Raises
    ------
    ValueError
        An array of the plan does not have the shape that the case asks for.
    """
    _check_shapes(case, plan)
    book = _Book(case, plan)
    with np.errstate(invalid="ignore"):  # a figure that is not a number fails its own check
        parts = tuple(book.parts())
    return Audit(parts, tuple(_finite(plan)) or tuple(book.checks()))


def _check_shapes(case: Case, plan: Plan) -> None:
    wanted = (case.n, case.t)
    for name in ("made", "stock", "late", "lost", "setup"):
        if getattr(plan, name).shape != wanted:
            raise ValueError(f"{name} has shape {getattr(plan, name).shape}, not {wanted}")
    if plan.overtime.shape != (len(case.resources), case.t):
        raise ValueError(f"overtime has shape {plan.overtime.shape}, not {(len(case.resources), case.t)}")


def _finite(plan: Plan) -> Iterator[Check]:
    """A failed check for every array with a figure that is no number: nothing else can be checked then."""
    for name in ("made", "stock", "late", "lost", "overtime"):
        if not np.isfinite(getattr(plan, name)).all():
            yield Check("Figures", name, "numbers", "a figure that is not a number", np.inf, ok=False)


@dataclass(frozen=True)
class _Book:
    """A case and a plan side by side, with what follows from both."""

    case: Case
    plan: Plan

    # ------------------------------------------------------------------ quantities

    def family_setups(self) -> Flags:
        """Shape (F, T): any member is made."""
        made = np.zeros((len(self.case.families), self.case.t), dtype=bool)
        for item in np.flatnonzero(self.case.item_family >= 0):
            made[self.case.item_family[item]] |= self.plan.made[item] > 0
        return made

    def use(self) -> tuple[Floats, Flags]:
        """Time needed on each resource in each period, and whether the resource is used: (R, T) both."""
        case, made = self.case, self.plan.made
        need = np.zeros((len(case.resources), case.t))
        used = np.zeros(need.shape, dtype=bool)
        for item in np.flatnonzero(case.item_resource >= 0):
            resource = case.item_resource[item]
            need[resource] += case.time_per_unit[item] * made[item] + case.setup_time[item] * (made[item] > 0)
            used[resource] |= made[item] > 0
        for family, runs in enumerate(self.family_setups()):
            resource = case.family_resource[family]
            if resource >= 0:
                need[resource] += case.family_time[family] * runs
                used[resource] |= runs
        return need, used

    def size(self) -> Floats:
        """Shape (N, 1): the largest quantity of each item, the measure of its tolerance."""
        case = self.case
        bounds = [case.opening_stock, case.safety_stock, case.closing_stock]
        arrays = [case.demand, case.receipts, self.plan.made]
        largest = np.max([*bounds, *(np.max(a, axis=1, initial=0.0) for a in arrays)], axis=0)
        return np.where(largest > 0, largest, 1.0)[:, None]

    # ------------------------------------------------------------------ cost

    def parts(self) -> Iterator[CostPart]:
        case, plan = self.case, self.plan
        made = plan.made > 0
        _, used = self.use()
        yield CostPart("Setup cost", float((case.setup_cost * made).sum()))
        yield CostPart("Production cost", float((case.unit_cost * plan.made).sum()))
        yield CostPart("Holding cost", float((case.holding_cost * plan.stock).sum()))
        yield CostPart("Backlog cost", _priced(case.backlog_cost, plan.late))
        yield CostPart("Lost sale cost", _priced(case.lost_cost, plan.lost))
        yield CostPart("Overtime cost", float((case.overtime_cost[:, None] * plan.overtime).sum()))
        yield CostPart("Family setup cost", float((case.family_cost[:, None] * self.family_setups()).sum()))
        yield CostPart("Resource use cost", float((case.use_cost[:, None] * used).sum()))

    # ------------------------------------------------------------------ rules

    def checks(self) -> Iterator[Check]:
        yield from self._quantity_checks()
        yield from self._stock_checks()
        yield from self._service_checks()
        yield from self._lot_checks()
        yield from self._resource_checks()

    def _quantity_checks(self) -> Iterator[Check]:
        plan = self.plan
        lowest = np.min([plan.made, plan.stock, plan.late, plan.lost], axis=0)
        yield self._items("No negative quantity", -lowest, "0 or more", lowest)
        balance = plan.stock - plan.late - self._balance()
        yield self._items("Stock balance", np.abs(balance), "stock follows from what comes and goes", balance)
        differs = plan.setup != (plan.made > 0)  # a whole size, so that no tolerance forgives it
        yield self._items(
            "Setups", self.size() * differs, "a setup exactly where something is made", plan.setup,
        )

    def _balance(self) -> Floats:
        """Stock less late orders at each period's end, from the opening stock and all flows."""
        case, plan = self.case, self.plan
        flows = case.receipts + plan.made - case.demand + plan.lost
        return case.opening_stock[:, None] + np.cumsum(flows, axis=1)

    def _stock_checks(self) -> Iterator[Check]:
        case, stock = self.case, self.plan.stock
        safety = np.repeat(case.safety_stock[:, None], case.t, axis=1)
        safety[:, -1:] = -np.inf
        yield self._items("Safety stock", safety - stock, safety, stock)
        closing = np.full_like(stock, -np.inf)
        closing[:, -1:] = case.closing_stock[:, None]
        yield self._items("Closing stock", closing - stock, closing, stock)
        most = np.repeat(case.most_stock[:, None], case.t, axis=1)
        yield self._items("Most stock", stock - most, most, stock)

    def _service_checks(self) -> Iterator[Check]:
        case, plan = self.case, self.plan
        may_wait, may_lose = np.isfinite(case.backlog_cost)[:, None], np.isfinite(case.lost_cost)[:, None]
        yield self._items("Late only where allowed", np.where(may_wait, 0.0, plan.late), "0", plan.late)
        at_end = np.zeros_like(plan.late)
        at_end[:, -1:] = plan.late[:, -1:]
        yield self._items("All met by the end", at_end, "nothing late after the last period", at_end)
        most_lost = np.where(may_lose, case.demand, 0.0)
        yield self._items("Lost sales within demand", plan.lost - most_lost, most_lost, plan.lost)
        before = np.concatenate([np.zeros((case.n, 1)), plan.late[:, :-1]], axis=1)
        due = case.demand - plan.lost + before
        yield self._items("Late no more than ordered", plan.late - due, due, plan.late)

    def _lot_checks(self) -> Iterator[Check]:
        case, made = self.case, self.plan.made
        least = case.least_lot[:, None] * (made > 0)
        yield self._items("Setup allowed", np.where(case.setup_allowed, 0.0, made), "nothing made", made)
        yield self._items("Least lot", least - made, least, made)
        most = np.repeat(case.most_lot[:, None], case.t, axis=1)
        yield self._items("Most lot", made - most, most, made)
        multiple = np.repeat(case.lot_multiple[:, None], case.t, axis=1)
        step = np.where(multiple > 0, multiple, 1.0)
        off = np.where(multiple > 0, made - step * np.round(made / step), 0.0)
        yield self._items("Lot multiple", np.abs(off), multiple, made)

    def _resource_checks(self) -> Iterator[Check]:
        case, overtime = self.case, self.plan.overtime
        need, _ = self.use()
        for r, name in enumerate(case.resources):
            finite = case.capacity[r][np.isfinite(case.capacity[r])]
            size = max(1e-3, float(np.max(finite, initial=0.0)))
            yield _resource(case, name, "Capacity", need[r], case.capacity[r] + overtime[r], size)
            limit = np.full(case.t, case.overtime_limit[r])
            yield _resource(case, name, "Overtime limit", overtime[r], limit, size)
            yield _not_negative(case, name, "No negative overtime", overtime[r], size)

    def _items(self, rule: str, excess: Floats, required: Floats | str, got: Floats | Flags) -> Check:
        """Check an (N, T) rule, broken where ``excess`` is above the tolerance; names the worst cell."""
        case = self.case
        if not excess.size:
            return Check(rule, "no items", "-", "-", 0.0, ok=True)
        relative = excess / self.size()
        i, t = np.unravel_index(int(np.argmax(relative)), relative.shape)
        if relative[i, t] <= TOLERANCE:
            wanted = _words(required, None)
            everyone = "the only item" if case.n == 1 else f"all {case.n} items"
            return Check(rule, everyone, wanted, "holds in every period", 0.0, ok=True)
        where = f"item {case.items[i]}, {case.period_unit} {case.periods[t]}"
        wanted, found = _words(required, (i, t)), f"{float(got[i, t]):.10g}"
        return Check(rule, where, wanted, found, float(excess[i, t]), ok=False)


def _resource(case: Case, name: str, rule: str, need: Floats, limit: Floats, size: float) -> Check:
    """Check need <= limit in all periods of one resource; names the fullest period, or the worst."""
    subject = f"resource {name}"
    if not case.t:
        return Check(rule, subject, "-", "-", 0.0, ok=True)
    with np.errstate(invalid="ignore"):
        excess = need - limit
    t = int(np.argmax(excess))
    ok = bool(excess[t] <= TOLERANCE * size)
    found = f"{_shown(need[t])} in {case.period_unit} {case.periods[t]}"
    return Check(rule, subject, f"at most {limit[t]:.10g}", found, 0.0 if ok else float(excess[t]), ok=ok)


def _not_negative(case: Case, name: str, rule: str, time: Floats, size: float) -> Check:
    """Check time >= 0 in all periods of one resource; names the period with the least."""
    subject = f"resource {name}"
    if not case.t:
        return Check(rule, subject, "-", "-", 0.0, ok=True)
    t = int(np.argmin(time))
    ok = bool(time[t] >= -TOLERANCE * size)
    found = f"{_shown(time[t])} in {case.period_unit} {case.periods[t]}"
    return Check(rule, subject, "0 or more", found, 0.0 if ok else -float(time[t]), ok=ok)


def _shown(figure: float) -> str:
    """A figure without the rounding of the machine: no minus before 0, no 1e-14."""
    return f"{round(float(figure), 9) + 0.0:.10g}"


def _words(required: Floats | str, place: tuple[np.intp, np.intp] | None) -> str:
    if isinstance(required, str):
        return required
    return "the item's own figure" if place is None else f"{float(required[place]):.10g}"


def _priced(price: Floats, quantity: Floats) -> float:
    """Sum of price x quantity; a quantity without a price (a broken rule, checked apart) counts nothing."""
    return float((np.where(np.isfinite(price), price, 0.0)[:, None] * quantity).sum())
