"""When families and rented resources run: chosen at given prices, then held, so that items are alone again.

At fixed prices on capacity, families are joint replenishment problems (``joint``). With the choice of
running periods held, the case that is left has neither families nor uses, and its own prices tell where the
choice could be better.
"""

from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.lot_sizing.bound import Charges, Relaxation
from ledgersolve.lot_sizing.case import Case, Flags, Floats
from ledgersolve.lot_sizing.joint import JointSearch
from ledgersolve.mip import Clock


@dataclass(frozen=True)
class Runs:
    """Periods in which families (F, T) and rented resources (R, T) may run; True for resources not rented."""

    family: Flags
    used: Flags


def held(case: Case, runs: Runs) -> Case:
    """Give the case with the choice made: families and uses are gone, their time taken off the capacity.

    A plan of it is a plan of ``case``, and costs there what it costs here plus the families and uses that it
    really runs; it may be impossible although ``case`` is not.
    """
    none = np.zeros((1, case.t), dtype=bool)
    open_to = np.vstack([runs.used, ~none])[case.item_resource]
    open_to &= np.vstack([runs.family, ~none])[case.item_family]
    taken = np.zeros(case.capacity.shape)
    placed = np.flatnonzero(case.family_resource >= 0)
    np.add.at(taken, case.family_resource[placed], case.family_time[placed, None] * runs.family[placed])
    return replace(
        case, setup_allowed=case.setup_allowed & open_to, capacity=case.capacity - taken,
        use_cost=np.zeros(len(case.resources)), families=(), family_cost=np.zeros(0), family_time=np.zeros(0),
        family_resource=np.zeros(0, dtype=np.int64), item_family=np.full(case.n, -1, dtype=np.int64),
    )


def choose(
    relaxation: Relaxation, charges: Charges, often: Floats, clock: Clock, seconds: float,
    before: Runs | None = None,
) -> Runs:
    """Give runs that are good at the prices of ``charges``: families first, then rented resources.

    ``often`` (F, T) estimates how often each family runs, from the ascent; ``before`` is a choice to start
    from in its place.
    """
    case, none = relaxation.case, np.zeros((1, relaxation.case.t))
    always = np.ones((1, case.t), dtype=bool)
    prices = charges.prices
    by_item = np.vstack([prices, none])[case.item_resource]
    setups = case.setup_cost + case.setup_time[:, None] * by_item
    setups = np.where(case.setup_allowed, setups, np.inf)
    units = case.unit_cost + case.time_per_unit[:, None] * by_item
    by_family = np.vstack([prices, none])[case.family_resource]
    price = case.family_cost[:, None] + case.family_time[:, None] * by_family + charges.family_use
    search = JointSearch(case, case.item_family, price, setups, units)
    family = _searched(search, often, None if before is None else before.family, clock, seconds)
    used = np.ones(case.capacity.shape, dtype=bool)
    if not relaxation.rented.any():
        return Runs(family, used)
    open_to = np.vstack([family, always])[case.item_family]
    rented = np.where(case.item_resource >= 0, relaxation.rented[case.item_resource], False)
    search = JointSearch(
        case, np.where(rented, case.item_resource, -1), relaxation.use_value(prices),
        np.where(open_to, setups, np.inf), units,
    )
    used = _searched(search, used.astype(float), None if before is None else before.used, clock, seconds)
    used |= ~relaxation.rented[:, None]
    return Runs(family & np.vstack([used, always])[case.family_resource], used)


def _searched(
    search: JointSearch, often: Floats, before: Flags | None, clock: Clock, seconds: float
) -> Flags:
    if not search.price.size or not search.group.size:
        return np.ones(search.price.shape, dtype=bool)
    if before is None:
        return search.chosen(often, clock, seconds)[0]
    return search.searched(before, clock, seconds)[0]
