"""Lot-sizing references written apart from the engine: a textbook model, a walk over states, random cases."""

from functools import cache

import numpy as np
from scipy.optimize import LinearConstraint, milp
from scipy.sparse import lil_matrix

from ledgersolve.lot_sizing.case import Case, plain_case

EXACT = 1e-6


def textbook_cost(case: Case) -> float | None:
    """Least cost by the textbook model (one big M an item) in scipy's solver; None where no plan exists.

    One M an item: no plan gains from a lot above all demand, the stock asked for, and one least lot.
    """
    rows = _Rows(case)
    n, t = case.n, case.t
    for i in range(n):
        big = float(
            case.demand[i].sum() + case.safety_stock[i] + case.closing_stock[i]
            + case.least_lot[i] + case.lot_multiple[i]
        )
        for p in range(t):
            rows.item(i, p, big)
    for r in range(len(case.resources)):
        for p in range(t):
            rows.resource(r, p)
    return rows.solve()


class _Rows:
    """Rows of the textbook model, one at a time."""

    NAMES = ("made", "setup", "stock", "late", "lost", "count")

    def __init__(self, case: Case) -> None:
        self.case = case
        n, t = case.n, case.t
        self.cells = n * t
        self.wide = len(self.NAMES) * self.cells + (len(case.families) + 2 * len(case.resources)) * t
        self.cost = np.zeros(self.wide)
        self.low, self.high = np.zeros(self.wide), np.full(self.wide, np.inf)
        self.whole = np.zeros(self.wide)
        self.entries: list[tuple[dict[int, float], float, float]] = []

    def at(self, name: str, row: int, period: int) -> int:
        """Number of a variable."""
        t = self.case.t
        if name in self.NAMES:
            return self.NAMES.index(name) * self.cells + row * t + period
        first = len(self.NAMES) * self.cells
        before = {"family": 0, "used": len(self.case.families)}
        before["over"] = before["used"] + len(self.case.resources)
        return first + (before[name] + row) * t + period

    def item(self, i: int, p: int, big: float) -> None:
        """Everything that concerns one item in one period."""
        case = self.case
        made, setup, stock, late, lost, count = (self.at(name, i, p) for name in self.NAMES)
        self.cost[[made, setup, stock]] = case.unit_cost[i, p], case.setup_cost[i, p], case.holding_cost[i, p]
        self.high[setup], self.whole[setup] = float(case.setup_allowed[i, p]), 1
        self.low[stock] = case.closing_stock[i] if p == case.t - 1 else case.safety_stock[i]
        self.entries.append(({stock: 1.0}, -np.inf, case.most_stock[i]))
        waits, loses = not np.isnan(case.backlog_cost[i]), not np.isnan(case.lost_cost[i])
        self.cost[late] = case.backlog_cost[i] if waits else 0.0
        self.high[late] = np.inf if waits and p < case.t - 1 else 0.0
        self.cost[lost] = case.lost_cost[i] if loses else 0.0
        self.high[lost] = case.demand[i, p] if loses else 0.0
        balance = {stock: 1.0, late: -1.0, made: -1.0, lost: -1.0}
        ordered = {late: 1.0, lost: 1.0}
        rest = case.receipts[i, p] - case.demand[i, p]
        if p:
            balance |= {self.at("stock", i, p - 1): -1.0, self.at("late", i, p - 1): 1.0}
            ordered[self.at("late", i, p - 1)] = -1.0
        else:
            rest += case.opening_stock[i]
        self.entries += [(balance, rest, rest), (ordered, -np.inf, case.demand[i, p])]
        self.entries += [({made: 1.0, setup: -big}, -np.inf, 0.0), ({made: 1.0}, -np.inf, case.most_lot[i])]
        self.entries.append(({made: 1.0, setup: -case.least_lot[i]}, 0.0, np.inf))
        if case.lot_multiple[i] > 0:
            self.whole[count] = 1
            self.entries.append(({made: 1.0, count: -case.lot_multiple[i]}, 0.0, 0.0))
        family, resource = case.item_family[i], case.item_resource[i]
        if family >= 0:
            self.entries.append(({setup: 1.0, self.at("family", family, p): -1.0}, -np.inf, 0.0))
        if resource >= 0:
            self.entries.append(({setup: 1.0, self.at("used", resource, p): -1.0}, -np.inf, 0.0))

    def resource(self, r: int, p: int) -> None:
        """Capacity, overtime and use of one resource in one period."""
        case = self.case
        used, over = self.at("used", r, p), self.at("over", r, p)
        self.cost[[used, over]] = case.use_cost[r], case.overtime_cost[r]
        self.high[[used, over]] = 1.0, case.overtime_limit[r]
        time = {over: -1.0}
        for i in np.flatnonzero(case.item_resource == r):
            time[self.at("made", i, p)] = case.time_per_unit[i]
            time[self.at("setup", i, p)] = case.setup_time[i]
        for f in np.flatnonzero(case.family_resource == r):
            time[self.at("family", f, p)] = case.family_time[f]
            self.entries.append(({self.at("family", f, p): 1.0, used: -1.0}, -np.inf, 0.0))
        self.entries.append((time, -np.inf, case.capacity[r, p]))

    def solve(self) -> float | None:
        """Least cost, or None."""
        case = self.case
        for f in range(len(case.families)):
            for p in range(case.t):
                family = self.at("family", f, p)
                self.cost[family], self.high[family] = case.family_cost[f], 1.0
        if not (self.low <= self.high).all():
            return None
        matrix = lil_matrix((len(self.entries), self.wide))
        for k, (row, _, _) in enumerate(self.entries):
            for variable, factor in row.items():
                matrix[k, variable] += factor
        rows = LinearConstraint(
            matrix.tocsc(), [low for _, low, _ in self.entries], [high for _, _, high in self.entries]
        )
        answer = milp(
            self.cost, integrality=self.whole, bounds=(self.low, self.high), constraints=rows,
            options={"mip_rel_gap": 0.0, "presolve": False},
        )
        if answer.status == 2:
            return None
        assert answer.status == 0, answer.message
        return float(answer.fun)


