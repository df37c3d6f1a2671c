"""References for site selection written apart from the program: enumeration, and a textbook model for scipy.

The enumeration tries every set of sites; for each, a small program of scipy's delivers at least cost, written
with the summed form of the rows, so that nothing is shared with the strong model under test.
"""

import itertools
import math

import numpy as np
from scipy.optimize import Bounds, LinearConstraint, milp

from ledgersolve.site_selection.case import Case


def brute_force(case: Case) -> float:
    """Least cost over all sets of sites; inf where no plan exists."""
    m = len(case.sites)
    costs = [
        _network(case, np.array(chosen)) + _deliveries(case, np.array(chosen))
        for chosen in itertools.product([False, True], repeat=m)
        if _allowed(case, np.array(chosen))
    ]
    return min(costs, default=math.inf)


def _allowed(case: Case, chosen: np.ndarray) -> bool:
    count = int(chosen.sum())
    groups = [int(g) for g in case.group[chosen] if g >= 0]
    return (
        not (case.rule[~chosen] == 1).any() and not (case.rule[chosen] == -1).any()
        and len(groups) == len(set(groups))
        and (case.fewest_sites is None or count >= case.fewest_sites)
        and (case.most_sites is None or count <= case.most_sites)
    )


def _network(case: Case, chosen: np.ndarray) -> float:
    opened = case.opening_cost[chosen & ~case.today].sum()
    closed = case.closing_cost[case.today & ~chosen].sum()
    return float(case.fixed_cost[chosen].sum() + opened + closed)


def _deliveries(case: Case, chosen: np.ndarray) -> float:
    """Least delivery and unmet cost from the chosen sites; columns are shares, choices, unmet shares."""
    m, n = len(case.sites), len(case.customers)
    whole = 1.0 if case.cost_is_whole else 0.0
    upper_x = np.zeros((m, n))
    cost_x = np.zeros((m, n))
    for j, i in itertools.product(range(m), range(n)):
        if chosen[j] and _usable(case, j, i):
            upper_x[j, i] = 1.0
            rate = case.lane_cost[j, i]
            cost_x[j, i] = rate * (whole or case.demand[i]) + case.handling_cost[j] * case.demand[i]
            if case.lane_most is not None and case.demand[i] > 0:
                upper_x[j, i] = min(1.0, case.lane_most[j, i] / case.demand[i])
    may = np.zeros(n) if case.unmet_cost is None else (case.demand > 0).astype(float)
    cost_u = (case.unmet_cost or 0.0) * case.demand
    size = m * n
    rows, low, high = [], [], []

    def row(x: np.ndarray, z: np.ndarray | None, u: np.ndarray | None, lower: float, upper: float) -> None:
        parts = [x.ravel(), np.zeros(size) if z is None else z.ravel(), np.zeros(n) if u is None else u]
        rows.append(np.concatenate(parts))
        low.append(lower)
        high.append(upper)

    for i in range(n):
        if case.cost_is_whole or case.demand[i] > 0:
            mark = np.zeros((m, n))
            mark[:, i] = 1.0
            row(mark, None, np.eye(n)[i], 1.0, 1.0)
            if case.single_source[i]:
                row(np.zeros((m, n)), mark, None, 0.0, 1.0)
                for j in range(m):
                    one = np.zeros((m, n))
                    one[j, i] = 1.0
                    row(one, -one, None, -np.inf, 0.0)
    for j in range(m):
        load = np.zeros((m, n))
        load[j] = case.demand
        upper = case.capacity[j] if np.isfinite(case.capacity[j]) else np.inf
        row(load, None, None, case.least_volume[j] if chosen[j] else 0.0, upper)
    if case.share_within is not None and case.demand.sum() > 0:
        load = np.where(case.distance <= case.share_distance, case.demand, 0.0)
        row(load, None, None, case.share_within * case.demand.sum(), np.inf)
    upper = np.concatenate([upper_x.ravel(), np.ones(size), may])
    cost = np.concatenate([cost_x.ravel(), np.zeros(size), cost_u])
    integrality = np.concatenate([np.zeros(size), np.ones(size), np.zeros(n)])
    found = milp(
        cost, bounds=Bounds(0.0, upper), constraints=LinearConstraint(np.array(rows), low, high),
        integrality=integrality, options={"mip_rel_gap": 0.0},
    )
    return float(found.fun) if found.status == 0 else math.inf


def _usable(case: Case, j: int, i: int) -> bool:
    own = case.customer_longest[i]
    longest = own if not math.isnan(own) else case.longest_distance
    near = longest is None or case.distance is None or case.distance[j, i] <= longest
    return bool(np.isfinite(case.lane_cost[j, i]) and near)


def textbook(case: Case, seconds: float = 60.0) -> float:
    """Least cost of a capacitated or uncapacitated case by scipy's solver on the textbook model.

    Knows fixed costs, capacities, per-unit or whole costs and a count of sites; nothing else.
    """
    m, n = case.lane_cost.shape
    cost_x = np.where(np.isfinite(case.lane_cost), case.lane_cost, 0.0)
    cost_x = cost_x if case.cost_is_whole else cost_x * case.demand
    upper = np.concatenate([np.isfinite(case.lane_cost).ravel().astype(float), np.ones(m)])
    cost = np.concatenate([cost_x.ravel(), case.fixed_cost])
    rows, low, high = [], [], []
    for i in range(n):
        mark = np.zeros((m, n))
        mark[:, i] = 1.0
        rows.append(np.append(mark.ravel(), np.zeros(m)))
        low.append(1.0)
        high.append(1.0)
    total = float(case.demand.sum())
    for j, i in itertools.product(range(m), range(n)):
        one = np.zeros((m, n))
        one[j, i] = 1.0
        rows.append(np.append(one.ravel(), -np.eye(m)[j]))
        low.append(-np.inf)
        high.append(0.0)
    for j in range(m):
        load = np.zeros((m, n))
        load[j] = case.demand
        rows.append(np.append(load.ravel(), -np.eye(m)[j] * min(case.capacity[j], total)))
        low.append(-np.inf)
        high.append(0.0)
    rows.append(np.append(np.zeros(m * n), np.ones(m)))
    low.append(float(case.fewest_sites or 0))
    high.append(float(m if case.most_sites is None else case.most_sites))
    found = milp(
        cost, bounds=Bounds(0.0, upper), constraints=LinearConstraint(np.array(rows), low, high),
        integrality=np.concatenate([np.zeros(m * n), np.ones(m)]),
        options={"mip_rel_gap": 1e-9, "time_limit": seconds},
    )
    return float(found.fun) if found.status == 0 else math.inf
