"""Schedules as columns: the pool of those met, and the master that mixes them within the capacities.

The master (Manne 1958; Dzielinski & Gomory 1965; Lasdon & Terjung 1971) chooses for every item a mix of
schedules so that the loads fit; its duals are prices under which the item programmes find better schedules.
Prices are stabilised between the duals and the best prices known (Wentges 1997). The bound is the Lagrangian
one at the prices tried, valid whether or not the master has come to its end.
"""

from dataclasses import dataclass, field

import numpy as np

from ledgersolve.lot_sizing.bound import Charges, Point, Relaxation
from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.mip import Clock, LinearModel

ROUNDS = 40
"""Most rounds of column generation."""

CLOSE = 2e-6
"""Relative distance of master and bound at which generation has come to its end."""

_PER_ITEM = 24


@dataclass
class Pool:
    """Schedules met so far, each once: item, cost under the case's own figures, quantities (K, T)."""

    case: Case
    items: Ints = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
    costs: Floats = field(default_factory=lambda: np.zeros(0))
    made: Floats = field(default_factory=lambda: np.zeros((0, 0)))
    _seen: list[set[float]] = field(default_factory=list)
    _fresh: list[tuple[Ints, Floats, Floats]] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.made = np.zeros((0, self.case.t))
        self._seen = [set() for _ in range(self.case.n)]
        self._mark = np.random.default_rng(7).random(self.case.t)

    def add(self, made: Floats, costs: Floats, which: Flags | None = None) -> int:
        """Take in one schedule an item ((N, T) and (N,)), of the items ``which``; gives how many were new."""
        new = []
        wanted = np.ones(self.case.n, dtype=bool) if which is None else which
        keys = (made @ self._mark).tolist()
        for i in np.flatnonzero(wanted).tolist():
            key = keys[i]
            if key not in self._seen[i]:
                self._seen[i].add(key)
                new.append(i)
        if new:
            self._fresh.append((np.array(new), costs[new], made[new]))
        return len(new)

    def gather(self) -> None:
        """Join what was added since the last time."""
        if self._fresh:
            self.items = np.concatenate([self.items, *(part[0] for part in self._fresh)])
            self.costs = np.concatenate([self.costs, *(part[1] for part in self._fresh)])
            self.made = np.concatenate([self.made, *(part[2] for part in self._fresh)])
            self._fresh.clear()

    def charged(self, charges: Charges) -> Floats:
        """Shape (K,): cost of each schedule under charges."""
        case, items, setup = self.case, self.items, self.made > 0
        by_item = np.vstack([charges.prices, np.zeros((1, case.t))])[case.item_resource]
        per_setup = case.setup_time[:, None] * by_item + charges.family + charges.use
        per_unit = case.time_per_unit[:, None] * by_item
        extra = (per_setup[items] * setup + per_unit[items] * self.made).sum(axis=1)
        return np.asarray(self.costs + extra)

    def promising(self, charges: Charges, per_item: int) -> Ints:
        """Numbers of the ``per_item`` cheapest schedules of every item under charges."""
        costs = self.charged(charges)
        order = np.lexsort((costs, self.items))
        ranked = self.items[order]
        first = np.searchsorted(ranked, np.arange(self.case.n))
        rank = np.arange(order.size) - first[ranked]
        return np.asarray(np.sort(order[rank < per_item]))


@dataclass(frozen=True)
class Mix:
    """An answer of the master: schedules used (numbers in the pool) with their shares, and the duals."""

    cost: float
    columns: Ints
    shares: Floats
    prices: Floats
    short: float


def generate(
    relaxation: Relaxation, pool: Pool, best: Point, clock: Clock, dear: float
) -> tuple[Point, Mix | None]:
    """Generate columns until master and bound meet, time is over, or nothing new is found.

    ``dear`` is the price of a time unit beyond overtime, for mixes that do not fit yet. Gives the best point
    and the last mix.
    """
    mix: Mix | None = None
    stay = 0.0
    for _ in range(ROUNDS):
        if clock.over() or not relaxation.case.resources:
            break
        pool.gather()
        mix = solve_master(relaxation, pool, best.charges, dear, clock)
        if mix is None or mix.cost - best.bound <= CLOSE * abs(mix.cost):
            break
        prices = stay * best.charges.prices + (1.0 - stay) * mix.prices
        charges = Charges(prices, best.charges.family, best.charges.use, best.charges.family_use)
        point = relaxation.at(charges)
        new = pool.add(point.schedules.made, relaxation.column_costs(point))
        if point.bound > best.bound:
            best = point
        elif new == 0 and stay == 0.0:
            break
        stay = 0.5 if new else 0.0
    return best, mix


