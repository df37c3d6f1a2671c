"""From a lot-sizing case to a plan with an honest bound: which method for which items.

Items without a tie to others go to the programmes of one item, exact where these carry the item's
features; what they do not carry goes to the whole model, item by item. Items tied by a resource or a family
are a case of their own each group: a small one goes to the whole model, others to the decomposition, and then,
as far as their size allows, to the whole model with the plan found as a start. Before any group is solved at
length, all of them get a first plan (``responses``), so that a run that is stopped early has one.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.groups import Group, groups, joined, part
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.programmes import ItemProgrammes
from ledgersolve.lot_sizing.responses import first_plan
from ledgersolve.lot_sizing.tied import solve_tied
from ledgersolve.mip import Clock, Limits, Progress, Solved, Stage, Verdict, judge

FIRST_SHARE = 0.5
"""Most of the time that first plans may take; they end by themselves, most often within a second."""


@dataclass
class _Part:
    """A group on its way: the best plan so far, its cost, the bound, and whether nothing is left to do."""

    group: Group
    bound: float
    plan: Plan | None = None
    cost: float = math.inf
    settled: bool = False

    def take(self, plan: Plan | None) -> None:
        """Take a plan that is sound and better."""
        if plan is not None:
            checked = audit(self.group.case, plan)
            if checked.ok and checked.total < self.cost:
                self.plan, self.cost = plan, checked.total


def solve(case: Case, limits: Limits, start: Plan | None = None) -> Solved[Plan]:
    """Solve a case within the limits; the verdict follows from the audited cost and the proven bound.

    ``start`` is a plan to begin with; one that breaks a rule of the case is left aside.
    """
    clock = limits.start()
    run = _Run(case, clock, start)
    if not run.alone():
        return run.impossible()
    run.first_plans()
    for number in range(len(run.parts)):
        if not run.tied(number):
            return run.impossible()
    return run.finish()


class _Run:
    """One run over the groups of a case; small groups come first and leave their spare time to the large."""

    def __init__(self, case: Case, clock: Clock, start: Plan | None = None) -> None:
        self.case, self.clock, self.start = case, clock, start
        self.notes: list[str] = []
        self.prices: Floats = np.zeros(case.capacity.shape)
        found = groups(case)
        self.lone = next((group for group in found if not group.shared), None)
        tied = sorted((group for group in found if group.shared), key=lambda group: group.case.n)
        self.parts = [self._begun(group) for group in tied]

    def _begun(self, group: Group) -> _Part:
        """Give a tied group with its first bound: each item alone, with all the time in the world."""
        programmes = ItemProgrammes(group.case)
        self.notes.append(f"{_words(group)} tied by {_ties(group.case)}.")
        return _Part(group, float(programmes.best().cost.sum()))

    def alone(self) -> bool:
        """Items without a tie: the exact programmes at once; the items they do not carry become parts.

        Such an item is settled too where its relaxed schedule keeps every rule at the relaxed cost. False
        when an item has no plan.
        """
        if any(math.isinf(p.bound) for p in self.parts):
            return False
        if self.lone is None:
            return True
        case = self.lone.case
        programmes = ItemProgrammes(case)
        found = programmes.best()
        if not np.isfinite(found.cost).all():
            return False
        settled = programmes.exact.copy()
        for item in np.flatnonzero(~settled):
            alone = part(case, np.array([item])).case
            checked = audit(alone, plan_from_made(alone, found.made[[item]]))
            settled[item] = checked.ok and checked.total <= found.cost[item] * (1 + 1e-9) + 1e-9
        if settled.any():
            self._settle(np.flatnonzero(settled), found.made, found.cost)
        for item in np.flatnonzero(~settled):
            self.parts.append(_Part(self._taken(np.array([item])), float(found.cost[item])))
        self._tell(programmes, settled)
        return True

    def _taken(self, items: Ints) -> Group:
        """Give a group of lone items, numbered as in the whole case."""
        assert self.lone is not None
        own = part(self.lone.case, items)
        return replace(own, items=self.lone.items[items])

    def _settle(self, items: Ints, made: Floats, cost: Floats) -> None:
        group = self._taken(items)
        plan = plan_from_made(group.case, made[items])
        checked = audit(group.case, plan)
        if not checked.ok:
            raise ArithmeticError(f"the programmes' plan breaks {[check.rule for check in checked.broken()]}")
        bound = min(float(cost[items].sum()), checked.total)
        self.parts.append(_Part(group, bound, plan, checked.total, settled=True))

    def _tell(self, programmes: ItemProgrammes, settled: Flags) -> None:
        """Note which method treated the lone items."""
        count, rest = int(settled.sum()), int((~settled).sum())
        self.notes.append(f"{count} items without shared capacity: exact dynamic programme.")
        if rest:
            features = ", ".join(programmes.relaxed())
            self.notes.append(f"{rest} items without shared capacity: whole model each ({features}).")
        self.clock.end_stage("dynamic programmes", f"{count} of {settled.size} items")

    def first_plans(self) -> None:
        """Give every group a plan soon: the one to begin with where it is sound, and one by responses."""
        open_parts = [p for p in self.parts if not p.settled]
        until = self.clock.elapsed() + FIRST_SHARE * self.clock.left()
        for number, now in enumerate(open_parts):
            case = now.group.case
            if self.start is not None:
                now.take(plan_from_made(case, self.start.made[now.group.items]))
            if case.n > 1 and not self.clock.over():
                seconds = (until - self.clock.elapsed()) / (len(open_parts) - number)
                now.take(first_plan(case, self.clock, max(seconds, 1e-3)))
        if open_parts:
            found = sum(p.plan is not None for p in open_parts)
            self.clock.note("first plans", sum(p.cost for p in self.parts), sum(p.bound for p in self.parts))
            self.clock.end_stage("first plans", f"{found} of {len(open_parts)} groups")

    def tied(self, number: int) -> bool:
        """One group that is not settled yet; False when it has no plan."""
        now = self.parts[number]
        if now.settled or (now.plan is not None and self.clock.over()):
            return True
        found = solve_tied(now.group.case, self._share(number), now.plan)
        now.settled = True
        if found.prices is not None:
            self.prices[now.group.resources] = found.prices
        self.clock.stages.extend(_named(found.stages, now.group))
        self.notes.extend(note for note in found.notes if note not in self.notes)
        if found.verdict is Verdict.NO_PLAN_EXISTS:
            return False
        now.bound = max(now.bound, -math.inf if found.bound is None else found.bound)
        now.take(found.plan)
        now.bound = min(now.bound, now.cost)
        return True

    def _share(self, number: int) -> Limits:
        """Time in proportion to size; progress of a part told as progress of the whole."""
        sizes = [p.group.case.n for p in self.parts[number:] if not p.settled]
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


def _words(group: Group) -> str:
    """Name a group by its items."""
    items = group.case.items
    return items[0] if len(items) == 1 else f"{len(items)} items from {items[0]}"


def _ties(case: Case) -> str:
    """Name what ties the items of a group."""
    names = (*(f"resource {name}" for name in case.resources), *(f"family {name}" for name in case.families))
    return ", ".join(names[:4]) + (f" and {len(names) - 4} more" if len(names) > 4 else "")


def _named(stages: tuple[Stage, ...], group: Group) -> list[Stage]:
    """Stages of a part, with its items in the note."""
    what = _words(group)
    return [replace(stage, note=f"{what}; {stage.note}" if stage.note else what) for stage in stages]
