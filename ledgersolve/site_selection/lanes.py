"""The case as the engines see it: one cost a lane for the customer's whole demand, forbidden lanes gone.

Every rule that forbids a single lane or decides a single site is applied here once, so that models, bounds
and searches need not know it: closed sites, service promises, lanes that are not listed, lanes that cannot
carry a single-source customer, group-mates of a site that must open, capacities that can never bind.
"""

from dataclasses import dataclass

import numpy as np

from ledgersolve.site_selection.case import CLOSED, FREE, OPEN, Case, Flags, Floats, Ints

DISTANCE_SLACK = 1e-9
"""Relative slack on distances, so that a computed 50.000000001 km keeps a promise of 50 km."""


@dataclass(frozen=True)
class Lanes:
    """What may serve whom, at what cost; m sites and n customers as in the case.

    Parameters
    ----------
    cost
        Shape (m, n): money for the customer's whole demand including handling, inf = no usable lane.
        Columns of customers that need no delivery are inf.
    limit
        Shape (m, n): largest share a lane carries (above 0, at most 1), or None = the whole on every lane.
    demand
        Shape (n,): units.
    needs
        Shape (n,): customers that are to be served.
    unmet_cost
        Shape (n,): money for leaving the customer's whole demand unmet; inf = must be met.
    single
        Shape (n,): served by at most one site.
    site_cost, offset
        Shape (m,) and one figure: cost of a set of sites = offset + sum of its ``site_cost``. Opening and
        closing costs are in it, so a figure can be negative.
    rule, group
        Shape (m,): as in the case, group-mates of a site that must open being closed.
    fewest, most
        Least and most number of open sites.
    capacity, least
        Shape (m,): units; capacity is inf where it can never bind.
    near, near_least
        Shape (m, n) flags and units: at least this much demand is served over near lanes; None and 0
        without such a rule.
    """

    cost: Floats
    limit: Floats | None
    demand: Floats
    needs: Flags
    unmet_cost: Floats
    single: Flags
    site_cost: Floats
    offset: float
    rule: Ints
    group: Ints
    fewest: int
    most: int
    capacity: Floats
    least: Floats
    near: Flags | None
    near_least: float

    @classmethod
    def of(cls, case: Case) -> "Lanes":
        """Prepare a case."""
        needs = case.needs_service()
        rule = _settled_rule(case)
        limit = _lane_limits(case)
        cost = _whole_cost(case, needs)
        gone = _forbidden(case, rule, limit)
        if gone is not None:
            cost = cost.copy() if cost is case.lane_cost else cost
            cost[gone] = np.inf
        if limit is not None and bool(((limit >= 1.0) | ~np.isfinite(cost)).all()):
            limit = None
        today = case.today
        near = _near(case)
        return cls(
            cost=cost,
            limit=limit,
            demand=case.demand,
            needs=needs,
            unmet_cost=_unmet_costs(case),
            single=case.single_source & needs,
            site_cost=case.fixed_cost + np.where(today, -case.closing_cost, case.opening_cost),
            offset=float(case.closing_cost[today].sum()),
            rule=rule,
            group=case.group,
            fewest=case.fewest_sites or 0,
            most=case.m if case.most_sites is None else min(case.most_sites, case.m),
            capacity=_binding_capacity(case, cost, limit),
            least=case.least_volume,
            near=near,
            near_least=0.0 if near is None else float(case.share_within or 0.0) * float(case.demand.sum()),
        )

    @property
    def m(self) -> int:
        """Number of sites."""
        return int(self.cost.shape[0])

    @property
    def n(self) -> int:
        """Number of customers."""
        return int(self.cost.shape[1])

    @property
    def capacitated(self) -> bool:
        """Whether volumes matter: a capacity that can bind, a least volume, or a limit on a lane."""
        return bool(np.isfinite(self.capacity).any() or (self.least > 0).any() or self.limit is not None)

    def pairs(self) -> tuple[Ints, Ints]:
        """Sites and customers of the usable lanes, shape (k,) each, ordered by site."""
        site, customer = np.nonzero(np.isfinite(self.cost))
        return site.astype(np.int64), customer.astype(np.int64)

    def network_cost(self, open_sites: Flags) -> float:
        """Money for a set of open sites, deliveries apart."""
        return self.offset + float(self.site_cost[open_sites].sum())

    def impossible(self) -> str | None:
        """Give a reason why no plan can exist, as far as counting shows it; None = not known."""
        forced = self.rule == OPEN
        groups = self.group[forced & (self.group >= 0)]
        if np.unique(groups).size < groups.size:
            return "two sites of one group must be open"
        if int(forced.sum()) > self.most:
            return f"{int(forced.sum())} sites must be open, and at most {self.most} may be"
        if self.most_choosable() < self.fewest:
            return f"only {self.most_choosable()} sites can open, and at least {self.fewest} must"
        must = self.needs & np.isinf(self.unmet_cost)
        if must.any() and self.most == 0:
            return "no site may open, and there are customers who must be served"
        stranded = must & ~np.isfinite(self.cost).any(axis=0)
        if stranded.any():
            return f"{int(stranded.sum())} customers have no lane they may be served on"
        return None

    def most_choosable(self) -> int:
        """Give the most sites that can be open at once under rules, groups and the most count."""
        free = self.rule != CLOSED
        grouped = np.unique(self.group[free & (self.group >= 0)]).size
        return min(self.most, int((free & (self.group < 0)).sum()) + int(grouped))


