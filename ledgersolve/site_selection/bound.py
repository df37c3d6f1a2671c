"""The bound anyone can check: from one price a customer to a cost that no plan can go below.

Weak duality: for any prices v, every plan costs at least

    offset + sum_i v_i + least sum, over the allowed sets of sites, of
    rho_j = site_cost_j + min sum_i (cost_ij - v_i) x_ij
            over 0 <= x_ij <= limit_ij with sum_i demand_i x_ij <= capacity_j

where the inner minimum is -sum_i max(0, v_i - cost_ij) for a site without a capacity, and else the best
filling of a continuous knapsack (Dantzig 1957). Allowed sets keep rules, groups and counts; least volumes,
single sourcing and the share rule are left out, which can only lower the bound.
"""

import numpy as np

from ledgersolve.site_selection.case import CLOSED, OPEN, Case, Flags, Floats
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.selection import Selection

ROUNDING = 1e-12
"""The bound is lowered by this part of the sum of all figures in it, for rounding."""


def price_bound(case: Case, prices: Floats) -> float:
    """Lower bound on the cost of every plan of the case, valid for any prices.

    Parameters
    ----------
    prices
        Shape (n,): money for serving each customer's whole demand; those of customers that need no delivery
        do not count.

    Raises
    ------
    ValueError
        The prices do not fit the case, or one is not finite.
    """
    given = np.asarray(prices, dtype=np.float64)
    if given.shape != (case.n,) or not np.isfinite(given).all():
        raise ValueError(f"{case.n} finite prices expected, one a customer")
    return price_bound_of(Lanes.of(case), given)


def price_bound_of(lanes: Lanes, prices: Floats) -> float:
    """As ``price_bound``, for lanes already prepared; inf where no set of sites is allowed."""
    value, rest = _values(lanes, prices)
    return rest + allowed_sets(lanes).pick(value)[0]


def flip_bounds(case: Case, prices: Floats, opened: Flags) -> Floats:
    """Shape (m,): lower bounds on every plan in which a site is not as in ``opened``, one site at a time.

    Valid for any prices; inf for sites that the case's rules decide.
    """
    lanes, given = Lanes.of(case), np.asarray(prices, dtype=np.float64)
    value, rest = _values(lanes, given)
    sets = allowed_sets(lanes)
    least, picked = sets.pick(value)
    rise = sets.flips(value, picked)
    # a site that the bound's own set already has the other way costs that set nothing more
    return rest + least + np.where(np.isinf(rise) | (picked == opened), rise, 0.0)


def _values(lanes: Lanes, prices: Floats) -> tuple[Floats, float]:
    """Value of each site at these prices, and what every plan pays beside the values, rounding taken off."""
    price = np.minimum(prices, lanes.unmet_cost)[lanes.needs]
    gain = np.array([_gain(lanes, j, price) for j in range(lanes.m)])
    size = float(np.abs(price).sum() + gain.sum() + np.abs(lanes.site_cost).sum() + abs(lanes.offset))
    return lanes.site_cost - gain, lanes.offset + float(price.sum()) - ROUNDING * size


def allowed_sets(lanes: Lanes) -> Selection:
    """Sets of sites that rules, groups and counts allow; somebody to serve needs at least one site."""
    must = bool((lanes.needs & np.isinf(lanes.unmet_cost)).any())
    return Selection(
        forced=lanes.rule == OPEN, shut=lanes.rule == CLOSED, group=lanes.group,
        fewest=max(lanes.fewest, int(must)), most=lanes.most,
    )


def _gain(lanes: Lanes, j: int, price: Floats) -> float:
    """What site j can save at these prices at most (prices of the customers that need service only)."""
    worth = price - lanes.cost[j, lanes.needs]
    on = np.flatnonzero(worth > 0)
    worth, units = worth[on], lanes.demand[lanes.needs][on]
    if lanes.limit is not None:
        limit = lanes.limit[j, lanes.needs][on]
        worth, units = worth * limit, units * limit
    room = float(lanes.capacity[j])
    if units.sum() <= room:
        return float(worth.sum())
    free = units <= 0
    order = np.flatnonzero(~free)
    order = order[np.argsort(-(worth[order] / units[order]), kind="stable")]
    before = np.cumsum(units[order]) - units[order]
    taken = np.clip((room - before) / units[order], 0.0, 1.0)
    return float(worth[free].sum() + (worth[order] * taken).sum())
