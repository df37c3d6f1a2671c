"""Ascent on the Lagrangian bound: the volume algorithm (Barahona & Anbil 2000).

Steps go along an average of the excesses met so far, from the best point known; the same averages estimate
how often each item is set up in each period, which later tells where a plan is likely to have its setups.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ledgersolve.lot_sizing.bound import Charges, Point, Relaxation
from ledgersolve.lot_sizing.case import Floats

REACH = 0.02
"""How far above the best bound, as a share of it, a step aims when no plan is known to be nearer."""

PATIENCE = 6
"""Steps without gain after which steps are shortened."""

SHARE = 0.5
"""Share of a coupling's cost by which a first step moves what its members pay."""


@dataclass
class Ascent:
    """The state of an ascent: the best point, and averages of what the items answered.

    ``often`` (N, T) and ``runs`` (F, T) estimate how often items and families are set up, ``excess`` (R, T)
    what is asked for beyond the time given.
    """

    relaxation: Relaxation
    best: Point
    often: Floats
    runs: Floats
    excess: Floats
    step: float = 0.5
    weight: float = 0.2
    steps: int = 0
    quick: bool = False
    _failed: int = 0

    @classmethod
    def begin(
        cls, relaxation: Relaxation, charges: Charges | None = None, *, step: float = 0.5, quick: bool = False
    ) -> "Ascent":
        """Start at ``charges`` (None: nothing charged); ``quick`` as in ``Relaxation.at``."""
        point = relaxation.at(charges if charges is not None else relaxation.start(), quick=quick)
        often = point.setup.astype(np.float64)
        return cls(relaxation, point, often, point.runs, point.excess, step=step, quick=quick)

    def exactly(self) -> None:
        """Go on with the exact programmes of all items."""
        if self.quick:
            self.quick = False
            self.best = self.relaxation.at(self.best.charges)

    def climb(self, steps: int, goal: float, met: Callable[[Point], bool]) -> None:
        """Take up to ``steps`` steps; ``goal`` is the cost of a plan, or inf.

        ``met`` sees every point, and ends the ascent by saying True.
        """
        for _ in range(steps):
            if not np.isfinite(self.best.bound) or self._settled():
                return
            point = self.relaxation.at(self._next(goal), quick=self.quick)
            self.steps += 1
            self._take(point)
            if met(point):
                return

    def _next(self, goal: float) -> Charges:
        """Give the point of the next step: Polyak's length along the averaged excess.

        What members pay for couplings moves by a share of what the coupling costs, which shrinks with the
        steps, but slower: shares have as many dimensions as setups and need more steps.
        """
        best = self.best
        aim = min(goal, best.bound + max(REACH * abs(best.bound), 1e-6))
        gain = self.step * max(aim - best.bound, 1e-7 * abs(best.bound))
        uphill = np.where((best.charges.prices <= 0) & (self.excess < 0), 0.0, self.excess)
        prices = best.charges.prices + gain / max(float((uphill**2).sum()), 1e-12) * uphill
        share = SHARE * (2.0 * self.step) ** 0.25
        return self.relaxation.moved(best.charges, prices, self.often, self.runs, share)

    def _take(self, point: Point) -> None:
        weight = self.weight
        self.often += weight * (point.setup - self.often)
        self.runs = self.runs + weight * (point.runs - self.runs)
        excess = self.excess + weight * (point.excess - self.excess)
        if point.bound > self.best.bound:
            aligned = float((point.excess * excess).sum()) > 0
            self.step = min(self.step * (1.3 if aligned else 1.0), 2.0)
            self.best, self._failed = point, 0
        else:
            self._failed += 1
            if self._failed >= PATIENCE:
                self.step *= 0.65
                self.weight = max(self.weight * 0.9, 0.05)
                self._failed = 0
        self.excess = excess

    def _settled(self) -> bool:
        return self.step < 1e-4
