"""When families and rented resources run: chosen at given prices, then held, so that items are alone again.

At fixed prices on capacity, families are joint replenishment problems: a family's setup is paid once for all
its members. For any choice of the periods in which families and resources run the best plan of the items is
again one dynamic programme each, so a choice is improved by local search, one period switched at a time,
all families and all switches evaluated at once (Federgruen & Tzur 1994 solve the same problem by search over
joint setups). With the choice held, the case that is left has neither families nor uses.
"""

from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.lot_sizing.bound import Charges, Relaxation
from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.wagner_whitin import WagnerWhitin
from ledgersolve.mip import Clock

_LEVELS = (0.1, 0.3, 0.5, 0.7)
_CELLS = 4_000_000
_ROUNDS = 100


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


def choose(relaxation: Relaxation, charges: Charges, often: Floats, clock: Clock) -> Runs:
    """Give runs that are good at the prices of ``charges``: families first, then rented resources.

    ``often`` (F, T) estimates how often each family runs, from the ascent.
    """
    case, none = relaxation.case, np.zeros((1, relaxation.case.t))
    prices = charges.prices
    by_item = np.vstack([prices, none])[case.item_resource]
    setups = case.setup_cost + case.setup_time[:, None] * by_item
    setups = np.where(case.setup_allowed, setups, np.inf)
    units = case.unit_cost + case.time_per_unit[:, None] * by_item
    by_family = np.vstack([prices, none])[case.family_resource]
    price = case.family_cost[:, None] + case.family_time[:, None] * by_family + charges.family_use
    family = _Search(case, case.item_family, price, setups, units).chosen(often, clock)
    used = np.ones(case.capacity.shape, dtype=bool)
    if not relaxation.rented.any():
        return Runs(family, used)
    open_to = np.vstack([family, ~none.astype(bool)])[case.item_family]
    rented = np.where(relaxation.rented[case.item_resource], case.item_resource, -1)
    search = _Search(
        case, np.where(case.item_resource >= 0, rented, -1), relaxation.use_value(prices),
        np.where(open_to, setups, np.inf), units,
    )
    used = search.chosen(np.ones(used.shape), clock) | ~relaxation.rented[:, None]
    reach = np.vstack([used, ~none.astype(bool)])[case.family_resource]
    return Runs(family & reach, used)


class _Search:
    """Costs of groups of items at fixed prices, for many choices of the periods in which groups run.

    ``group`` (N,) numbers the group of each item, -1 none; ``price`` (G, T) is what a running group costs.
    """

    def __init__(self, case: Case, group: Ints, price: Floats, setups: Floats, units: Floats) -> None:
        self.case, self.price = case, price
        self.members = np.flatnonzero(group >= 0)
        self.group = group[self.members]
        self.setups, self.units = setups[self.members], units[self.members]
        self.programmes: dict[int, WagnerWhitin] = {}

    def chosen(self, often: Floats, clock: Clock) -> Flags:
        """Search from the best of the periods in which ``often`` (G, T) reaches some level, group by group."""
        if not self.members.size:
            return np.zeros(self.price.shape, dtype=bool)
        starts = [often >= level for level in _LEVELS] + [np.ones(often.shape, dtype=bool)]
        costs = np.stack([self.costs(start[None])[0] for start in starts])
        first = costs.argmin(axis=0)
        choice = np.stack(starts)[first, np.arange(first.size)]
        return self.improved(choice, costs.min(axis=0), clock)

    def costs(self, choices: Flags) -> Floats:
        """Cost of each group under each of M choices (M, G, T); shape (M, G)."""
        m, n, t = len(choices), self.members.size, self.case.t
        if m not in self.programmes:
            self.programmes[m] = WagnerWhitin(self.case, np.tile(self.members, m))
        allowed = choices[:, self.group].reshape(m * n, t)
        setups = np.where(allowed, np.tile(self.setups, (m, 1)), np.inf)
        by_item = self.programmes[m].schedule(setups, np.tile(self.units, (m, 1))).cost.reshape(m, n)
        total = np.zeros((m, len(self.price)))
        for k in range(m):
            np.add.at(total[k], self.group, by_item[k])
        return np.asarray(total + (choices * self.price).sum(axis=2))

    def improved(self, choice: Flags, cost: Floats, clock: Clock) -> Flags:
        """Switch, for every group at once, the period that saves most, until none does."""
        t = self.case.t
        batch = max(1, _CELLS // max(self.members.size * t, 1))
        for _ in range(_ROUNDS):
            switched = np.empty((t, cost.size))
            for start in range(0, t, batch):
                if clock.over():
                    return choice
                periods = np.arange(start, min(start + batch, t))
                tries = np.repeat(choice[None], periods.size, axis=0)
                tries[np.arange(periods.size), :, periods] ^= True
                switched[periods] = self.costs(tries)
            period, least = switched.argmin(axis=0), switched.min(axis=0)
            better = np.flatnonzero(least < cost - 1e-9 * np.abs(cost))
            if not better.size:
                return choice
            choice[better, period[better]] ^= True
            cost = np.minimum(cost, least)
        return choice
