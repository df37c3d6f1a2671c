"""First plans by best responses: one item at a time is planned anew on what the others leave.

An item sees the resources as all others leave them: time within the capacity is free, overtime costs what it
costs, and time that is not there costs a good deal more; the setup of a family, or the use of a resource, costs
only where no other item causes it already. Its best answer is one run of the programme over whole steps (``grid``),
which keeps every rule of the item. Items answer in turn until nothing is missing; while something is, missing
time becomes dearer (best-response play on the capacity game, as in the smoothing heuristics for setup times of
Trigeiro, Thomas & McClain 1989, with a programme in place of single shifts).
"""

import math
from collections.abc import Iterable

import numpy as np

from ledgersolve.lot_sizing.ascent import Ascent
from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.bound import Relaxation
from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.grid import ItemGrid, Pieces, common_steps
from ledgersolve.lot_sizing.plan import Plan, family_setups, plan_from_made, resource_need
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.lot_sizing.tight import lot_limits
from ledgersolve.lot_sizing.wagner_whitin import needs
from ledgersolve.mip import Clock

STEPS = 300
"""Steps of quantity into which the needs of an item are cut, about."""
FINEST = 6
"""Steps that must fit between an item's least and most lot, and into its stock."""
SWEEPS = 40
"""Most rounds in which every item answers."""
DEARER = 3.0
"""Factor by which missing time becomes dearer each round."""
FITS = 1e-6
"""Missing time below this share of a capacity is rounding."""
ENDLESS = 1e15

_FIRST_STEPS = 40


def first_plan(case: Case, clock: Clock, seconds: float) -> Plan | None:
    """Give a plan soon: a short ascent for prices, then responses; None where time did not suffice."""
    until = clock.elapsed() + min(seconds, clock.left())
    relaxation = Relaxation(case)
    ascent = Ascent.begin(relaxation, quick=relaxation.programmes.dear.size > 0)
    half = (clock.elapsed() + until) / 2
    ascent.climb(_FIRST_STEPS, math.inf, lambda _: clock.over() or clock.elapsed() > half)
    if not math.isfinite(ascent.best.bound) or clock.over():
        return None
    made, prices = ascent.best.schedules.made, ascent.best.charges.prices
    return settled(case, made, prices, clock, until - clock.elapsed(), polish=False)


def settled(
    case: Case, made: Floats, prices: Floats, clock: Clock, seconds: float, *, polish: bool = True
) -> Plan | None:
    """Make quantities (N, T) fit by responses; give the best plan met that the audit finds sound.

    ``prices`` (R, T) are those of capacity; missing time costs a good deal more. To ``polish``, every item answers
    once more when nothing is missing, now for cost alone; quantities are re-optimised before and after.
    """
    until = clock.elapsed() + min(seconds, clock.left())
    responses = Responses(case, made, prices)
    responses.settle(clock, until)
    best = _cheapest(case, responses.made, clock)
    if best is None or not polish or clock.over() or clock.elapsed() > until:
        return None if best is None else best[1]
    responses = Responses(case, best[1].made, prices)
    responses.dear *= DEARER**2
    responses.round(clock, until)
    again = _cheapest(case, responses.made, clock)
    return best[1] if again is None or again[0] >= best[0] else again[1]


def _cheapest(case: Case, made: Floats, clock: Clock) -> tuple[float, Plan] | None:
    """Give quantities as a plan, as they are or re-optimised, whichever is sound and cheaper, with its cost."""
    found = []
    for plan in (plan_from_made(case, made), best_quantities(case, made > 0, max(1.0, clock.left()), counts=made)):
        checked = None if plan is None else audit(case, plan)
        if plan is not None and checked is not None and checked.ok:
            found.append((checked.total, plan))
    return min(found, key=lambda pair: pair[0], default=None)


