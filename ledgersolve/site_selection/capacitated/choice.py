"""The cheapest set of sites once every site has a value: counts, groups, rules and the capacity needed.

The row "capacity of the open sites >= demand that must be met" is implied by the model and gives the Lagrangian
relaxation most of its strength (Beasley 1988). It is used twice: as the least number of sites that can hold
the demand, and priced (a second, one-dimensional Lagrangian), which is as good as its linear relaxation.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ledgersolve.site_selection.case import Floats, Ints
from ledgersolve.site_selection.lanes import Lanes

State = NDArray[np.int8]
"""Shape (m,): 1 = open, -1 = closed, 0 = free."""

SLACK = 1e-9
TANGENTS = 12
"""Most tangents laid to find the capacity price."""

FARTHEST = 1e6
"""Prices above this multiple of the dearest rate are not tried: no set the counts allow holds the demand."""


@dataclass(frozen=True)
class Choice:
    """A set of sites, optimal for the relaxation.

    ``value`` is a lower bound on the sum of the values of every allowed set; ``degree`` (m,) says how far sites
    are open in it (fractions only where the capacity price decides). ``picked`` (m,) is the set behind
    ``flip`` (m,): by how much ``value`` rises at least if a free site is put the other way. ``roomy`` (m,)
    is a set near it that holds the demand, and ``worth`` the sum of its values.
    """

    value: float
    degree: Floats
    picked: NDArray[np.bool_]
    flip: Floats
    roomy: NDArray[np.bool_]
    worth: float


class Pool:
    """The sets of sites allowed when some sites are fixed.

    ``state`` is the state given and what follows from it at once. ``impossible`` says that no set is left.
    """

    def __init__(self, lanes: Lanes, reach: Floats, state: State) -> None:
        must = lanes.needs & np.isinf(lanes.unmet_cost)
        self.lanes = lanes
        self.need = float(lanes.demand[must].sum())
        self.holds = np.minimum(np.minimum(lanes.capacity, reach), self.need)
        self.all_units = float(lanes.demand[lanes.needs].sum()) * (1.0 + SLACK)
        self.state = state.copy()
        self.price = 0.0
        self.impossible = not self._settle()

    def _settle(self) -> bool:
        """Close group-mates of open sites, open sites the demand cannot do without, count; until nothing changes."""
        while True:
            before = int(np.count_nonzero(self.state))
            taken = np.unique(self.lanes.group[(self.state == 1) & (self.lanes.group >= 0)])
            self.state[np.isin(self.lanes.group, taken) & (self.state == 0)] = -1
            if not self._count():
                return False
            if int(np.count_nonzero(self.state)) == before:
                return True

    def _count(self) -> bool:
        lanes, opened = self.lanes, self.state == 1
        self.free = np.flatnonzero(self.state == 0)
        self.group = lanes.group[self.free]
        self.grouped = bool((self.group >= 0).any())
        self.left = self.need * (1.0 - SLACK) - float(self.holds[opened].sum())
        running = int(opened.sum())
        holds = self._one_a_group(self.holds[self.free])
        held = np.cumsum(np.sort(holds)[::-1])
        fewest = int(np.searchsorted(held, self.left)) + 1 if self.left > 0 else 0
        if fewest > holds.size:
            return False
        self.low = max(lanes.fewest - running, fewest, 0)
        self.high = min(lanes.most - running, holds.size, self._most_by_least())
        if self.low > self.high:
            return False
        if self.left > 0:
            needed = (held[-1] - self.holds[self.free] < self.left - SLACK * self.need) & (self.group < 0)
            self.state[self.free[needed]] = 1
        if self.high == 0:
            self.state[self.free] = -1
        elif self.low == holds.size and not self.grouped:
            self.state[self.free] = 1
        even = self.free.size == 0 or float(np.ptp(self.holds[self.free])) <= SLACK * max(self.need, 1.0)
        self.counted = self.left <= 0 or (even and not self.grouped)
        return True

    def _one_a_group(self, figures: Floats) -> Floats:
        """The figures of sites without a group, and the largest one of each group."""
        if not self.grouped:
            return figures
        groups, numbers = np.unique(self.group[self.group >= 0], return_inverse=True)
        best = np.full(groups.size, -np.inf)
        np.maximum.at(best, numbers, figures[self.group >= 0])
        return np.concatenate([figures[self.group < 0], best])

    def _most_by_least(self) -> int:
        """Most free sites whose least volumes all demand can fill."""
        spare = self.all_units - float(self.lanes.least[self.state == 1].sum())
        if spare < 0:
            return -1
        least = np.sort(-self._one_a_group(-self.lanes.least[self.free]))
        return int(np.searchsorted(np.cumsum(least), spare, side="right"))

    def choose(self, value: Floats) -> Choice:
        """Choose sites for these values (m,); exact but for the whole-number side of the capacity row."""
        own = value[self.free]
        if self.counted:
            best = self._at(own, 0.0)
            degree, roomy = best.opened.astype(np.float64), best.opened
        else:
            best, degree, roomy = self._priced(own)
        fixed = float(value[self.state == 1].sum())
        flip = np.full(self.state.size, np.inf)
        flip[self.free] = best.flip
        return Choice(
            value=fixed + best.value, degree=self._spread(degree), picked=self._spread(best.opened) > 0,
            flip=flip, roomy=self._spread(roomy) > 0, worth=fixed + float(own[roomy].sum()),
        )

    def _spread(self, free: NDArray[np.generic]) -> Floats:
        """Figures of the free sites and 1 for every open one, over all sites."""
        spread: Floats = (self.state == 1).astype(np.float64)
        spread[self.free] = free
        return spread

    def _priced(self, own: Floats) -> tuple["_Picked", Floats, NDArray[np.bool_]]:
        """Find the capacity price; mix the selections on its two sides so that they just hold the demand."""
        low = self._at(own, 0.0)
        if low.short <= 0:
            return low, low.opened.astype(np.float64), low.opened
        if not self.grouped:
            found = self._by_rate(own)
            if found is not None:
                return found
        return self._by_tangents(own, low)

    def _by_rate(self, own: Floats) -> tuple["_Picked", Floats, NDArray[np.bool_]] | None:
        """Fill the need in the order of value per unit held, as if counts were no matter; None if they are."""
        holds = self.holds[self.free]
        rate = own / np.maximum(holds, 1e-300)
        order = np.argsort(rate, kind="stable")
        held = np.cumsum(holds[order])
        last = int(np.searchsorted(held, self.left))
        if last >= order.size or rate[order[last]] <= 0:
            return None
        inside, critical = order[: last + 1], int(order[last])
        count = inside.size
        if not self.low <= count - 1 <= count <= self.high:
            return None
        roomy = np.zeros(own.size, dtype=bool)
        roomy[inside] = True
        degree = roomy.astype(np.float64)
        degree[critical] = 1.0 - (held[last] - self.left) / holds[critical]
        return self._at(own, float(rate[critical])), degree, roomy

    def _by_tangents(self, own: Floats, low: "_Picked") -> tuple["_Picked", Floats, NDArray[np.bool_]]:
        """Find the best capacity price between two tangents, one on either side (Kelley 1960), from the last one."""
        bottom, top = 0.0, self.price if self.price > 0 else self._steepest(own)
        high = self._at(own, top)
        best = high if high.value > low.value else low
        while high.short > 0 and np.isfinite(top):
            low, bottom, top = high, top, 1.3 * top if self.price > 0 else 2.0 * top
            if top > FARTHEST * self._steepest(own):
                return best, high.opened.astype(np.float64), high.opened
            high = self._at(own, top)
            best = high if high.value > best.value else best
        for _ in range(TANGENTS):
            meeting = (high.value - low.value + low.short * bottom - high.short * top) / (low.short - high.short)
            if not bottom < meeting < top:
                break
            found = self._at(own, meeting)
            best = found if found.value > best.value else best
            if low.value + low.short * (meeting - bottom) - found.value <= 1e-9 * abs(found.value):
                break
            if found.short > 0:
                low, bottom = found, meeting
            else:
                high, top = found, meeting
        self.price = top
        weight = low.short / (low.short - high.short)
        return best, (1.0 - weight) * low.opened + weight * high.opened, high.opened

    def _steepest(self, own: Floats) -> float:
        holds = self.holds[self.free]
        rates = own[holds > 0] / holds[holds > 0]
        return float(max(rates.max(initial=0.0), 1e-12))

    def _at(self, own: Floats, price: float) -> "_Picked":
        """Best selection among the free sites at a capacity price."""
        holds = self.holds[self.free]
        priced = own - price * holds if price else own
        order = np.argsort(priced, kind="stable")
        second = np.full(own.size, np.inf)
        leader = np.arange(own.size)
        if self.grouped:
            order = self._leaders(priced, order, second, leader)
        count = int(np.clip(np.searchsorted(priced[order], 0.0), self.low, self.high))
        inside, outside = order[:count], order[count:]
        opened = np.zeros(own.size, dtype=bool)
        opened[inside] = True
        last = priced[inside[-1]] if count else -np.inf
        following = priced[outside[0]] if outside.size else np.inf
        flip = np.empty(own.size)
        flip[~opened] = priced[~opened] - (last if count == self.high or last > 0 else 0.0)
        mates = ~opened & opened[leader]
        flip[mates] = priced[mates] - priced[leader[mates]]
        instead = np.minimum(following, second[inside])
        flip[inside] = (instead if count <= self.low else np.minimum(instead, 0.0)) - priced[inside]
        value = float(priced[inside].sum()) + price * max(self.left, 0.0)
        return _Picked(value, opened, flip, self.left - float(holds[inside].sum()))

    def _leaders(self, priced: Floats, order: Ints, second: Floats, leader: Ints) -> Ints:
        """Keep the best member of each group in the order; note who leads whom, and the next best."""
        group = self.group[order]
        by_group = order[np.argsort(group, kind="stable")]
        by_group = by_group[self.group[by_group] >= 0]
        first = np.append(True, self.group[by_group][1:] != self.group[by_group][:-1])
        starts = np.flatnonzero(first)
        leaders = by_group[starts]
        leader[by_group] = np.repeat(leaders, np.diff(np.append(starts, by_group.size)))
        seconds = by_group[np.minimum(starts + 1, by_group.size - 1)]
        has_second = self.group[seconds] == self.group[leaders]
        has_second &= seconds != leaders
        second[leaders[has_second]] = priced[seconds[has_second]]
        leading: Ints = order[leader[order] == order]
        return leading


@dataclass(frozen=True)
class _Picked:
    """A selection among the free sites at one capacity price; ``short`` = units it does not hold."""

    value: float
    opened: NDArray[np.bool_]
    flip: Floats
    short: float
