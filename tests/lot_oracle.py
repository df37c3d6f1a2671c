"""The textbook big-M model of a lot-sizing case, for comparison in tests; shares no code with the engine."""

from dataclasses import replace

import numpy as np

from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.mip import LinearModel, LinearResult


def whole_big_m(case: Case, seconds: float = 60.0, gap: float = 0.0) -> LinearResult:
    """Solve the case as it reads in its docstring: one big-M row a lot, nothing strengthened."""
    n, t = case.n, case.t
    model = LinearModel()
    most = np.where(case.setup_allowed, np.minimum(case.most_lot, _most_ever(case))[:, None], 0.0)
    made = model.add_variables(n * t, upper=most.ravel(), cost=case.unit_cost.ravel()).reshape(n, t)
    setup = model.add_variables(
        n * t, upper=case.setup_allowed.ravel().astype(float), cost=case.setup_cost.ravel(), whole=True
    ).reshape(n, t)
    stock = model.add_variables(
        n * t, lower=case.least_stock().ravel(), upper=np.maximum(
            np.repeat(case.most_stock, t), case.least_stock().ravel()), cost=case.holding_cost.ravel()
    ).reshape(n, t)
    may_late = np.repeat(~np.isnan(case.backlog_cost), t).reshape(n, t)
    may_late[:, -1] = False
    late = model.add_variables(
        n * t, upper=np.where(may_late, np.inf, 0.0).ravel(),
        cost=np.repeat(np.nan_to_num(case.backlog_cost), t),
    ).reshape(n, t)
    may_lose = ~np.isnan(case.lost_cost)[:, None]
    lost = model.add_variables(
        n * t, upper=np.where(may_lose, case.demand, 0.0).ravel(),
        cost=np.repeat(np.nan_to_num(case.lost_cost), t),
    ).reshape(n, t)
    for i in range(n):
        for s in range(t):
            left = case.demand[i, s] - case.receipts[i, s] - (case.opening_stock[i] if s == 0 else 0.0)
            columns = [made[i, s], stock[i, s], late[i, s], lost[i, s]]
            values = [1.0, -1.0, 1.0, 1.0]
            if s:
                columns += [stock[i, s - 1], late[i, s - 1]]
                values += [1.0, -1.0]
            model.add_row(columns, values, lower=left, upper=left)
            columns, values = [late[i, s], lost[i, s]], [1.0, 1.0]
            if s:
                columns, values = [*columns, late[i, s - 1]], [1.0, 1.0, -1.0]
            model.add_row(columns, values, upper=case.demand[i, s])
            model.add_row([made[i, s], setup[i, s]], [1.0, -most[i, s]], upper=0.0)
            if case.least_lot[i] > 0:
                model.add_row([made[i, s], setup[i, s]], [1.0, -case.least_lot[i]], lower=0.0)
        if case.lot_multiple[i] > 0:
            lots = model.add_variables(t, whole=True)
            for s in range(t):
                model.add_row([made[i, s], lots[s]], [1.0, -case.lot_multiple[i]], lower=0.0, upper=0.0)
    _resources(case, model, made, setup)
    return model.solve(seconds, gap=gap)


def _resources(case: Case, model: LinearModel, made: np.ndarray, setup: np.ndarray) -> None:
    n, t = case.n, case.t
    family = [
        model.add_variables(t, upper=1.0, cost=case.family_cost[f], whole=True)
        for f in range(len(case.families))
    ]
    for i in range(n):
        if case.item_family[i] >= 0:
            for s in range(t):
                model.add_row([setup[i, s], family[case.item_family[i]][s]], [1.0, -1.0], upper=0.0)
    for r in range(len(case.resources)):
        members = np.flatnonzero(case.item_resource == r)
        groups = np.flatnonzero(case.family_resource == r)
        over = model.add_variables(t, upper=case.overtime_limit[r], cost=case.overtime_cost[r])
        used = model.add_variables(t, upper=1.0, cost=case.use_cost[r], whole=True)
        for s in range(t):
            columns = [*made[members, s], *setup[members, s], *(family[f][s] for f in groups), over[s]]
            values = [
                *case.time_per_unit[members], *case.setup_time[members], *case.family_time[groups], -1.0
            ]
            model.add_row(columns, values, upper=case.capacity[r, s])
            for variable in (*setup[members, s], *(family[f][s] for f in groups)):
                model.add_row([variable, used[s]], [1.0, -1.0], upper=0.0)


