"""The whole way of a case with volumes: bound, dive, branch, a kernel for the wrapper, the rest closed.

Split deliveries: Lagrangian bound with a knapsack a site, plans by diving, sites fixed by reduced costs, branch
and bound on the sites; where that is slow, the wrapper looks for a better plan in a kernel of sites and lanes.
Single sourcing rides on the same bound; lanes are fixed too, and the wrapper closes what is left.
"""


import numpy as np

from ledgersolve.mip import PROVEN_GAP, Clock
from ledgersolve.site_selection.answer import Answer
from ledgersolve.site_selection.capacitated.best import Best
from ledgersolve.site_selection.capacitated.choice import Pool, State
from ledgersolve.site_selection.capacitated.dive import dive
from ledgersolve.site_selection.capacitated.kernel import fewest_penalties, kernel_sites, on_plan, run_model
from ledgersolve.site_selection.capacitated.knapsack import SiteItems
from ledgersolve.site_selection.capacitated.lagrangian import Climb, Effort, Relaxation
from ledgersolve.site_selection.capacitated.moves import Moves
from ledgersolve.site_selection.capacitated.serving import Server
from ledgersolve.site_selection.capacitated.single_source import SingleSourcing, worthwhile_lanes
from ledgersolve.site_selection.capacitated.tree import Tree
from ledgersolve.site_selection.case import CLOSED, OPEN
from ledgersolve.site_selection.lanes import Lanes

EXACT = 1e-8
"""Relative difference below which two costs are one."""

SMALL = 20_000
"""Up to so many lanes the exact optimum is looked for at once."""

HANDY = 40_000
"""Most lanes that the wrapper is handed to close a case."""

SWIFT = 0.7
"""A slice of branch and bound that leaves at most this part of the gap is followed by another one."""

MANY = 200_000
"""Most lanes that the wrapper is handed to find a first plan."""

STEP_SECONDS = 6e-8
"""What a step of a climb takes for each lane, rounded up, on the machine of DEVELOPERS.md."""

KERNEL_LANES = 8
"""Lanes a customer in the first kernel."""

KERNEL_SITES = 2.2
"""Sites in the first kernel, as a multiple of those open in the relaxation."""


def solve_capacitated(lanes: Lanes, clock: Clock) -> Answer:
    """Find the cheapest plan where volumes matter, and a bound on every plan.

    An anytime method: at the limit it gives its best plan and the bound proven so far.
    """
    engine = _Engine(lanes, clock)
    return engine.run()


