"""Cases with slack: the least change of an item's own rules, and of capacity, with which a plan exists.

Only slack is paid for, one a unit, so that the least cost is the smallest change (elastic programming;
Chinneck & Dravnieks 1991). Items come first, each alone; then time on the resources, as overtime without a
limit, so that the ordinary engine finds the least shortfall at any size.
"""

from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.lot_sizing.case import Case, Floats, Ints
from ledgersolve.lot_sizing.groups import part
from ledgersolve.lot_sizing.plan import resource_need
from ledgersolve.lot_sizing.programmes import ItemProgrammes
from ledgersolve.mip import Clock, LinearModel

TINY = 1e-6
"""Slack below this share of an item's quantities, or of a capacity, is rounding."""
HELD = 1e-5
"""Price of holding beside a price of 1 for a time unit."""
ITEM_SECONDS = 5.0


@dataclass(frozen=True)
class Slack:
    """Least change of one item's rules: demand not met (T,), and safety, closing and most stock off by."""

    unmet: Floats
    safety: float = 0.0
    closing: float = 0.0
    room: float = 0.0

    @property
    def total(self) -> float:
        """Slack in all."""
        return float(self.unmet.sum()) + self.safety + self.closing + self.room


def stranded(case: Case, clock: Clock) -> dict[int, Slack]:
    """Items for which no plan exists even with all the time in the world, and the least change that helps."""
    free = without_ties(case)
    programmes = ItemProgrammes(free)
    doubtful = np.flatnonzero(~programmes.exact | ~np.isfinite(programmes.best().cost))
    found = {}
    for item in doubtful.tolist():
        slack = item_slack(part(free, np.array([item])).case, min(ITEM_SECONDS, clock.left()))
        if slack is not None and slack.total > TINY * max(1.0, float(case.demand[item].max(initial=0.0))):
            found[item] = slack
    return found


def without_ties(case: Case) -> Case:
    """Give the case with every item on its own: no resource, no family."""
    nothing = np.full(case.n, -1, dtype=np.int64)
    return replace(case, item_resource=nothing, item_family=nothing)


def mended(case: Case, slacks: dict[int, Slack]) -> Case:
    """Give the case with the items' rules changed by their slack."""
    demand, safety = case.demand.copy(), case.safety_stock.copy()
    closing, most = case.closing_stock.copy(), case.most_stock.copy()
    for item, slack in slacks.items():
        demand[item] = np.maximum(demand[item] - slack.unmet, 0.0)
        safety[item] = max(safety[item] - slack.safety * (1 + TINY), 0.0)
        closing[item] = max(closing[item] - slack.closing * (1 + TINY), 0.0)
        most[item] += slack.room * (1 + TINY)
    return replace(case, demand=demand, safety_stock=safety, closing_stock=closing, most_stock=most)


def short_of_time(case: Case, held: float = HELD) -> Case:
    """Give the case in which only time beyond capacity and overtime costs: one money unit a time unit.

    ``held`` is a small price of holding beside it, so that shortfall is placed as late as it can be.
    """
    most = resource_need(case, _all_at_once(case)).max(axis=1, initial=0.0)
    nothing = np.zeros((case.n, case.t))
    price = held * np.where(case.time_per_unit > 0, case.time_per_unit, 1.0) / max(case.t, 1)
    return replace(
        case, setup_cost=nothing, unit_cost=nothing, holding_cost=np.repeat(price[:, None], case.t, axis=1),
        backlog_cost=np.where(np.isnan(case.backlog_cost), np.nan, 2 * price),
        lost_cost=np.where(np.isnan(case.lost_cost), np.nan, 2 * case.t * price),
        family_cost=np.zeros(len(case.families)), use_cost=np.zeros(len(case.resources)),
        capacity=case.capacity + case.overtime_limit[:, None], overtime_limit=most,
        overtime_cost=np.ones(len(case.resources)),
    )


def _all_at_once(case: Case) -> Floats:
    """Shape (N, T): everything an item could ever need made in every period, which bounds all time needed."""
    stocks = np.maximum(case.safety_stock, case.closing_stock) + case.least_lot + case.lot_multiple + 1.0
    return np.repeat((case.demand.sum(axis=1) + stocks)[:, None], case.t, axis=1)


def item_slack(case: Case, seconds: float) -> Slack | None:
    """Least slack of a case of one item without resources; None where the time does not suffice.

    Late demand is named in the latest period in which it can be short.
    """
    model = _ItemModel(case)
    result = model.model.solve(seconds, gap=1e-6)
    if result.values is None:
        return None
    figures = [float(result.values[v]) for v in (model.safety, model.closing, model.room)]
    tiny = TINY * max(1.0, float(case.demand.max(initial=0.0)))
    unmet = result.values[model.unmet]
    return Slack(np.where(unmet > tiny, unmet, 0.0), *(f if f > tiny else 0.0 for f in figures))