def _most_ever(case: Case) -> np.ndarray:
    return case.demand.sum(axis=1) + case.least_stock().max(axis=1) + case.least_lot + case.lot_multiple + 1.0


def random_items(rng: np.random.Generator, n: int, t: int, *features: str) -> Case:
    """Give a small case without resources whose items have the features named, others at defaults."""
    demand = rng.integers(0, 30, (n, t)).astype(float) * (rng.random((n, t)) < 0.8)
    case = plain_case(demand, rng.integers(5, 120, (n, t)), rng.integers(0, 4, (n, t)))
    case = replace(case, unit_cost=rng.integers(0, 6, (n, t)).astype(float))
    changes: dict[str, object] = {}
    if "opening" in features:
        changes["opening_stock"] = rng.integers(0, 60, n).astype(float)
    if "safety" in features:
        changes["safety_stock"] = rng.integers(0, 15, n).astype(float)
        changes["closing_stock"] = rng.integers(0, 30, n).astype(float)
    if "closing" in features:
        changes["closing_stock"] = rng.integers(0, 20, n).astype(float)
    if "receipts" in features:
        changes["receipts"] = rng.integers(0, 50, (n, t)) * (rng.random((n, t)) < 0.25)
    if "allowed" in features:
        changes["setup_allowed"] = rng.random((n, t)) < 0.7
    if "late" in features:
        changes["backlog_cost"] = rng.integers(1, 8, n).astype(float)
    if "lost" in features:
        changes["lost_cost"] = rng.integers(3, 15, n).astype(float)
    if "most stock" in features:
        changes["most_stock"] = rng.integers(20, 60, n).astype(float)
    if "least lot" in features:
        changes["least_lot"] = rng.integers(5, 60, n).astype(float)
    if "multiple" in features:
        changes["lot_multiple"] = rng.integers(4, 30, n).astype(float)
    if "most lot" in features:
        changes["most_lot"] = rng.integers(30, 60, n).astype(float)
    return replace(case, **changes)


def random_shared(rng: np.random.Generator, n: int, t: int, *features: str) -> Case:
    """Give a small case on two resources that are nearly full, with the features named.

    Beside those of ``random_items``: "family", "overtime", "use".
    """
    case = random_items(rng, n, t, *features)
    resource = rng.integers(-1 if "loose" in features else 0, 2, n)
    time, setup_time = rng.integers(1, 4, n) / 2, rng.integers(0, 12, n).astype(float)
    load = np.zeros((2, t))
    np.add.at(load, resource[resource >= 0], (time[:, None] * case.demand)[resource >= 0])
    capacity = np.ceil(load.mean(axis=1, keepdims=True) * 1.15 + 14.0) * np.ones((2, t))
    changes: dict[str, object] = {
        "resources": ("A", "B"), "item_resource": resource, "time_per_unit": time, "setup_time": setup_time,
        "capacity": capacity, "overtime_limit": np.zeros(2), "overtime_cost": np.zeros(2), "use_cost": np.zeros(2),
    }
    if "overtime" in features:
        changes |= {"overtime_limit": np.full(2, 25.0), "overtime_cost": rng.integers(1, 6, 2).astype(float)}
    if "use" in features:
        changes["use_cost"] = rng.integers(20, 90, 2).astype(float)
    if "family" in features:
        changes |= {
            "families": ("F", "G"), "item_family": rng.integers(-1, 2, n), "family_cost": np.array([60.0, 25.0]),
            "family_time": np.array([5.0, 3.0]), "family_resource": np.array([0, -1]),
        }
    return replace(case, **changes)
