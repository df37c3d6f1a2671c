"""The best plan so far and the proven bound, and when the two are close enough to stop."""

from collections.abc import Callable

import numpy as np

from ledgersolve.mip import PROVEN_GAP, Clock, relative_gap
from ledgersolve.site_selection.case import Flags

EXACT = 1e-9
"""Relative gap below which two figures are one."""

CostOf = Callable[[Flags], float]


class Incumbent:
    """Best set of sites (flags over the root core), its cost, and the bound on every plan.

    Parameters
    ----------
    cost_of
        Gives the true cost of a set of sites, inf where it serves not everybody.
    grain
        Least difference between the costs of two plans, 0 where unknown: costs in whole money differ by 1.
    """

    def __init__(self, m: int, cost_of: CostOf, grain: float, clock: Clock) -> None:
        self.opened: Flags = np.zeros(m, dtype=bool)
        self.cost, self.bound = np.inf, -np.inf
        self.cost_of, self.grain, self.clock = cost_of, grain, clock
        self._within: float | None = None

    def offer(self, opened: Flags) -> bool:
        """Take a set of sites if it is better than the best one."""
        cost = self.cost_of(opened)
        if cost >= self.cost:
            return False
        self.opened, self.cost = opened.copy(), cost
        self.clock.note("search", best=cost)
        return True

    def raise_bound(self, bound: float, stage: str) -> None:
        """Take in a proven bound; it never passes the best plan's cost."""
        if bound > self.bound:
            self.bound = min(bound, self.cost)
            self.clock.note(stage, bound=self.bound)

    def cut(self) -> float:
        """Where a part of the plans has this bound, it holds nothing better; inf without a plan."""
        if not np.isfinite(self.cost):
            return np.inf
        return self.cost - max(self.grain * (1.0 - 1e-6), EXACT * abs(self.cost))

    def closed_at(self, bound: float) -> float:
        """Bound that stands for a part that was given up at ``bound``, which reached the cut."""
        return self.cost if self.grain > 0 and bound >= self.cut() else min(bound, self.cost)

    def enough(self) -> bool:
        """Whether to stop: the accepted gap is reached.

        Where no more than a proven plan was asked for, the run goes on for half the time it took so far, and
        two seconds, to end with the very best plan instead of one within a hundredth of a per cent.
        """
        limits = self.clock.limits
        gap = relative_gap(self.cost, self.bound)
        if gap <= EXACT:
            return True
        if gap > limits.gap:
            return False
        if limits.gap > PROVEN_GAP:
            return True
        self._within = self.clock.elapsed() if self._within is None else self._within
        return self.clock.elapsed() > 1.5 * self._within + 2.0
