"""Question 9: where time is short, what more of it would bring, and what is late or lost, for whom."""

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.findings import NOT_ANSWERED, Answered, Column
from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.bound import price_bound
from ledgersolve.lot_sizing.case import Case, Floats
from ledgersolve.lot_sizing.earlier import started_earlier
from ledgersolve.lot_sizing.groups import binding
from ledgersolve.lot_sizing.plan import Plan, plan_from_made, resource_need
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.lot_sizing.why_lots import Row, money
from ledgersolve.mip import Clock, Limits, Solved, Verdict

FULL = 0.999
"""A resource is at its limit from this share of its time."""
MOST_PERIODS = 8
"""Full periods that are asked about, those first where an hour is worth most."""
RE_PLANNED = 3
"""Full periods for which one more hour is re-planned in whole, if the time allows."""
MOST_RESOURCES = 5
"""Resources that are asked about, the fullest ones."""
HOURS_SHARE = 0.4
"""Share of the time for hours with the plan's setups; the rest is for re-planning."""
MORE = 0.1
"""Part of a resource's time that is given to it, or allowed as overtime, in addition."""
EXACT = 2.5e-6
"""Width, as a share of the plan's cost, up to which a saving counts as one figure."""
TINY = 1e-6
"""Savings below this share of the plan's cost are rounding."""

COLUMNS = (Column("What"), Column("Saves at least", "money"), Column("and at most", "money"),
           Column("How it was found"))


@dataclass(frozen=True)
class _Saving:
    """What a change saves: at least, at most (None = no figure), and how that was found."""

    low: float | None
    high: float | None
    how: str
    plan: Plan | None = None


def bottlenecks(case: Case, solved: Solved[Plan], clock: Clock) -> Answered:
    """What one more hour, more time, overtime and an earlier start would save; the figures never guess."""
    question = "Where are the bottlenecks?"
    if solved.plan is None or solved.cost is None or not case.resources:
        return Answered(question, "No resource limits the plan.", COLUMNS)
    cells, resources = _full_cells(case, solved.plan, solved), _short(case, solved.plan)
    if not resources:
        enough = "There is time enough for every plan: more of it would save nothing."
        part = "Not asked: the resources that may limit the plan have no limit in some periods."
        words = part if binding(case).any() else enough
        return Answered(question, words, COLUMNS)
    asker = _Asker(case, solved.plan, solved.cost, solved.bound, solved.prices, clock)
    hours = [(cell, asker.same_setups(*cell)) for cell in cells[:MOST_PERIODS]
             if clock.left() > (1 - HOURS_SHARE) * clock.limits.seconds]
    paid = [r for r in resources if case.overtime_limit[r] > 0]
    asker.asks = len(resources) + len(paid) + 1 + RE_PLANNED
    told = [one for r in resources for one in _more_time(case, asker, r)]
    told.append(_earlier(case, asker))
    told += [(f"one more time unit of {case.resources[r]} in {case.periods[t]}",
              _best(saving, asker.one_more(r, t)) if k < RE_PLANNED else saving)
             for k, ((r, t), saving) in enumerate(hours)]
    shown = [(what, _worth_telling(saving, TINY * abs(solved.cost))) for what, saving in told]
    words = " ".join([_full_words(case, cells), *_saving_words(case, shown, len(cells) - len(hours))])
    answered = bool(cells) or any(saving.low is not None or saving.high is not None for _, saving in shown)
    return Answered(question, words, COLUMNS, tuple(_row(*one) for one in shown), headline=answered)


def _worth_telling(saving: _Saving, tiny: float) -> _Saving:
    """Drop a saving of nothing at least, which says nothing: as much holds before any re-planning."""
    if saving.low is None or saving.low > tiny:
        return saving
    if saving.high is None:
        return replace(saving, low=None, how=NOT_ANSWERED)
    if saving.high <= tiny:
        return replace(saving, low=0.0, high=0.0)
    return replace(saving, low=None, how=f"not known yet: between nothing and that; {saving.how}")


def _full_words(case: Case, cells: list[tuple[int, int]]) -> str:
    if not cells:
        return "No resource is full in any period."
    r, t = min(cells, key=lambda cell: cell[1])
    count = "1 period of a resource is" if len(cells) == 1 else f"{len(cells)} periods of resources are"
    spare = any(case.overtime_limit[resource] > 0 for resource, _ in cells)
    how = "full in regular time" if spare else "full"
    return f"{count} {how}, the first one {case.resources[r]} in {case.periods[t]}."


