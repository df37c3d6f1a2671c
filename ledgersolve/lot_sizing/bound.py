"""The Lagrangian bound of a lot-sizing case: prices on capacity, and one dynamic programme an item.

With a price on every resource and period the capacity rows leave the constraints and enter the costs
(Trigeiro, Thomas & McClain 1989): each item is then planned alone by its own programme, paying for the time
it takes. Two couplings remain and are priced the same way: the setup of a family is paid in shares by its
members, and the use of a resource in shares by the items and families on it. For any prices and shares that
are not negative

    sum over items of the least cost under the charges
    + sum over families and periods of min(0, setup + its time at the price + its share of uses - shares paid)
    - sum over resources and periods of price x capacity + max(0, price - overtime cost) x overtime limit

is no more than the cost of any plan; where use costs money the last term of a period becomes
min(0, use cost - that term - shares paid), since an unused resource gives no time.
"""

from dataclasses import dataclass

import numpy as np

from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.programmes import ItemProgrammes
from ledgersolve.lot_sizing.wagner_whitin import Schedules

SAFETY = 1e-9
"""Relative allowance for rounding, taken off every bound."""

_SHARE_STEPS = 30
_NOBODY = -1e300


@dataclass(frozen=True)
class Charges:
    """What couplings cost at one point; all figures are 0 or more, in money.

    Parameters
    ----------
    prices
        Shape (R, T): per time unit.
    family
        Shape (N, T): what an item pays towards its family's setup if it is set up.
    use, family_use
        Shapes (N, T) and (F, T): what items and families pay towards the use of their resource.
    """

    prices: Floats
    family: Floats
    use: Floats
    family_use: Floats


@dataclass(frozen=True)
class Point:
    """The relaxation at some charges.

    ``bound`` is the proven bound (inf where an item has no schedule at all); ``schedules`` and ``setup`` the
    items' answers; ``runs`` (F, T) and ``used`` (R, T), 0 to 1, those of families and uses; ``excess`` (R, T)
    the time asked for beyond what is given, a supergradient of the bound in the prices.
    """

    charges: Charges
    bound: float
    schedules: Schedules
    setup: Flags
    runs: Floats
    used: Floats
    excess: Floats


class Relaxation:
    """The relaxation of a case, ready to be asked at many points."""

    def __init__(self, case: Case) -> None:
        self.case = case
        self.programmes = ItemProgrammes(case)
        limited = np.isfinite(case.capacity)
        self.priced = limited & np.isfinite(case.overtime_limit)[:, None]
        self.capped = limited & ~self.priced
        self.capacity = np.where(limited, case.capacity, 0.0)
        self.overtime = np.where(np.isfinite(case.overtime_limit), case.overtime_limit, 0.0)[:, None]
        self.rented = case.use_cost > 0
        self.members = _Members(case.item_family, len(case.families))
        self.users = _Members(
            np.concatenate([case.item_resource, case.family_resource]), len(case.resources)
        )
        self.coupled = bool(case.families) or bool(self.rented.any())
        count = len(case.resources)
        self.on = (case.item_resource == np.arange(count)[:, None]).astype(np.float64)
        self.family_on = (case.family_resource == np.arange(count)[:, None]).astype(np.float64)
        self.kin = (case.item_family == np.arange(len(case.families))[:, None]).astype(np.float64)

    def start(self, prices: Floats | None = None) -> Charges:
        """Give charges at these prices (None: 0), with couplings shared equally."""
        case = self.case
        at = np.zeros(case.capacity.shape) if prices is None else prices
        zero = np.zeros((case.n, case.t))
        return self.filled(Charges(at, zero, zero, np.zeros((len(case.families), case.t))))

    def filled(self, charges: Charges) -> Charges:
        """Give the nearest charges that are allowed, and pay couplings in full and no more."""
        case = self.case
        prices = np.where(self.priced | self.capped, np.maximum(charges.prices, 0.0), 0.0)
        prices = np.where(self.capped, np.minimum(prices, case.overtime_cost[:, None]), prices)
        if not self.coupled:
            return Charges(prices, charges.family, charges.use, charges.family_use)
        due = np.where(self.rented[:, None], np.maximum(self.use_value(prices), 0.0), 0.0)
        paid = self.users.project(np.concatenate([charges.use, charges.family_use]), due)
        use, family_use = paid[: case.n], paid[case.n :]
        family = self.members.project(charges.family, self._family_value(prices, family_use))
        return Charges(prices, family, use, family_use)

    def at(self, charges: Charges, *, quick: bool = False) -> Point:
        """Evaluate the relaxation; ``quick`` gives a lower bound of it (see ``ItemProgrammes.schedule``)."""
        case, prices = self.case, charges.prices
        by_item = np.vstack([prices, np.zeros((1, case.t))])[case.item_resource]
        setups = case.setup_cost + case.setup_time[:, None] * by_item + charges.family + charges.use
        units = case.unit_cost + case.time_per_unit[:, None] * by_item
        schedules = self.programmes.schedule(setups, units, quick=quick)
        setup = schedules.made > 0
        family_value = self._family_value(prices, charges.family_use) - self.kin @ charges.family
        runs = _answer(family_value, self.kin @ (charges.family * setup), self.kin @ charges.family)
        paid = self.on @ charges.use + self.family_on @ charges.family_use
        use_value = self.use_value(prices)
        rented = self.rented[:, None]
        left = use_value - paid
        called = self.on @ (charges.use * setup) + self.family_on @ (charges.family_use * runs)
        used = np.where(rented, _answer(left, called, paid), 1.0)
        given = np.where(rented, np.minimum(left, 0.0), use_value)
        bound = schedules.cost.sum() + np.minimum(family_value, 0.0).sum() + given.sum()
        load = self.on @ (case.time_per_unit[:, None] * schedules.made + case.setup_time[:, None] * setup)
        load += self.family_on @ (case.family_time[:, None] * runs)
        over = self.overtime * (prices > case.overtime_cost[:, None])
        excess = np.where(self.priced | self.capped, load - (self.capacity + over) * used, 0.0)
        size = np.abs(schedules.cost).sum() + np.abs(given).sum()
        safe = float(bound) - SAFETY * float(size) if np.isfinite(bound) else float(bound)
        return Point(charges, safe, schedules, setup, runs, used, excess)

    def moved(
        self, charges: Charges, prices: Floats, often: Floats, runs: Floats, share: float
    ) -> Charges:
        """Give charges at new prices, what members pay moved towards those set up most.

        ``often`` (N, T) and ``runs`` (F, T) tell how often items and families are set up; ``share`` of what a
        coupling costs is moved.
        """
        case = self.case
        if not self.coupled:
            return self.filled(Charges(prices, charges.family, charges.use, charges.family_use))
        none = np.zeros((1, case.t))
        use = np.vstack([np.maximum(self.use_value(charges.prices), 0.0), none]) * share
        family = np.vstack([self._family_value(charges.prices, charges.family_use), none]) * share
        return self.filled(
            Charges(
                prices, charges.family + family[case.item_family] * often,
                charges.use + use[case.item_resource] * often,
                charges.family_use + use[case.family_resource] * runs,
            )
        )

    def column_costs(self, point: Point) -> Floats:
        """Shape (N,): the items' schedules at the case's own costs (setups of families and uses apart)."""
        case, charges = self.case, point.charges
        by_item = np.vstack([charges.prices, np.zeros((1, case.t))])[case.item_resource]
        extra = (case.setup_time[:, None] * by_item + charges.family + charges.use) * point.setup
        extra += case.time_per_unit[:, None] * by_item * point.schedules.made
        return np.asarray(point.schedules.cost - extra.sum(axis=1))

    def use_value(self, prices: Floats) -> Floats:
        """Shape (R, T): cost of using a resource, less the worth of its time."""
        over = np.maximum(prices - self.case.overtime_cost[:, None], 0.0) * self.overtime
        return np.asarray(self.case.use_cost[:, None] * self.rented[:, None] - prices * self.capacity - over)

    def _family_value(self, prices: Floats, family_use: Floats) -> Floats:
        """Shape (F, T): what a family's setup costs at these prices."""
        case = self.case
        by_family = np.vstack([prices, np.zeros((1, case.t))])[case.family_resource]
        return np.asarray(case.family_cost[:, None] + case.family_time[:, None] * by_family + family_use)


