"""A kernel of promising sites and lanes, handed to the wrapper (Guastaroba & Speranza 2012, 2014)."""

from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.mip import Clock
from ledgersolve.site_selection.capacitated.knapsack import SiteItems
from ledgersolve.site_selection.capacitated.lagrangian import Climb
from ledgersolve.site_selection.case import CLOSED, OPEN, Flags, Floats, Ints
from ledgersolve.site_selection.deliveries import deliver, tidy
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.model import SiteModel, build
from ledgersolve.site_selection.plan import Plan


@dataclass(frozen=True)
class Outcome:
    """What the wrapper made of a kernel: a plan if it found one, a bound that holds within the kernel only."""

    plan: Plan | None
    bound: float
    infeasible: bool = False


def kernel_sites(climb: Climb, worth: np.ndarray, size: int, also: Flags | None) -> Flags:
    """Shape (m,): the sites most often open in a climb, then the most worthwhile ones; those open for good."""
    usable = np.flatnonzero(climb.state >= 0)
    order = np.lexsort((worth[usable], -np.round(climb.average[usable], 3), -climb.state[usable]))
    kept: Flags = climb.state == 1
    kept[usable[order[:size]]] = True
    return kept if also is None else kept | (also & (climb.state >= 0))


def fewest_penalties(items: SiteItems, penalty: Floats, count: int) -> Ints:
    """Positions of each customer's best items by penalty, then cost: so many a customer."""
    order = np.lexsort((items.cost, penalty, items.customer))
    customer = items.customer[order]
    first = np.searchsorted(customer, np.arange(items.lanes.n))
    used = np.zeros(order.size, dtype=bool)
    used[order] = np.arange(order.size) - first[customer] < count
    return np.flatnonzero(used)


def on_plan(items: SiteItems, plan: Plan | None) -> Flags:
    """Which items a plan uses."""
    if plan is None:
        return np.zeros(items.site.size, dtype=bool)
    key = items.site.astype(np.int64) * items.lanes.n + items.customer
    return np.isin(key, plan.site * items.lanes.n + plan.customer)


def run_model(
    lanes: Lanes, items: SiteItems, kept: Flags, forced: Flags, clock: Clock, seconds: float, gap: float,
    hint: Plan | None,
) -> Outcome:
    """Solve the strong model over some sites and lanes.

    ``items`` are the lanes, ``kept`` the sites that may open, ``forced`` those that are open.
    """
    if clock.over():
        return Outcome(None, -np.inf)
    rule = np.where(kept, np.where(forced, OPEN, lanes.rule), CLOSED)
    built = build(replace(lanes, rule=rule), (items.site.astype(np.int64), items.customer.astype(np.int64)))
    start = None if hint is None else built.hint(hint.open, hint.site, hint.customer, hint.share)
    result = built.model.solve(
        min(seconds, clock.left()), gap=gap, hint=start, cancelled=clock.limits.cancelled
    )
    if result.values is None:
        return Outcome(None, result.bound, result.status == "infeasible")
    return Outcome(_plan(built, lanes, result.values, clock), result.bound)


def _plan(built: SiteModel, lanes: Lanes, values: np.ndarray, clock: Clock) -> Plan:
    """Keep the sites (and single sources) the wrapper chose, and deliver exactly on the kernel's lanes."""
    opened = built.read_open(values)
    source = built.read_sources(values, lanes.single)
    plan = deliver(lanes, opened, source, seconds=max(clock.left(), 2.0), pairs=(built.site, built.customer))
    if plan is None:
        unmet = np.zeros(lanes.n)
        unmet[built.unmet] = values[built.u]
        plan = tidy(lanes, opened, built.site, built.customer, values[built.x], unmet)
    return plan
