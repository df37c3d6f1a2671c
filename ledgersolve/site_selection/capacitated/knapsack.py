"""Each site's own best use at given customer prices: a continuous knapsack, all sites at once.

With a price v_i for serving customer i, an open site j is worth

    site_cost_j + min sum_i (cost_ij - v_i) x_ij
                  over 0 <= x_ij <= limit_ij with least_j <= sum_i demand_i x_ij <= capacity_j

which is filled in the order of reduced cost per unit (Dantzig 1957; as the site problem of a Lagrangian on the
assignment rows: Geoffrion & McBride 1978, Beasley 1988). A price on the share-within rule lowers the cost of
near lanes by price x demand.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ledgersolve.site_selection.case import Flags, Floats, Ints
from ledgersolve.site_selection.lanes import Lanes


@dataclass(frozen=True)
class Prices:
    """Prices of the relaxed rules: (n,) money for serving each customer whole; money per near unit."""

    customer: Floats
    near: float = 0.0


@dataclass(frozen=True)
class SiteValues:
    """What every site is worth if open (shape (m,)), and the lanes it would use with their shares.

    ``at`` are the lanes' positions among the items.
    """

    value: Floats
    at: Ints
    site: NDArray[np.integer]
    customer: NDArray[np.integer]
    share: Floats

    def served(self, opened: Floats, n: int) -> Floats:
        """Shape (n,): how often each customer is served when sites are open to these degrees (m,)."""
        weights = self.share * opened[self.site]
        return np.bincount(self.customer, weights=weights, minlength=n).astype(np.float64)


@dataclass(frozen=True)
class SiteItems:
    """Usable lanes as knapsack items, ordered by site, and the sites' own figures.

    ``limit`` (largest share) and ``near`` (flags) are one a lane, or None where no rule asks for them.
    """

    lanes: Lanes
    site: NDArray[np.integer]
    customer: NDArray[np.integer]
    cost: Floats
    limit: Floats | None
    near: Flags | None
    reach: Floats

    @classmethod
    def of(cls, lanes: Lanes) -> "SiteItems":
        """Take all usable lanes, without those too big for a site that must serve the customer whole."""
        usable = np.isfinite(lanes.cost)
        whole = lanes.single & np.isinf(lanes.unmet_cost)
        if whole.any():
            usable &= ~(whole & (lanes.demand > lanes.capacity[:, None] * (1.0 + 1e-9)))
        site, customer = np.nonzero(usable)
        limit = None if lanes.limit is None else lanes.limit[site, customer]
        near = None if lanes.near is None else lanes.near[site, customer]
        units = lanes.demand[customer] if limit is None else lanes.demand[customer] * limit
        reach = np.bincount(site, weights=units, minlength=lanes.m).astype(np.float64)
        small = np.int16 if lanes.m < 2**15 else np.int32
        return cls(
            lanes, site.astype(small), customer.astype(np.int32), lanes.cost[site, customer], limit, near, reach
        )

    def only(self, kept_sites: Flags) -> "SiteItems":
        """The items of some sites."""
        return self.at(np.flatnonzero(kept_sites[self.site]))

    def at(self, kept: Ints) -> "SiteItems":
        """The items at these positions (ascending)."""
        return replace(
            self, site=self.site[kept], customer=self.customer[kept], cost=self.cost[kept],
            limit=None if self.limit is None else self.limit[kept],
            near=None if self.near is None else self.near[kept],
        )

    def units(self, at: Ints) -> Floats:
        """Units that the lanes at these positions carry when fully used."""
        units: Floats = self.lanes.demand[self.customer[at]]
        return units if self.limit is None else units * self.limit[at]

    def reduced(self, prices: Prices) -> Floats:
        """Cost less prices of each lane fully used."""
        reduced: Floats = self.cost - prices.customer[self.customer]
        if self.near is not None and prices.near > 0:
            reduced -= (prices.near * self.near) * self.lanes.demand[self.customer]
        return reduced if self.limit is None else reduced * self.limit

    def evaluate(self, prices: Prices) -> SiteValues:
        """Fill every site's knapsack; the values are exact."""
        lanes = self.lanes
        reduced = self.reduced(prices)
        wanted = reduced < 0
        asked = lanes.least > 0
        if asked.any():
            wanted |= asked[self.site]
        at = np.flatnonzero(wanted)
        site, reduced, units = self.site[at], reduced[at], self.units(at)
        taken = (reduced < 0).astype(np.float64)
        load = np.bincount(site, weights=units * taken, minlength=lanes.m)
        uneven = (load > lanes.capacity) | (load < lanes.least)
        if uneven.any():
            part = np.flatnonzero(uneven[site] & (units > 0))
            taken[part] = _fill(site[part], reduced[part], units[part], lanes)
        worth = np.bincount(site, weights=reduced * taken, minlength=lanes.m)
        used = np.flatnonzero(taken > 0)
        share = taken[used] if self.limit is None else taken[used] * self.limit[at[used]]
        return SiteValues(lanes.site_cost + worth, at[used], site[used], self.customer[at[used]], share)

    def room_prices(self, prices: Prices, values: SiteValues) -> Floats:
        """Shape (m,): what another unit of room is worth to each site at these prices.

        Above 0 where the site is full, below 0 where its least volume forces lanes on it that do not pay.
        """
        lanes = self.lanes
        units = self.units(values.at)
        reduced = self.at(values.at).reduced(prices)
        load = np.bincount(values.site, weights=values.share * lanes.demand[values.customer], minlength=lanes.m)
        worst = np.full(lanes.m, -np.inf)
        sized = units > 0
        np.maximum.at(worst, values.site[sized], reduced[sized] / units[sized])
        full = (load >= lanes.capacity * (1.0 - 1e-9)) & (worst < 0) & np.isfinite(worst)
        forced = (lanes.least > 0) & (load <= lanes.least * (1.0 + 1e-9)) & (worst > 0)
        return np.where(full | forced, -worst, 0.0)

    def penalties(self, prices: Prices, values: SiteValues) -> Floats:
        """By how much an open site's value rises at least for each unit of share put on a lane, one a lane.

        These are the reduced costs of the knapsacks.
        """
        every = np.arange(self.site.size)
        room = self.room_prices(prices, values)
        penalty: Floats = np.maximum(0.0, self.reduced(prices) + room[self.site] * self.units(every))
        return penalty if self.limit is None else penalty / self.limit


def _fill(site: NDArray[np.integer], reduced: Floats, units: Floats, lanes: Lanes) -> Floats:
    """Fraction of each item taken: best first up to the capacity, others up to the least volume."""
    order = np.argsort(reduced / units)
    order = order[np.argsort(site[order], kind="stable")]
    sites, sizes = site[order], units[order]
    filled = np.cumsum(sizes)
    first = np.flatnonzero(np.append(True, sites[1:] != sites[:-1])) if sites.size else np.zeros(0, dtype=int)
    before_site = np.repeat(filled[first] - sizes[first], np.diff(np.append(first, sites.size)))
    before = filled - sizes - before_site
    room = np.where(reduced[order] < 0, lanes.capacity[sites], lanes.least[sites])
    taken = np.empty(sites.size)
    taken[order] = np.clip((room - before) / sizes, 0.0, 1.0)
    return taken
