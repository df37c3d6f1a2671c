"""Single sourcing: from split deliveries to whole ones, for a given set of open sites.

The linear program that splits deliveries is nearly whole already: at most one customer a full site is split.
Lanes whose reduced cost shows that no better plan uses them whole are left out; the wrapper decides the rest.
"""

from dataclasses import dataclass

import numpy as np

from ledgersolve.mip import Clock
from ledgersolve.site_selection.capacitated.kernel import fewest_penalties
from ledgersolve.site_selection.capacitated.knapsack import Prices, SiteItems
from ledgersolve.site_selection.capacitated.serving import Served
from ledgersolve.site_selection.case import Flags, Ints
from ledgersolve.site_selection.deliveries import deliver, plan_cost, tidy
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.model import SiteModel, build
from ledgersolve.site_selection.plan import Plan

MANY = 12_000
"""Above so many lanes only each customer's best few are handed over, and nothing is proven about the rest."""

FEW = 5
"""Lanes a customer then."""

QUICK, THOROUGH = 2.0, 30.0
"""Seconds for a set of sites that looks promising, and for one that has to be settled."""


@dataclass(frozen=True)
class SingleSourcing:
    """Makes split deliveries whole."""

    lanes: Lanes
    items: SiteItems
    clock: Clock

    def finish(self, served: Served, opened: Flags, cutoff: float, thorough: bool) -> Served:
        """Find the best whole deliveries for the open sites, if they can cost less than ``cutoff``."""
        if served.plan is None or self._whole(served.plan):
            return served
        if served.prices is None or served.bound >= cutoff:
            return Served(None, np.inf, served.bound)
        items, complete = self._worthwhile(served.prices, served.bound, opened, cutoff)
        built = build(self.lanes, (items.site.astype(np.int64), items.customer.astype(np.int64)), open_sites=opened)
        _only_below(built, cutoff)
        seconds = min(THOROUGH if thorough else QUICK, self.clock.left())
        result = built.model.solve(seconds, gap=1e-6, cancelled=self.clock.limits.cancelled)
        bound = served.bound
        if complete:
            beyond = cutoff if result.status == "infeasible" else result.bound - 1e-9 * abs(result.bound)
            bound = max(bound, min(beyond, cutoff))
        if result.values is None:
            return Served(None, np.inf, bound)
        source = built.read_sources(result.values, self.lanes.single)
        pairs = (built.site, built.customer)
        plan = deliver(self.lanes, opened, source, seconds=max(self.clock.left(), 2.0), pairs=pairs)
        if plan is None:
            unmet = np.zeros(self.lanes.n)
            unmet[built.unmet] = result.values[built.u]
            plan = tidy(self.lanes, opened, built.site, built.customer, result.values[built.x], unmet)
        return Served(plan, plan_cost(self.lanes, plan), bound)

    def _whole(self, plan: Plan) -> bool:
        sources = np.bincount(plan.customer, minlength=self.lanes.n)
        return bool((sources[self.lanes.single] <= 1).all())

    def _worthwhile(
        self, prices: Prices, bound: float, opened: Flags, cutoff: float
    ) -> tuple[SiteItems, bool]:
        """Lanes of the open sites that a plan below the cutoff may use, and whether these are all of them."""
        items = self.items.only(opened)
        penalty = items.penalties(prices, items.evaluate(prices))
        whole = self.lanes.single & np.isinf(self.lanes.unmet_cost)
        kept = ~whole[items.customer] | (bound + penalty < cutoff)
        items, penalty = items.at(np.flatnonzero(kept)), penalty[kept]
        if items.site.size <= MANY:
            return items, True
        return items.at(fewest_penalties(items, penalty, FEW)), False


def _only_below(built: SiteModel, cutoff: float) -> None:
    """Ask for a plan below the cutoff and nothing else: showing that there is none takes a fraction of the time."""
    cost = built.model.columns()[2]
    priced = np.flatnonzero(cost)
    if np.isfinite(cutoff) and priced.size:
        built.model.add_row(priced, cost[priced], upper=cutoff - built.model.offset)


def worthwhile_lanes(
    items: SiteItems, prices: Prices, bound: float, flip: np.ndarray, picked: Flags, cutoff: float
) -> Ints:
    """Positions of the lanes that a plan below the cutoff may use, by the root's reduced costs.

    ``bound`` is the relaxation's at these prices, ``picked`` the set of sites behind it and ``flip`` what opening one
    of the others adds.
    """
    lanes = items.lanes
    penalty = items.penalties(prices, items.evaluate(prices))
    whole = lanes.single & np.isinf(lanes.unmet_cost)
    opening = np.where(picked, 0.0, np.where(np.isfinite(flip), np.maximum(flip, 0.0), 0.0))
    return np.flatnonzero(~whole[items.customer] | (bound + opening[items.site] + penalty < cutoff))

