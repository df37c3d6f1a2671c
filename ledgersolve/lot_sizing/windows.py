"""Fix-and-optimise: a plan is improved in windows, everything outside a window held (Helber & Sahling 2010).

A window over items keeps the other items as they are: what is left is a case of its own, on what the
others leave of the resources. A window over periods keeps the stocks at its ends. On cases small enough
for one model, a window frees the setups of its items and periods only, and every quantity. Each
window goes to the wrapper as its strong model, with the plan as a start; a window that cannot be better
costs little, since it is told to stop at the plan's cost.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, Floats, Ints
from ledgersolve.lot_sizing.groups import part
from ledgersolve.lot_sizing.model import Form, WholeModel, whole_model
from ledgersolve.lot_sizing.plan import Plan, family_setups, plan_from_made, resource_need
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.mip import Clock

WHOLE_CELLS = 1500
"""Items x periods up to which windows free setups of one model; above, a window is a case of its own."""

FREE_SETUPS = 160
"""Setups freed in a first window; windows grow while the wrapper proves them."""

_WINDOW_SECONDS = 6.0


@dataclass
class Best:
    """The best plan so far and its audited cost; ``take`` accepts only what is sound and better."""

    case: Case
    plan: Plan
    cost: float

    def take(self, plan: Plan | None) -> bool:
        """Take a plan if the audit finds it sound and cheaper."""
        if plan is None:
            return False
        checked = audit(self.case, plan)
        if not checked.ok or not checked.total < self.cost - 1e-9 * abs(self.cost):
            return False
        self.plan, self.cost = plan, checked.total
        return True


def improve(best: Best, clock: Clock, seed: int = 0) -> int:
    """Improve a plan window by window until time is over, it is near enough, or no window helps any more.

    Gives the number of windows tried.
    """
    case = best.case
    rng = np.random.default_rng(seed)
    small = whole_model(case, Form.INEQUALITIES) if case.n * case.t <= WHOLE_CELLS else None
    tried, idle, size = 0, 0, int(np.clip(case.n * case.t // 3, 30, FREE_SETUPS))
    while not clock.over() and not clock.close_enough():
        gained, proven = False, True
        for items, periods in _windows(case, size, rng):
            if clock.over() or clock.close_enough():
                return tried
            seconds = min(_WINDOW_SECONDS, clock.left())
            plan, ended = (
                _freed(small, best, items, periods, seconds, clock) if small is not None
                else _apart(best, items, periods, seconds, clock)
            )
            tried += 1
            proven &= ended
            if best.take(plan):
                gained = True
                clock.note("windows", best=best.cost)
        if gained:
            idle = 0
            continue
        idle += 1
        if size >= case.n * case.t or (idle >= 3 and not proven):
            return tried
        size = int(size * 1.4) if proven else max(size * 3 // 4, 40)
    return tried


def _windows(case: Case, size: int, rng: np.random.Generator) -> Iterator[tuple[Ints, Ints]]:
    """Windows of about ``size`` setups: runs of periods for all items, and items over all periods."""
    every_item, every_period = np.arange(case.n), np.arange(case.t)
    span = int(np.clip(size // case.n, 2, case.t))
    step = max(1, span // 2)
    runs = [every_period[start : start + span] for start in range(0, max(case.t - step, 1), step)]
    count = int(np.clip(size // case.t, 1, case.n))
    order = _kin_together(case, rng)
    teams = [order[start : start + count] for start in range(0, case.n, count)]
    both = [(every_item, run) for run in runs] + [(team, every_period) for team in teams]
    for k in rng.permutation(len(both)):
        yield both[k]


def _kin_together(case: Case, rng: np.random.Generator) -> Ints:
    """Items in random order, but those of a family side by side."""
    rank = rng.random(case.n)
    family_rank = rng.random(len(case.families) + 1)
    key = np.where(case.item_family >= 0, family_rank[case.item_family], rank)
    return np.asarray(np.lexsort((rank, key)))


def _freed(
    whole: WholeModel, best: Best, items: Ints, periods: Ints, seconds: float, clock: Clock
) -> tuple[Plan | None, bool]:
    """Free the setups of a window in the whole model; every quantity stays free."""
    free = np.zeros(best.plan.setup.shape, dtype=bool)
    free[np.ix_(items, periods)] = True
    held = ~free
    setup = best.plan.setup[held].astype(np.float64)
    model = whole.model.bounded(whole.setup[held], setup, setup)
    result = model.solve(
        seconds, gap=1e-5, hint=whole.hint(best.plan), cancelled=clock.limits.cancelled
    )
    if result.values is None:
        return None, result.status == "infeasible"
    made = whole.quantities(result.values)
    return _polished(best.case, made, seconds), result.status == "optimal"


def _polished(case: Case, made: Floats, seconds: float) -> Plan:
    """Quantities re-optimised for the setups; as they are where that fails."""
    again = best_quantities(case, made > 0, max(seconds, 1.0), counts=made)
    return plan_from_made(case, made) if again is None else again


def _apart(
    best: Best, items: Ints, periods: Ints, seconds: float, clock: Clock
) -> tuple[Plan | None, bool]:
    """Solve a window as a case of its own, and put its quantities back into the plan."""
    if periods.size == best.case.t:
        case, plan = items_apart(best.case, best.plan, items), None
    else:
        run = (int(periods[0]), int(periods[-1]) + 1)
        if not _clean_ends(best.plan, *run):
            return None, True
        case, plan = periods_apart(best.case, best.plan, *run), None
    now = best.plan.made[np.ix_(items, periods)]
    plan = plan_from_made(case, now)
    whole = whole_model(case, Form.INEQUALITIES)
    result = whole.model.solve(
        seconds, gap=1e-5, hint=whole.hint(plan), cancelled=clock.limits.cancelled
    )
    if result.values is None:
        return None, result.status == "infeasible"
    made = best.plan.made.copy()
    made[np.ix_(items, periods)] = whole.quantities(result.values)
    return plan_from_made(best.case, made), result.status == "optimal"


def items_apart(case: Case, plan: Plan, items: Ints) -> Case:
    """Give the case of some items on what the others of the plan leave of the resources.

    Families and rented resources that others need too run anyway and cost nothing here; items of a family
    that is only partly inside keep to its periods in the plan.
    """
    outside = np.ones(case.n, dtype=bool)
    outside[items] = False
    rest = np.where(outside[:, None], plan.made, 0.0)
    shared = np.zeros(len(case.families) + 1, dtype=bool)
    shared[case.item_family[outside]] = True
    shared[-1] = False
    runs = np.vstack([family_setups(case, plan.setup), np.ones((1, case.t), dtype=bool)])
    sunk = np.where(shared[:-1, None], runs[:-1], False)
    taken = resource_need(case, rest)
    placed = np.flatnonzero((case.family_resource >= 0) & shared[:-1])
    extra = sunk[placed] & ~family_setups(case, rest > 0)[placed]
    np.add.at(taken, case.family_resource[placed], case.family_time[placed, None] * extra)
    kept = shared[case.item_family]
    used = np.vstack([_used(case, plan), np.ones((1, case.t), dtype=bool)])
    allowed = case.setup_allowed & np.where(kept[:, None], runs[case.item_family], True)
    rented = np.append(case.use_cost > 0, False)
    allowed &= np.where(rented[case.item_resource][:, None], used[case.item_resource], True)
    held = replace(
        case, setup_allowed=allowed, capacity=case.capacity - taken, use_cost=np.zeros(len(case.resources)),
        item_family=np.where(kept, -1, case.item_family),
    )
    return part(held, items).case


def _used(case: Case, plan: Plan) -> Floats:
    """Shape (R, T): where the plan uses a resource."""
    used = np.zeros((len(case.resources), case.t), dtype=bool)
    on = np.flatnonzero(case.item_resource >= 0)
    np.logical_or.at(used, case.item_resource[on], plan.setup[on])
    placed = np.flatnonzero(case.family_resource >= 0)
    np.logical_or.at(used, case.family_resource[placed], family_setups(case, plan.setup)[placed])
    return np.asarray(used)


def _clean_ends(plan: Plan, first: int, last: int) -> bool:
    """Whether nothing is late at the ends of a run of periods."""
    ends = [t for t in (first - 1, last - 1) if t >= 0]
    return not bool((plan.late[:, ends] > 0).any())


def periods_apart(case: Case, plan: Plan, first: int, last: int) -> Case:
    """Give the case of periods first .. last - 1, with the plan's stock before them and at their end."""
    run = slice(first, last)
    by_period = {
        name: getattr(case, name)[:, run]
        for name in (
            "demand", "receipts", "setup_cost", "unit_cost", "holding_cost", "setup_allowed", "capacity"
        )
    }
    opening = case.opening_stock if first == 0 else plan.stock[:, first - 1]
    ends = case.closing_stock if last == case.t else np.maximum(plan.stock[:, last - 1], case.safety_stock)
    return replace(
        case, periods=case.periods[run], period_starts=case.period_starts[run], opening_stock=opening,
        closing_stock=ends, today=None, compare_today=False, **by_period,
    )
