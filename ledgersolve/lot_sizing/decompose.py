"""Items tied by shared capacity: bound and plan by decomposition.

The way: an ascent on the Lagrangian bound keeps the schedules it meets; where families or rented resources
couple the items, their running periods are chosen at the prices and held; columns are generated to the
bound; the wrapper picks one schedule an item; quantities are re-optimised with the setups fixed; windows
improve the plan until time is over or the gap is accepted.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass, field, replace

from ledgersolve.lot_sizing.ascent import Ascent
from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.bound import Charges, Point, Relaxation
from ledgersolve.lot_sizing.case import Case, Floats
from ledgersolve.lot_sizing.columns import Pool, generate, rounded
from ledgersolve.lot_sizing.couplings import Runs, choose, held
from ledgersolve.lot_sizing.pick import mixed, picks
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.lot_sizing.responses import settled
from ledgersolve.lot_sizing.start import find_start
from ledgersolve.lot_sizing.windows import Best, improve
from ledgersolve.mip import Clock, Limits, Progress, Solved, Verdict, judge

RESPONSES_SHARE = 0.15
"""Most of the time left that responses to the prices of the ascent may take."""
ROUNDING_SHARE = 0.4
"""Share of the time for whole choices in which mixes of schedules are rounded, before the wrapper picks."""
_ROUNDINGS = 12
_STEPS = 800
_HELD_STEPS, _HELD_STEP = 60, 0.03
_HOLDS = 16
_BLEND = 0.1
_EXACT_STEP = 0.05
_EXACT_STEPS = 150
_NEAR_TOP = 0.02
_KEEP_ALL = 60


def solve_decomposed(case: Case, limits: Limits, start: Plan | None = None) -> Solved[Plan]:
    """Solve a case of items that share resources or families; ``start`` is a plan to begin with.

    ``Solved.prices`` are those of the bound, for ``price_bound``.
    """
    run = _Run(case, limits.start())
    run.tell()
    run.take(start)
    run.ascend()
    if run.impossible:
        return Solved(Verdict.NO_PLAN_EXISTS, None, None, None, tuple(run.clock.stages), tuple(run.notes))
    run.plan_by_columns()
    run.improve()
    return run.ended()


@dataclass
class _Run:
    case: Case
    clock: Clock
    notes: list[str] = field(default_factory=list)
    plan: Plan | None = None
    cost: float = math.inf

    def __post_init__(self) -> None:
        self.relaxation = Relaxation(self.case)
        self.pool = Pool(self.case)
        self.ascent: Ascent | None = None
        self.point: Point = self.relaxation.at(self.relaxation.start())

    @property
    def impossible(self) -> bool:
        """Whether some item has no schedule even alone."""
        return not math.isfinite(self.point.bound)

    def tell(self) -> None:
        """Note what the bound leaves out, and what the plan needs beyond schedules of single items."""
        left_out = self.relaxation.programmes.relaxed()
        self.notes.append(
            "Decomposition: the programmes of single items carry every rule of the items exactly; capacity is priced."
            if not left_out else
            f"Decomposition: the bound leaves out {', '.join(left_out)} of some items (no common step, or "
            "too many); the plan keeps these rules, by responses in coarser steps and by models."
        )
        if self.relaxation.coupled:
            self.notes.append(
                "Families and rented periods: shared out among the items in the bound; in the plan their periods are "
                "chosen first and held while schedules are chosen, and opened again in windows and responses."
            )

    def take(self, plan: Plan | None) -> bool:
        """Take a plan that is sound and better."""
        if plan is None:
            return False
        checked = audit(self.case, plan)
        if not checked.ok or not checked.total < self.cost:
            return False
        self.plan, self.cost = plan, checked.total
        self.clock.note("plan", best=self.cost)
        return True

    def ascend(self) -> None:
        """Climb, and keep schedules met near the top."""
        share = 0.3 * self.clock.left()
        until = self.clock.elapsed() + share
        self.ascent = climb(self.relaxation, self.pool, None, _STEPS, self.cost, self.clock, until)
        climb_exactly(self.relaxation, self.pool, self.ascent, self.clock, until + share / 2)
        self.point = self.ascent.best
        self.clock.note("ascent", bound=self.point.bound)
        self.clock.end_stage("ascent", f"{self.ascent.steps} steps")
        if not self.impossible and not self.clock.over():
            made, prices = self.point.schedules.made, self.point.charges.prices
            self.take(settled(self.case, made, prices, self.clock, RESPONSES_SHARE * self.clock.left()))
            self.clock.end_stage("responses")

    def plan_by_columns(self) -> None:
        """Hold couplings, generate columns, pick schedules, re-optimise quantities."""
        if not self.relaxation.coupled:
            self.point, made = plan_held(
                self.relaxation, self.pool, self.point, self.clock, 0.3 * self.clock.left(), self._found
            )
            self._finish(made)
        else:
            until = self.clock.elapsed() + 0.4 * self.clock.left()
            self._hold(until)

    def _hold(self, until: float) -> None:
        """Choose when families and uses run, hold it, and learn from the prices that follow; keep the best."""
        case, charges, ascent = self.case, self.point.charges, self.ascent
        prices, often = charges.prices, self.point.runs if ascent is None else ascent.runs
        best, least, tried = None, math.inf, 0
        runs: Runs | None = None
        while tried < _HOLDS and not (tried and (self.clock.elapsed() > until or self.clock.over())):
            at = Charges(prices, charges.family, charges.use, charges.family_use)
            runs = choose(self.relaxation, at, often, self.clock, 0.0, runs)
            relaxation = Relaxation(held(case, runs))
            pool = Pool(relaxation.case)
            ascent = climb(
                relaxation, pool, relaxation.start(prices), _HELD_STEPS, math.inf, self.clock, until, _HELD_STEP
            )
            ascent.exactly()
            tried += 1
            value = ascent.best.bound + _sunk(case, runs)
            if best is None or value < least:
                best, least = (relaxation, pool, ascent), value
            if math.isfinite(value):
                prices = (1 - _BLEND) * prices + _BLEND * ascent.best.charges.prices
        self.clock.end_stage("families and uses", f"{tried} choices held")
        if best is None:
            return
        relaxation, pool, ascent = best
        climb_exactly(relaxation, pool, ascent, self.clock, self.clock.elapsed() + 0.1 * self.clock.left())
        apart = replace(self.clock.limits, seconds=max(self.clock.left(), 1e-3), progress=_unheard).start()
        _, made = plan_held(relaxation, pool, ascent.best, apart, 0.4 * self.clock.left(), self._found)
        self._finish(made)

    def _found(self, made: Floats, rounding: bool) -> bool:
        """Take quantities as they are, re-optimised, or, of a rounding, after responses; True: near enough."""
        if rounding:
            seconds = RESPONSES_SHARE * self.clock.left()
            self.take(settled(self.case, made, self.point.charges.prices, self.clock, seconds))
        else:
            self.take(plan_from_made(self.case, made))
            self.take(best_quantities(self.case, made > 0, max(1.0, self.clock.left()), counts=made))
        return self.clock.close_enough()

    def _finish(self, made: Floats | None) -> None:
        """Let items answer once more to the best plan; where there is none yet, mend what was picked."""
        self.clock.note("columns", bound=self.point.bound)
        self.clock.end_stage("columns")
        if self.clock.over() or self.clock.close_enough():
            return
        guess = self.point.schedules.made if made is None else made
        prices = self.point.charges.prices
        start = guess if self.plan is None else self.plan.made
        self.take(settled(self.case, start, prices, self.clock, RESPONSES_SHARE * self.clock.left()))
        self.clock.end_stage("responses")
        if self.plan is None and not self.clock.over():
            self.take(find_start(self.case, guess, prices, self.clock, 0.5 * self.clock.left()))
            self.clock.end_stage("first plan")

    def improve(self) -> None:
        """Windows, where the plan is not yet near enough."""
        if self.plan is None or self.clock.over() or self.clock.close_enough():
            return
        best = Best(self.case, self.plan, self.cost)
        tried = improve(best, self.clock)
        self.take(best.plan)
        self.clock.end_stage("windows", f"{tried} windows")

    def ended(self) -> Solved[Plan]:
        """Give the end of the run."""
        bound, stages, notes = self.point.bound, tuple(self.clock.stages), tuple(self.notes)
        prices = self.point.charges.prices
        if self.plan is None:
            return Solved(Verdict.NONE_FOUND, None, None, bound, stages, notes, prices)
        bound = min(bound, self.cost)
        verdict = judge(self.cost, bound, self.clock.limits.gap)
        return Solved(verdict, self.plan, self.cost, bound, stages, notes, prices)


def climb(
    relaxation: Relaxation, pool: Pool, charges: Charges | None, steps: int, goal: float, clock: Clock,
    until: float, step: float = 0.5,
) -> Ascent:
    """Climb from some charges and keep the schedules met near the top.

    Items that need the dearer programme are relaxed on the way (``Ascent.quick``).
    """
    ascent = Ascent.begin(relaxation, charges, step=step, quick=relaxation.programmes.dear.size > 0)
    ascent.climb(steps, goal, _keeper(relaxation, pool, ascent, clock, until))
    return ascent


def climb_exactly(relaxation: Relaxation, pool: Pool, ascent: Ascent, clock: Clock, until: float) -> None:
    """Go on with the exact programmes of all items, for a few steps, as long as there is time."""
    if relaxation.programmes.dear.size and not clock.over() and math.isfinite(ascent.best.bound):
        ascent.exactly()
        ascent.step = _EXACT_STEP
        ascent.climb(_EXACT_STEPS, math.inf, _keeper(relaxation, pool, ascent, clock, until))


def _keeper(
    relaxation: Relaxation, pool: Pool, ascent: Ascent, clock: Clock, until: float
) -> Callable[[Point], bool]:
    keep_all = relaxation.case.n <= _KEEP_ALL
    beyond = ~relaxation.programmes.exact

    def met(point: Point) -> bool:
        if keep_all or ascent.step < _NEAR_TOP:
            sound = point.schedules.sound
            pool.add(
                point.schedules.made, relaxation.column_costs(point), None if sound is None else sound | beyond
            )
        return clock.over() or clock.elapsed() > until

    return met


def plan_held(
    relaxation: Relaxation, pool: Pool, point: Point, clock: Clock, seconds: float,
    take: Callable[[Floats, bool], bool],
) -> tuple[Point, Floats | None]:
    """Columns to the bound, and one schedule an item: the last quantities (N, T) found, or None.

    First the mix of the master is rounded at random, then the wrapper picks. ``take`` sees everything that is
    found, with whether it is only a rounding, and ends the search by saying True.
    """
    case = relaxation.case
    if not math.isfinite(point.bound):
        return point, None
    pool.add(point.schedules.made, relaxation.column_costs(point))
    dear = 10.0 * float(point.charges.prices.max(initial=0.0)) + 2.0 * float(case.overtime_cost.max(initial=0.0))
    dear = max(dear, 1e-3 * abs(point.bound) / max(float(relaxation.capacity.max(initial=1.0)), 1.0))
    point, mix = generate(relaxation, pool, point, clock, dear)
    if mix is None:
        return point, None
    clock.end_stage("column generation", f"{pool.items.size} schedules")
    made, until = None, clock.elapsed() + ROUNDING_SHARE * seconds
    for seed in range(_ROUNDINGS if mixed(mix, case.n) else 0):
        if clock.over() or (seed and clock.elapsed() > until):
            break
        made = rounded(pool, mix, seed)
        if take(made, True):
            return point, made
    left = seconds - (clock.elapsed() - until + ROUNDING_SHARE * seconds)
    for made in picks(relaxation, pool, point, mix, dear, left, clock, max(clock.limits.gap / 2, 1e-5)):
        if take(made, False):
            break
    return point, made


def _unheard(_: Progress) -> None:
    """Keep bounds of a case with its couplings held, which are none of the case itself, out of the stream."""


def _sunk(case: Case, runs: Runs) -> float:
    """Cost of what a choice runs."""
    family = float((case.family_cost[:, None] * runs.family).sum())
    return family + float((case.use_cost[:, None] * runs.used).sum())
