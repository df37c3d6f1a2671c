"""One schedule an item: the choice among the schedules met, by the wrapper.

The master with whole-number choices (Manne 1958; Degraeve & Jans 2007), where families and uses are paid in
full by whoever needs them. Time that does not fit is allowed at a price, so that there is always an answer;
quantities are re-optimised afterwards with the setups fixed, which gives back most of what single schedules
waste.
"""

from collections.abc import Iterator

import numpy as np

from ledgersolve.lot_sizing.bound import Point, Relaxation
from ledgersolve.lot_sizing.case import Flags, Floats, Ints
from ledgersolve.lot_sizing.columns import Mix, Pool
from ledgersolve.mip import Clock, LinearModel

MOST_COLUMNS = 12_000
"""Largest number of schedules given to the wrapper."""

ROUNDS = ((8, 0.2), (24, 0.5), (60, 1.0))
"""Schedules an item, and the share of the time left, of each choice: few are chosen from soon, many well."""

MANY_ITEMS_ROUNDS = ((8, 0.1), (60, 1.0))
"""The same where the mix settles most items already: the time belongs to the one choice from many schedules."""

MIXED = 1.3
"""Schedules an item in the mix from which on it leaves much open."""

MIXED_SETUPS, MIXED_ITEMS = 1500, 40
"""Items x periods, and items, up to which setups, not schedules, are the whole-number choice."""


def mixed(mix: Mix, items: int) -> bool:
    """Whether the mix leaves much open: with few items against the periods many schedules of an item share."""
    return mix.columns.size > MIXED * items