def walk_cost(case: Case) -> float | None:
    """Least cost of one item without resources by a walk over every quantity; None where no plan exists.

    All quantities of the case must be whole numbers, so that some best plan is whole too.
    """
    assert case.n == 1
    demand, receipts = case.demand[0], case.receipts[0]
    waits, loses = not np.isnan(case.backlog_cost[0]), not np.isnan(case.lost_cost[0])
    stocks = case.safety_stock[0] + case.closing_stock[0]
    most = int(demand.sum() + stocks + case.least_lot[0] + case.lot_multiple[0])

    @cache
    def best(p: int, stock: int, late: int) -> float:
        if p == case.t:
            return 0.0 if late == 0 else np.inf
        cheapest = np.inf
        for made in range(most + 1):
            if not _lot_fits(case, made, p):
                continue
            price = case.setup_cost[0, p] * (made > 0) + case.unit_cost[0, p] * made
            for lost in range(int(demand[p]) + 1 if loses else 1):
                due = late + int(demand[p]) - lost
                for late_after in range(due + 1 if waits else 1):
                    left = stock + int(receipts[p]) + made - (due - late_after)
                    if not _stock_fits(case, left, p):
                        continue
                    now = price + case.holding_cost[0, p] * left
                    now += case.backlog_cost[0] * late_after if late_after else 0.0
                    now += case.lost_cost[0] * lost if lost else 0.0
                    cheapest = min(cheapest, now + best(p + 1, left, late_after))
        return float(cheapest)

    least = best(0, int(case.opening_stock[0]), 0)
    return least if np.isfinite(least) else None


def _lot_fits(case: Case, made: int, p: int) -> bool:
    if made == 0:
        return True
    multiple = case.lot_multiple[0]
    return bool(
        case.setup_allowed[0, p] and case.least_lot[0] <= made <= case.most_lot[0]
        and (multiple == 0 or made % multiple == 0)
    )


def _stock_fits(case: Case, stock: int, p: int) -> bool:
    least = case.closing_stock[0] if p == case.t - 1 else case.safety_stock[0]
    return bool(least <= stock <= case.most_stock[0])


