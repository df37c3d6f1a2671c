"""The lot-sizing plan: what is made when, and what follows from it."""

from dataclasses import dataclass

import numpy as np

from ledgersolve.lot_sizing.case import Flags, Floats


@dataclass(frozen=True)
class Plan:
    """A plan for a case with N items, T periods, R resources and F families.

    Parameters
    ----------
    made, stock, late, lost
        Shape (N, T): units made; in stock, and late, at the period's end; demand of the period never met.
    setup
        Shape (N, T): true exactly where ``made`` > 0.
    overtime
        Shape (R, T): time units of overtime.
    """

    made: Floats
    stock: Floats
    late: Floats
    lost: Floats
    setup: Flags
    overtime: Floats

    @property
    def setups(self) -> int:
        """Number of setups."""
        return int(np.count_nonzero(self.setup))
