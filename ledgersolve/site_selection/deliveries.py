"""Deliveries at their best for a given set of open sites, and plans made tidy."""

import numpy as np

from ledgersolve.site_selection.case import OPEN, Flags, Floats, Ints
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.model import build
from ledgersolve.site_selection.plan import Plan

TINY_SHARE = 1e-7
"""Shares up to this are rounding of a solver, not deliveries."""


def deliver(
    lanes: Lanes, open_sites: Flags, source: Ints | None = None, *, seconds: float = 60.0,
    pairs: tuple[Ints, Ints] | None = None,
) -> Plan | None:
    """Serve every customer as cheaply as the open sites allow.

    Without volumes and a share rule each customer goes to its cheapest open site; else a linear program
    says (with ``source`` fixing the site of each single-source customer, -1 = none; where it is None and
    single sourcing matters, a mixed-integer one). None where no deliveries keep all rules.
    """
    if not lanes.capacitated and lanes.near is None:
        return cheapest(lanes, open_sites)
    built = build(lanes, pairs, open_sites=open_sites, source=source)
    result = built.model.solve(seconds)
    if result.values is None:
        return None
    shares = result.values[built.x]
    unmet = np.zeros(lanes.n)
    unmet[built.unmet] = result.values[built.u]
    return tidy(lanes, open_sites, built.site, built.customer, shares, unmet)


def cheapest(lanes: Lanes, open_sites: Flags) -> Plan | None:
    """Serve each customer whole from its cheapest open site, or not at all where that costs less."""
    opened = np.flatnonzero(open_sites)
    site = np.zeros(lanes.n, dtype=np.int64)
    cost = np.full(lanes.n, np.inf)
    for j in opened.tolist():
        better = lanes.cost[j] < cost
        site[better] = j
        np.minimum(cost, lanes.cost[j], out=cost)
    unmet = lanes.needs & (lanes.unmet_cost < cost)
    served = np.flatnonzero(lanes.needs & ~unmet)
    if not np.isfinite(cost[served]).all():
        return None
    return Plan(
        open=open_sites.copy(), site=site[served], customer=served.astype(np.int64),
        share=np.ones(served.size), unmet=unmet.astype(np.float64),
    )


def tidy(
    lanes: Lanes, open_sites: Flags, site: Ints, customer: Ints, share: Floats, unmet: Floats
) -> Plan:
    """Make a plan of a solver's shares: rounding gone, each customer's shares adding up to 1 exactly."""
    kept = np.flatnonzero((share > TINY_SHARE) & open_sites[site])
    site, customer, share = site[kept], customer[kept], share[kept]
    order = np.lexsort((site, customer))
    site, customer, share = site[order], customer[order], np.minimum(share[order], 1.0)
    unmet = np.where(unmet > TINY_SHARE, np.minimum(unmet, 1.0), 0.0)
    total = np.bincount(customer, weights=share, minlength=lanes.n) + unmet
    scale = np.divide(1.0, total, out=np.ones(lanes.n), where=total > 0)
    share = share * scale[customer]
    unmet = unmet * scale
    _add_up(customer, share, unmet)
    return Plan(open_sites.copy(), site, customer, share, unmet)


def _add_up(customer: Ints, share: Floats, unmet: Floats) -> None:
    """Let the last delivery of each customer take what rounding leaves, in place."""
    last = np.flatnonzero(np.append(customer[1:] != customer[:-1], True)) if customer.size else customer
    total = np.bincount(customer, weights=share, minlength=unmet.size) + unmet
    rest = 1.0 - total[customer[last]]
    share[last] += np.where(np.abs(rest) < TINY_SHARE, rest, 0.0)


def without_idle(lanes: Lanes, plan: Plan) -> Plan:
    """Close open sites that deliver nothing, the dearest first, where rules and counts let them close.

    A site whose closing would cost more than it saves stays open; so does one that costs nothing to run
    only if a count of sites needs it.
    """
    busy = np.zeros(lanes.m, dtype=bool)
    busy[plan.site] = True
    idle = np.flatnonzero(plan.open & ~busy & (lanes.rule != OPEN) & (lanes.site_cost >= 0))
    spare = max(0, int(plan.open.sum()) - lanes.fewest)
    dearest = idle[np.argsort(-lanes.site_cost[idle], kind="stable")][:spare]
    opened = plan.open.copy()
    opened[dearest] = False
    return Plan(opened, plan.site, plan.customer, plan.share, plan.unmet)


def plan_cost(lanes: Lanes, plan: Plan) -> float:
    """Cost of a plan as the engine counts it; the audit counts again on its own."""
    left = plan.unmet > 0
    unmet = float((lanes.unmet_cost[left] * plan.unmet[left]).sum())
    lane = float((lanes.cost[plan.site, plan.customer] * plan.share).sum())
    return lanes.network_cost(plan.open) + lane + unmet