def _saving_words(case: Case, shown: list[tuple[str, _Saving]], not_asked: int) -> list[str]:
    """Sentences about what the changes save: of all of them only where all are known, and of what is missing."""
    gains = [(saving.low, what, saving) for what, saving in shown if saving.low is not None and saving.low > 0]
    missing = [what for what, saving in shown if saving.how == NOT_ANSWERED]
    unknown = [(saving.high, what) for what, saving in shown if saving.low is None and saving.high is not None]
    nothing = [what for what, saving in shown if saving.low == 0.0]
    words = []
    if gains:
        most, what, best = max(gains, key=lambda gain: gain[0])
        least = "" if best.high == best.low else " at least"
        surely = all(one is best or (one.high is not None and one.high <= most) for _, one in shown)
        rank = "Most" if surely else "Most, as far as is known,"
        words.append(f"{rank} is saved by {what}: {money(case, most, 'down' if least else 'nearest')}{least}.")
    elif nothing and len(nothing) == len(shown):
        words.append("No change that was asked about saves anything.")
    elif unknown:
        most, what = max(unknown)
        words.append(f"How much the changes save is not known yet; the most it can be is {money(case, most, 'up')} "
                     f"({what}).")
    if missing:
        words.append(f"{NOT_ANSWERED.capitalize()}: {'; '.join(missing[:3])}"
                     f"{f'; and {len(missing) - 3} more' if len(missing) > 3 else ''}.")
    if not_asked > 0:
        words.append(f"{not_asked} of the full periods {'was' if not_asked == 1 else 'were'} not asked about.")
    return words


def _full_cells(case: Case, plan: Plan, solved: Solved[Plan]) -> list[tuple[int, int]]:
    need = resource_need(case, plan.made)
    full = (need >= FULL * case.capacity) & (need > 0)
    price = solved.prices if solved.prices is not None and solved.prices.shape == need.shape else plan.overtime
    cells = [(int(r), int(t)) for r, t in zip(*np.nonzero(full), strict=True)]
    return sorted(cells, key=lambda cell: -float(price[cell]))


def _short(case: Case, plan: Plan) -> list[int]:
    """Resources that can stand in the way of a plan, the fullest ones, in the order of the sheet."""
    need = resource_need(case, plan.made).sum(axis=1)
    have = np.where(np.isfinite(case.capacity), case.capacity, 0.0).sum(axis=1)
    able = np.flatnonzero(binding(case) & np.isfinite(case.capacity).all(axis=1))
    load = need / np.maximum(have, 1e-12)
    return sorted(able[np.argsort(-load[able], kind="stable")][:MOST_RESOURCES].tolist())


@dataclass
class _Asker:
    """Re-solves changed cases from the plan, each with its part of the time left."""

    case: Case
    plan: Plan
    cost: float
    bound: float | None
    prices: Floats | None
    clock: Clock
    asks: int = 1

    def __post_init__(self) -> None:
        self.counts = self.plan.made if bool((self.case.lot_multiple > 0).any()) else None
        sized = self._sized(self.case)
        self.sized_cost = self.cost if sized is None else min(self.cost, sized)

    def _sized(self, case: Case) -> float | None:
        """Cost of the plan's setups with their best sizes."""
        found = best_quantities(case, self.plan.setup, max(self.clock.left() / 10, 1.0), counts=self.counts)
        checked = None if found is None else audit(case, found)
        return checked.total if checked is not None and checked.ok else None

    def _with_one_more(self, resource: int, period: int) -> Case:
        capacity = self.case.capacity.copy()
        capacity[resource, period] += 1.0
        return replace(self.case, capacity=capacity)

    def same_setups(self, resource: int, period: int) -> _Saving:
        """One more time unit with the plan's setups; at most what the prices of the bound allow."""
        more = self._with_one_more(resource, period)
        sized = self._sized(more)
        low = 0.0 if sized is None else max(0.0, self.sized_cost - sized)
        high = None
        if self.prices is not None and self.prices.shape == self.case.capacity.shape:
            high = max(low, self.sized_cost - price_bound(more, self.prices))
        return _Saving(low, high, "sizes re-planned with the same setups; at most by the bound")

    def _begun(self, changed: Case, seconds: float) -> Plan:
        """Give the plan with its setups at their best sizes for a changed case."""
        sized = best_quantities(changed, self.plan.setup, seconds, counts=self.counts)
        return sized or plan_from_made(changed, self.plan.made)

    def one_more(self, resource: int, period: int) -> _Saving:
        """One more time unit, all re-planned."""
        return self.re_planned(self._with_one_more(resource, period))

    def re_planned(self, changed: Case, start: Plan | None = None, anyway: float = 0.0) -> _Saving:
        """Re-solve a changed case, of whose cost a part is paid ``anyway``.

        What is saved at least is counted from what every plan of the case as it is costs at least: a plan found
        on the way that is better than this one may owe that to the search, not to the change.
        """
        seconds = self.clock.left() / max(self.asks, 1)
        self.asks -= 1
        if seconds <= 0.02:
            return _Saving(None, None, NOT_ANSWERED)
        begun = start or self._begun(changed, seconds / 4)
        found = solve(changed, Limits(0.75 * seconds, 1e-6, self.clock.limits.cancelled), begun)
        if found.cost is None and found.bound is None:
            return _Saving(None, None, NOT_ANSWERED)
        own = None if found.cost is None else found.cost - anyway
        low = None if own is None else 0.0 if self.bound is None else max(0.0, self.bound - own)
        high = None if found.bound is None else max(low or 0.0, self.cost - (found.bound - anyway))
        exact = low is not None and high is not None and high - low <= EXACT * self.cost
        sure = "exact" if exact and found.verdict is Verdict.PROVEN_BEST else "a proven range"
        how = f"all re-planned, {sure}"
        if own is not None and not exact and self.cost - own > TINY * self.cost:
            less = money(self.case, self.cost - own, "down")
            how += f"; a plan for {less} less was found, but in part that may be due to more search"
        return _Saving(low, high, how, found.plan)


