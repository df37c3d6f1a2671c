"""The strong model of the whole case, for the wrapper, and the way back from its figures to a plan.

With x_ij the share of customer i's demand from site j, y_j = 1 if site j is open, u_i the unmet share:

    minimise    offset + sum_j site_cost_j y_j + sum_ij cost_ij x_ij + sum_i unmet_cost_i u_i
    subject to  sum_j x_ij + u_i = 1                       every customer
                x_ij <= limit_ij y_j                       every lane, never summed over customers
                sum_i demand_i x_ij <= capacity_j y_j      where a capacity can bind
                sum_i demand_i x_ij >= least_j y_j
                sum_j reach_j y_j >= demand to be met      implied; helps the relaxation
                counts, groups, rules on y; share within distance

A single-source customer has whole-number x; where demand may stay unmet, a whole-number z_ij says which site
serves it and x_ij <= limit_ij z_ij. (Krarup & Pruzan 1983; Cornuejols, Nemhauser & Wolsey 1990.)
"""

from dataclasses import dataclass

import numpy as np

from ledgersolve.mip import LinearModel
from ledgersolve.site_selection.case import CLOSED, OPEN, Flags, Floats, Ints
from ledgersolve.site_selection.lanes import Lanes


@dataclass(frozen=True)
class SiteModel:
    """A model and the numbers of its variables.

    ``y`` has one number a site, ``x`` one a lane in ``site``, ``customer``; ``u`` one for each customer in
    ``unmet`` (those whose demand may stay unmet); ``z`` belongs to the lanes ``chosen`` (positions in ``x``).
    """

    model: LinearModel
    y: Ints
    site: Ints
    customer: Ints
    x: Ints
    unmet: Ints
    u: Ints
    chosen: Ints
    z: Ints

    def read_open(self, values: Floats) -> Flags:
        """Shape (m,): the sites the figures open."""
        return values[self.y] > 0.5

    def read_sources(self, values: Floats, single: Flags) -> Ints:
        """Shape (n,): the one site of each single-source customer; -1 for none, and for everybody else."""
        source = np.full(single.size, -1, dtype=np.int64)
        weight = values[self.x].copy()
        weight[self.chosen] = values[self.z]
        used = np.flatnonzero(single[self.customer] & (weight > 0.5))
        source[self.customer[used]] = self.site[used]
        return source

    def hint(self, open_sites: Flags, site: Ints, customer: Ints, share: Floats) -> Floats:
        """Figures of a known plan, one a variable; NaN where the plan does not say."""
        values = np.full(self.model.variables, np.nan)
        values[self.y] = open_sites
        n = int(max(self.customer.max(initial=0), customer.max(initial=0))) + 1
        known = dict(zip((site * n + customer).tolist(), share.tolist(), strict=True))
        given = np.array([known.get(key, 0.0) for key in (self.site * n + self.customer).tolist()])
        values[self.x] = given
        values[self.z] = given[self.chosen] > 0
        served = np.bincount(self.customer, weights=given, minlength=n)
        values[self.u] = np.clip(1.0 - served[self.unmet], 0.0, 1.0)
        return values


def build(
    lanes: Lanes, pairs: tuple[Ints, Ints] | None = None, *, open_sites: Flags | None = None,
    source: Ints | None = None, relaxed: bool = False,
) -> SiteModel:
    """Build the strong model.

    Parameters
    ----------
    pairs
        Sites and customers of the lanes to use; None = all usable ones.
    open_sites
        Shape (m,): fixes which sites are open, so that deliveries alone are left.
    source
        Shape (n,): with ``open_sites``, fixes the site of each single-source customer (-1 = none).
    relaxed
        Leave whole-number conditions out.
    """
    site, customer = lanes.pairs() if pairs is None else pairs
    if open_sites is not None:
        kept = open_sites[site]
        if source is not None:
            kept = kept & (~lanes.single[customer] | (source[customer] == site))
        site, customer = site[kept], customer[kept]
    model = LinearModel(offset=lanes.offset)
    y = _sites(model, lanes, open_sites, relaxed)
    decided = open_sites is not None and (source is not None or not lanes.single.any())
    x, chosen, z = _deliveries(model, lanes, site, customer, relaxed or decided)
    unmet = np.flatnonzero(lanes.needs & np.isfinite(lanes.unmet_cost)).astype(np.int64)
    u = model.add_variables(unmet.size, upper=1.0, cost=lanes.unmet_cost[unmet])
    built = SiteModel(model, y, site, customer, x, unmet, u, chosen, z)
    _service_rows(built, lanes)
    _link_rows(built, lanes, decided)
    _volume_rows(built, lanes, site_fixed=open_sites is not None)
    _site_rows(built, lanes)
    _share_row(built, lanes)
    return built


