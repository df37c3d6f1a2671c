"""The lot-sizing plan: what is made when, and what follows from it."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.mip import LinearModel

SERVICE_BATCH = 4096
"""Cells (items x periods) a service model: keeps each linear programme small."""


@dataclass(frozen=True)
class Plan:
    """A plan for a case with N items, T periods, R resources and F families.

    Parameters
    ----------
    made, stock, late, lost
        Shape (N, T): units made; in stock, and late, at the period's end; demand of the period never met.
    setup
        Shape (N, T): true exactly where ``made`` > 0.
    overtime
        Shape (R, T): time units of overtime.
    """

    made: Floats
    stock: Floats
    late: Floats
    lost: Floats
    setup: Flags
    overtime: Floats

    @property
    def setups(self) -> int:
        """Number of setups."""
        return int(np.count_nonzero(self.setup))


def plan_from_made(case: Case, made: ArrayLike, overtime: ArrayLike | None = None) -> Plan:
    """Complete given quantities to a plan: stock, late, lost and overtime as cheap as the rules allow.

    Where the quantities cannot keep a rule (too little for the demand, too much for the capacity), the plan
    still says what follows from them and breaks the rule by as little as it can; the audit then names it.

    Parameters
    ----------
    made
        Shape (N, T): units made.
    overtime
        Shape (R, T), or None for the least that the quantities need, up to the limit.
    """
    quantities = np.array(np.broadcast_to(np.asarray(made, dtype=np.float64), (case.n, case.t)))
    lost = _least_lost(case, quantities)
    both = np.flatnonzero(np.isfinite(case.lost_cost) & np.isfinite(case.backlog_cost))
    if both.size and case.t:
        lost[both] = _lost_or_late(case, quantities, both)
    stock, late = _stock_and_late(case, quantities, lost)
    if overtime is None:
        over = np.maximum(resource_need(case, quantities) - case.capacity, 0.0)
        extra = np.minimum(over, case.overtime_limit[:, None])
    else:
        extra = np.array(np.broadcast_to(np.asarray(overtime, dtype=np.float64), case.capacity.shape))
    return Plan(quantities, stock, late, lost, quantities > 0, extra)


def family_setups(case: Case, setup: Flags) -> Flags:
    """Shape (F, T): periods in which any member of the family has a setup."""
    runs = np.zeros((len(case.families), case.t), dtype=bool)
    members = np.flatnonzero(case.item_family >= 0)
    np.logical_or.at(runs, case.item_family[members], setup[members])
    return runs


def resource_need(case: Case, made: Floats) -> Floats:
    """Shape (R, T): time that the quantities with their setups, and family setups, need."""
    need = np.zeros((len(case.resources), case.t))
    setup = made > 0
    on = np.flatnonzero(case.item_resource >= 0)
    time = case.time_per_unit[on, None] * made[on] + case.setup_time[on, None] * setup[on]
    np.add.at(need, case.item_resource[on], time)
    placed = np.flatnonzero(case.family_resource >= 0)
    by_family = case.family_time[placed, None] * family_setups(case, setup)[placed]
    np.add.at(need, case.family_resource[placed], by_family)
    return need


def _net(case: Case, made: Floats) -> Floats:
    """Shape (N, T): stock less late at each period's end if nothing is lost."""
    return case.opening_stock[:, None] + np.cumsum(case.receipts + made - case.demand, axis=1)


def _least_lost(case: Case, made: Floats) -> Floats:
    """Demand to lose so that the least stock holds with nothing late: as little, and as late, as can be.

    The cumulated loss is the smallest non-decreasing curve above the shortage whose steps stay within the
    demand. Losing later saves stock, so it is the cheapest one for items that may not be late.
    """
    lost = np.zeros((case.n, case.t))
    may = np.flatnonzero(np.isfinite(case.lost_cost))
    if not may.size or not case.t:
        return lost
    short = np.maximum(case.least_stock()[may] - _net(case, made)[may], 0.0)
    for t in range(case.t - 2, -1, -1):
        short[:, t] = np.maximum(short[:, t], short[:, t + 1] - case.demand[may, t + 1])
    total = np.zeros(may.size)
    for t in range(case.t):
        step = np.clip(short[:, t] - total, 0.0, case.demand[may, t])
        lost[may, t] = step
        total += step
    return lost