class Responses:
    """The state of the play: what is made, and what that leaves of resources, families and uses."""

    def __init__(self, case: Case, made: Floats, prices: Floats) -> None:
        self.case, self.made = case, made.copy()
        self.need = resource_need(case, made)
        setup = made > 0
        self.kin = np.zeros((len(case.families) + 1, case.t), dtype=np.int64)
        np.add.at(self.kin, case.item_family, setup)
        self.users = np.zeros((len(case.resources) + 1, case.t), dtype=np.int64)
        np.add.at(self.users, case.item_resource, setup)
        np.add.at(self.users, case.family_resource, family_setups(case, setup))
        self.capacity = np.where(np.isfinite(case.capacity), case.capacity, ENDLESS)
        self.overtime = np.where(np.isfinite(case.overtime_limit), case.overtime_limit, ENDLESS)
        self.dear = _dear(case, prices)
        self.tiny = FITS * np.maximum(np.where(np.isfinite(case.capacity), case.capacity, 0.0), 1e-3)
        self.steps, self.grids = coarse_steps(case), dict[int, ItemGrid]()

    def missing(self) -> Floats:
        """Shape (R, T): time that is not there."""
        short = self.need - self.capacity - self.overtime[:, None]
        return np.where(short > self.tiny, short, 0.0)

    def settle(self, clock: Clock, until: float, seed: int = 0) -> bool:
        """Let items answer until nothing is missing; False where time or rounds are over first."""
        rng = np.random.default_rng(seed)
        self._play(np.flatnonzero(~self._fits_alone()), clock, until)
        for _ in range(SWEEPS):
            short = self.missing()
            if not short.any():
                return True
            if clock.over() or clock.elapsed() > until:
                return False
            self._play(rng.permutation(self._concerned(short)), clock, until)
            self.dear *= DEARER
        return not self.missing().any()

    def round(self, clock: Clock, until: float, seed: int = 1) -> None:
        """Let every item answer once."""
        self._play(np.random.default_rng(seed).permutation(self.case.n), clock, until)

    def _fits_alone(self) -> Flags:
        """Items whose quantities keep their own rules."""
        case = self.case
        least, most = lot_limits(case)
        made = self.made
        tiny = 1e-9 * (1.0 + made.max(axis=1, initial=0.0))[:, None]
        fits = ((made <= 0) | (made >= least[:, None] - tiny)) & (made <= most[:, None] + tiny)
        by = np.where(case.lot_multiple > 0, case.lot_multiple, 1.0)[:, None]
        fits &= (case.lot_multiple[:, None] == 0) | (np.abs(made / by - np.round(made / by)) <= 1e-9)
        plan = plan_from_made(case, made)
        fits &= (plan.stock <= case.most_stock[:, None] + tiny) & (plan.stock >= case.least_stock() - tiny)
        return np.asarray(fits.all(axis=1))

    def _concerned(self, short: Floats) -> Ints:
        """Items with a lot where time is missing, on the resource or through their family."""
        case = self.case
        lacks = np.vstack([short > 0, np.zeros((1, case.t), dtype=bool)])
        by_family = np.vstack([lacks[case.family_resource], lacks[-1:]])[case.item_family]
        there = (self.made > 0) & (lacks[case.item_resource] | by_family)
        return np.flatnonzero(there.any(axis=1))

    def _play(self, items: Iterable[int], clock: Clock, until: float) -> None:
        for item in items:
            if clock.over() or clock.elapsed() > until:
                return
            self.answer(int(item))

    def answer(self, item: int) -> None:
        """Plan one item anew on what the others leave."""
        before = self.made[item].copy()
        self._place(item, before, -1)
        if item not in self.grids:
            self.grids[item] = ItemGrid(self.case, item, float(self.steps[item]))
        made, _, cost = self.grids[item].schedule(self._pieces(item))
        self.made[item] = made if math.isfinite(cost) else before
        self._place(item, self.made[item], 1)

    def _place(self, item: int, made: Floats, sign: int) -> None:
        """Put the item's lots on its resource (1), or take them off (-1)."""
        case, setup = self.case, made > 0
        family, resource = int(case.item_family[item]), int(case.item_resource[item])
        before = self.kin[family] > 0
        self.kin[family] += sign * setup
        self.users[resource] += sign * setup
        if resource >= 0:
            self.need[resource] += sign * (case.time_per_unit[item] * made + case.setup_time[item] * setup)
        if family >= 0:
            changed = (self.kin[family] > 0) != before
            place = int(case.family_resource[family])
            self.users[place] += sign * changed
            if place >= 0:
                self.need[place] += sign * case.family_time[family] * changed

    def _pieces(self, item: int) -> Pieces:
        """Cost of the item's lots, with what they cost through time, family and use."""
        case = self.case
        family, resource = int(case.item_family[item]), int(case.item_resource[item])
        base = case.setup_cost[item].copy()
        unit = case.unit_cost[item]
        fixed = np.zeros(case.t)
        if family >= 0:
            begins = self.kin[family] == 0
            base += case.family_cost[family] * begins
            place = int(case.family_resource[family])
            if place == resource:
                fixed += case.family_time[family] * begins
            elif place >= 0:
                base += self._rent(place) * begins
                base += self._dues(place, case.family_time[family] * begins) - self._dues(place, 0.0)
        if resource < 0:
            return Pieces(np.full((1, case.t), np.inf), base[None], unit[None])
        base += self._rent(resource)
        return self._timed(item, base, fixed + case.setup_time[item])

    def _rent(self, resource: int) -> Floats:
        """Cost of using the resource where nobody uses it yet."""
        return np.asarray(self.case.use_cost[resource] * (self.users[resource] == 0))

    def _dues(self, resource: int, more: Floats | float) -> Floats:
        """Cost of overtime and missing time if ``more`` time is needed."""
        over = self.need[resource] + more - self.capacity[resource]
        limit = self.overtime[resource]
        paid = self.case.overtime_cost[resource] * np.clip(over, 0.0, limit)
        return np.asarray(paid + self.dear * np.maximum(over - limit, 0.0))

    def _timed(self, item: int, base: Floats, fixed: Floats) -> Pieces:
        """Three pieces: units within the capacity, in overtime, and in time that is not there."""
        case, resource = self.case, int(self.case.item_resource[item])
        unit, time = case.unit_cost[item], float(case.time_per_unit[item])
        base = base - self._dues(resource, 0.0)
        if time <= 0:
            return Pieces(np.full((1, case.t), np.inf), (base + self._dues(resource, fixed))[None], unit[None])
        room = self.capacity[resource] - self.need[resource] - fixed
        limit, rate = float(self.overtime[resource]), float(case.overtime_cost[resource])
        ends = np.stack([room / time, (room + limit) / time, np.full(case.t, np.inf)])
        bases = np.stack([base, base - rate * room, base + rate * limit - self.dear * (room + limit)])
        slopes = np.stack([unit, unit + rate * time, unit + self.dear * time])
        return Pieces(ends, bases, slopes)


