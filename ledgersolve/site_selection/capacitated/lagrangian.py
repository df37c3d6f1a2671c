"""The Lagrangian bound with volumes: assignment rows priced, a knapsack a site, a choice of sites.

Prices climb by subgradient steps towards a target (Held, Wolfe & Crowder 1974; Polyak's step length), with a
part of the last direction kept (Camerini, Fratta & Maffioli 1975). Every step gives a lower bound on all plans that
respect the fixed sites, and with an upper bound at hand it fixes further sites by their reduced costs.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ledgersolve.mip import Clock
from ledgersolve.site_selection.capacitated.choice import Choice, Pool, State
from ledgersolve.site_selection.capacitated.knapsack import Prices, SiteItems, SiteValues
from ledgersolve.site_selection.case import Floats
from ledgersolve.site_selection.lanes import Lanes

SAFETY = 1e-10
"""Relative amount by which bounds are lowered, for rounding."""

LARGE = 200_000
"""From this number of lanes on the clock is looked at in each step, not in each eighth."""

OVERSHOOT = 1.5e-3
"""Part of the upper bound by which a climb aims above it."""

Seen = Callable[[Choice, float, Prices], None]


@dataclass(frozen=True)
class Effort:
    """How long and how boldly to climb.

    ``length`` is the first step length as a part of Polyak's; after ``patience`` steps without progress it
    is multiplied by ``cooling``. ``memory`` is the part of the last direction that is kept.
    """

    steps: int
    length: float
    patience: int
    cooling: float = 0.75
    memory: float = 0.8
    shortest: float = 1e-3


@dataclass(frozen=True)
class Climb:
    """The end of a climb: best bound and prices, the state of the sites, how open each was on average."""

    bound: float
    prices: Prices
    state: State
    average: Floats
    steps: int


class Relaxation:
    """The relaxation of one case."""

    def __init__(self, lanes: Lanes, items: SiteItems) -> None:
        self.lanes, self.items = lanes, items
        free_to_fall = bool((lanes.least > 0).any())
        self.floor = -np.inf if free_to_fall else 0.0
        self.near_scale = float(lanes.demand.mean() * np.sqrt(max(lanes.n, 1))) or 1.0

    def first_prices(self) -> Prices:
        """Each customer's second cheapest lane, or what leaving its demand unmet costs."""
        cost = self.lanes.cost
        second = np.partition(cost, 1, axis=0)[1] if self.lanes.m > 1 else cost[0]
        first = cost.min(axis=0)
        prices = np.minimum(np.where(np.isfinite(second), second, first), self.lanes.unmet_cost)
        return Prices(np.where(self.lanes.needs & np.isfinite(prices), prices, 0.0))

    def bound_at(self, prices: Prices, values: SiteValues, choice: Choice) -> float:
        """Lower bound on every plan from the values of the sites at these prices."""
        lanes = self.lanes
        terms = float(prices.customer[lanes.needs].sum()) + prices.near * lanes.near_least
        bound = lanes.offset + terms + choice.value
        return bound - SAFETY * (abs(lanes.offset) + abs(terms) + float(np.abs(values.value).max(initial=0.0)))

    def climb(
        self, items: SiteItems, prices: Prices, state: State, effort: Effort, clock: Clock, *,
        upper: float = np.inf, seen: Seen | None = None,
    ) -> Climb:
        """Raise the bound until it reaches ``upper`` (no plan below that is left), or effort or time ends."""
        return _Climber(self, items, prices, state, effort, upper, seen).run(clock)