def rounded(pool: Pool, mix: Mix, seed: int) -> Floats:
    """Quantities (N, T): of every item one schedule of the mix, drawn by its share (seed 0: the largest)."""
    rng = np.random.default_rng(seed)
    noise = rng.gumbel(size=mix.shares.size) * (seed > 0)
    draw = np.log(np.maximum(mix.shares, 1e-12)) + noise
    order = np.lexsort((draw, pool.items[mix.columns]))
    quantities = np.zeros((pool.case.n, pool.case.t))
    chosen = mix.columns[order]
    quantities[pool.items[chosen]] = pool.made[chosen]
    return quantities


def solve_master(
    relaxation: Relaxation, pool: Pool, charges: Charges, dear: float, clock: Clock
) -> Mix | None:
    """Solve the master over the promising schedules, what members pay for couplings held as it is."""
    case = relaxation.case
    chosen = pool.promising(charges, _PER_ITEM)
    items, made = pool.items[chosen], pool.made[chosen]
    setup = made > 0
    model = LinearModel()
    costs = pool.costs[chosen] + ((charges.family + charges.use)[items] * setup).sum(axis=1)
    columns = model.add_variables(chosen.size, cost=costs)
    model.add_rows(case.n, items, columns, 1.0, lower=1.0, upper=1.0)
    rows = add_time(relaxation, model, items, made, columns, charges, dear)
    result = model.solve(clock.left())
    if result.values is None or result.duals is None:
        return None
    prices = np.zeros(case.capacity.shape)
    prices[relaxation.priced] = np.maximum(-result.duals[rows.time], 0.0)
    shares = result.values[columns]
    used = np.flatnonzero(shares > 1e-9)
    return Mix(
        result.objective, chosen[used], shares[used], prices, float(result.values[rows.short].sum())
    )


@dataclass(frozen=True)
class TimeRows:
    """Numbers of what ``add_time`` added: rows of the limited cells, and time short in each of them."""

    time: Ints
    short: Ints


def add_time(
    relaxation: Relaxation, model: LinearModel, items: Ints, made: Floats, columns: Ints, charges: Charges,
    dear: float,
) -> TimeRows:
    """Add the capacity rows over schedules, with overtime, families and uses at what is left to pay."""
    case = relaxation.case
    cells = np.full(case.capacity.shape, -1, dtype=np.int64)
    limited = relaxation.priced
    cells[limited] = np.arange(int(limited.sum()))
    load = case.time_per_unit[items, None] * made + case.setup_time[items, None] * (made > 0)
    row = np.vstack([cells, np.full((1, case.t), -1)])[case.item_resource[items]]
    there = (load > 0) & (row >= 0)
    count = int(limited.sum())
    over = model.add_variables(
        count, upper=np.broadcast_to(relaxation.overtime, limited.shape)[limited],
        cost=np.broadcast_to(case.overtime_cost[:, None], limited.shape)[limited],
    )
    short = model.add_variables(count, cost=dear)
    parts = [
        (row[there], np.broadcast_to(columns[:, None], there.shape)[there], load[there]),
        (np.arange(count), over, np.full(count, -1.0)), (np.arange(count), short, np.full(count, -1.0)),
    ]
    parts += _couplings(relaxation, model, charges, cells)
    rented = np.broadcast_to(relaxation.rented[:, None], limited.shape)[limited]
    capacity = np.where(rented, 0.0, relaxation.capacity[limited])
    rows, variables, factors = (np.concatenate([part[k] for part in parts]) for k in range(3))
    return TimeRows(model.add_rows(count, rows, variables, factors, upper=capacity), short)


def _couplings(
    relaxation: Relaxation, model: LinearModel, charges: Charges, cells: Ints
) -> list[tuple[Ints, Ints, Floats]]:
    """Families and uses as variables from 0 to 1 that cost what their members do not pay."""
    case = relaxation.case
    parts = []
    if case.families:
        cost = case.family_cost[:, None] + charges.family_use - relaxation.kin @ charges.family
        runs = model.add_variables(cost.size, upper=1.0, cost=cost.ravel())
        row = np.vstack([cells, np.full((1, case.t), -1)])[case.family_resource].ravel()
        time = np.repeat(case.family_time, case.t)
        there = (row >= 0) & (time > 0)
        parts.append((row[there], runs[there], time[there]))
    if relaxation.rented.any():
        paid = relaxation.on @ charges.use + relaxation.family_on @ charges.family_use
        rented: Flags = np.broadcast_to(relaxation.rented[:, None], cells.shape)
        cost = np.broadcast_to(case.use_cost[:, None], cells.shape) - paid
        used = model.add_variables(int(rented.sum()), upper=1.0, cost=cost[rented])
        row, capacity = cells[rented], relaxation.capacity[rented]
        parts.append((row[row >= 0], used[row >= 0], -capacity[row >= 0]))
    return parts
