"""The engine for cases in which volumes do not matter: bound, search and shrink in rounds, then branch.

Each round climbs the Lagrangian from where it stood, starts local searches from what the relaxation likes,
and drops the sites that no better plan can use. What is undecided after that is branched on.
"""

import numpy as np

from ledgersolve.mip import PROVEN_GAP, Clock
from ledgersolve.site_selection.answer import Answer
from ledgersolve.site_selection.bound import price_bound_of
from ledgersolve.site_selection.case import Flags, Floats
from ledgersolve.site_selection.deliveries import cheapest, without_idle
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.uncapacitated.branch import Tree
from ledgersolve.site_selection.uncapacitated.core import Core, NearLanes
from ledgersolve.site_selection.uncapacitated.incumbent import Incumbent
from ledgersolve.site_selection.uncapacitated.search import Search
from ledgersolve.site_selection.uncapacitated.tabu import Tabu
from ledgersolve.site_selection.uncapacitated.volume import Dual, Steps, climb, start_prices
from ledgersolve.site_selection.whole import solve_whole

ROUND_STEPS = 150
WIDEST, NARROWEST = 0.6, 0.2
"""Room for prices in a round, see ``NearLanes.around``."""
WALK_FIRST, WALK_MOVES = 0.2, 2000
"""Part of the time so far that the tabu search gets before branching, and its most moves."""
EXTRA = 0.15
"""Part of the run's time that may go to better checkable prices at its end."""
PATIENCE = 2
"""Rounds without progress before branching starts."""


def solve_uncapacitated(lanes: Lanes, clock: Clock) -> Answer:
    """Solve a case without volumes and share rule; ``lanes`` is not impossible by counting."""
    core = Core.of(lanes)
    if core.m == 0 or core.n == 0:
        return _without_deliveries(lanes, core)
    answer = _Engine(lanes, core, clock).run()
    if answer.plan is None and not answer.impossible and not clock.over():
        # Few lanes, few sites: whether a plan exists at all is a covering problem, the wrapper's own ground.
        return solve_whole(lanes, clock)
    return answer


def _without_deliveries(lanes: Lanes, core: Core) -> Answer:
    """Nobody to serve, or nothing to serve from: the sites are chosen for their own costs."""
    least, picked = core.selection.pick(core.fixed)
    if not np.isfinite(least) or (core.m == 0 and np.isinf(core.unmet).any()):
        return Answer(None, np.inf, impossible=True, notes=("no allowed set of sites serves everybody",))
    plan = cheapest(lanes, core.open_in_case(picked, lanes.m))
    bound = core.offset + least + float(core.unmet.sum())
    return Answer(plan, bound, prices=_spread(lanes, core, core.unmet))


def _spread(lanes: Lanes, core: Core, prices: Floats) -> Floats:
    """Prices over all customers of the case; 0 for those that need no delivery."""
    spread = np.zeros(lanes.n)
    spread[core.customers] = prices
    return spread