def coarse_steps(case: Case) -> Floats:
    """Shape (N,): steps that cut an item's needs into about ``STEPS``, fine enough for its limits.

    Whole lot multiples, else whole common steps where there are any.
    """
    total = np.maximum(needs(case).raw.max(axis=1, initial=0.0), 0.0)
    step = np.where(total > 0, total / STEPS, 1.0)
    least, most = lot_limits(case)
    room = case.most_stock - case.least_stock().max(axis=1, initial=0.0)
    for limit in (np.where(least > 0, least, np.inf), most, np.where(most > least, most - least, np.inf), room):
        step = np.where(np.isfinite(limit) & (limit > 0), np.minimum(step, limit / FINEST), step)
    common = common_steps(case)
    whole = np.floor(step / np.where(common > 0, common, 1.0))
    step = np.where(common > 0, np.maximum(whole, 1.0) * common, step)
    return np.asarray(np.where(case.lot_multiple > 0, case.lot_multiple, step))


def _dear(case: Case, prices: Floats) -> float:
    """Give a price of missing time above what time saves at the margin."""
    dearest = float(prices.max(initial=0.0)) + float(case.overtime_cost.max(initial=0.0))
    size = float(np.where(np.isfinite(case.capacity), case.capacity, 0.0).max(initial=0.0))
    by_setup = float(case.setup_cost.max(initial=0.0)) / max(size, 1e-9)
    return 3.0 * max(dearest, by_setup, 1e-3)