class _Climber:
    """One climb in progress."""

    def __init__(
        self, relaxation: Relaxation, items: SiteItems, prices: Prices, state: State, effort: Effort,
        upper: float, seen: Seen | None,
    ) -> None:
        self.relaxation, self.lanes, self.items = relaxation, relaxation.lanes, items
        self.effort, self.upper, self.seen = effort, upper, seen
        self.pool = Pool(self.lanes, items.reach, state)
        self.prices = self.best_prices = prices
        self.active, self.ceiling = items, np.full(self.lanes.n, np.inf)
        self._narrow()
        self.best, self.length, self.stale = -np.inf, effort.length, 0
        self.average = np.zeros(self.lanes.m)
        self.direction: Floats | None = None
        self.taken = 0

    def run(self, clock: Clock) -> Climb:
        stride = 8 if self.items.site.size <= LARGE else 1
        for step in range(self.effort.steps):
            if self.pool.impossible:
                return self._end(np.inf)
            if step % stride == stride - 1 and clock.over():
                break
            self.taken = step + 1
            if not self._step():
                break
        return self._end(np.inf if self.pool.impossible else self.best)

    def _step(self) -> bool:
        """One evaluation and one move; False when nothing is left to do."""
        if bool((self.prices.customer > self.ceiling).any()):
            self._narrow()
        values = self.active.evaluate(self.prices)
        choice = self.pool.choose(values.value)
        bound = self.relaxation.bound_at(self.prices, values, choice)
        if self.seen is not None:
            self.seen(choice, bound, self.prices)
        self.average = 0.9 * self.average + 0.1 * choice.degree if self.taken > 1 else choice.degree
        self._judge(bound)
        if self.best >= self.upper or self._fix(choice, bound):
            return self.best < self.upper and not self.pool.impossible
        return self._move(values, choice, bound)

    def _judge(self, bound: float) -> None:
        self.stale = 0 if bound > self.best + 1e-6 * abs(self.best) else self.stale + 1
        if bound > self.best:
            self.best, self.best_prices = bound, self.prices

    def _fix(self, choice: Choice, bound: float) -> bool:
        """Fix free sites that no plan below ``upper`` can have the other way; True if the pool changed."""
        fixed = np.flatnonzero((self.pool.state == 0) & (bound + choice.flip >= self.upper))
        if fixed.size == 0:
            return False
        state = self.pool.state.copy()
        state[fixed] = np.where(choice.picked[fixed], 1, -1)
        price = self.pool.price
        closed = bool((state[fixed] == -1).any())
        self.pool = Pool(self.lanes, self.items.reach, state)
        self.pool.price = price
        if closed:
            self.items = self.items.only(self.pool.state >= 0)
            self.active = self.active.only(self.pool.state >= 0)
        return True

    def _narrow(self) -> None:
        """Set lanes aside that cannot pay before prices have risen a good deal."""
        lanes = self.lanes
        if lanes.near is not None or bool((lanes.least > 0).any()):
            return
        prices = self.prices.customer
        self.ceiling = prices + 0.2 * np.abs(prices) + 0.1 * float(np.abs(prices).mean())
        self.active = self.items.at(np.flatnonzero(self.items.cost < self.ceiling[self.items.customer]))

    def _move(self, values: SiteValues, choice: Choice, bound: float) -> bool:
        lanes = self.lanes
        if self.stale >= self.effort.patience:
            self.length, self.stale = self.length * self.effort.cooling, 0
            if self.length < self.effort.shortest:
                return False
        slope = self._slope(values, choice)
        step = slope if self.direction is None else slope + self.effort.memory * self.direction
        self.direction = step
        norm = float(step @ step)
        if norm < 1e-12:
            return False
        moved = step * (self.length * (self._target(bound) - bound) / norm)
        customer = np.clip(self.prices.customer + moved[: lanes.n], self.relaxation.floor, lanes.unmet_cost)
        near = max(0.0, self.prices.near + float(moved[lanes.n]) / self.relaxation.near_scale)
        self.prices = Prices(np.where(lanes.needs, customer, 0.0), near)
        return True

    def _target(self, bound: float) -> float:
        """Aim above what has to be reached: steps towards that point itself would shrink and never pass it."""
        if not np.isfinite(self.upper):
            return bound + max(0.02 * abs(bound), 1e-6)
        aim = max(self.upper, bound) + OVERSHOOT * max(abs(self.upper), 1e-6)
        return min(aim, bound + max(0.02 * abs(bound), 1e-6))

    def _slope(self, values: SiteValues, choice: Choice) -> Floats:
        """Subgradient: what each customer lacks, and what the share rule lacks (scaled)."""
        lanes = self.lanes
        slope = np.zeros(lanes.n + 1)
        slope[: lanes.n] = np.where(lanes.needs, 1.0 - values.served(choice.degree, lanes.n), 0.0)
        at_top = (self.prices.customer >= lanes.unmet_cost) & (slope[: lanes.n] > 0)
        slope[: lanes.n][at_top] = 0.0
        if lanes.near is not None:
            near = lanes.near[values.site, values.customer]
            weight = values.share * choice.degree[values.site] * lanes.demand[values.customer]
            slope[lanes.n] = (lanes.near_least - float(weight[near].sum())) / self.relaxation.near_scale
            if self.prices.near <= 0 and slope[lanes.n] < 0:
                slope[lanes.n] = 0.0
        return slope

    def _end(self, bound: float) -> Climb:
        return Climb(bound, self.best_prices, self.pool.state, self.average, self.taken)