class _Engine:
    """One run: the core as it shrinks, the best plan and the best bound so far."""

    def __init__(self, lanes: Lanes, core: Core, clock: Clock) -> None:
        self.lanes, self.root, self.clock = lanes, core, clock
        self.core, self.selection, self.rows = core, core.selection, np.arange(core.m)
        self.search = Search(core)
        self.incumbent = Incumbent(core.m, self._cost_of, _grain(core), clock)
        self.floor = np.inf
        self.room = np.full(core.n, np.inf)
        self.random = np.random.default_rng(1)
        self.checkable: list[Floats] = []
        self.notes = ["no volume rule can bind: priced customers, local search, branching on sites"]

    def _cost_of(self, opened: Flags) -> float:
        return cost_of_sites(self.root, opened)

    def run(self) -> Answer:
        """Bound and search, then branch."""
        self.incumbent.raise_bound(_plain_bound(self.core), "bound")
        self.search.greedy()
        self.search.improve(np.arange(self.core.m), self.clock)
        self._offer()
        self.clock.end_stage("first plan")
        dual = self._rounds()
        self.checkable.append(dual.prices)
        self.clock.end_stage("bound and search")
        if np.isfinite(self.incumbent.cost) and not self.incumbent.enough():
            self._branch(dual)
        return self._answer()

    def _branch(self, dual: Dual) -> None:
        """Walk over the sites left for a better plan, then branch on them."""
        tabu = None
        if Tabu.fits(self.core):
            tabu = Tabu(self.core, self.search.base, self.incumbent.opened[self.rows], self.random)
            found = tabu.run(WALK_FIRST * self.clock.elapsed() + 0.1, WALK_MOVES, self.clock)
            if found is not None:
                self._offer_set(found)
            self.clock.end_stage("tabu search")
        tree = Tree(self.core, self.search, tabu, self.incumbent, self.rows)
        tree.floor = self.floor
        tree.run(dual, self.selection, self.clock)
        self.notes.append(f"branched on sites: {tree.nodes} nodes")
        self.clock.end_stage("branch")

    def _offer(self) -> None:
        found = self.search.found()
        if found.cost < self.incumbent.cost:
            self._offer_set(found.opened)

    def _offer_set(self, chosen: Flags) -> None:
        opened = np.zeros(self.root.m, dtype=bool)
        opened[self.rows[chosen]] = True
        self.incumbent.offer(opened)

    def _target(self) -> float:
        """Cost the steps aim at: the best plan's, or that of the present set with its penalties."""
        return self.incumbent.cut() if np.isfinite(self.incumbent.cost) else self.search.cost()

    def _rounds(self) -> Dual:
        """Climb and search in turn until the gap is closed or neither side moves."""
        prices = start_prices(self.core, self.search.first, self.search.second, self.search.source)
        self.room = WIDEST * np.maximum(prices - self.core.lowest, self.core.spread)
        steps, average, idle = Steps(), None, 0
        while True:
            near = NearLanes.around(self.core, self.selection, prices, self.room)
            bound, cost = self.incumbent.bound, self.incumbent.cost
            dual = climb(
                self.core, near, self.selection, prices, self._target(), ROUND_STEPS, self.clock, steps,
                average,
            )
            self.incumbent.raise_bound(min(dual.bound, self.floor), "bound")
            if self.incumbent.enough() or self.clock.over():
                return dual
            self._search_from(dual)
            if self.incumbent.cost < cost:
                steps.length = max(steps.length, 0.05)
            closing = self.incumbent.cost - self.incumbent.bound
            moved = self.incumbent.cost < cost or self.incumbent.bound - bound > 0.1 * closing
            idle = 0 if moved else idle + 1
            self._narrow(near, prices, dual.prices)
            dual = self._shrunk(dual)
            prices, average = dual.prices, dual.average
            decided = bool((self.selection.forced | self.selection.shut).all())
            if decided or idle >= PATIENCE or self.incumbent.enough():
                return dual

    def _search_from(self, dual: Dual) -> None:
        """Local searches from the sets the relaxation likes, and from random ones drawn by it."""
        gap = max(self._target() - dual.bound, 0.0)
        candidates = np.flatnonzero((dual.average > 1e-3) | (dual.value < gap))
        draws = [self.random.random(self.core.m) < dual.average for _ in range(2)]
        for start in (dual.average > 0.5, dual.average > 0.3, dual.picked, *draws):
            self.search.restart(start)
            self.search.improve(candidates, self.clock)
            self._offer()
            if self.clock.over():
                return

    def _shrunk(self, dual: Dual) -> Dual:
        """Drop the sites that no better plan can open, and force those it must open."""
        cut = self.incumbent.cut()
        rise = self.selection.flips(dual.value, dual.picked)
        sure = np.isfinite(rise) & (dual.bound + rise >= cut)
        if sure.any():
            self.floor = min(self.floor, self.incumbent.closed_at(cut))
            self.selection = self.selection.fix(
                np.flatnonzero(sure & dual.picked), np.flatnonzero(sure & ~dual.picked)
            )
        return self._drop(dual) if np.count_nonzero(self.selection.shut) > 0.1 * self.core.m else dual

    def _narrow(self, near: NearLanes, before: Floats, after: Floats) -> None:
        """Lower the ceilings as prices come to rest, but raise those that hold a price back."""
        scale = np.maximum(after - self.core.lowest, self.core.spread)
        moved = np.abs(after - before) / np.maximum(scale, 1e-300)
        margin = np.clip(4.0 * np.quantile(moved, 0.98), NARROWEST, WIDEST)
        held = near.held(after)
        wider = 4.0 * self.room[held]
        self.room = margin * scale
        self.room[held] = wider

    def _drop(self, dual: Dual) -> Dual:
        """Leave the shut sites out of the core."""
        self.checkable = self.checkable or [dual.prices]
        rows = np.flatnonzero(~self.selection.shut)
        self.core = self.core.keep(rows, self.selection)
        self.selection, self.rows = self.core.selection, self.rows[rows]
        self.search = Search(self.core, self.search.base)
        return Dual(dual.prices, dual.bound, dual.value[rows], dual.picked[rows], dual.average[rows])

    def _answer(self) -> Answer:
        incumbent = self.incumbent
        if not np.isfinite(incumbent.cost):
            return Answer(None, incumbent.bound, notes=tuple(self.notes))
        plan = cheapest(self.lanes, self.root.open_in_case(incumbent.opened, self.lanes.m))
        plan = None if plan is None else without_idle(self.lanes, plan)
        return Answer(plan, incumbent.bound, notes=tuple(self.notes), prices=self._checkable_prices())

    def _checkable_prices(self) -> Floats:
        """Prices whose bound over all sites, the dropped ones too, is the best known.

        The last prices looked at the sites left only; where that shows, they climb a little more with all sites.
        """
        spread = [_spread(self.lanes, self.root, prices) for prices in self.checkable]
        bounds = [price_bound_of(self.lanes, given) for given in spread]
        best = int(np.argmax(bounds))
        target = min(self.incumbent.cut(), self.incumbent.cost * (1.0 - 0.1 * PROVEN_GAP))
        if bounds[best] >= target or self.core.m == self.root.m or self.clock.over():
            return spread[best]
        root, prices = self.root, self.checkable[best]
        end = self.clock.elapsed() + EXTRA * self.clock.elapsed() + 0.05
        steps, bound, before = Steps(), bounds[best], -np.inf
        while bound > before and bound < target and self.clock.elapsed() < end:
            before = bound
            room = WIDEST * np.maximum(prices - root.lowest, root.spread)
            near = NearLanes.around(root, root.selection, prices, room)
            dual = climb(root, near, root.selection, prices, target, 50, self.clock, steps)
            prices, bound = dual.prices, max(bound, dual.bound)
        self.clock.end_stage("checkable prices")
        again = _spread(self.lanes, root, prices)
        return again if price_bound_of(self.lanes, again) > bounds[best] else spread[best]


def _plain_bound(core: Core) -> float:
    """Everybody at the cheapest lane, and no site paid for: exact where a plan costs nothing."""
    served = np.minimum(core.lowest, core.unmet)
    return core.offset + float(np.minimum(core.fixed, 0.0).sum() + served[np.isfinite(served)].sum())


def cost_of_sites(core: Core, opened: Flags) -> float:
    """Cost of a set of sites with everybody served at least cost; inf where somebody cannot be."""
    first = core.unmet.copy()
    for j in np.flatnonzero(opened).tolist():
        np.minimum(first, core.cost[j], out=first)
    return core.offset + float(core.fixed[opened].sum() + first.sum())


def _grain(core: Core) -> float:
    """1 where every cost is in whole money, so that two plans differ by at least that; else 0."""
    figures = [core.fixed, core.unmet[np.isfinite(core.unmet)], np.array([core.offset])]
    if all(bool((part == np.round(part)).all()) for part in figures):
        for row in core.cost:
            known = row[np.isfinite(row)]
            if not bool((known == np.round(known)).all()):
                return 0.0
        return 1.0
    return 0.0
