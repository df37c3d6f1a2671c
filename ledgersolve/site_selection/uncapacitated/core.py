"""The uncapacitated core of a case: usable sites, customers that need service, lanes worth a look.

Capacities, least volumes, lane limits and the share rule are left out, so whatever is a lower bound for the
core is one for the case.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ledgersolve.site_selection.bound import allowed_sets
from ledgersolve.site_selection.case import CLOSED, Flags, Floats, Ints
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.selection import Selection


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
    """

    sites: Ints
    customers: Ints
    fixed: Floats
    cost: Floats
    selection: Selection
    unmet: Floats
    offset: float

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
            unmet=lanes.unmet_cost[customers], offset=lanes.offset,
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


@dataclass(frozen=True)
class NearLanes:
    """The lanes of a core cheaper than a ceiling price of their customer, ordered by site.

    Prices up to the ceiling are all they are good for: a dearer lane does not matter to the bound then.

    Parameters
    ----------
    ceiling
        Shape (n,): highest price of each customer.
    customer, cost
        Shape (k,): customer and cost of each lane, site after site.
    site
        Shape (k,): its site.
    filled, start
        Shape (f,): sites that have any lane here, and the first lane of each.
    """

    ceiling: Floats
    customer: NDArray[np.int32]
    cost: Floats
    site: NDArray[np.int32]
    filled: Ints
    start: Ints

    @classmethod
    def below(cls, core: Core, ceiling: Floats) -> "NearLanes":
        """Collect the lanes of the core below the ceiling, row by row, so that no large table arises."""
        customers = [np.flatnonzero(core.cost[j] < ceiling).astype(np.int32) for j in range(core.m)]
        costs = [core.cost[j, on] for j, on in enumerate(customers)]
        sizes = np.array([on.size for on in customers], dtype=np.int64)
        nothing = np.zeros(0)
        filled = np.flatnonzero(sizes)
        starts = np.cumsum(sizes) - sizes
        return cls(
            ceiling=ceiling, customer=np.concatenate([nothing.astype(np.int32), *customers]),
            cost=np.concatenate([nothing, *costs]),
            site=np.repeat(np.arange(core.m, dtype=np.int32), sizes), filled=filled, start=starts[filled],
        )

    @property
    def size(self) -> int:
        """Number of lanes."""
        return int(self.cost.size)

    def of_sites(self, kept: Flags) -> "NearLanes":
        """Give the lanes of some sites, the sites keeping their numbers."""
        on = np.flatnonzero(kept[self.site])
        site = self.site[on]
        sizes = np.bincount(site, minlength=kept.size)
        filled = np.flatnonzero(sizes)
        starts = np.cumsum(sizes) - sizes
        return NearLanes(self.ceiling, self.customer[on], self.cost[on], site, filled, starts[filled])

    def worth(self, prices: Floats) -> Floats:
        """Shape (k,): by how much each lane's cost is below its customer's price, 0 where it is not."""
        worth = prices[self.customer]
        worth -= self.cost
        return np.maximum(worth, 0.0, out=worth)

    def by_site(self, figures: Floats, m: int) -> Floats:
        """Sums of figures (k,) over each of the core's m sites."""
        sums = np.zeros(m)
        if self.filled.size:
            sums[self.filled] = np.add.reduceat(figures, self.start)
        return sums