class _Engine:
    def __init__(self, lanes: Lanes, clock: Clock) -> None:
        self.lanes, self.clock = lanes, clock
        self.items = SiteItems.of(lanes)
        self.relaxation = Relaxation(lanes, self.items)
        self.best = Best(lanes, Server(lanes, self.items), clock)
        if lanes.single.any():
            self.best.finish = SingleSourcing(lanes, self.items, clock).finish
        self.bound = -np.inf
        self.nodes = 0
        self.notes: list[str] = []
        exact = self.items.site.size <= SMALL and clock.limits.gap <= PROVEN_GAP
        self.margin = EXACT if exact else max(0.5 * clock.limits.gap, EXACT)

    def run(self) -> Answer:
        """Go the whole way."""
        pool = Pool(self.lanes, self.items.reach, self._rules())
        if pool.impossible:
            return Answer(None, np.inf, impossible=True, notes=("no set of sites can hold the demand",))
        if self._near_units() < self.lanes.near_least * (1.0 - 1e-6):
            note = "too little demand has a site near enough for the share within distance"
            return Answer(None, np.inf, impossible=True, notes=(note,))
        if not (pool.state == 0).any():
            return self._settled(pool.state)
        root = self._root(pool.state)
        if self.best.plan is None and not self.clock.over() and self._impossible(root):
            return Answer(None, np.inf, impossible=True, notes=("the wrapper proved that no plan exists",))
        if not self._done():
            self._close(root)
        self._polish()
        return self._answer(root)

    def _near_units(self) -> float:
        """Most units that near lanes could carry if every site were open and had all the room."""
        items = self.items
        if items.near is None:
            return 0.0
        share = np.ones(items.site.size) if items.limit is None else items.limit
        near = np.bincount(items.customer, weights=share * items.near, minlength=self.lanes.n)
        return float((np.minimum(near, 1.0) * self.lanes.demand).sum())

    def _rules(self) -> State:
        """Rules of the case; a site that can never reach its least volume stays closed."""
        state = np.where(self.lanes.rule == OPEN, 1, np.where(self.lanes.rule == CLOSED, -1, 0)).astype(np.int8)
        short = np.minimum(self.items.reach, self.lanes.capacity) < self.lanes.least * (1.0 - 1e-9)
        state[short & (state == 0)] = -1
        return state

    def _settled(self, state: State) -> Answer:
        """All sites are fixed: only deliveries are left."""
        served = self.best.try_set(state == 1, thorough=True)
        self.clock.end_stage("deliveries")
        if self.best.plan is None and served.bound == np.inf:
            return Answer(None, np.inf, impossible=True, notes=("the open sites cannot serve everybody",))
        self._raise(served.bound)
        if self.best.finish is not None and not self._done():
            root = Climb(served.bound, self.relaxation.first_prices(), state, np.where(state == 1, 1.0, 0.0), 0)
            if self._whole_model(root, self.clock.left()) and self.best.plan is None:
                return Answer(None, np.inf, impossible=True, notes=("the wrapper proved that no plan exists",))
        return self._answer(None)

    def _root(self, state: State) -> Climb:
        """Bound and first plans, each helping the other."""
        steps = self._affordable()
        root = self.relaxation.climb(
            self.items, self.relaxation.first_prices(), state, Effort(steps, 1.0, 8), self.clock,
            seen=self.best.see,
        )
        self._raise(root.bound)
        self.clock.end_stage("bound", f"{root.steps} steps")
        for _ in range(3):
            if self.clock.over():
                break
            self._search(root)
            root = self._again(root, steps)
            if self._done():
                break
        if self.best.plan is None:
            self.best.try_waiting(5)
        self.clock.end_stage("search", f"{len(self.best.known)} sets of sites tried")
        return root

    def _again(self, root: Climb, steps: int) -> Climb:
        """Climb on from the root with the best cost as a target; sites are fixed on the way."""
        cutoff = self._cutoff()
        climb = self.relaxation.climb(
            self.items.only(root.state >= 0), root.prices, root.state, Effort(steps, 0.3, 8), self.clock,
            upper=cutoff, seen=self.best.see,
        )
        self._raise(min(climb.bound, cutoff))
        return climb if climb.bound >= root.bound else Climb(
            root.bound, root.prices, climb.state, climb.average, climb.steps
        )

    def _search(self, climb: Climb) -> None:
        """Dive from a climb and move on from there, and from the best plan."""
        moves = Moves(self.lanes, self.items, self.best, self.clock, climb.state)
        seconds = max(1.0, 0.05 * self.clock.left())
        found = dive(self.relaxation, self.best, climb, self.clock)
        if found is not None:
            moves.improve(found, seconds)
        if self.best.plan is not None and not (found is not None and (found == self.best.plan.open).all()):
            moves.improve(self.best.plan.open, seconds)

    def _affordable(self) -> int:
        """Steps of a climb that a fifth of the time allows; by size, so that equal runs take equal steps."""
        a_step = 1e-4 + STEP_SECONDS * self.items.site.size
        return int(np.clip(0.2 * self.clock.limits.seconds / a_step, 20, 200))

    def _close(self, root: Climb) -> None:
        """Branch on the sites; between, the wrapper looks for a better plan in growing kernels."""
        tree = Tree(self.relaxation, self.best, self.clock, self.margin, root)
        slice_seconds, growth = max(1.0, self.clock.elapsed()), 1.0
        while not self.clock.over():
            cost, gap = self.best.cost, self.best.cost - tree.bound()
            tree.run(slice_seconds)
            self.nodes = tree.nodes
            self._raise(tree.bound())
            self.clock.end_stage("branch and bound", f"{self.nodes} nodes")
            if tree.closed() or self._done() or self.clock.over():
                return
            slice_seconds *= 2.0
            swift = self.best.cost - tree.bound() <= SWIFT * gap and np.isfinite(gap)
            if not swift and self._wrapper(root, growth):
                return
            growth *= 1.0 if swift else 1.5
            self._search(tree.lowest() or root)
            if self.best.cost < cost:
                root = self._again(root, 200)
                tree.adopt(root.state)

    def _wrapper(self, root: Climb, growth: float) -> bool:
        """Let the wrapper close the case where it is small enough, or search a kernel; True if closed."""
        seconds = min(max(5.0, 0.3 * self.clock.left()), 60.0 * growth)
        if self.best.finish is not None and self._whole_model(root, seconds):
            return True
        self._kernel(root, growth, seconds)
        return self._done()

    def _whole_model(self, root: Climb, seconds: float) -> bool:
        """Hand over every site and lane that a better plan may use; True if that closed the case."""
        items = self.items.only(root.state >= 0)
        values = items.evaluate(root.prices)
        pool = Pool(self.lanes, self.items.reach, root.state)
        choice = pool.choose(values.value)
        bound = self.relaxation.bound_at(root.prices, values, choice)
        items = items.at(
            worthwhile_lanes(items, root.prices, bound, choice.flip, choice.picked, self._cutoff())
        )
        if items.site.size > HANDY:
            return False
        outcome = run_model(
            self.lanes, items, root.state >= 0, root.state == 1, self.clock, seconds, self.margin, self.best.plan
        )
        self.best.take(outcome.plan)
        self._raise(self._cutoff() if outcome.infeasible else min(outcome.bound, self.best.cost))
        self.clock.end_stage("rest of the model", f"{items.site.size} lanes")
        return outcome.infeasible or self._done()

    def _kernel(self, root: Climb, growth: float, seconds: float) -> None:
        """Search the most promising sites and lanes."""
        items = self.items.only(root.state >= 0)
        values = items.evaluate(root.prices)
        size = int(np.ceil(KERNEL_SITES * growth * max(1.0, root.average.sum())))
        also = None if self.best.plan is None else self.best.plan.open
        kept = kernel_sites(root, values.value, size, also)
        penalty = items.penalties(root.prices, values)
        at = np.flatnonzero(kept[items.site])
        items, penalty = items.at(at), penalty[at]
        used = on_plan(items, self.best.plan)
        used[fewest_penalties(items, penalty, int(KERNEL_LANES * growth))] = True
        items = items.at(np.flatnonzero(used))
        outcome = run_model(
            self.lanes, items, kept, root.state == 1, self.clock, seconds, self.margin, self.best.plan
        )
        if outcome.plan is not None:
            self.best.take(outcome.plan)
            self.best.try_set(outcome.plan.open)
        self.clock.end_stage("kernel", f"{int(kept.sum())} sites, {items.site.size} lanes")

    def _impossible(self, root: Climb) -> bool:
        """Without a plan so far, ask the wrapper for one; True if it shows over all lanes that there is none."""
        items = self.items.only(root.state >= 0)
        whole = items.site.size <= MANY
        if not whole:
            penalty = items.penalties(root.prices, items.evaluate(root.prices))
            items = items.at(fewest_penalties(items, penalty, max(3, MANY // self.lanes.n)))
        outcome = run_model(
            self.lanes, items, root.state >= 0, root.state == 1, self.clock, 0.5 * self.clock.left(), 0.05, None
        )
        self.best.take(outcome.plan)
        self.clock.end_stage("first plan", f"by the wrapper over {items.site.size} lanes")
        return whole and outcome.infeasible

    def _polish(self) -> None:
        """Go on to the exact optimum for a while where no more than a proven plan was asked for."""
        if self.margin <= EXACT or self.clock.limits.gap > PROVEN_GAP or not self._done():
            return
        if self.best.finish is not None or self.best.cost - self.bound <= EXACT * abs(self.best.cost):
            return
        seconds = 0.5 * self.clock.elapsed() + 1.0
        self.margin = EXACT
        pool = Pool(self.lanes, self.items.reach, self._rules())
        root = self.relaxation.climb(
            self.items, self.relaxation.first_prices(), pool.state, Effort(200, 1.0, 8), self.clock,
            upper=self._cutoff(),
        )
        tree = Tree(self.relaxation, self.best, self.clock, self.margin, root)
        tree.run(seconds)
        self.nodes += tree.nodes
        self._raise(tree.bound())
        self.clock.end_stage("polish", f"{tree.nodes} nodes")

    def _cutoff(self) -> float:
        return self.best.below(self.margin)

    def _raise(self, bound: float) -> None:
        if bound > self.bound:
            self.bound = bound
            self.clock.note("bound", bound=min(bound, self.best.cost) if np.isfinite(bound) else None)

    def _done(self) -> bool:
        return self.bound >= self._cutoff()

    def _answer(self, root: Climb | None) -> Answer:
        if self.best.plan is None and self.bound == np.inf:
            return Answer(None, np.inf, impossible=True, notes=("no set of sites can serve everybody",))
        bound = min(self.bound, self.best.cost) if self.best.plan is not None else self.bound
        note = f"volumes: Lagrangian bound with a knapsack a site, {self.nodes} nodes of branch and bound"
        prices = None if root is None else root.prices.customer
        return Answer(self.best.plan, bound, notes=(note, *self.notes), prices=prices)