class _ItemModel:
    """The textbook model of one item with slack in demand and in the limits of stock."""

    def __init__(self, case: Case) -> None:
        self.case, self.model = case, LinearModel()
        t = case.t
        big = float(
            case.demand.sum() + case.safety_stock[0] + case.closing_stock[0] + case.least_lot[0]
            + case.lot_multiple[0]
        )
        most = np.where(case.setup_allowed[0], min(big, float(case.most_lot[0])), 0.0)
        add = self.model.add_variables
        self.made, self.setup = add(t, upper=most), add(t, upper=1.0, whole=True)
        self.stock = add(t)
        waits = np.isfinite(case.backlog_cost[0])
        self.late = add(t, upper=np.where(np.arange(t) < t - 1, np.inf if waits else 0.0, 0.0))
        self.lost = add(t, upper=case.demand[0] if np.isfinite(case.lost_cost[0]) else 0.0)
        later = (t - np.arange(t)) / max(t, 1)
        self.unmet = add(t, upper=case.demand[0], cost=1.0 + HELD * later)
        # where stock cannot be both high and low enough, the limit upwards gives way, not a part of each
        self.safety, self.closing, self.room = (int(k) for k in add(3, cost=[1.001, 1.001, 1.0]))
        self._balance()
        self._lots(big)
        self._limits()

    def _balance(self) -> None:
        case, t = self.case, self.case.t
        now, after = np.arange(t), np.arange(1, t)
        rest = case.receipts[0] - case.demand[0]
        rest[0] += case.opening_stock[0]
        columns = [self.stock, self.late, self.made, self.lost, self.unmet, self.stock[:-1], self.late[:-1]]
        signs = np.repeat([1.0, -1.0, -1.0, -1.0, -1.0, -1.0, 1.0], [t] * 5 + [t - 1] * 2)
        rows = np.concatenate([now] * 5 + [after] * 2)
        self.model.add_rows(t, rows, np.concatenate(columns), signs, lower=rest, upper=rest)
        columns = [self.late, self.lost, self.unmet, self.late[:-1]]
        signs = np.repeat([1.0, 1.0, 1.0, -1.0], [t, t, t, t - 1])
        rows = np.concatenate([now] * 3 + [after])
        self.model.add_rows(t, rows, np.concatenate(columns), signs, upper=case.demand[0])

    def _lots(self, big: float) -> None:
        case, t, model = self.case, self.case.t, self.model
        now = np.tile(np.arange(t), 2)
        pair = np.concatenate([self.made, self.setup])
        model.add_rows(t, now, pair, np.repeat([1.0, -big], t), upper=0.0)
        model.add_rows(t, now, pair, np.repeat([1.0, -float(case.least_lot[0])], t), lower=0.0)
        if case.lot_multiple[0] > 0:
            pair = np.concatenate([self.made, model.add_variables(t, whole=True)])
            steps = np.repeat([1.0, -float(case.lot_multiple[0])], t)
            model.add_rows(t, now, pair, steps, lower=0.0, upper=0.0)

    def _limits(self) -> None:
        """Rows stock + slack >= least, stock - slack <= most."""
        case, t = self.case, self.case.t
        slack: Ints = np.where(np.arange(t) < t - 1, self.safety, self.closing)
        rows = np.tile(np.arange(t), 2)
        least = np.concatenate([self.stock, slack])
        self.model.add_rows(t, rows, least, 1.0, lower=case.least_stock()[0])
        most = np.concatenate([self.stock, np.full(t, self.room)])
        self.model.add_rows(t, rows, most, np.repeat([1.0, -1.0], t), upper=float(case.most_stock[0]))


def shortfall(case: Case, made: Floats) -> Floats:
    """Shape (R, T): time that the quantities need beyond capacity and the overtime limit."""
    need = resource_need(case, made)
    short = need - case.capacity - case.overtime_limit[:, None]
    finite = np.where(np.isfinite(case.capacity), case.capacity, 0.0)
    size = np.maximum(finite.max(axis=1, initial=0.0), 1e-3)[:, None]
    return np.where(short > TINY * size, short, 0.0)


def with_time(case: Case, short: Floats) -> Case:
    """Give the case with its capacity raised by ``short``."""
    return replace(case, capacity=case.capacity + short * (1 + TINY))
