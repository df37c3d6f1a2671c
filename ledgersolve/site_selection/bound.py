"""The bound anyone can check: from one price a customer to a cost that no plan can go below.

Weak duality: for any prices v and any share price p of 0 or more, every plan costs at least

    offset + sum_i v_i + p * (units to be served near) + least sum, over the allowed sets of sites, of
    rho_j = site_cost_j + min sum_i (cost_ij - p * demand_i * near_ij - v_i) x_ij
            over 0 <= x_ij <= limit_ij with least_j <= sum_i demand_i x_ij <= capacity_j

where the inner minimum is -sum_i max(0, v_i - cost_ij) for a site without volumes, and else the best filling
of a continuous knapsack (Dantzig 1957). The share price stands for the share-within-distance rule, relaxed like
the assignment rows. Allowed sets keep rules, groups and counts; single sourcing is left out, which can only
lower the bound.
"""

from collections.abc import Callable

import numpy as np

from ledgersolve.site_selection.case import CLOSED, OPEN, Case, Flags, Floats
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.selection import Selection

ROUNDING = 1e-12
"""The bound is lowered by this part of the sum of all figures in it, for rounding."""


SHARE_STEPS = 48
"""Bounds worked out at most to find the best share price."""


def price_bound(case: Case, prices: Floats, share: float | None = None) -> float:
    """Lower bound on the cost of every plan of the case, valid for any prices.

    Parameters
    ----------
    prices
        Shape (n,): money for serving each customer's whole demand; those of customers that need no delivery
        do not count.
    share
        Share price: money per unit served near; None = the best for these prices.

    Raises
    ------
    ValueError
        The prices do not fit the case, or one is not finite, or the share price is below 0.
    """
    given = np.asarray(prices, dtype=np.float64)
    if given.shape != (case.n,) or not np.isfinite(given).all():
        raise ValueError(f"{case.n} finite prices expected, one a customer")
    if share is not None and not (share >= 0 and np.isfinite(share)):
        raise ValueError("a finite share price of 0 or more expected")
    return price_bound_of(Lanes.of(case), given, share)


def price_bound_of(lanes: Lanes, prices: Floats, share: float | None = None) -> float:
    """As ``price_bound``, for lanes already prepared; inf where no set of sites is allowed."""
    value, rest = _values(lanes, prices, share_price(lanes, prices) if share is None else share)
    return rest + allowed_sets(lanes).pick(value)[0]


def share_price(lanes: Lanes, prices: Floats) -> float:
    """Best share price beside these prices (money per near unit); 0 where no share rule asks for one.

    The bound is concave in it: the highest point lies between the neighbours of the best of ever larger
    prices, and golden sections close in on it (Kiefer 1953).
    """
    if lanes.near is None or lanes.near_least <= 0:
        return 0.0
    sets = allowed_sets(lanes)

    def bound(share: float) -> float:
        value, rest = _values(lanes, prices, share)
        return rest + sets.pick(value)[0]

    units = float(lanes.demand[lanes.needs].sum())
    first = max(float(np.abs(prices[lanes.needs]).sum()) / units, 1e-6) if units > 0 else 1.0
    return highest(bound, first / 16, SHARE_STEPS)


def highest(bound: Callable[[float], float], first: float, steps: int) -> float:
    """Figure of 0 or more at which a concave function is highest, about; ``first`` is where to begin."""
    low, middle, high = 0.0, 0.0, first
    best, at_high = bound(low), bound(high)
    while at_high > best and steps > 0:
        low, middle, best, high = middle, high, at_high, 2 * high
        at_high, steps = bound(high), steps - 1
    part = (np.sqrt(5.0) - 1) / 2
    inner, outer = high - part * (high - low), low + part * (high - low)
    at_inner, at_outer = bound(inner), bound(outer)
    for _ in range(steps):
        if at_inner >= at_outer:
            high, outer, at_outer = outer, inner, at_inner
            inner = high - part * (high - low)
            at_inner = bound(inner)
        else:
            low, inner, at_inner = inner, outer, at_outer
            outer = low + part * (high - low)
            at_outer = bound(outer)
    found = inner if at_inner >= at_outer else outer
    return found if max(at_inner, at_outer) > best else middle


def flip_bounds(case: Case, prices: Floats, opened: Flags) -> Floats:
    """Shape (m,): lower bounds on every plan in which a site is not as in ``opened``, one site at a time.

    Valid for any prices; inf for sites that the case's rules decide.
    """
    lanes, given = Lanes.of(case), np.asarray(prices, dtype=np.float64)
    value, rest = _values(lanes, given, share_price(lanes, given))
    sets = allowed_sets(lanes)
    least, picked = sets.pick(value)
    rise = sets.flips(value, picked)
    # a site that the bound's own set already has the other way costs that set nothing more
    return rest + least + np.where(np.isinf(rise) | (picked == opened), rise, 0.0)


def _values(lanes: Lanes, prices: Floats, share: float) -> tuple[Floats, float]:
    """Value of each site at these prices, and what every plan pays beside the values, rounding taken off."""
    price = np.minimum(prices, lanes.unmet_cost)[lanes.needs]
    gain = np.array([_gain(lanes, j, price, share) for j in range(lanes.m)])
    near = share * lanes.near_least
    size = float(np.abs(price).sum() + np.abs(gain).sum() + np.abs(lanes.site_cost).sum() + abs(lanes.offset) + near)
    return lanes.site_cost - gain, lanes.offset + float(price.sum()) + near - ROUNDING * size


def allowed_sets(lanes: Lanes) -> Selection:
    """Sets of sites that rules, groups and counts allow; somebody to serve needs at least one site."""
    must = bool((lanes.needs & np.isinf(lanes.unmet_cost)).any())
    return Selection(
        forced=lanes.rule == OPEN, shut=lanes.rule == CLOSED, group=lanes.group,
        fewest=max(lanes.fewest, int(must)), most=lanes.most,
    )


def _gain(lanes: Lanes, j: int, price: Floats, share: float) -> float:
    """What site j can save at these prices at most (prices of the customers that need service only)."""
    needs = lanes.needs
    worth, units = price - lanes.cost[j, needs], lanes.demand[needs]
    if share > 0 and lanes.near is not None:
        worth += share * units * lanes.near[j, needs]
    least = float(lanes.least[j])
    on = np.flatnonzero((worth > 0) | ((least > 0) & np.isfinite(worth)))
    worth, units = worth[on], units[on]
    if lanes.limit is not None:
        limit = lanes.limit[j, needs][on]
        worth, units = worth * limit, units * limit
    good = worth > 0
    if least <= float(units[good].sum()) <= float(lanes.capacity[j]):
        return float(worth[good].sum())
    free = units <= 0
    order = np.flatnonzero(~free)
    order = order[np.argsort(-(worth[order] / units[order]), kind="stable")]
    worth, units, free_worth = worth[order], units[order], float(worth[free & good].sum())
    room = np.where(worth > 0, lanes.capacity[j], min(least, float(lanes.capacity[j])))
    before = np.cumsum(units) - units
    taken = np.clip((room - before) / units, 0.0, 1.0)
    return free_worth + float((worth * taken).sum())
