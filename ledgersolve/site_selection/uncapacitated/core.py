"""The uncapacitated core of a case: usable sites, customers that need service, lanes worth a look.

Capacities, least volumes, lane limits and the share rule are left out, so whatever is a lower bound for the
core is one for the case.
"""

from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.site_selection.bound import allowed_sets
from ledgersolve.site_selection.case import CLOSED, Flags, Floats, Ints
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.selection import Selection

ALL_LANES = 50_000
"""Up to so many lanes are kept whole; beyond, only those below a ceiling price."""
BLOCK = 1024
CLOSE = 10
"""So many cheapest lanes of a customer show how fast its lanes grow dearer."""


@dataclass(frozen=True)
class Core:
    """Sites and customers that count, with m sites and n customers of its own numbering.

    Parameters
    ----------
    sites, customers
        Numbers in the case.
    fixed
        Shape (m,): money if open, may be negative.
    cost
        Shape (m, n): money for the customer's whole demand, inf = no lane.
    selection
        Which sets of sites are allowed.
    unmet
        Shape (n,): money for leaving the customer unserved, inf = must be served.
    offset
        Money in every plan.
    lowest, spread
        Shape (n,): each customer's cheapest lane, and by how much its tenth cheapest is dearer.
    """

    sites: Ints
    customers: Ints
    fixed: Floats
    cost: Floats
    selection: Selection
    unmet: Floats
    offset: float
    lowest: Floats
    spread: Floats

    @classmethod
    def of(cls, lanes: Lanes) -> "Core":
        """Take the core out of a case that is not impossible by counting."""
        customers = np.flatnonzero(lanes.needs)
        sites = np.flatnonzero(lanes.rule != CLOSED)
        cost = lanes.cost
        if sites.size < lanes.m:
            cost = cost[sites]
        if customers.size < lanes.n:
            cost = np.ascontiguousarray(cost[:, customers])
        selection = allowed_sets(lanes).keep(sites)
        return cls(
            sites=sites, customers=customers, fixed=lanes.site_cost[sites], cost=cost, selection=selection,
            unmet=lanes.unmet_cost[customers], offset=lanes.offset, lowest=cost.min(axis=0, initial=np.inf),
            spread=_spread(cost),
        )

    @property
    def m(self) -> int:
        """Number of sites in the core."""
        return int(self.cost.shape[0])

    @property
    def n(self) -> int:
        """Number of customers in the core."""
        return int(self.cost.shape[1])

    def keep(self, rows: Ints, selection: Selection) -> "Core":
        """Give the core of some of its sites; ``selection`` is over all of them."""
        return replace(
            self, sites=self.sites[rows], fixed=self.fixed[rows], cost=self.cost[rows],
            selection=selection.keep(rows),
        )

    def open_in_case(self, chosen: Flags, m: int) -> Flags:
        """Flags over the case's m sites for flags over the core's sites."""
        opened = np.zeros(m, dtype=bool)
        opened[self.sites[chosen]] = True
        return opened


def _spread(cost: Floats) -> Floats:
    """Tenth cheapest less cheapest lane of each customer, block by block; 0 where there are fewer lanes."""
    m, n = cost.shape
    spread = np.zeros(n)
    if m <= CLOSE:
        return spread
    for start in range(0, n, BLOCK):
        part = np.partition(cost[:, start : start + BLOCK].T, CLOSE - 1, axis=1)[:, :CLOSE]
        low, high = part.min(axis=1), part[:, CLOSE - 1]
        spread[start : start + BLOCK] = np.where(np.isfinite(high), high, low) - low
    return np.nan_to_num(spread)


class NearLanes:
    """The lanes of a core cheaper than a ceiling price of their customer, ordered by site.

    Prices up to the ceiling are all they are good for: a dearer lane does not matter to the bound then.

    Parameters
    ----------
    ceiling
        Shape (n,): highest price of each customer.
    customer, cost
        Shape (k,): customer and cost of each lane, site after site.
    sizes
        Shape (m,): number of lanes of each site.
    """

    def __init__(self, ceiling: Floats, customer: Ints, cost: Floats, sizes: Ints) -> None:
        self.ceiling, self.customer, self.cost, self.sizes = ceiling, customer, cost, sizes
        self.ours: Flags = np.zeros(ceiling.size, dtype=bool)
        self.end = np.cumsum(sizes)
        self.filled = np.flatnonzero(sizes)
        self.start = (self.end - sizes)[self.filled]
        # Written anew by every call of ``worth``: fresh pages for each would take longer than the sums.
        self._worth = np.empty(cost.size)

    @classmethod
    def around(cls, core: Core, selection: Selection, prices: Floats, room: Floats) -> "NearLanes":
        """Take the lanes that prices around the given ones may come to need.

        The ceiling is ``room`` (n,) above the price; on small cores there is none. It is never above a lane of
        a forced site or the cost of leaving the customer unserved, where a higher price gains nothing.
        """
        ceiling = core.unmet.copy()
        for j in np.flatnonzero(selection.forced).tolist():
            np.minimum(ceiling, core.cost[j], out=ceiling)
        ours = np.zeros(core.n, dtype=bool)
        if core.m * core.n > ALL_LANES:
            own = prices + room
            ours = own < ceiling
            ceiling[ours] = own[ours]
        near = cls.below(core, ceiling, ~selection.shut)
        near.ours = ours
        return near

    def held(self, prices: Floats) -> Flags:
        """Customers whose prices stand at a ceiling of our own making."""
        return self.ours & (prices >= self.ceiling)

    @classmethod
    def below(cls, core: Core, ceiling: Floats, kept: Flags) -> "NearLanes":
        """Collect the lanes of some sites below the ceiling, row by row, so that no large table arises."""
        nobody = np.zeros(0, dtype=np.int64)
        customers = [np.flatnonzero(core.cost[j] < ceiling) if kept[j] else nobody for j in range(core.m)]
        costs = [core.cost[j, on] for j, on in enumerate(customers)]
        sizes = np.array([on.size for on in customers], dtype=np.int64)
        nothing = np.zeros(0)
        return cls(ceiling, np.concatenate([nobody, *customers]), np.concatenate([nothing, *costs]), sizes)

    @property
    def size(self) -> int:
        """Number of lanes."""
        return int(self.cost.size)

    def worth(self, prices: Floats) -> Floats:
        """Shape (k,): by how much each lane's cost is below its customer's price, 0 where it is not.

        The array is the lanes' own and holds until the next call.
        """
        worth = np.take(prices, self.customer, out=self._worth, mode="clip")
        np.subtract(worth, self.cost, out=worth)
        return np.maximum(worth, 0.0, out=worth)

    def by_site(self, figures: Floats, m: int) -> Floats:
        """Sums of figures (k,) over each of the core's m sites."""
        sums = np.zeros(m)
        if self.filled.size:
            sums[self.filled] = np.add.reduceat(figures, self.start)
        return sums

    def served(self, picked: Flags, worth: Floats) -> Floats:
        """Shape (n,): how many of the picked sites would serve each customer, at the lanes' worth."""
        parts = [np.zeros(0, dtype=np.int64)]
        for j in np.flatnonzero(picked & (self.sizes > 0)).tolist():
            lanes = slice(int(self.end[j] - self.sizes[j]), int(self.end[j]))
            parts.append(self.customer[lanes][worth[lanes] > 0])
        return np.bincount(np.concatenate(parts), minlength=self.ceiling.size).astype(np.float64)
