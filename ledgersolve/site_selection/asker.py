"""Re-solving for questions: changed cases under a shared clock, exact or as a proven interval."""

from collections.abc import Iterable
from dataclasses import dataclass, field, replace

import numpy as np

from ledgersolve.mip import Clock, Limits, Solved, Verdict
from ledgersolve.site_selection.case import CLOSED, OPEN, Case, Flags, Floats
from ledgersolve.site_selection.plan import Plan
from ledgersolve.site_selection.solve import solve
from ledgersolve.workbook.figures import Rounding, money_words

SHARE_OF_LEFT = 0.34
"""A single re-solve takes at most this share of the time that is left."""


@dataclass(frozen=True)
class Found:
    """The outcome of one re-solve: cost at least ``low`` and at most ``high`` (None = no figure)."""

    low: float | None
    high: float | None
    plan: Plan | None
    impossible: bool = False

    @property
    def exact(self) -> bool:
        """Whether low and high are one figure, proven."""
        return self.low is not None and self.low == self.high

    @property
    def known(self) -> bool:
        """Whether anything was found out."""
        return self.impossible or self.low is not None or self.high is not None


@dataclass
class Asker:
    """Asks the engine about changed cases; remembers what it asked, so that answers share re-solves."""

    case: Case
    base: Plan
    base_cost: float
    clock: Clock
    _flips: dict[int, Found] = field(default_factory=dict)

    def ask(self, changed: Case, seconds: float | None = None) -> Found:
        """Re-solve a changed case, for at most a share of the time left."""
        left = self.clock.left()
        if left <= 0.05:
            return Found(None, None, None)
        most = left * SHARE_OF_LEFT if seconds is None else min(seconds, left)
        limits = Limits(max(most, 0.05), 1e-4, self.clock.limits.cancelled)
        return found(solve(changed, limits))

    def flip(self, j: int) -> Found:
        """Do without site j if it is open in the plan, insist on it if it is not."""
        if j not in self._flips:
            self._flips[j] = self.ask(self.flipped(self.case, j))
        return self._flips[j]

    def flipped(self, case: Case, j: int) -> Case:
        """Give the case in which site j is the other way round than in the plan."""
        rule = case.rule.copy()
        rule[j] = CLOSED if self.base.open[j] else OPEN
        return replace(case, rule=rule, variants=())

    def kept(self, case: Case, open_sites: Flags | None = None) -> Found:
        """Cost a changed case with the plan's sites open, and no others."""
        sites = self.base.open if open_sites is None else open_sites
        fixed = replace(
            case, rule=np.where(sites, OPEN, CLOSED).astype(np.int64), fewest_sites=None, most_sites=None,
            group=np.full(case.m, -1, dtype=np.int64), variants=(),
        )
        return self.ask(fixed)

    def may_flip(self, j: int) -> bool:
        """Whether the workbook leaves site j to us."""
        return bool(self.case.rule[j] == 0)


def found(solved: Solved[Plan]) -> Found:
    """Turn the end of a run into an interval; proven best counts as one figure."""
    if solved.verdict is Verdict.NO_PLAN_EXISTS:
        return Found(None, None, None, impossible=True)
    if solved.verdict is Verdict.PROVEN_BEST:
        return Found(solved.cost, solved.cost, solved.plan)
    return Found(solved.bound, solved.cost, solved.plan)


def site_part(case: Case, plan: Plan) -> float:
    """Fixed, opening and closing cost of a plan."""
    opened, today = plan.open, case.today
    return float(
        case.fixed_cost[opened].sum() + case.opening_cost[opened & ~today].sum()
        + case.closing_cost[today & ~opened].sum()
    )


def service_part(case: Case, plan: Plan) -> Floats:
    """Shape (n,): cost of serving each customer under a plan, unmet demand included."""
    volume = plan.share * case.demand[plan.customer]
    rate = case.lane_cost[plan.site, plan.customer]
    lane = plan.share * rate if case.cost_is_whole else volume * rate
    cost = lane + volume * case.handling_cost[plan.site]
    unmet = plan.unmet * case.demand * (case.unmet_cost or 0.0)
    return np.bincount(plan.customer, weights=cost, minlength=case.n) + unmet


def codes(case: Case, numbers: Iterable[int]) -> str:
    """Site codes in words: ``HAM, MUC and 3 more``."""
    listed = [case.sites[j] for j in numbers]
    return ", ".join(listed[:6]) + (f" and {len(listed) - 6} more" if len(listed) > 6 else "") or "none"


def money(case: Case, value: float, rounding: Rounding = "nearest") -> str:
    """An amount in words."""
    return money_words(value, case.currency, rounding)


def interval(case: Case, answer: Found, base: float = 0.0) -> str:
    """An amount above ``base`` in words, saying whether it is exact."""
    if answer.low is not None and answer.high is not None:
        if answer.exact:
            return money(case, answer.high - base)
        low, high = money(case, max(answer.low - base, 0.0), "down"), money(case, answer.high - base, "up")
        return f"between {low} and {high}"
    if answer.high is not None:
        return f"at most {money(case, answer.high - base, 'up')}"
    return f"at least {money(case, max(answer.low - base, 0.0), 'down')}" if answer.low is not None else "not known"