def picks(
    relaxation: Relaxation, pool: Pool, point: Point, mix: Mix, dear: float, seconds: float, clock: Clock,
    gap: float,
) -> Iterator[Floats]:
    """Give quantities (N, T), one schedule an item, chosen from more and more schedules as long as there is time.

    ``point`` holds the charges by which schedules are ranked.
    """
    case, until, before = relaxation.case, clock.elapsed() + seconds, 0
    few = case.n <= MIXED_ITEMS and case.n * case.t <= MIXED_SETUPS and not relaxation.coupled
    for count, share in ROUNDS if mixed(mix, case.n) else MANY_ITEMS_ROUNDS:
        per_item = min(count, max(MOST_COLUMNS // max(case.n, 1), 3))
        chosen = np.union1d(pool.promising(point.charges, per_item), mix.columns)
        left = min(until - clock.elapsed(), clock.left())
        if left <= 0 or chosen.size == before:
            return
        before = chosen.size
        way = _mixed if few and count == ROUNDS[-1][0] else _whole
        made = way(relaxation, pool, chosen, dear, share * left, clock, gap)
        if made is not None:
            yield made


def _whole(
    relaxation: Relaxation, pool: Pool, chosen: Ints, dear: float, seconds: float, clock: Clock, gap: float
) -> Floats | None:
    """One schedule an item; None where time ran out before any choice."""
    case, items, made = relaxation.case, pool.items[chosen], pool.made[chosen]
    model = LinearModel()
    columns = model.add_variables(chosen.size, upper=1.0, cost=pool.costs[chosen], whole=True)
    model.add_rows(case.n, items, columns, 1.0, lower=1.0, upper=1.0)
    family, used = _couplings(relaxation, model, items, made > 0, columns)
    _time(relaxation, model, items, made, columns, family, used, dear)
    result = model.solve(seconds, gap=gap, cancelled=clock.limits.cancelled)
    if result.values is None:
        return None
    taken = np.flatnonzero(result.values[columns] > 0.5)
    quantities = np.zeros((case.n, case.t))
    quantities[items[taken]] = made[taken]
    return quantities


def _mixed(
    relaxation: Relaxation, pool: Pool, chosen: Ints, dear: float, seconds: float, clock: Clock, gap: float
) -> Floats | None:
    """Whole-number setups, and quantities that mix schedules whose setups all are among them.

    With few items one schedule each does not fill the periods well; a mix can (Degraeve & Jans 2007).
    """
    case, items, made = relaxation.case, pool.items[chosen], pool.made[chosen]
    model = LinearModel()
    setups = (case.setup_cost[items] * (made > 0)).sum(axis=1)
    columns = model.add_variables(chosen.size, upper=1.0, cost=pool.costs[chosen] - setups)
    model.add_rows(case.n, items, columns, 1.0, lower=1.0, upper=1.0)
    column, period = np.nonzero(made > 0)
    met, row = np.unique(items[column] * case.t + period, return_inverse=True)
    cost = case.setup_cost.ravel()[met]
    setup = model.add_variables(met.size, upper=1.0, cost=cost, whole=True)
    model.add_rows(
        met.size, np.concatenate([row, np.arange(met.size)]), np.concatenate([columns[column], setup]),
        np.repeat([1.0, -1.0], [column.size, met.size]), upper=0.0,
    )
    _mixed_time(relaxation, model, items, made, columns, setup, met, dear)
    result = model.solve(seconds, gap=gap, cancelled=clock.limits.cancelled)
    if result.values is None:
        return None
    quantities = np.zeros((case.n, case.t))
    np.add.at(quantities, items, result.values[columns][:, None] * made)
    size = 1e-9 * quantities.max(axis=1, keepdims=True)
    return np.where(quantities > size, quantities, 0.0)


def _mixed_time(
    relaxation: Relaxation, model: LinearModel, items: Ints, made: Floats, columns: Ints, setup: Ints,
    met: Ints, dear: float,
) -> None:
    """Capacity rows: time per unit by the schedules mixed, setup time by the setups."""
    case = relaxation.case
    limited = np.isfinite(case.capacity)
    count = int(limited.sum())
    cells = np.full((len(case.resources) + 1, case.t), -1, dtype=np.int64)
    cells[:-1][limited] = np.arange(count)
    row = cells[case.item_resource[items]]
    load = case.time_per_unit[items, None] * made
    there = (load > 0) & (row >= 0)
    item, period = met // case.t, met % case.t
    setup_row = cells[case.item_resource[item], period]
    timed = (setup_row >= 0) & (case.setup_time[item] > 0)
    over = model.add_variables(
        count, upper=np.broadcast_to(case.overtime_limit[:, None], limited.shape)[limited],
        cost=np.broadcast_to(case.overtime_cost[:, None], limited.shape)[limited],
    )
    short = model.add_variables(count, cost=dear)
    parts = (
        (row[there], np.broadcast_to(columns[:, None], there.shape)[there], load[there]),
        (setup_row[timed], setup[timed], case.setup_time[item][timed]),
        (np.arange(count), over, np.full(count, -1.0)), (np.arange(count), short, np.full(count, -1.0)),
    )
    rows, variables, factors = (np.concatenate([part[k] for part in parts]) for k in range(3))
    model.add_rows(count, rows, variables, factors, upper=case.capacity[limited])


def _couplings(
    relaxation: Relaxation, model: LinearModel, items: Ints, setup: Flags, columns: Ints
) -> tuple[Ints, Ints]:
    """Family setups and uses, each at least what the schedules of any one item ask for; -1 where free."""
    case = relaxation.case
    family = np.full((len(case.families), case.t), -1, dtype=np.int64)
    used = np.full(case.capacity.shape, -1, dtype=np.int64)
    if case.families:
        family[:] = model.add_variables(
            family.size, upper=1.0, cost=np.repeat(case.family_cost, case.t), whole=True
        ).reshape(family.shape)
    rented = relaxation.rented
    if rented.any():
        used[rented] = model.add_variables(
            int(rented.sum()) * case.t, upper=1.0, cost=np.repeat(case.use_cost[rented], case.t), whole=True
        ).reshape(-1, case.t)
    none = np.full((1, case.t), -1, dtype=np.int64)
    _link(model, np.vstack([family, none])[case.item_family], items, setup, columns)
    _link(model, np.vstack([used, none])[case.item_resource], items, setup, columns)
    over = np.vstack([used, none])[case.family_resource]
    both = (family >= 0) & (over >= 0)
    rows = np.arange(int(both.sum()))
    model.add_rows(
        rows.size, np.tile(rows, 2), np.concatenate([family[both], over[both]]),
        np.repeat([1.0, -1.0], rows.size), upper=0.0,
    )
    return family, used


def _link(model: LinearModel, target: Ints, items: Ints, setup: Flags, columns: Ints) -> None:
    """For each item and period: the schedules with a setup there need the coupling ``target`` (N, T)."""
    column, period = np.nonzero(setup & (target[items] >= 0))
    if not column.size:
        return
    cell = items[column] * target.shape[1] + period
    unique, row = np.unique(cell, return_inverse=True)
    model.add_rows(
        unique.size, np.concatenate([row, np.arange(unique.size)]),
        np.concatenate([columns[column], target.ravel()[unique]]),
        np.repeat([1.0, -1.0], [column.size, unique.size]), upper=0.0,
    )


def _time(
    relaxation: Relaxation, model: LinearModel, items: Ints, made: Floats, columns: Ints, family: Ints,
    used: Ints, dear: float,
) -> None:
    """Capacity rows; an unused resource gives no time, and time short costs ``dear``."""
    case = relaxation.case
    limited = np.isfinite(case.capacity)
    cells = np.full(limited.shape, -1, dtype=np.int64)
    count = int(limited.sum())
    cells[limited] = np.arange(count)
    none = np.full((1, case.t), -1, dtype=np.int64)
    load = case.time_per_unit[items, None] * made + case.setup_time[items, None] * (made > 0)
    row = np.vstack([cells, none])[case.item_resource[items]]
    there = (load > 0) & (row >= 0)
    over = model.add_variables(
        count, upper=np.broadcast_to(case.overtime_limit[:, None], limited.shape)[limited],
        cost=np.broadcast_to(case.overtime_cost[:, None], limited.shape)[limited],
    )
    short = model.add_variables(count, cost=dear)
    family_row = np.vstack([cells, none])[case.family_resource]
    timed = (family >= 0) & (family_row >= 0) & (case.family_time > 0)[:, None]
    rent = (used >= 0) & limited
    parts = (
        (row[there], np.broadcast_to(columns[:, None], there.shape)[there], load[there]),
        (np.arange(count), over, np.full(count, -1.0)), (np.arange(count), short, np.full(count, -1.0)),
        (family_row[timed], family[timed], np.broadcast_to(case.family_time[:, None], timed.shape)[timed]),
        (cells[rent], used[rent], -case.capacity[rent]),
    )
    rows, variables, factors = (np.concatenate([part[k] for part in parts]) for k in range(3))
    model.add_rows(count, rows, variables, factors, upper=np.where(rent, 0.0, case.capacity)[limited])
