"""Split deliveries at their best for given open sites, on few lanes first and priced against all of them.

The linear program sees each customer's few cheapest lanes. Its prices, put into the knapsacks of the open
sites over all lanes, give a lower bound; lanes that the knapsacks use and the program lacks join until
the two figures meet (column generation, Dantzig & Wolfe 1960, with several columns a round).
"""

from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.mip import Clock, LinearResult
from ledgersolve.site_selection.capacitated.knapsack import Prices, SiteItems
from ledgersolve.site_selection.case import Flags, Ints
from ledgersolve.site_selection.deliveries import plan_cost, tidy
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.model import SiteModel, build
from ledgersolve.site_selection.plan import Plan

FEW = 12_000
"""Up to so many lanes the linear program takes all of them at once."""

NEAREST = 4
"""Lanes a customer to begin with."""

MEETING = 1e-8
"""Relative distance at which cost and bound of the deliveries count as equal."""


@dataclass(frozen=True)
class Served:
    """Best split deliveries for a set of open sites.

    ``cost`` is inf and ``plan`` None where none exist; ``bound`` holds for every plan with this set of sites.
    """

    plan: Plan | None
    cost: float
    bound: float
    prices: Prices | None = None


NOTHING = Served(None, np.inf, np.inf)
UNKNOWN = Served(None, np.inf, -np.inf)


class Server:
    """Deliveries of one case, single sourcing left aside."""

    def __init__(self, lanes: Lanes, items: SiteItems) -> None:
        self.lanes = replace(lanes, single=np.zeros(lanes.n, dtype=bool)) if lanes.single.any() else lanes
        self.items = items

    def serve(self, opened: Flags, clock: Clock) -> Served:
        """Find the best split deliveries for the open sites."""
        if not self._could(opened):
            return NOTHING
        items = self.items.only(opened)
        used = np.ones(items.site.size, dtype=bool) if items.site.size <= FEW else _cheapest(items, self.lanes)
        while True:
            at = np.flatnonzero(used)
            built = build(
                self.lanes, (items.site[at].astype(np.int64), items.customer[at].astype(np.int64)),
                open_sites=opened, relaxed=True,
            )
            result = built.model.solve(clock.left())
            if result.values is None or result.duals is None:
                if result.status != "infeasible":
                    return UNKNOWN
                if used.all():
                    return NOTHING
                used[:] = True
                continue
            prices = self._prices(result)
            bound, missing = self._priced(items, opened, prices, used)
            cost = result.objective
            if used.all() or missing.size == 0 or bound >= cost - MEETING * abs(cost):
                return self._served(built, result, opened, max(bound, cost) if used.all() else bound, prices)
            used[missing] = True

    def _could(self, opened: Flags) -> bool:
        """Whether the open sites hold the demand, as far as counting shows."""
        lanes = self.lanes
        must = float(lanes.demand[lanes.needs & np.isinf(lanes.unmet_cost)].sum())
        return float(np.minimum(lanes.capacity, self.items.reach)[opened].sum()) >= must * (1.0 - 1e-9)

    def _prices(self, result: LinearResult) -> Prices:
        lanes = self.lanes
        duals = np.zeros(0) if result.duals is None else result.duals
        customer = np.zeros(lanes.n)
        needs = np.flatnonzero(lanes.needs)
        customer[needs] = np.minimum(duals[: needs.size], lanes.unmet_cost[needs])
        near = 0.0 if lanes.near is None else max(0.0, float(duals[-1]))
        return Prices(customer, near)

    def _priced(self, items: SiteItems, opened: Flags, prices: Prices, used: Flags) -> tuple[float, Ints]:
        """Lower bound at these prices over all lanes, and the lanes it uses that the program lacks."""
        lanes = self.lanes
        values = items.evaluate(prices)
        terms = float(prices.customer[lanes.needs].sum()) + prices.near * lanes.near_least
        bound = lanes.offset + terms + float(values.value[opened].sum())
        return bound, values.at[~used[values.at]]

    def _served(
        self, built: SiteModel, result: LinearResult, opened: Flags, bound: float, prices: Prices
    ) -> Served:
        values = np.zeros(0) if result.values is None else result.values
        unmet = np.zeros(self.lanes.n)
        unmet[built.unmet] = values[built.u]
        plan = tidy(self.lanes, opened, built.site, built.customer, values[built.x], unmet)
        return Served(plan, plan_cost(self.lanes, plan), bound, prices)


def _cheapest(items: SiteItems, lanes: Lanes) -> Flags:
    """Each customer's few cheapest lanes, and a lane with a limit only together with the next one."""
    worth = items.cost if items.limit is None else items.cost + (1.0 - items.limit) * np.abs(items.cost)
    order = np.lexsort((worth, items.customer))
    customer = items.customer[order]
    first = np.searchsorted(customer, np.arange(lanes.n))
    rank = np.arange(order.size) - first[customer]
    used = np.zeros(order.size, dtype=bool)
    used[order] = rank < NEAREST
    return used
