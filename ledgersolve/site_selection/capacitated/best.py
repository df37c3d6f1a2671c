"""The best plan so far, and which sets of sites are worth their deliveries being worked out."""

import time
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from ledgersolve.mip import Clock
from ledgersolve.site_selection.capacitated.choice import Choice
from ledgersolve.site_selection.capacitated.knapsack import Prices
from ledgersolve.site_selection.capacitated.serving import Served, Server
from ledgersolve.site_selection.case import Flags
from ledgersolve.site_selection.deliveries import plan_cost, without_idle
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.plan import Plan

Finisher = Callable[[Served, Flags, float, bool], Served]
"""Turns split deliveries into whole ones that cost less than a figure, if there are any; thoroughly or not."""

LEAST_GAIN = 1e-9
"""Relative difference in cost below which two plans count as equal."""


SETTLED = 1e-6
"""Relative distance below the best cost within which a set's deliveries count as settled."""


@dataclass
class Best:
    """Best plan so far with its cost, and what is known of each set of sites tried.

    ``known`` maps a set (bytes of its flags) to what its deliveries cost; ``waiting`` maps sets met on the way
    and not tried yet to a lower bound on the cost of their plans; ``tried`` are the sets whose split deliveries
    have been worked out. ``spent`` is the time that trying took, in seconds.
    """

    lanes: Lanes
    server: Server
    clock: Clock
    finish: Finisher | None = None
    plan: Plan | None = None
    cost: float = np.inf
    known: dict[bytes, Served] = field(default_factory=dict)
    waiting: dict[bytes, float] = field(default_factory=dict)
    tried: set[bytes] = field(default_factory=set)
    spent: float = 0.0

    def below(self, margin: float) -> float:
        """Cost that is lower than the best one by this part; inf without a plan."""
        return self.cost - margin * abs(self.cost) if self.plan is not None else np.inf

    def see(self, choice: Choice, bound: float, _: Prices) -> None:
        """Note the set of a step; a later step may show that no plan with it can be better."""
        key = choice.roomy.tobytes()
        if key not in self.known:
            floor = bound + max(0.0, choice.worth - choice.value)
            self.waiting[key] = max(floor, self.waiting.get(key, -np.inf))

    def try_waiting(self, most: int) -> None:
        """Work out the most promising sets met so far, at most so many; forget the hopeless."""
        for _ in range(most):
            self.waiting = {key: floor for key, floor in self.waiting.items() if floor < self.cost}
            if not self.waiting or self.clock.over():
                return
            key = min(self.waiting, key=self.waiting.__getitem__)
            self.try_set(np.frombuffer(key, dtype=bool).copy())

    def try_set(self, opened: Flags, *, thorough: bool = False) -> Served:
        """Work out the best deliveries of a set of sites; the plan is kept if it is the best.

        A set is worked out once, and again if single sourcing left it open and it has to be settled.
        """
        key = opened.tobytes()
        self.waiting.pop(key, None)
        again = thorough and self.finish is not None and key in self.known and self.open_still(key)
        if key not in self.known or again:
            began = time.monotonic()
            self.offer(opened, self.server.serve(opened, self.clock), thorough=thorough)
            self.spent += time.monotonic() - began
        return self.known[key]

    def open_still(self, key: bytes) -> bool:
        """Whether a set tried may still have a plan better than the best."""
        return self.known[key].bound < self.cost - SETTLED * abs(self.cost)

    def offer(self, opened: Flags, served: Served, *, thorough: bool = False) -> None:
        """Take in the split deliveries of a set of sites, made whole where single sourcing asks for it."""
        if self.finish is not None and served.plan is not None:
            served = self.finish(served, opened, self.cost, thorough)
        self.take(served.plan)
        self.known[opened.tobytes()] = replace(served, plan=None, prices=None)
        self.tried.add(opened.tobytes())

    def take(self, plan: Plan | None) -> bool:
        """Keep a plan if it is the best so far."""
        if plan is None:
            return False
        plan = without_idle(self.lanes, plan)
        cost = plan_cost(self.lanes, plan)
        if cost >= self.cost - LEAST_GAIN * abs(cost):
            return False
        self.plan, self.cost = plan, cost
        self.clock.note("search", best=cost)
        return True
