"""Local search on the set of open sites: open one, close one, swap two.

Every move is first estimated with the prices of the present deliveries, all at once; the most promising ones are
then bounded by raising the capacity prices of their own transport problem (a Lagrangian with one price a site),
and only those that stay below the present cost have their deliveries worked out.
"""

import time
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from ledgersolve.mip import Clock
from ledgersolve.site_selection.capacitated.best import Best
from ledgersolve.site_selection.capacitated.choice import State
from ledgersolve.site_selection.capacitated.knapsack import Prices, SiteItems
from ledgersolve.site_selection.capacitated.serving import Served
from ledgersolve.site_selection.case import Flags, Floats, Ints
from ledgersolve.site_selection.lanes import Lanes

PROMISING = 80
"""Moves a round that are bounded."""

STEPS = 15
"""Steps of a bound."""

HOPEFUL = 0.02
"""Moves whose estimate is worse by more than this part of the cost are left out."""

MOST_FIGURES = 4_000_000
"""So many sites x customers at most are estimated at once."""

LEAST_GAIN = 1e-6
"""Relative gain that makes a move worth taking."""


@dataclass(frozen=True)
class Moves:
    """The neighbourhood of a set of sites.

    ``state`` says which sites may change (0), as fixed so far.
    """

    lanes: Lanes
    items: SiteItems
    best: Best
    clock: Clock
    state: State

    def improve(self, opened: Flags, seconds: float) -> None:
        """Move to better sets until none is found or time is over; better plans go to ``best``.

        With single sourcing the moves go by split deliveries, and only the last set is made whole.
        """
        if self.clock.over():
            return
        end = time.monotonic() + seconds
        served = self.best.server.serve(opened, self.clock)
        while served.prices is not None and not self._over(end):
            better = self._round(opened, served, served.prices, end)
            if better is None:
                break
            opened, served = better
        if self.best.plan is None or not self.clock.over():
            self.best.try_set(opened)

    def _over(self, end: float) -> bool:
        return time.monotonic() > end or self.clock.over()

    def _round(self, opened: Flags, served: Served, prices: Prices, end: float) -> tuple[Flags, Served] | None:
        """Take the first move found that pays."""
        values = self.items.evaluate(prices)
        room = np.where(opened, np.maximum(0.0, self.items.room_prices(prices, values)), 0.0)
        target = served.cost * (1.0 - LEAST_GAIN)
        for changed in self._promising(opened, served, values.value, room):
            if self._over(end):
                return None
            if changed.tobytes() in self.best.tried or self._bounded(changed, room, target):
                continue
            found = self.best.server.serve(changed, self.clock)
            self.best.tried.add(changed.tobytes())
            if self.best.finish is None:
                self.best.offer(changed, found)
            if found.cost < target and found.prices is not None:
                return changed, found
        return None

    def _promising(self, opened: Flags, served: Served, worth: Floats, room: Floats) -> Iterator[Flags]:
        """Estimate all moves and give the sets of the most promising ones, best first.

        ``worth`` are the sites' values at the prices of the deliveries: a move changes the cost by the value of the
        site opened less that of the site closed at least.
        """
        inside = np.flatnonzero(opened)
        if inside.size == 0:
            return
        outside = np.flatnonzero(~opened & (self.state == 0) & (worth < max(0.0, float(worth[inside].max()))))
        outside = outside[np.argsort(worth[outside], kind="stable")[: max(20, MOST_FIGURES // self.lanes.n)]]
        change = self._estimates(inside, outside, room, abs(served.cost))
        least = np.append(0.0, -worth[inside])[:, None] + np.append(worth[outside], 0.0)
        change[least >= 0] = np.inf
        change[np.append(False, self.state[inside] != 0)] = np.inf
        order = np.argsort(change, axis=None, kind="stable")[:PROMISING]
        rows, columns = np.unravel_index(order[change.ravel()[order] < HOPEFUL * abs(served.cost)], change.shape)
        for row, column in zip(rows.tolist(), columns.tolist(), strict=True):
            changed = opened.copy()
            if row > 0:
                changed[inside[row - 1]] = False
            if column < outside.size:
                changed[outside[column]] = True
            if self._allowed(changed):
                yield changed

    def _estimates(self, inside: Ints, outside: Ints, room: Floats, penalty: float) -> Floats:
        """Change of cost of closing one of (none, ``inside``) and opening one of (``outside``, none)."""
        lanes = self.lanes
        needs = np.flatnonzero(lanes.needs)
        demand, unmet = lanes.demand[needs], lanes.unmet_cost[needs]
        priced = lanes.cost[np.ix_(inside, needs)] + np.outer(room[inside], demand)
        first, which, second = _two_best(priced, unmet, penalty)
        costs = lanes.cost[np.ix_(outside, needs)]
        change = np.full((inside.size + 1, outside.size + 1), np.inf)
        for row in range(inside.size + 1):
            if self.clock.over():
                break
            base, loss = first, 0.0
            if row > 0:
                base = np.where(which == row - 1, second, first)
                loss = self._loss(int(inside[row - 1]), room, float((base - first).sum()))
            change[row] = loss + np.append(self._gains(outside, costs, base, demand), 0.0)
        change[0, -1] = np.inf
        return change

    def _loss(self, site: int, room: Floats, moved: float) -> float:
        """What closing a site costs if its customers go to their next best: less its own cost and room."""
        capacity = self.lanes.capacity[site]
        held = room[site] * capacity if room[site] > 0 else 0.0
        return moved - float(self.lanes.site_cost[site]) + float(held)

    def _gains(self, outside: Ints, costs: Floats, base: Floats, demand: Floats) -> Floats:
        """Change of cost by opening each site outside, its room shared out evenly."""
        saving = np.maximum(base - costs, 0.0)
        load = (saving > 0) @ demand
        part = np.minimum(1.0, self.lanes.capacity[outside] / np.maximum(load, 1e-300))
        gains: Floats = self.lanes.site_cost[outside] - saving.sum(axis=1) * part
        return gains

    def _allowed(self, changed: Flags) -> bool:
        lanes = self.lanes
        groups = lanes.group[changed & (lanes.group >= 0)]
        if np.unique(groups).size < groups.size:
            return False
        return lanes.fewest <= int(changed.sum()) <= lanes.most

    def _bounded(self, changed: Flags, room: Floats, target: float) -> bool:
        """Whether a few steps on the capacity prices show that the set costs at least ``target``."""
        lanes = self.lanes
        sites = np.flatnonzero(changed)
        if sites.size == 0:
            return False
        needs = np.flatnonzero(lanes.needs)
        cost, demand, unmet = lanes.cost[np.ix_(sites, needs)], lanes.demand[needs], lanes.unmet_cost[needs]
        capacity = np.minimum(lanes.capacity[sites], self.items.reach[sites])
        price = room[sites]
        network = lanes.network_cost(changed)
        for _ in range(STEPS):
            priced = cost + np.outer(price, demand)
            choice = np.argmin(priced, axis=0)
            least = priced[choice, np.arange(choice.size)]
            served = least < unmet
            bound = network + float(np.minimum(least, unmet).sum()) - float(price @ capacity)
            if bound >= target:
                return True
            load = np.bincount(choice[served], weights=demand[served], minlength=sites.size)
            slope = load - capacity
            slope[(price <= 0) & (slope < 0)] = 0.0
            norm = float(slope @ slope)
            if norm <= 0 or not np.isfinite(bound):
                return not np.isfinite(bound)
            price = np.maximum(0.0, price + slope * (1.2 * (target * 1.001 - bound) / norm))
        return False


def _two_best(priced: Floats, unmet: Floats, penalty: float) -> tuple[Floats, Ints, Floats]:
    """Least, its row and second least of each column, none above ``unmet``; without a second, a penalty more."""
    which = np.argmin(priced, axis=0)
    every = np.arange(which.size)
    first = np.minimum(priced[which, every], unmet)
    which = np.where(priced[which, every] < unmet, which, -1)
    priced[which, every] = np.inf
    second = np.minimum(priced.min(axis=0), unmet)
    return first, which, np.where(np.isfinite(second), second, first + penalty)
