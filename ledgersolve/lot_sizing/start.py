"""A first plan where the resources are so full that picks and roundings do not fit.

Setups from a guess that asks for too much time are mended in windows of periods: the elastic model frees the
setups of a window, holds the rest, and pays dearly for time that is missing; windows end at the periods that
lack time, since only earlier ones can help them (fix-and-optimise, Helber & Sahling 2010, on the shortfall
instead of the cost).
"""

from dataclasses import dataclass

import numpy as np

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, Flags, Floats
from ledgersolve.lot_sizing.model import Form, WholeModel, whole_model
from ledgersolve.lot_sizing.plan import Plan, plan_from_made, resource_need
from ledgersolve.lot_sizing.quantities import best_quantities
from ledgersolve.mip import Clock

WINDOW_SETUPS = 150
"""Setups freed in a first window."""
WINDOW_SECONDS = 4.0
DEARER = 6.0
"""Factor by which missing time becomes dearer when a window does not help: small lacks then show too."""
MOST_IDLE = 9
"""Windows without gain, one after the other, after which mending gives up."""
FITS = 1e-6
"""Missing time below this share of a capacity is rounding."""


def find_start(case: Case, guess: Floats, prices: Floats, clock: Clock, seconds: float) -> Plan | None:
    """Give a plan that fits, or None where the time did not suffice.

    Parameters
    ----------
    guess
        Shape (N, T): quantities of which the setups are taken.
    prices
        Shape (R, T): prices of capacity; missing time costs a good deal more.
    """
    until = clock.elapsed() + min(seconds, clock.left())
    mend = _Mend(case, guess > 0, _dear(case, prices), clock, until)
    while clock.elapsed() < until and not clock.over():
        if not mend.short.any():
            return mend.plan()
        if not mend.step():
            return None
    return mend.plan() if not mend.short.any() else None


def _dear(case: Case, prices: Floats) -> float:
    """Give a price of missing time above what time saves at the margin."""
    dearest = float(prices.max(initial=0.0)) + float(case.overtime_cost.max(initial=0.0))
    by_setup = float(case.setup_cost.max(initial=0.0)) / max(float(case.capacity.max(initial=1.0)), 1e-9)
    return 20.0 * max(dearest, by_setup, 1e-3)


@dataclass
class _Mend:
    """The mending of one guess: setups, the missing time they leave, and how wide windows are."""

    case: Case
    setup: Flags
    dear: float
    clock: Clock
    until: float
    span: int = 0
    idle: int = 0

    def __post_init__(self) -> None:
        self.whole: WholeModel = whole_model(self.case, Form.INEQUALITIES, dear=self.dear)
        self.setup = self.setup & (self.whole.tight.most_made > 0)
        self.span = int(np.clip(WINDOW_SETUPS // max(self.case.n, 1), 2, self.case.t))
        self.values: Floats | None = None
        self.short = np.full(self.case.capacity.shape, np.inf)
        self._solve(np.zeros(self.setup.shape, dtype=bool))

    def plan(self) -> Plan | None:
        """Give the plan of the present setups, if it fits."""
        if self.values is None:
            return None
        made = self.whole.quantities(self.values)
        again = best_quantities(self.case, made > 0, max(1.0, self.clock.left()), counts=made)
        for plan in (again, plan_from_made(self.case, made)):
            if plan is not None and audit(self.case, plan).ok:
                return plan
        return None

    def step(self) -> bool:
        """Free one window that ends where time is missing; widen windows that do not help. False: give up."""
        before = float(self.short.sum())
        self._solve(self._window())
        if self.short.sum() < before * (1 - 1e-6):
            self.idle = 0
            return True
        self.idle += 1
        if self.idle > MOST_IDLE:
            return False
        if self.idle % 2:
            self.dear *= DEARER
            self.whole = whole_model(self.case, Form.INEQUALITIES, dear=self.dear)
        else:
            self.span = min(self.case.t, self.span + max(1, self.span // 2))
        return True

    def _window(self) -> Flags:
        """Setups of the periods up to one that lacks time; the worst first, then the others in turn."""
        lacking = np.argsort(-self.short.max(axis=0))
        lacking = lacking[self.short.max(axis=0)[lacking] > 0]
        last = int(lacking[self.idle % lacking.size]) if lacking.size else self.case.t - 1
        free = np.zeros(self.setup.shape, dtype=bool)
        free[:, max(0, last + 2 - self.span) : last + 2] = True
        return free

    def _solve(self, free: Flags) -> None:
        """Solve with the setups outside ``free`` held; without any plan, with all of them free."""
        held = ~free
        fixed = self.setup[held].astype(np.float64)
        model = self.whole.model.bounded(self.whole.setup[held], fixed, fixed)
        seconds = max(min(WINDOW_SECONDS, self.until - self.clock.elapsed(), self.clock.left()), 0.1)
        result = model.solve(seconds, gap=1e-3, hint=self.values, cancelled=self.clock.limits.cancelled)
        if result.values is None:
            if self.values is None and held.all():
                self._open_all()
            return
        self.values = result.values
        self.setup = self.whole.setups(result.values)
        self.short = self._missing(result.values)

    def _open_all(self) -> None:
        """The guess carries no plan at all (needs not met): begin with a setup wherever one is possible."""
        self.setup = self.whole.tight.most_made > 0
        fixed = self.setup.astype(np.float64).ravel()
        model = self.whole.model.bounded(self.whole.setup.ravel(), fixed, fixed)
        result = model.solve(max(self.clock.left(), 0.1), cancelled=self.clock.limits.cancelled)
        if result.values is not None:
            self.values, self.short = result.values, self._missing(result.values)

    def _missing(self, values: Floats) -> Floats:
        case = self.case
        need = resource_need(case, self.whole.quantities(values))
        short = need - case.capacity - case.overtime_limit[:, None]
        size = np.maximum(np.where(np.isfinite(case.capacity), case.capacity, 0.0), 1e-3)
        return np.where(short > FITS * size, short, 0.0)