def _settled_rule(case: Case) -> Ints:
    rule = case.rule.astype(np.int64, copy=True)
    taken = np.unique(case.group[(rule == OPEN) & (case.group >= 0)])
    rule[np.isin(case.group, taken) & (rule == FREE)] = CLOSED
    return rule


def _whole_cost(case: Case, needs: Flags) -> Floats:
    """Cost of each customer's whole demand, handling included; the case's own array where nothing changes."""
    handled = bool(case.handling_cost.any())
    if case.cost_is_whole:
        return case.lane_cost + np.outer(case.handling_cost, case.demand) if handled else case.lane_cost
    if not handled and bool((case.demand == 1).all()):
        return case.lane_cost
    cost = case.lane_cost + case.handling_cost[:, None] if handled else case.lane_cost.copy()
    with np.errstate(invalid="ignore"):
        cost *= case.demand
    cost[:, ~needs] = np.inf
    return cost


def _lane_limits(case: Case) -> Floats | None:
    """Largest share of the demand that each lane carries, from 0 to 1; None where there are no limits."""
    if case.lane_most is None:
        return None
    limit = np.ones((case.m, case.n))
    np.divide(case.lane_most, case.demand, out=limit, where=np.broadcast_to(case.demand > 0, limit.shape))
    return np.minimum(limit, 1.0, out=limit)


def _forbidden(case: Case, rule: Ints, limit: Floats | None) -> Flags | None:
    """Lanes that a rule forbids, or None where there are none."""
    gone = np.zeros((case.m, case.n), dtype=bool)
    gone[rule == CLOSED] = True
    promised = case.promised()
    if case.distance is not None and np.isfinite(promised).any():
        kept = case.distance <= promised * (1.0 + DISTANCE_SLACK)
        gone |= ~kept & np.isfinite(promised)
    if limit is not None:
        gone |= limit <= 0.0
        whole_only = case.single_source & np.isinf(_unmet_costs(case))
        gone |= (limit < 1.0) & whole_only
    return gone if bool(gone.any()) else None


def _unmet_costs(case: Case) -> Floats:
    """Money for leaving all of a customer's demand unmet; a customer without demand is always served."""
    if case.unmet_cost is None:
        return np.full(case.n, np.inf)
    return np.where(case.demand > 0, case.unmet_cost * case.demand, np.inf)


def _binding_capacity(case: Case, cost: Floats, limit: Floats | None) -> Floats:
    """Capacities, inf where all demand a site could ever serve fits."""
    capacity = case.capacity.astype(np.float64, copy=True)
    for j in np.flatnonzero(np.isfinite(capacity)):
        usable = np.isfinite(cost[j])
        reach = case.demand[usable] if limit is None else case.demand[usable] * limit[j, usable]
        if reach.sum() <= capacity[j]:
            capacity[j] = np.inf
    return capacity


def _near(case: Case) -> Flags | None:
    if not case.share_within or case.share_distance is None or not case.demand.sum() > 0:
        return None
    if case.distance is None:
        return np.zeros((case.m, case.n), dtype=bool)
    return case.distance <= case.share_distance * (1.0 + DISTANCE_SLACK)
