"""Quantities re-optimised with the setups fixed: a linear programme, and the plan that comes of it."""

import numpy as np

from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.plan import Plan, plan_from_made, resource_need
from ledgersolve.lot_sizing.tight import Tight, tight_limits
from ledgersolve.mip import LinearModel

DUST = 1e-9
"""Share of an item's largest lot below which a quantity is rounding of the solver and counts as nothing."""


def best_quantities(
    case: Case, setup: Flags, seconds: float, *, counts: Floats | None = None, tight: Tight | None = None
) -> Plan | None:
    """Give the cheapest plan that makes nothing outside ``setup``, or None where the setups carry no plan.

    Parameters
    ----------
    setup
        Shape (N, T): where something may be made.
    counts
        Shape (N, T): quantities of items with a lot multiple, kept as they are; needed only for those.
    """
    tight = tight or tight_limits(case)
    setup = setup & (tight.most_made > 0)
    due = np.isfinite(case.backlog_cost) & (tight.must > 0)
    if (case.least_stock() > case.most_stock[:, None]).any() or not setup[due, 0].all():
        return None
    model, made = _quantity_model(case, setup, counts, tight)
    result = model.solve(seconds)
    if result.values is None:
        return None
    quantities = result.values[made].reshape(case.n, case.t)
    if counts is not None:
        quantities = np.where(case.lot_multiple[:, None] > 0, counts, quantities)
    size = tight.most_made.max(axis=1, initial=0.0)[:, None]
    return plan_from_made(case, np.where(quantities > DUST * size, quantities, 0.0))


def _quantity_model(
    case: Case, setup: Flags, counts: Floats | None, tight: Tight
) -> tuple[LinearModel, Ints]:
    n, t = case.n, case.t
    model = LinearModel()
    low = np.where(setup, tight.least_lot[:, None], 0.0)
    high = np.where(setup, tight.most_made, 0.0)
    must = np.where(np.isfinite(case.backlog_cost), tight.must, 0.0)
    low[:, 0] = np.minimum(np.maximum(low[:, 0], must), high[:, 0])
    if counts is not None:
        fixed = case.lot_multiple[:, None] > 0
        low, high = np.where(fixed, counts, low), np.where(fixed, counts, high)
    made = model.add_variables(n * t, lower=low.ravel(), upper=high.ravel(), cost=case.unit_cost.ravel())
    least = case.least_stock()
    most = np.maximum(np.repeat(case.most_stock[:, None], t, axis=1), least)
    held = case.holding_cost.ravel()
    stock = model.add_variables(n * t, lower=least.ravel(), upper=most.ravel(), cost=held)
    rows = np.arange(n * t)
    later = np.flatnonzero(rows % max(t, 1))
    entries = [(rows, stock, 1.0), (later, stock[later - 1], -1.0), (rows, made, -1.0)]
    entries += _service(case, model)
    rest = case.receipts - case.demand
    rest[:, :1] += case.opening_stock[:, None]
    model.add_rows(
        n * t, np.concatenate([e[0] for e in entries]), np.concatenate([e[1] for e in entries]),
        np.concatenate([np.full(e[0].size, e[2]) for e in entries]), lower=rest.ravel(), upper=rest.ravel(),
    )
    _time(case, model, setup, made.reshape(n, t))
    return model, made


def _service(case: Case, model: LinearModel) -> list[tuple[Ints, Ints, float]]:
    """Late and lost of the items that may be late or lose demand, as entries of the balance rows."""
    t = case.t
    entries: list[tuple[Ints, Ints, float]] = []
    waits, loses = np.flatnonzero(np.isfinite(case.backlog_cost)), np.flatnonzero(np.isfinite(case.lost_cost))
    if waits.size:
        ends = np.tile(np.arange(t) == t - 1, waits.size)
        late = model.add_variables(
            waits.size * t, upper=np.where(ends, 0.0, np.inf), cost=np.repeat(case.backlog_cost[waits], t)
        )
        rows = (waits[:, None] * t + np.arange(t)).ravel()
        before = np.flatnonzero(rows % t)
        entries += [(rows, late, -1.0), (rows[before], late[before - 1], 1.0)]
    if loses.size:
        lost = model.add_variables(
            loses.size * t, upper=case.demand[loses].ravel(), cost=np.repeat(case.lost_cost[loses], t)
        )
        entries.append(((loses[:, None] * t + np.arange(t)).ravel(), lost, -1.0))
    return entries


def _time(case: Case, model: LinearModel, setup: Flags, made: Ints) -> None:
    """Time on the resources, less what the setups take."""
    if not case.resources:
        return
    taken = resource_need(case, np.where(setup, 1.0, 0.0)) - _unit_time(case, setup)
    on = np.flatnonzero((case.item_resource >= 0) & (case.time_per_unit > 0))
    cells = np.arange(len(case.resources) * case.t).reshape(-1, case.t)
    over = np.repeat(case.overtime_limit, case.t)
    overtime = model.add_variables(cells.size, upper=over, cost=np.repeat(case.overtime_cost, case.t))
    limited = np.isfinite(case.capacity)
    there = limited[case.item_resource[on]]
    unit_time = np.broadcast_to(case.time_per_unit[on, None], there.shape)[there]
    model.add_rows(
        cells.size, np.concatenate([cells[case.item_resource[on]][there], cells[limited]]),
        np.concatenate([made[on][there], overtime[limited.ravel()]]),
        np.concatenate([unit_time, np.full(int(limited.sum()), -1.0)]), upper=(case.capacity - taken).ravel(),
    )


def _unit_time(case: Case, setup: Flags) -> Floats:
    """Time that one unit in every setup would take, which ``resource_need`` counts beside the setups."""
    time = np.zeros((len(case.resources), case.t))
    on = np.flatnonzero(case.item_resource >= 0)
    np.add.at(time, case.item_resource[on], case.time_per_unit[on, None] * setup[on])
    return time
