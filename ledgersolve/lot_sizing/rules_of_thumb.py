"""Plans by rules of thumb on the same data, to hold a plan against: each item alone, capacity not looked at.

Lot for lot; economic order quantity (Harris 1913), made whenever the stock does not cover the period; the rule
of least average cost a period (Silver & Meal 1973). Opening stock, receipts and least stocks are netted first;
least lots and multiples are kept by rounding up.
"""

import math
from collections.abc import Callable

import numpy as np

from ledgersolve.lot_sizing.case import Case, Floats

Cover = Callable[[Floats, int, float, float], float]
"""From net needs (T,), the period, setup and holding cost to the quantity of a lot."""


def net_needs(case: Case) -> Floats:
    """Shape (N, T): what must newly be made by each period at the latest, period by period."""
    wanted = np.cumsum(case.demand - case.receipts, axis=1) - case.opening_stock[:, None] + case.least_stock()
    reached = np.maximum.accumulate(np.maximum(wanted, 0.0), axis=1)
    return np.diff(reached, axis=1, prepend=0.0)


def lot_for_lot(needs: Floats, period: int, _setup: float, _holding: float) -> float:
    """Make what the period needs, nothing ahead."""
    return float(needs[period])


def order_quantity(needs: Floats, period: int, setup: float, holding: float) -> float:
    """Economic order quantity of the mean need: sqrt(2 x need x setup / holding), never less than is needed."""
    mean = float(needs.mean())
    if holding <= 0:
        return float(needs[period:].sum())
    return max(float(needs[period]), math.sqrt(2 * mean * setup / holding))


def least_period_cost(needs: Floats, period: int, setup: float, holding: float) -> float:
    """Cover periods as long as the average cost a period falls (Silver & Meal 1973)."""
    cost, average, covered = setup, setup, float(needs[period])
    for ahead in range(1, len(needs) - period):
        longer = cost + holding * ahead * float(needs[period + ahead])
        if longer / (ahead + 1) > average:
            break
        cost, average, covered = longer, longer / (ahead + 1), covered + float(needs[period + ahead])
    return covered


RULES: tuple[tuple[str, Cover], ...] = (
    ("Lot for lot", lot_for_lot),
    ("Economic order quantity", order_quantity),
    ("Silver-Meal rule", least_period_cost),
)


def quantities(case: Case, cover: Cover) -> Floats:
    """Shape (N, T): what a rule makes, each item alone."""
    needs = net_needs(case)
    made = np.zeros_like(needs)
    for item in range(case.n):
        _walk(case, item, needs[item], cover, made[item])
    return made


def _walk(case: Case, item: int, needs: Floats, cover: Cover, made: Floats) -> None:
    allowed = case.setup_allowed[item]
    ahead = 0.0  # made already, for needs still to come
    for period in np.flatnonzero(needs > 0):
        short = float(needs[period]) - ahead
        if short <= 1e-9 * max(1.0, float(needs[period])):
            ahead = max(0.0, -short)
            continue
        start = period
        while start > 0 and not allowed[start]:
            start -= 1
        setup, holding = float(case.setup_cost[item, period]), float(case.holding_cost[item, period])
        lot = max(short, cover(needs, int(period), setup, holding) - ahead)
        lot = _rounded(case, item, lot)
        made[start] += lot
        ahead += lot - float(needs[period])


def _rounded(case: Case, item: int, lot: float) -> float:
    lot = max(lot, float(case.least_lot[item]))
    multiple = float(case.lot_multiple[item])
    return float(np.ceil(lot / multiple - 1e-9) * multiple) if multiple > 0 else lot