def _row(what: str, saving: _Saving) -> Row:
    return (what, saving.low, saving.high, saving.how)


def _best(first: _Saving, second: _Saving) -> _Saving:
    """Give the tighter figures of two answers about one change."""
    if second.low is None:
        return first
    low = max(first.low or 0.0, second.low)
    highs = [high for high in (first.high, second.high) if high is not None]
    how = second.how if second.how.endswith("exact") or second.low >= (first.low or 0.0) else first.how
    return _Saving(low, max(low, min(highs)) if highs else None, how)


def _more_time(case: Case, asker: _Asker, resource: int) -> Iterator[tuple[str, _Saving]]:
    """A tenth more time in every period, and where there is paid overtime, as much more of it."""
    name, finite = case.resources[resource], case.capacity[resource][np.isfinite(case.capacity[resource])]
    capacity = case.capacity.copy()
    capacity[resource] *= 1 + MORE
    saving = asker.re_planned(replace(case, capacity=capacity))
    what = f"a tenth more time of {name} in every period"
    if not case.overtime_limit[resource] > 0:
        what += ", or as much overtime before its pay"
    yield what, _per_hour(asker, resource, saving)
    if case.overtime_limit[resource] > 0:
        limit = case.overtime_limit.copy()
        limit[resource] += MORE * float(finite.mean())
        price = f"{case.currency} {case.overtime_cost[resource]:,.2f} a time unit"
        yield (f"overtime of {name} allowed for a tenth of its time more, at {price}",
               asker.re_planned(replace(case, overtime_limit=limit)))


def _per_hour(asker: _Asker, resource: int, saving: _Saving) -> _Saving:
    """Add what a time unit of the additional time is worth on average: the most that overtime may cost."""
    if saving.plan is None or saving.low is None:
        return saving
    case = asker.case
    over = resource_need(case, saving.plan.made)[resource] - case.capacity[resource]
    used = float(np.clip(over, 0.0, MORE * case.capacity[resource]).sum())
    if not used > 1e-6:
        return saving
    if saving.low <= TINY * asker.cost:
        return saving
    least = "" if saving.low == saving.high or saving.how.endswith("exact") else "at least "
    worth = f"{used:,.1f} time units of it are used, worth {least}{case.currency} {saving.low / used:,.2f} each"
    return replace(saving, how=f"{saving.how}; {worth}")


def _earlier(case: Case, asker: _Asker) -> tuple[str, _Saving]:
    """A period more before the first one, in which stock can be built."""
    what = f"an earlier start: one {case.period_unit} more before {case.periods[0]}, with the same time"
    earlier = started_earlier(case)
    if earlier is None:
        asker.asks -= 1
        return what, _Saving(None, None, "not asked: stock at the start is outside its limits")
    changed, anyway = earlier
    made = np.hstack([np.zeros((case.n, 1)), asker.plan.made])
    return what, asker.re_planned(changed, plan_from_made(changed, made), anyway)
