"""The best allowed set of sites once every site has a value of its own: forced sites, groups and counts."""

from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.site_selection.case import Flags, Floats, Ints


@dataclass(frozen=True)
class Selection:
    """Which sets of m sites are allowed.

    ``forced`` sites are in every set, ``shut`` ones in none (both shape (m,)); of the sites of one ``group``
    (-1 = none) at most one is in; a set has between ``fewest`` and ``most`` sites. Group-mates of a forced site
    are shut.
    """

    forced: Flags
    shut: Flags
    group: Ints
    fewest: int
    most: int

    def __post_init__(self) -> None:
        groups = self.group[self.forced]
        mates = np.isin(self.group, groups[groups >= 0]) & ~self.forced
        if (mates & ~self.shut).any():
            object.__setattr__(self, "shut", self.shut | mates)

    @property
    def m(self) -> int:
        """Number of sites."""
        return int(self.forced.size)

    def fix(self, opened: Ints, closed: Ints) -> "Selection":
        """Force some sites open and shut others."""
        forced, shut = self.forced.copy(), self.shut.copy()
        forced[opened] = True
        shut[closed] = True
        return replace(self, forced=forced, shut=shut)

    def keep(self, rows: Ints) -> "Selection":
        """Give the selection among some of the sites."""
        return replace(self, forced=self.forced[rows], shut=self.shut[rows], group=self.group[rows])

    def pick(self, value: Floats) -> tuple[float, Flags]:
        """Least sum of values over the allowed sets, and a set that has it; inf where no set is allowed."""
        picked = self.forced | (~self.shut & (value < 0))
        if not self._grouped:
            size = int(np.count_nonzero(picked))
            if self.fewest <= size <= self.most:
                return float(value[picked].sum()), picked
        order, low, high = self._order(value)
        if low > min(order.size, high) or self._clash:
            return np.inf, self.forced.copy()
        size = int(np.clip(np.searchsorted(value[order], 0.0), low, high))
        picked = self.forced.copy()
        picked[order[:size]] = True
        return float(value[picked].sum()), picked

    def flips(self, value: Floats, picked: Flags) -> Floats:
        """Shape (m,): by how much the least sum rises at least if a free site is put the other way.

        ``picked`` is the set that ``pick`` gave for these values; inf for sites that are not free.
        """
        order, low, high = self._order(value)
        size = int(np.count_nonzero(picked & ~self.forced))
        inside, outside = order[:size], order[size:]
        last = float(value[inside[-1]]) if size else -np.inf
        following = float(value[outside[0]]) if outside.size else np.inf
        rise: Floats = np.full(self.m, np.inf)
        free = ~self.forced & ~self.shut
        out = free & ~picked
        rise[out] = value[out] - (last if size == high or last > 0 else 0.0)
        leader, second = self._mates(value, picked)
        mates = out & (leader >= 0)
        rise[mates] = value[mates] - value[leader[mates]]
        instead = np.minimum(following, second[inside])
        rise[inside] = (instead if size <= low else np.minimum(instead, 0.0)) - value[inside]
        return np.maximum(rise, 0.0, out=rise)

    @property
    def _grouped(self) -> bool:
        return bool((self.group >= 0).any())

    @property
    def _clash(self) -> bool:
        groups = self.group[self.forced & (self.group >= 0)]
        return bool(np.unique(groups).size < groups.size or (self.forced & self.shut).any())

    def _order(self, value: Floats) -> tuple[Ints, int, int]:
        """Free sites, best first and one a group, with the least and most number to take of them."""
        free = np.flatnonzero(~self.forced & ~self.shut)
        order = free[np.argsort(value[free], kind="stable")]
        groups = self.group[order]
        if (groups >= 0).any():
            first = np.zeros(order.size, dtype=bool)
            first[np.unique(groups, return_index=True)[1]] = True
            order = order[first | (groups < 0)]
        running = int(np.count_nonzero(self.forced))
        return order.astype(np.int64), max(self.fewest - running, 0), self.most - running

    def _mates(self, value: Floats, picked: Flags) -> tuple[Ints, Floats]:
        """Picked group-mate of each site (-1 = none), and the best value among each site's free mates."""
        leader = np.full(self.m, -1, dtype=np.int64)
        second = np.full(self.m, np.inf)
        if self._grouped:
            for j in np.flatnonzero(picked & (self.group >= 0)).tolist():
                mates = np.flatnonzero((self.group == self.group[j]) & ~self.shut)
                mates = mates[mates != j]
                leader[mates] = j
                second[j] = value[mates].min(initial=np.inf)
        return leader, second
