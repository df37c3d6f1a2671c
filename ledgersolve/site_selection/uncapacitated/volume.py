"""The Lagrangian bound without volumes: assignment rows priced, climbed by the volume algorithm.

For any prices v (one a customer) a lower bound on every plan is

    offset + sum_i v_i + least sum, over the allowed sets of sites, of
    rho_j = fixed_j - sum_i max(0, v_i - cost_ij)

(Cornuejols, Fisher & Nemhauser 1977). The steps follow Barahona & Anbil (2000), who average the subgradients
met on the way, and with them how often each site was picked: nearly the optimum of the linear relaxation.
"""

from dataclasses import dataclass

import numpy as np

from ledgersolve.mip import Clock
from ledgersolve.site_selection.case import Flags, Floats, Ints
from ledgersolve.site_selection.selection import Selection
from ledgersolve.site_selection.uncapacitated.core import Core, NearLanes

ROUNDING = 1e-12
"""Bounds are lowered by this part of the sum of all figures in them, for rounding."""


@dataclass(frozen=True)
class Dual:
    """Prices and the bound they prove.

    ``value`` (m,) are the rho of the sites, ``picked`` (m,) the best allowed set for them, ``average`` (m,)
    how often each site was picked lately, between 0 and 1.
    """

    prices: Floats
    bound: float
    value: Floats
    picked: Flags
    average: Floats


@dataclass
class Steps:
    """Step length and averaging of a climb; it can go on where it stopped.

    ``length`` is the part of Polyak's step, ``memory`` the largest weight of a new subgradient.
    """

    length: float = 0.1
    memory: float = 0.1
    shortest: float = 5e-4


def price_value(
    core: Core, near: NearLanes, selection: Selection, prices: Floats
) -> tuple[float, Floats, Flags, Floats]:
    """Bound, values of the sites, best set for them and worth of each lane.

    Prices are at most the ceilings of the lanes and the customers' cost of staying unmet.
    """
    worth = near.worth(prices)
    gain = near.by_site(worth, core.m)
    value = core.fixed - gain
    least, picked = selection.pick(value)
    total = float(prices.sum())
    size = float(np.abs(prices).sum() + gain.sum() + np.abs(core.fixed).sum() + abs(core.offset))
    return core.offset + total + least - ROUNDING * size, value, picked, worth


def start_prices(core: Core, first: Floats, second: Floats, source: Ints) -> Floats:
    """Prices that pay for the sites of a plan.

    ``first``, ``second`` (n,) are each customer's cheapest and second cheapest costs, ``source`` (n,) the
    site of the first (-1 = none): its fixed cost is shared among its customers by the gap between the two.
    """
    room = second - first
    served = source >= 0
    total = np.bincount(source[served], weights=room[served], minlength=core.m)
    part = np.clip(np.divide(core.fixed, total, out=np.zeros(core.m), where=total > 0), 0.0, 1.0)
    prices = first.copy()
    prices[served] += room[served] * part[source[served]]
    return np.minimum(prices, core.unmet)


def climb(
    core: Core, near: NearLanes, selection: Selection, prices: Floats, upper: float, count: int, clock: Clock,
    steps: Steps | None = None, average: Floats | None = None,
) -> Dual:
    """Climb from ``prices`` for at most ``count`` steps; ends early once the bound reaches ``upper``.

    ``upper`` is the cost of a known plan, or a guess above the bound; it scales the steps.
    """
    return _Climb(core, near, selection, prices, upper, steps or Steps(), average).run(count, clock)


class _Climb:
    """A climb in progress: best prices as centre, averaged subgradient as direction."""

    def __init__(
        self, core: Core, near: NearLanes, selection: Selection, prices: Floats, upper: float, steps: Steps,
        average: Floats | None,
    ) -> None:
        self.core, self.near, self.selection, self.upper, self.steps = core, near, selection, upper, steps
        # Above the cost of leaving a customer unserved a price would prove too much.
        self.top = np.minimum(near.ceiling, core.unmet)
        prices = np.minimum(prices, self.top)
        self.bound, self.value, self.picked, worth = price_value(core, near, selection, prices)
        self.prices = prices
        self.direction = self._lack(prices, self.picked, worth)
        self.average = self.picked.astype(np.float64) if average is None else average
        self.stale = 0

    def run(self, count: int, clock: Clock) -> Dual:
        start = self.bound
        for step in range(1, count + 1):
            if self.bound >= self.upper or (step % 8 == 0 and clock.over()):
                break
            norm = float(self.direction @ self.direction)
            if norm < 1e-10 or not np.isfinite(self.bound):
                break
            self._step(norm)
            if step % 100 == 0:
                if self.bound - start < 1e-4 * abs(self.upper):
                    self.steps.memory = max(0.5 * self.steps.memory, 1e-5)
                start = self.bound
        return Dual(self.prices, self.bound, self.value, self.picked, self.average)

    def _step(self, norm: float) -> None:
        length = self.steps.length * (self.upper - self.bound) / norm
        prices = np.minimum(self.prices + length * self.direction, self.top)
        bound, value, picked, worth = price_value(self.core, self.near, self.selection, prices)
        lack = self._lack(prices, picked, worth)
        agrees = float(self.direction @ lack) >= 0
        weight = self._weight(lack)
        self.direction = weight * lack + (1.0 - weight) * self.direction
        self.average = weight * picked + (1.0 - weight) * self.average
        if bound > self.bound:
            self.bound, self.prices, self.value, self.picked = bound, prices, value, picked
            self.stale = 0
            if agrees:
                self.steps.length = min(2.0, 1.1 * self.steps.length)
            return
        self.stale += 1
        if self.stale >= 20:
            self.steps.length = max(0.66 * self.steps.length, self.steps.shortest)
            self.stale = 0

    def _weight(self, lack: Floats) -> float:
        """Weight of the new subgradient that makes the average shortest, within limits."""
        change = lack - self.direction
        square = float(change @ change)
        if square <= 0:
            return self.steps.memory
        best = -float(self.direction @ change) / square
        return float(np.clip(best, 0.1 * self.steps.memory, self.steps.memory))

    def _lack(self, prices: Floats, picked: Flags, worth: Floats) -> Floats:
        """Subgradient: how much of each customer the picked sites leave unserved (negative: served twice)."""
        lack: Floats = 1.0 - self.near.served(picked, worth)
        lack[(prices >= self.top) & (lack > 0)] = 0.0
        return lack
