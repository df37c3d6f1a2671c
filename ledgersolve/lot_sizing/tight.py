"""Tight limits for models: how much a cheapest plan makes of an item in a period at most, and why.

Every big M of the models comes from here: remaining need, room in stock, largest lot, time on the
resource. Everything is in units; stock counts at a period's end.
"""

from dataclasses import dataclass

import numpy as np

from ledgersolve.lot_sizing.case import Case, Floats
from ledgersolve.lot_sizing.wagner_whitin import needs


@dataclass(frozen=True)
class Tight:
    """Netted needs and limits of a case with N items and T periods.

    Parameters
    ----------
    raw, stair
        Shape (N, T): what must have been made, or lost, by each period's end for stock to be at its least
        with nothing late, and its rising hull (see ``wagner_whitin.Needs``).
    step
        Shape (N, T): increase of ``stair`` from the period before: the net demand.
    base
        Shape (N, T): stock if exactly ``stair`` is made or lost.
    must
        Shape (N,): what must be made in the first period because stock must be there and cannot be late:
        only demand can wait.
    surplus
        Shape (N,): the most that a cheapest plan makes beyond the last need; above 0 only for items with a
        least lot or a lot multiple.
    least_lot, most_lot
        Shape (N,): limits of a lot, rounded to whole multiples; 0 and inf where none.
    most_made
        Shape (N, T): the most that a cheapest plan makes in a period; 0 where it can make nothing.
    """

    raw: Floats
    stair: Floats
    step: Floats
    base: Floats
    must: Floats
    surplus: Floats
    least_lot: Floats
    most_lot: Floats
    most_made: Floats


def tight_limits(case: Case) -> Tight:
    """Limits of a case.

    The surplus: a last lot that exceeds what is needed can be shortened, or dropped, without breaking a rule
    or raising a cost, down to its least size; so the surplus at the end is below one least lot or multiple.
    """
    need = needs(case)
    least, most = lot_limits(case)
    step = np.diff(need.stair, axis=1, prepend=0.0)
    surplus = np.where((case.least_lot > 0) | (case.lot_multiple > 0), least, 0.0)
    base = case.least_stock() + need.stair - need.raw
    must = np.maximum(case.least_stock()[:, 0] - case.opening_stock - case.receipts[:, 0], 0.0)
    limit = np.minimum(_remaining(case, need.stair, surplus), most[:, None])
    limit = np.minimum(limit, np.minimum(_room(case, need.stair, base), _time_limit(case)))
    possible = case.setup_allowed & (limit > 0) & (limit >= least[:, None] * (1 - 1e-9))
    most_made = np.where(possible, np.maximum(limit, least[:, None]), 0.0)
    return Tight(need.raw, need.stair, step, base, must, surplus, least, most, most_made)


def lot_limits(case: Case) -> tuple[Floats, Floats]:
    """Least and most lot, shape (N,); with a multiple, the whole multiples that keep them."""
    multiple = case.lot_multiple
    by = np.where(multiple > 0, multiple, 1.0)
    up = np.maximum(np.ceil(case.least_lot / by - 1e-9), 1.0) * by
    down = np.where(np.isfinite(case.most_lot), np.floor(case.most_lot / by + 1e-9) * by, np.inf)
    return np.where(multiple > 0, up, case.least_lot), np.where(multiple > 0, down, case.most_lot)


def _remaining(case: Case, stair: Floats, surplus: Floats) -> Floats:
    """What is still needed when a period starts: all of it for items that may be late."""
    before = np.concatenate([np.zeros((case.n, 1)), stair[:, :-1]], axis=1)
    before[np.isfinite(case.backlog_cost)] = 0.0
    return np.asarray(np.maximum(stair[:, -1:] - before, 0.0) + surplus[:, None])


def _room(case: Case, stair: Floats, base: Floats) -> Floats:
    """What fits into stock after the needs of the period (items that may be late: no limit from here)."""
    before = np.concatenate([np.zeros((case.n, 1)), stair[:, :-1]], axis=1)
    room = np.asarray(np.maximum(stair - before + case.most_stock[:, None] - base, 0.0))
    room[np.isfinite(case.backlog_cost)] = np.inf
    return room


def _time_limit(case: Case) -> Floats:
    """What an item alone can make in the time of its resource, overtime included."""
    limit = np.full((case.n, case.t), np.inf)
    for item in np.flatnonzero(case.item_resource >= 0):
        resource, family = case.item_resource[item], case.item_family[item]
        time = case.capacity[resource] + case.overtime_limit[resource] - case.setup_time[item]
        if family >= 0 and case.family_resource[family] == resource:
            time = time - case.family_time[family]
        spare = 1e-9 * (1.0 + case.setup_time[item])
        if case.time_per_unit[item] > 0:
            limit[item] = np.maximum(time, 0.0) / case.time_per_unit[item]
        limit[item] = np.where(time < -spare, 0.0, limit[item])
    return limit