def _sites(model: LinearModel, lanes: Lanes, open_sites: Flags | None, relaxed: bool) -> Ints:
    if open_sites is not None:
        fixed = open_sites.astype(np.float64)
        return model.add_variables(lanes.m, lower=fixed, upper=fixed, cost=lanes.site_cost)
    lower, upper = (lanes.rule == OPEN).astype(np.float64), (lanes.rule != CLOSED).astype(np.float64)
    lower = np.minimum(lower, upper)
    return model.add_variables(lanes.m, lower=lower, upper=upper, cost=lanes.site_cost, whole=not relaxed)


def _deliveries(
    model: LinearModel, lanes: Lanes, site: Ints, customer: Ints, relaxed: bool
) -> tuple[Ints, Ints, Ints]:
    """Add x, and z for single-source customers whose demand may stay partly unmet."""
    cost = lanes.cost[site, customer]
    limit = np.ones(site.size) if lanes.limit is None else lanes.limit[site, customer]
    single = lanes.single[customer] & (not relaxed)
    partly = single & np.isfinite(lanes.unmet_cost[customer])
    whole = single & ~partly
    x = np.empty(site.size, dtype=np.int64)
    rest = np.flatnonzero(~whole)
    x[rest] = model.add_variables(rest.size, upper=limit[rest], cost=cost[rest])
    single_lanes = np.flatnonzero(whole)
    x[single_lanes] = model.add_variables(single_lanes.size, upper=1.0, cost=cost[single_lanes], whole=True)
    chosen = np.flatnonzero(partly).astype(np.int64)
    z = model.add_variables(chosen.size, upper=1.0, whole=True)
    return x, chosen, z


def _service_rows(built: SiteModel, lanes: Lanes) -> None:
    """Every customer's shares and its unmet share make 1; at most one z a customer."""
    needs = np.flatnonzero(lanes.needs)
    row = np.full(lanes.n, -1, dtype=np.int64)
    row[needs] = np.arange(needs.size)
    rows = np.concatenate([row[built.customer], row[built.unmet]])
    variables = np.concatenate([built.x, built.u])
    built.model.add_rows(needs.size, rows, variables, 1.0, lower=1.0, upper=1.0)
    if built.chosen.size:
        customers, numbers = np.unique(built.customer[built.chosen], return_inverse=True)
        built.model.add_rows(customers.size, numbers, built.z, 1.0, upper=1.0)


def _link_rows(built: SiteModel, lanes: Lanes, decided: bool) -> None:
    """x_ij <= limit_ij y_j; with z: x_ij <= limit_ij z_ij and z_ij <= y_j."""
    if decided:
        return
    count = built.x.size
    limit = np.ones(count) if lanes.limit is None else lanes.limit[built.site, built.customer]
    holder = built.y[built.site].copy()
    holder[built.chosen] = built.z
    rows = np.arange(count)
    _pairwise(built.model, rows, built.x, holder, limit)
    picked = np.arange(built.chosen.size)
    _pairwise(built.model, picked, built.z, built.y[built.site[built.chosen]], np.ones(picked.size))


def _pairwise(model: LinearModel, rows: Ints, small: Ints, large: Ints, factor: Floats) -> None:
    if rows.size:
        entries = np.concatenate([np.ones(rows.size), -factor])
        model.add_rows(rows.size, np.tile(rows, 2), np.concatenate([small, large]), entries, upper=0.0)


def _volume_rows(built: SiteModel, lanes: Lanes, *, site_fixed: bool) -> None:
    units = lanes.demand[built.customer]
    for j in np.flatnonzero(np.isfinite(lanes.capacity)):
        on = np.flatnonzero((built.site == j) & (units > 0))
        variables = np.append(built.x[on], built.y[j])
        built.model.add_row(variables, np.append(units[on], -lanes.capacity[j]), upper=0.0)
    for j in np.flatnonzero(lanes.least > 0):
        on = np.flatnonzero((built.site == j) & (units > 0))
        variables = np.append(built.x[on], built.y[j])
        built.model.add_row(variables, np.append(units[on], -lanes.least[j]), lower=0.0)
    must = lanes.demand[lanes.needs & np.isinf(lanes.unmet_cost)].sum()
    if must > 0 and not site_fixed and np.isfinite(lanes.capacity).any():
        reach = np.minimum(np.bincount(built.site, weights=units, minlength=lanes.m), lanes.capacity)
        built.model.add_row(built.y, reach, lower=float(must))


def _site_rows(built: SiteModel, lanes: Lanes) -> None:
    """Groups and counts."""
    grouped = np.flatnonzero(lanes.group >= 0)
    if grouped.size:
        groups, numbers = np.unique(lanes.group[grouped], return_inverse=True)
        built.model.add_rows(groups.size, numbers, built.y[grouped], 1.0, upper=1.0)
    if lanes.fewest > 0 or lanes.most < lanes.m:
        built.model.add_row(built.y, 1.0, lower=float(lanes.fewest), upper=float(lanes.most))


def _share_row(built: SiteModel, lanes: Lanes) -> None:
    if lanes.near is not None:
        on = np.flatnonzero(lanes.near[built.site, built.customer])
        units = lanes.demand[built.customer[on]]
        built.model.add_row(built.x[on], units, lower=lanes.near_least)