def _stock_and_late(case: Case, made: Floats, lost: Floats) -> tuple[Floats, Floats]:
    """Stock and late orders: late only what the least stock asks for and what has been ordered."""
    net = _net(case, made) + np.cumsum(lost, axis=1)
    least = case.least_stock()
    may_wait = np.isfinite(case.backlog_cost)
    late = np.zeros_like(net)
    before = np.zeros(case.n)
    for t in range(case.t - 1):
        ordered = before + case.demand[:, t] - lost[:, t]
        late[:, t] = np.where(may_wait, np.clip(least[:, t] - net[:, t], 0.0, np.maximum(ordered, 0.0)), 0.0)
        before = late[:, t]
    return net + late, late


def _lost_or_late(case: Case, made: Floats, items: Ints) -> Floats:
    """Lost demand of items that may be late or lose demand: the cheapest mix, by linear programmes."""
    lost = np.zeros((items.size, case.t))
    batch = max(1, SERVICE_BATCH // case.t)
    for first in range(0, items.size, batch):
        part = items[first:first + batch]
        lost[first:first + batch] = _cheapest_service(case, made, part)
    return lost


def _cheapest_service(case: Case, made: Floats, items: Ints) -> Floats:
    """One linear programme: stock, late and lost of ``items`` for given quantities.

    Stock outside its limits is allowed at a price above every other one, so that this is kept least first.
    """
    t, cells = case.t, items.size * case.t
    least = case.least_stock()[items].ravel()
    waiting = case.holding_cost[items].sum() + case.backlog_cost[items].sum()
    dear = 1.0 + 2.0 * t * waiting + case.lost_cost[items].sum()
    model = LinearModel()
    ends = np.tile(np.arange(t) == t - 1, items.size)
    before = np.flatnonzero(~np.tile(np.arange(t) == 0, items.size))
    room = np.maximum(np.repeat(case.most_stock[items], t) - least, 0.0)
    surplus = model.add_variables(cells, upper=room, cost=case.holding_cost[items].ravel())
    over = model.add_variables(cells, cost=dear)
    short = model.add_variables(cells, cost=dear)
    late = model.add_variables(
        cells, upper=np.where(ends, 0.0, np.inf), cost=np.repeat(case.backlog_cost[items], t)
    )
    price = np.repeat(case.lost_cost[items], t)
    lost = model.add_variables(cells, upper=case.demand[items].ravel(), cost=price)
    rest = (case.receipts + made - case.demand)[items].copy()
    rest[:, 0] += case.opening_stock[items]
    rows = np.arange(cells)
    steps = rest.ravel() - np.where(np.isin(rows, before), least - np.roll(least, 1), least)
    model.add_rows(
        cells, np.concatenate([rows] * 5 + [before] * 4),
        np.concatenate([surplus, over, short, late, lost, *(v[before - 1] for v in (surplus, over, short, late))]),
        np.repeat([1.0, 1.0, -1.0, -1.0, -1.0, -1.0, -1.0, 1.0, 1.0], [cells] * 5 + [before.size] * 4),
        lower=steps, upper=steps,
    )
    model.add_rows(
        cells, np.concatenate([rows, rows, before]), np.concatenate([late, lost, late[before - 1]]),
        np.repeat([1.0, 1.0, -1.0], [cells, cells, before.size]), upper=case.demand[items].ravel(),
    )
    result = model.solve(60.0)
    if result.values is None:
        raise ArithmeticError(f"the service model of items {items.tolist()} ended {result.status}")
    return result.values[lost].reshape(items.size, t)
