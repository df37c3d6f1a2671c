"""Running totals of time: what every plan must have spent on a resource by each period's end.

Where that exceeds the time there has been, no plan exists, and anyone can check it by adding up.
"""

import numpy as np

from ledgersolve.lot_sizing.case import Case, Floats
from ledgersolve.lot_sizing.tight import tight_limits


def must_be_made(case: Case) -> Floats:
    """Shape (N, T): units that every plan has made by each period's end.

    Items that may be late owe them at the horizon's end only; items that may lose demand owe what stock
    asks for beyond all demand.
    """
    tight = tight_limits(case)
    waits, loses = np.isfinite(case.backlog_cost), np.isfinite(case.lost_cost)
    due = tight.stair.copy()
    due[waits, :-1] = 0.0
    due[waits, -1] = np.maximum(tight.raw[waits, -1], 0.0)
    without = np.maximum(tight.raw - np.cumsum(case.demand, axis=1), 0.0)
    without[waits, :-1] = 0.0
    due[loses] = np.maximum.accumulate(without, axis=1)[loses]
    return np.asarray(np.maximum(due, 0.0))


def least_time(case: Case) -> Floats:
    """Shape (R, T): time that every plan has spent on each resource by each period's end, at least.

    Setups are counted as few as the largest lots allow, a family's setup once.
    """
    due, most = must_be_made(case), tight_limits(case).most_lot
    lot = np.where(np.isfinite(most), np.maximum(most, 1e-12), np.inf)[:, None]
    setups = np.where(due > 0, np.maximum(np.ceil(due / lot - 1e-9), 1.0), 0.0)
    need = np.zeros(case.capacity.shape)
    on = np.flatnonzero(case.item_resource >= 0)
    time = case.time_per_unit[on, None] * due[on] + case.setup_time[on, None] * setups[on]
    np.add.at(need, case.item_resource[on], time)
    for family in np.flatnonzero(case.family_resource >= 0):
        once = (due[case.item_family == family] > 0).any(axis=0)
        need[case.family_resource[family]] += case.family_time[family] * once
    return need


def overdrawn(case: Case) -> Floats:
    """Shape (R, T): by how much ``least_time`` exceeds all time there has been; 0 where it does not."""
    need = least_time(case)
    excess = need - np.cumsum(case.capacity + case.overtime_limit[:, None], axis=1)
    return np.where(excess > 1e-6 * np.maximum(need, 1e-3), excess, 0.0)
