"""Branch and bound over sites with Lagrangian bounds: the best bound first, prices handed down the tree.

Every node climbs a few steps from its parent's prices, fixes sites by reduced cost, searches for a better
plan now and then, and splits on the site the relaxation is least sure of (as Posta, Ferland & Michelon 2014
do with a bundle method). No node needs a linear program, so size does not matter.
"""

import heapq
import itertools
from dataclasses import dataclass

import numpy as np

from ledgersolve.mip import Clock
from ledgersolve.site_selection.case import Flags, Floats, Ints
from ledgersolve.site_selection.selection import Selection
from ledgersolve.site_selection.uncapacitated.core import Core, NearLanes
from ledgersolve.site_selection.uncapacitated.incumbent import Incumbent
from ledgersolve.site_selection.uncapacitated.search import Search
from ledgersolve.site_selection.uncapacitated.tabu import Tabu
from ledgersolve.site_selection.uncapacitated.volume import Dual, Steps, climb

NODE_STEPS = 40
NODE_CLIMBS = 8
WALKING, WALK = 0.3, 20_000
"""Part of the branching time that goes to the tabu walk, and its most moves at a time."""
MARGIN = 0.4
"""Room for prices in a node, see ``NearLanes.around``."""


@dataclass(frozen=True)
class Node:
    """Part of all plans: what its selection allows. ``average`` is how open each site was in the parent."""

    selection: Selection
    prices: Floats
    average: Floats


class Tree:
    """The tree of one core, whose sites are ``rows`` of the incumbent's."""

    def __init__(
        self, core: Core, search: Search, tabu: Tabu | None, incumbent: Incumbent, rows: Ints
    ) -> None:
        self.core, self.search, self.tabu = core, search, tabu
        self.incumbent, self.rows = incumbent, rows
        self.floor = np.inf
        self.nodes = 0
        self._walked = 0.0
        self._number = itertools.count()
        self._heap: list[tuple[float, int, Node]] = []

    def bound(self) -> float:
        """Proven lower bound on every plan of the core."""
        waiting = self._heap[0][0] if self._heap else np.inf
        return min(self.floor, waiting, self.incumbent.cost)

    def run(self, dual: Dual, selection: Selection, clock: Clock) -> None:
        """Work through the nodes, from the root's prices on, until none is open, or enough is proven."""
        self._push(dual.bound, Node(selection, dual.prices, dual.average))
        self._walked = clock.elapsed()
        while self._heap and not clock.over() and not self.incumbent.enough():
            bound, _, node = heapq.heappop(self._heap)
            try:
                self._work(bound, node, clock)
            finally:
                self.nodes += 1
            self.incumbent.raise_bound(self.bound(), "branch")
            if self.tabu is not None and self.nodes % 16 == 0:
                self._walk(clock)

    def _walk(self, clock: Clock) -> None:
        """Give the tabu walk its part of the time."""
        now = clock.elapsed()
        if self.tabu is not None:
            found = self.tabu.run(WALKING * (now - self._walked), WALK, clock)
            if found is not None:
                self._offer(found)
        self._walked = clock.elapsed()

    def _work(self, bound: float, node: Node, clock: Clock) -> None:
        """Climb while it pays, then search and split, unless the node is closed on the way."""
        steps = Steps(length=0.05)
        selection, prices, average = node.selection, node.prices, node.average
        room = MARGIN * np.maximum(prices - self.core.lowest, self.core.spread)
        near = NearLanes.around(self.core, selection, prices, room)
        for attempt in range(NODE_CLIMBS):
            if self._closed(bound):
                return
            cut = self.incumbent.cut()
            dual = climb(self.core, near, selection, prices, cut, NODE_STEPS, clock, steps, average)
            gained = max(dual.bound - bound, 0.0)
            bound = max(bound, dual.bound)
            prices, average = dual.prices, dual.average
            if self._closed(bound):
                return
            selection = self._fixed(selection, dual)
            held = near.held(prices)
            if held.any():
                room[held] *= 4.0
                near = NearLanes.around(self.core, selection, prices, room)
            elif attempt > 0 and gained * (NODE_CLIMBS - attempt) < cut - bound:
                break
            if clock.over():
                break
        self._look(selection, dual, clock)
        if not self._closed(bound):
            self._split(bound, selection, dual)

    def _closed(self, bound: float) -> bool:
        """Take the node out if nothing better can be in it."""
        if bound < self.incumbent.cut():
            return False
        self.floor = min(self.floor, self.incumbent.closed_at(bound))
        return True

    def _fixed(self, selection: Selection, dual: Dual) -> Selection:
        """Fix the free sites that no better plan of this node can have the other way."""
        rise = selection.flips(dual.value, dual.picked)
        sure = np.isfinite(rise) & (dual.bound + rise >= self.incumbent.cut())
        if not sure.any():
            return selection
        self.floor = min(self.floor, self.incumbent.closed_at(self.incumbent.cut()))
        return selection.fix(np.flatnonzero(sure & dual.picked), np.flatnonzero(sure & ~dual.picked))

    def _look(self, selection: Selection, dual: Dual, clock: Clock) -> None:
        """Search from the set the relaxation likes; every fifth node once the tree has grown."""
        if self.nodes > 20 and self.nodes % 5:
            return
        start = dual.average > 0.5 if self.nodes % 2 else dual.picked
        self.search.restart(start & ~selection.shut)
        self.search.improve(np.flatnonzero(~selection.shut), clock)
        found = self.search.found()
        if found.cost < self.incumbent.cost:
            self._offer(found.opened)

    def _offer(self, chosen: Flags) -> None:
        """Offer a set of the core's sites to the incumbent."""
        opened = np.zeros(self.incumbent.opened.size, dtype=bool)
        opened[self.rows[chosen]] = True
        self.incumbent.offer(opened)

    def _split(self, bound: float, selection: Selection, dual: Dual) -> None:
        free = np.flatnonzero(~selection.forced & ~selection.shut)
        if free.size == 0:
            self._settle(selection, bound)
            return
        doubt = np.round(0.5 - np.abs(dual.average[free] - 0.5), 3)
        j = free[np.lexsort((np.abs(dual.value[free]), -doubt))[:1]]
        nothing = np.zeros(0, dtype=np.int64)
        for child in (selection.fix(j, nothing), selection.fix(nothing, j)):
            self._push(bound, Node(child, dual.prices, dual.average))

    def _settle(self, selection: Selection, bound: float) -> None:
        """All sites decided: what serving everyone from them costs is exact."""
        if selection.pick(np.zeros(self.core.m))[0] == np.inf:
            return
        opened = np.zeros(self.incumbent.opened.size, dtype=bool)
        opened[self.rows[selection.forced]] = True
        self.incumbent.offer(opened)
        cost = self.incumbent.cost_of(opened)
        self.floor = min(self.floor, max(bound, cost))

    def _push(self, bound: float, node: Node) -> None:
        heapq.heappush(self._heap, (bound, next(self._number), node))