FEATURES = (
    "opening", "receipts", "safety", "closing", "most stock", "least lot", "most lot", "multiple", "backlog",
    "lost", "unit cost", "setup allowed", "resource", "setup time", "second resource", "overtime", "use cost",
    "family", "family on resource",
)


def random_case(rng: np.random.Generator, n: int, t: int, features: frozenset[str]) -> Case:
    """Make a small random case of whole numbers in which the named features occur."""
    demand = rng.integers(0, 8, (n, t)) * (rng.random((n, t)) < 0.8)
    zero, none, never = np.zeros(n), np.full(n, np.inf), np.full(n, np.nan)
    safety = rng.integers(0, 3, n).astype(float) if "safety" in features else zero
    arrived = rng.integers(0, 9, (n, t)) * (rng.random((n, t)) < 0.3)
    changes: dict[str, object] = {
        "opening_stock": rng.integers(0, 8, n).astype(float) if "opening" in features else zero,
        "receipts": arrived.astype(float) * ("receipts" in features),
        "safety_stock": safety,
        "closing_stock": rng.integers(0, 6, n).astype(float) if "closing" in features else safety,
        "most_stock": rng.integers(5, 16, n).astype(float) if "most stock" in features else none,
        "least_lot": rng.integers(0, 8, n).astype(float) if "least lot" in features else zero,
        "most_lot": rng.integers(6, 14, n).astype(float) if "most lot" in features else none,
        "lot_multiple": rng.integers(0, 5, n).astype(float) if "multiple" in features else zero,
        "backlog_cost": _sometimes(rng, rng.integers(1, 5, n)) if "backlog" in features else never,
        "lost_cost": _sometimes(rng, rng.integers(2, 12, n)) if "lost" in features else never,
        "unit_cost": rng.integers(0, 4, (n, t)).astype(float) * ("unit cost" in features),
        "setup_allowed": rng.random((n, t)) < (0.8 if "setup allowed" in features else 2.0),
    }
    return plain_case(
        demand, rng.integers(0, 25, (n, t)), rng.integers(0, 3, (n, t)) if rng.random() < 0.5 else 1.0,
        **changes, **_resources(rng, demand, features),
    )


def _sometimes(rng: np.random.Generator, price: np.ndarray) -> np.ndarray:
    return np.where(rng.random(price.size) < 0.8, price, np.nan)


def _resources(rng: np.random.Generator, demand: np.ndarray, features: frozenset[str]) -> dict[str, object]:
    n, t = demand.shape
    count = 0 if "resource" not in features else 2 if "second resource" in features else 1
    families = 2 if "family" in features else 0
    setup_time = rng.integers(0, 4, n) if "setup time" in features else np.zeros(n)
    load = float(demand.sum()) / t / max(count, 1)
    capacity = np.round(rng.uniform(0.9, 2.2, (count, t)) * load + setup_time.mean() * n / 2)
    placed = count if "family on resource" in features and count else 0
    return {
        "resources": tuple(f"R{k}" for k in range(count)), "capacity": capacity,
        "overtime_limit": rng.integers(0, 6, count).astype(float) * ("overtime" in features),
        "overtime_cost": rng.integers(0, 4, count).astype(float),
        "use_cost": rng.integers(0, 12, count).astype(float) * ("use cost" in features),
        "item_resource": np.where(
            rng.random(n) < (0.1 if count else 2.0), -1, rng.integers(0, max(count, 1), n)
        ),
        "time_per_unit": rng.integers(0, 3, n).astype(float) if rng.random() < 0.4 else np.ones(n),
        "setup_time": setup_time.astype(float),
        "families": tuple(f"F{k}" for k in range(families)),
        "family_cost": rng.integers(0, 20, families).astype(float),
        "family_time": rng.integers(0, 3, families).astype(float),
        "family_resource": rng.integers(-1, placed, families) if families else np.zeros(0, dtype=np.int64),
        "item_family": rng.integers(-1, families, n) if families else np.full(n, -1),
    }