def price_bound(case: Case, prices: Floats) -> float:
    """Give the bound that follows from prices (R, T) per time unit; valid whatever the prices are.

    Negative prices count as 0. Couplings by families and uses are shared by a few ascent steps.
    """
    relaxation = Relaxation(case)
    point = relaxation.at(relaxation.start(np.asarray(prices, dtype=np.float64)))
    best = point
    often, runs = point.setup.astype(np.float64), point.runs
    for k in range(_SHARE_STEPS if relaxation.coupled else 0):
        share = 0.5 / (1 + k) ** 0.5
        point = relaxation.at(relaxation.moved(best.charges, best.charges.prices, often, runs, share))
        best = max(best, point, key=lambda reached: reached.bound)
        often, runs = often + 0.2 * (point.setup - often), runs + 0.2 * (point.runs - runs)
    return best.bound


def _answer(value: Floats, called: Floats, paid: Floats) -> Floats:
    """Answer of a coupling: 1 where it pays, the share called where it just pays, else 0."""
    tie = np.abs(value) <= 1e-9 * (1.0 + paid)
    shared = called / np.where(paid > 0, paid, 1.0)
    return np.where(tie, shared, np.where(value < 0, 1.0, 0.0))


class _Members:
    """Members of groups, and the projection of what they pay onto what their group owes."""

    def __init__(self, group: Ints, count: int) -> None:
        sizes = np.bincount(group[group >= 0], minlength=count)
        self.table = np.full((count, int(sizes.max(initial=0))), -1, dtype=np.int64)
        for g in range(count):
            self.table[g, : sizes[g]] = np.flatnonzero(group == g)

    def project(self, values: Floats, owed: Floats) -> Floats:
        """Nearest payments (members, T), 0 or more, that add up to ``owed`` (groups, T) in each group.

        The projection onto a simplex (Held, Wolfe & Crowder 1974): sort, and take off the level that leaves
        the sum.
        """
        answer = np.zeros_like(values)
        if not self.table.size or not (owed > 0).any():
            return answer
        there = self.table >= 0
        own = np.where(there[:, :, None], values[self.table], _NOBODY)
        falling = -np.sort(-own, axis=1)
        rank = np.arange(1, self.table.shape[1] + 1)[None, :, None]
        level = (np.cumsum(falling, axis=1) - owed[:, None, :]) / rank
        kept = np.maximum((falling > level).sum(axis=1), 1)
        cut = np.take_along_axis(level, kept[:, None, :] - 1, axis=1)
        paid = np.where(there[:, :, None], np.maximum(own - cut, 0.0), 0.0)
        paid *= (owed > 0)[:, None, :]
        answer[self.table[there]] = paid[there]
        return answer
