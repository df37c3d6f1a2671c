"""From a lot-sizing case to a plan with an honest bound: which method for which items.

Items without a tie to others go to the programmes of one item, exact where these carry the item's
features; what they do not carry goes to the whole model, item by item. Items tied by a resource or a family
are a case of their own each group: a small one goes to the whole model, others to the decomposition, and then,
as far as their size allows, to the whole model with the plan found as a start.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, Floats
from ledgersolve.lot_sizing.decompose import solve_decomposed
from ledgersolve.lot_sizing.groups import Group, groups, joined, part
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.programmes import ItemProgrammes
from ledgersolve.lot_sizing.tight import tight_limits
from ledgersolve.lot_sizing.whole import solve_whole
from ledgersolve.mip import Clock, Limits, Progress, Solved, Stage, Verdict, judge

WHOLE_AT_ONCE = 60
"""Setups up to which the whole model needs no help."""
SMALL, FIRST_SHARE_SMALL = 250, 0.2
"""Setups up to which the decomposition gets a short share of the time, and that share."""
WHOLE_AFTER, FIRST_SHARE = 2000, 0.5
"""Setups up to which the whole model gets what time the decomposition leaves, and the latter's share."""


@dataclass
class _Part:
    """A group on its way: the best plan so far, its cost, and the bound."""

    group: Group
    bound: float
    plan: Plan | None = None
    cost: float = math.inf


def solve(case: Case, limits: Limits) -> Solved[Plan]:
    """Solve a case within the limits; the verdict follows from the audited cost and the proven bound."""
    clock = limits.start()
    run = _Run(case, clock)
    if not run.alone():
        return run.impossible()
    for number in range(len(run.parts)):
        if not run.tied(number):
            return run.impossible()
    return run.finish()


class _Run:
    """One run over the groups of a case."""

    def __init__(self, case: Case, clock: Clock) -> None:
        self.case, self.clock = case, clock
        self.notes: list[str] = []
        self.prices: Floats = np.zeros(case.capacity.shape)
        self.parts: list[_Part] = []
        for group in groups(case):
            if group.shared:
                self.parts.append(_Part(group, -math.inf))
            else:
                self.lone = group

    lone: Group | None = None

    def alone(self) -> bool:
        """Items without a tie: the exact programmes at once; the items they do not carry become parts."""
        if self.lone is None:
            return True
        group, case = self.lone, self.lone.case
        programmes = ItemProgrammes(case)
        found = programmes.best()
        if not np.isfinite(found.cost).all():
            return False
        exact = np.flatnonzero(programmes.exact)
        made = found.made[exact]
        if exact.size:
            sub = part(case, exact)
            own = Group(sub.case, group.items[exact], sub.resources, shared=False)
            self._add(own, plan_from_made(sub.case, made), found.cost[exact])
            self.notes.append(f"{exact.size} items without shared capacity: exact dynamic programme.")
        self.clock.end_stage("dynamic programmes", f"{exact.size} of {case.n} items")
        for item in np.flatnonzero(~programmes.exact):
            sub = part(case, np.array([item]))
            own = Group(sub.case, group.items[[item]], sub.resources)
            self.parts.append(_Part(own, float(found.cost[item])))
        return True

    def _add(self, group: Group, plan: Plan, cost: Floats) -> None:
        checked = audit(group.case, plan)
        total = checked.total if checked.ok else math.inf
        bound = min(float(cost.sum()), total)
        self.parts.append(_Part(group, bound, plan if checked.ok else None, total))

    def tied(self, number: int) -> bool:
        """One group that is still without a plan; False when it has none."""
        now = self.parts[number]
        if now.plan is not None:
            return True
        found = _tied(now.group.case, self._share(number))
        if found.prices is not None:
            self.prices[now.group.resources] = found.prices
        self.clock.stages.extend(_named(found.stages, now.group))
        if found.verdict is Verdict.NO_PLAN_EXISTS:
            return False
        now.bound = max(now.bound, -math.inf if found.bound is None else found.bound)
        if found.plan is not None and found.cost is not None:
            now.plan, now.cost = found.plan, found.cost
            now.bound = min(now.bound, now.cost)
        return True

    def _share(self, number: int) -> Limits:
        """Time in proportion to size; progress of a part told as progress of the whole."""
        sizes = [p.group.case.n for p in self.parts[number:] if p.plan is None]
        seconds = max(self.clock.left() * sizes[0] / sum(sizes), 1e-3)
        return replace(self.clock.limits, seconds=seconds, progress=self._teller(number))

    def _teller(self, number: int) -> Callable[[Progress], None]:
        others = [p for k, p in enumerate(self.parts) if k != number]
        cost, bound = sum(p.cost for p in others), sum(p.bound for p in others)

        def tell(step: Progress) -> None:
            best = math.inf if step.best is None else step.best + cost
            least = -math.inf if step.bound is None else step.bound + bound
            self.clock.note(step.stage, best, least)

        return tell

    def impossible(self) -> Solved[Plan]:
        """The proven end without a plan."""
        return Solved(Verdict.NO_PLAN_EXISTS, None, None, None, tuple(self.clock.stages), tuple(self.notes))

    def finish(self) -> Solved[Plan]:
        """Put the parts together; cost by the audit of the whole."""
        stages, notes = tuple(self.clock.stages), tuple(self.notes)
        bound = sum(p.bound for p in self.parts)
        known = bound if math.isfinite(bound) else None
        plans = [p.plan for p in self.parts if p.plan is not None]
        if len(plans) < len(self.parts):
            return Solved(Verdict.NONE_FOUND, None, None, known, stages, notes, self.prices)
        plan = joined(self.case, [p.group for p in self.parts], plans)
        cost = audit(self.case, plan).total
        known = None if known is None else min(known, cost)
        self.clock.note("done", cost, known)
        verdict = judge(cost, bound, self.clock.limits.gap)
        return Solved(verdict, plan, cost, known, stages, notes, self.prices)


def _tied(case: Case, limits: Limits) -> Solved[Plan]:
    """One group of tied items: the decomposition, the whole model, or one after the other, by size."""
    cells = int(np.count_nonzero(tight_limits(case).most_made > 0))
    if cells <= WHOLE_AT_ONCE:
        return solve_whole(case, limits)
    clock = limits.start()
    share = 1.0 if cells > WHOLE_AFTER else FIRST_SHARE_SMALL if cells <= SMALL else FIRST_SHARE
    first = solve_decomposed(case, replace(limits, seconds=limits.seconds * share))
    enough = first.gap is not None and first.gap <= limits.gap
    if first.verdict is Verdict.NO_PLAN_EXISTS or enough or share == 1.0 or clock.left() < 0.5:
        return first
    second = solve_whole(case, replace(limits, seconds=clock.left()), first.plan, first.bound)
    return replace(second, stages=first.stages + second.stages, notes=first.notes, prices=first.prices)


def _named(stages: tuple[Stage, ...], group: Group) -> list[Stage]:
    """Stages of a part, with its items in the note."""
    items = group.case.items
    what = items[0] if len(items) == 1 else f"{len(items)} items from {items[0]}"
    return [replace(stage, note=f"{what}; {stage.note}") for stage in stages]
