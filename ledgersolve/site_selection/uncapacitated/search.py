"""Local search over sets of open sites: greedy start, then open, close and swap with fast gains.

Every customer knows its cheapest and second cheapest open site; what a move is worth follows from these
(Whitaker 1983; Resende & Werneck 2004 for the table of corrections that makes all swaps of one site cheap).
A customer that no open site serves stands on an imagined site of its own: what leaving it unmet costs, or a
penalty where it must be served.
"""

import heapq
from dataclasses import dataclass

import numpy as np

from ledgersolve.mip import Clock
from ledgersolve.site_selection.case import Flags, Floats, Ints
from ledgersolve.site_selection.uncapacitated.core import Core

NOBODY = -1


@dataclass(frozen=True)
class Found:
    """A set of sites, shape (m,), and its cost: inf where somebody who must be served is not."""

    opened: Flags
    cost: float


class Search:
    """A set of open sites that is being improved."""

    def __init__(self, core: Core, base: Floats | None = None) -> None:
        self.core = core
        self.base = base if base is not None else np.minimum(core.unmet, penalties(core))
        self.must = np.isinf(core.unmet)
        self.group = core.selection.group
        self.opened = core.selection.forced.copy()
        self._serve()

    def cost(self) -> float:
        """Cost of the present set, penalties included."""
        return self.core.offset + float(self.core.fixed[self.opened].sum() + self.first.sum())

    def found(self) -> Found:
        """Give the present set."""
        stranded = bool((self.must & (self.source == NOBODY)).any())
        return Found(self.opened.copy(), np.inf if stranded else self.cost())

    def restart(self, opened: Flags) -> None:
        """Go to another set, made to fit forced sites, groups and counts."""
        selection = self.core.selection
        wanted = np.where(opened, -1.0, 1.0)
        _, self.opened = selection.pick(wanted)
        self._serve()

    def greedy(self) -> None:
        """Open the site that saves most, from the forced sites on, as long as one saves or one is needed."""
        core, selection = self.core, self.core.selection
        self.opened = selection.forced.copy()
        first = self._cheapest()
        heap = [(-np.inf, j) for j in np.flatnonzero(~selection.forced & ~selection.shut).tolist()]
        count = int(self.opened.sum())
        taken = set(self.group[self.opened].tolist())
        while heap and count < selection.most:
            _, j = heapq.heappop(heap)
            if self.group[j] >= 0 and self.group[j] in taken:
                continue
            saving = float(np.maximum(first - core.cost[j], 0.0).sum() - core.fixed[j])
            if heap and saving < -heap[0][0]:
                heapq.heappush(heap, (-saving, j))
                continue
            if saving <= 0 and count >= selection.fewest:
                break
            self.opened[j] = True
            count += 1
            taken.add(int(self.group[j]))
            np.minimum(first, core.cost[j], out=first)
        self._serve()

    def improve(self, candidates: Ints, clock: Clock) -> bool:
        """Make improving moves among the candidates until none is left; True if anything improved."""
        better = False
        moved = True
        while moved and not clock.over():
            moved = False
            for step, j in enumerate(candidates.tolist()):
                if step % 32 == 31 and clock.over():
                    break
                moved |= self._try_close(j) if self.opened[j] else self._try_open(j)
            better |= moved
        return better

    def _cheapest(self) -> Floats:
        first: Floats = self.base.copy()
        for j in np.flatnonzero(self.opened).tolist():
            np.minimum(first, self.core.cost[j], out=first)
        return first

    def _serve(self) -> None:
        """Cheapest and second cheapest open site of every customer, from nothing."""
        n = self.core.n
        self.first, self.second = self.base.copy(), self.base.copy()
        self.source, self.next = np.full(n, NOBODY, dtype=np.int64), np.full(n, NOBODY, dtype=np.int64)
        for j in np.flatnonzero(self.opened).tolist():
            self._enter(j)
        self._weigh()

    def _enter(self, j: int) -> None:
        cost = self.core.cost[j]
        on = np.flatnonzero(cost < self.second)
        ahead = on[cost[on] < self.first[on]]
        self.second[on], self.next[on] = cost[on], j
        self.second[ahead], self.next[ahead] = self.first[ahead], self.source[ahead]
        self.first[ahead], self.source[ahead] = cost[ahead], j

    def _leave(self, k: int) -> None:
        touched = np.flatnonzero((self.source == k) | (self.next == k))
        rows = np.flatnonzero(self.opened)
        table = np.vstack([self.base[touched], self.core.cost[np.ix_(rows, touched)], self.base[touched]])
        names = np.concatenate([[NOBODY], rows, [NOBODY]])
        two = np.argpartition(table, 1, axis=0)[:2]
        costs = np.take_along_axis(table, two, axis=0)
        order = np.argsort(costs, axis=0, kind="stable")
        two, costs = np.take_along_axis(two, order, axis=0), np.take_along_axis(costs, order, axis=0)
        self.first[touched], self.second[touched] = costs
        self.source[touched], self.next[touched] = names[two]

    def _weigh(self) -> None:
        """What closing each open site costs (shape (m,)), fixed cost saved."""
        served = self.source >= 0
        gap = (self.second - self.first)[served]
        self.loss = np.bincount(self.source[served], weights=gap, minlength=self.core.m) - self.core.fixed
        self.closable = self.opened & ~self.core.selection.forced
        self.running = int(np.count_nonzero(self.opened))
        self.least_gain = 1e-9 * max(1.0, abs(self.cost()))

    def _try_close(self, k: int) -> bool:
        needed = not self.closable[k] or self.running <= self.core.selection.fewest
        if needed or self.loss[k] >= -self.least_gain:
            return False
        self._move(closing=k)
        return True

    def _try_open(self, j: int) -> bool:
        """Open j, alone or in place of the site that makes the best swap, if that saves money."""
        selection = self.core.selection
        if selection.shut[j]:
            return False
        cost = self.core.cost[j]
        on = np.flatnonzero(cost < self.second)
        first, near, source = self.first[on], cost[on], self.source[on]
        alone = float(self.core.fixed[j] - np.maximum(first - near, 0.0).sum())
        served = source >= 0
        kept = (self.second[on] - np.maximum(first, near))[served]
        swap = alone + self.loss - np.bincount(source[served], weights=kept, minlength=self.core.m)
        swap[~self.closable] = np.inf
        mates = self.opened & (self.group == self.group[j]) if self.group[j] >= 0 else None
        if mates is not None and mates.any():
            swap[~mates] = np.inf
            alone = np.inf
        elif self.running >= selection.most:
            alone = np.inf
        k = int(swap.argmin())
        if min(alone, float(swap[k])) >= -self.least_gain:
            return False
        if alone <= swap[k]:
            self._move(opening=j)
        else:
            self._move(opening=j, closing=k)
        return True

    def _move(self, opening: int | None = None, closing: int | None = None) -> None:
        if opening is not None:
            self.opened[opening] = True
            self._enter(opening)
        if closing is not None:
            self.opened[closing] = False
            self._leave(closing)
        self._weigh()


def penalties(core: Core) -> Floats:
    """Shape (n,): cost of leaving a customer unserved that makes opening a site for it worth while.

    Twice its dearest lane and the dearest site; taken row by row, so that no large table arises.
    """
    dearest: Floats = np.zeros(core.n)
    for row in core.cost:
        np.maximum(dearest, np.where(np.isfinite(row), row, 0.0), out=dearest)
    penalty: Floats = 2.0 * (dearest + np.abs(core.fixed).max(initial=0.0)) + 1.0
    return penalty
