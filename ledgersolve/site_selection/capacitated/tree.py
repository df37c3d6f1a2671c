"""Branch and bound on the sites with the Lagrangian bound (Geoffrion & McBride 1978; Goertz & Klose 2012).

The node with the lowest bound is split on the site whose average state over the last climb is least decided.
Its two parts climb on from its prices. A node with all sites fixed is settled by its best deliveries.
"""

import heapq
import itertools
import time
from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.mip import Clock
from ledgersolve.site_selection.capacitated.best import Best
from ledgersolve.site_selection.capacitated.choice import State
from ledgersolve.site_selection.capacitated.knapsack import SiteItems
from ledgersolve.site_selection.capacitated.lagrangian import Climb, Effort, Relaxation

AT_NODE = Effort(steps=45, length=0.4, patience=6)

TRYING = 0.3
"""Largest part of the time that goes into the deliveries of sets met on the way."""


@dataclass(frozen=True)
class Node:
    """A part of the site choices not yet ruled out."""

    bound: float
    climb: Climb


class Tree:
    """The open nodes, and the bound over all of them.

    Parameters
    ----------
    margin
        Relative amount by which a plan must beat the best one to be looked for; a part of the choices
        is ruled out once its bound shows that it holds no such plan.
    """

    def __init__(self, relaxation: Relaxation, best: Best, clock: Clock, margin: float, root: Climb) -> None:
        self.relaxation, self.best, self.clock, self.margin = relaxation, best, clock, margin
        self.items: SiteItems = relaxation.items.only(root.state >= 0)
        self.heap: list[tuple[float, int, Node]] = []
        self.counter = itertools.count()
        self.nodes = 0
        self.unsettled = np.inf
        self._add(Node(root.bound, root))

    def cutoff(self) -> float:
        """Cost that a plan must beat."""
        return self.best.below(self.margin)

    def bound(self) -> float:
        """Proven lower bound on the cost of every plan, as far as it is below the cutoff."""
        lowest = self.heap[0][0] if self.heap else np.inf
        return min(lowest, self.unsettled, self.cutoff())

    def lowest(self) -> Climb | None:
        """The climb of the node with the lowest bound."""
        return self.heap[0][2].climb if self.heap else None

    def adopt(self, state: State) -> None:
        """Fix sites in all nodes that are fixed for the whole case; nodes that contradict it hold nothing better."""
        kept, self.heap = self.heap, []
        for _, _, node in kept:
            own = node.climb.state
            if not ((own * state) == -1).any():
                joined = np.where(own == 0, state, own).astype(np.int8)
                self._add(Node(node.bound, replace(node.climb, state=joined)))

    def closed(self) -> bool:
        """Whether no plan below the cutoff is left."""
        return not self.heap and self.unsettled >= self.cutoff()

    def run(self, seconds: float) -> None:
        """Split nodes until none is left, or time is over."""
        began, spent = time.monotonic(), self.best.spent
        while self.heap and not self.clock.over():
            elapsed = time.monotonic() - began
            if elapsed > seconds:
                return
            self._split(heapq.heappop(self.heap)[2])
            if self.best.spent - spent <= TRYING * elapsed + 0.05:
                self.best.try_waiting(1)
            self.clock.note("branch and bound", bound=self.bound())

    def _split(self, node: Node) -> None:
        if node.bound >= self.cutoff():
            return
        state = node.climb.state
        free = np.flatnonzero(state == 0)
        if free.size == 0:
            self._settle(node)
            return
        site = int(free[np.argmin(np.abs(node.climb.average[free] - 0.5))])
        parts = []
        for value in (1, -1):
            fixed = state.copy()
            fixed[site] = value
            parts.append(self._climb(node, fixed))
        if self.clock.over():
            self._add(node)  # a climb may have been cut short; the parent's bound stands for both parts
            return
        for part in parts:
            self._add(part)

    def _climb(self, node: Node, fixed: State) -> Node:
        self.nodes += 1
        climb = self.relaxation.climb(
            self.items.only(fixed >= 0), node.climb.prices, fixed, AT_NODE, self.clock, upper=self.cutoff(),
            seen=self.best.see,
        )
        return Node(max(climb.bound, node.bound), climb)

    def _add(self, node: Node) -> None:
        if node.bound < self.cutoff():
            heapq.heappush(self.heap, (node.bound, next(self.counter), node))

    def _settle(self, node: Node) -> None:
        served = self.best.try_set(node.climb.state == 1, thorough=True)
        if served.bound < self.cutoff():
            self.unsettled = min(self.unsettled, max(served.bound, node.bound))
