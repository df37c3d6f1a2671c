"""The case in which production may start one period earlier: what building stock ahead would bring."""

from dataclasses import replace

import numpy as np

from ledgersolve.lot_sizing.case import Case


def started_earlier(case: Case) -> tuple[Case, float] | None:
    """Give the case with one period more in front, and what is paid in it whatever is made.

    The period has the first one's costs, permissions and time, and no demand. The opening stock is held through it in
    any case; that is the figure given beside the case. An item that starts below its safety stock is lent the
    difference until the first period, as the safety stock is due only then. None where such an item may
    be late, lose demand or has a most stock: there the loan would change what is allowed; and where an item starts
    above its most stock.
    """
    if case.t == 0:
        return None
    loan = np.maximum(case.safety_stock - case.opening_stock, 0.0)
    bent = np.isfinite(case.backlog_cost) | np.isfinite(case.lost_cost) | np.isfinite(case.most_stock)
    if ((bent | (case.t == 1)) & (loan > 0)).any() or (case.opening_stock > case.most_stock).any():
        return None
    nothing = np.zeros((case.n, 1))
    demand = case.demand.copy()
    demand[:, 0] += loan
    opening = case.opening_stock + loan
    changed = replace(
        case, periods=(f"before {case.periods[0]}", *case.periods), period_starts=("", *case.period_starts),
        demand=np.hstack([nothing, demand]), receipts=np.hstack([nothing, case.receipts]),
        setup_cost=np.hstack([case.setup_cost[:, :1], case.setup_cost]),
        unit_cost=np.hstack([case.unit_cost[:, :1], case.unit_cost]),
        holding_cost=np.hstack([case.holding_cost[:, :1], case.holding_cost]),
        setup_allowed=np.hstack([case.setup_allowed[:, :1], case.setup_allowed]),
        capacity=np.hstack([case.capacity[:, :1], case.capacity]), opening_stock=opening,
        today=None, compare_today=False,
    )
    return changed, float((case.holding_cost[:, 0] * opening).sum())
