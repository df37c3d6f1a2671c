"""Re-solving for questions: changed cases under a shared clock, exact or as a proven interval."""

from collections.abc import Hashable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np

from ledgersolve.mip import Clock, Limits, Solved, Verdict
from ledgersolve.site_selection.bound import flip_bounds
from ledgersolve.site_selection.case import CLOSED, OPEN, Case, Flags, Floats
from ledgersolve.site_selection.plan import Plan
from ledgersolve.site_selection.solve import solve
from ledgersolve.workbook.figures import Rounding, money_words

LEAST_SHARE = 0.2
"""A re-solve may take its part of the time of its question, and at least this share of what is left of it."""
LEAST_SECONDS = 0.05
"""With less time left than this, nothing is asked any more."""
ASK_AGAIN = 2.0
"""What stayed open is asked again where there is so many times the time that it had."""
GAP = 1e-8
"""Accepted gap of re-solves: differences of costs are asked for, so that costs must be known well."""
LONGEST_NAME = 40
"""Letters of the longest name that a sentence bears."""
EXACT = 1e-7
"""Relative width up to which bound and cost count as one figure."""


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
    def settled(self) -> bool:
        """Whether asking again would not tell more."""
        return self.within(0.0)

    def within(self, gap: float) -> bool:
        """Whether low and high are so close, as a share of the cost, or no plan exists."""
        if self.impossible or self.exact:
            return True
        return self.low is not None and self.high is not None and self.high - self.low <= gap * abs(self.high)

    def joined(self, other: "Found") -> "Found":
        """Give what two outcomes of the same case tell together."""
        if self.impossible or other.impossible:
            return Found(None, None, None, impossible=True)
        lows = [found.low for found in (self, other) if found.low is not None]
        best = min((self, other), key=lambda found: np.inf if found.high is None else found.high)
        return interval(max(lows, default=None), best.high, best.plan)


def interval(low: float | None, high: float | None, plan: Plan | None) -> Found:
    """Cost between two figures; one figure where they lie so close that no more is told of them."""
    if low is not None and high is not None and high - low <= EXACT * abs(high):
        return Found(high, high, plan)
    return Found(low, high, plan)


NOTHING = Found(None, None, None)


@dataclass
class Asker:
    """Asks the engine about changed cases; remembers what it asked, so that answers share re-solves.

    ``base_bound`` is what no plan of the workbook's own case undercuts, ``prices`` (one a customer) are what
    that rests on, where they are known. ``asks`` counts the re-solves that the question at hand still has to
    make, so that each gets its part of the time; ``whole`` are the seconds in which the plan itself was proven
    best (0 = it was not): with so many left, a re-solve has them, because one exact answer says more than many
    wide ranges. ``plans`` are those found on the way that keep the workbook's own rules, with their cost: each
    is a plan that some other question looks for.
    """

    case: Case
    base: Plan
    base_cost: float
    clock: Clock
    base_bound: float | None = None
    prices: Floats | None = None
    whole: float = 0.0
    asks: int = 1
    plans: list[tuple[float, Plan]] = field(default_factory=list)
    _known: dict[Hashable, tuple[Found, float]] = field(default_factory=dict)

    @contextmanager
    def part(self, share: float, asks: int = 1) -> Iterator[None]:
        """Keep to a share of the time left, for about so many re-solves; what is not used stays."""
        whole, clock = self.clock, self.clock.limits
        self.clock = replace(clock, seconds=max(share * whole.left(), 1e-3)).start()
        self.asks = asks
        try:
            yield
        finally:
            self.clock = whole

    def ask(self, changed: Case, key: Hashable = None, gap: float = GAP) -> Found:
        """Re-solve a changed case within its part of the time, to a gap that is enough.

        A ``key`` stands for the change and is remembered.
        """
        before, had = self._known.get(key, (NOTHING, 0.0))
        left = self.clock.left()
        seconds = left * max(1.0 / max(self.asks, 1), LEAST_SHARE)
        if self.whole <= left:
            seconds = max(seconds, self.whole)
        self.asks -= 1
        if before.within(gap) or left <= LEAST_SECONDS or seconds < ASK_AGAIN * had:
            return before
        seconds = max(seconds, LEAST_SECONDS)
        told = found(solve(changed, Limits(seconds, gap, self.clock.limits.cancelled))).joined(before)
        if key is not None:
            self._known[key] = (told, seconds)
        return told

    def ask_within(self, narrowed: Case, key: Hashable = None) -> Found:
        """Ask about the workbook's own case with a rule added: what it finds keeps the workbook's rules."""
        told = self.ask(narrowed, key)
        if told.plan is not None and told.high is not None:
            self.plans.append((told.high, told.plan))
        return told

    def flip(self, j: int) -> Found:
        """Do without site j if it is open in the plan, insist on it if it is not."""
        return self.ask_within(self.flipped(self.case, j), ("flip", j))

    def known_flip(self, j: int) -> Found:
        """Give what is known about flipping a site: by asking, by all plans found so far, and by prices."""
        told, _ = self._known.get(("flip", j), (NOTHING, 0.0))
        low = float(self.flip_lows[j])
        if np.isfinite(low) and not told.settled:
            told = told.joined(Found(low, None, None))
        return self.with_plans(told, [pair for pair in self.plans if pair[1].open[j] != self.base.open[j]])

    @cached_property
    def flip_lows(self) -> Floats:
        """Shape (m,): what the prices of the plan's bound say of every flip; -inf where there are none."""
        if self.prices is None or self.prices.shape != (self.case.n,) or not np.isfinite(self.prices).all():
            return np.full(self.case.m, -np.inf)
        return flip_bounds(self.case, self.prices, self.base.open)

    def with_plans(self, told: Found, plans: Iterable[tuple[float, Plan]]) -> Found:
        """Add plans found on the way to what re-solving told."""
        for cost, plan in plans:
            if not told.settled:
                told = told.joined(Found(None, cost, plan))
        return told

    def flipped(self, case: Case, j: int) -> Case:
        """Give the case in which site j is the other way round than in the plan."""
        rule = case.rule.copy()
        rule[j] = CLOSED if self.base.open[j] else OPEN
        return replace(case, rule=rule, variants=())

    def kept(self, case: Case, key: Hashable = None) -> Found:
        """Cost a changed case with the plan's sites open, and no others."""
        return self.ask(only(case, self.base.open), None if key is None else ("kept", key))

    def rivals(self, most: int) -> list[Flags]:
        """Other sets of sites that keep the workbook's own rules, those of the cheapest plans found so far."""
        sets: dict[bytes, Flags] = {}
        for _, plan in sorted(self.plans, key=lambda pair: pair[0]):
            if bool((plan.open != self.base.open).any()):
                sets.setdefault(plan.open.tobytes(), plan.open)
        return list(sets.values())[:most]

    def may_flip(self, j: int) -> bool:
        """Whether the workbook leaves site j to us."""
        return bool(self.case.rule[j] == 0)


def only(case: Case, sites: Flags) -> Case:
    """Give the case with these sites open, and no others."""
    return replace(
        case, rule=np.where(sites, OPEN, CLOSED).astype(np.int64), fewest_sites=None, most_sites=None,
        group=np.full(case.m, -1, dtype=np.int64), variants=(),
    )


def found(solved: Solved[Plan]) -> Found:
    """Turn the end of a run into an interval."""
    if solved.verdict is Verdict.NO_PLAN_EXISTS:
        return Found(None, None, None, impossible=True)
    return interval(solved.bound, solved.cost, solved.plan)


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


def spoken(case: Case, site: int) -> str:
    """A site as a sentence names it: by its name, by its code where the name is long or holds marks of its own."""
    name = case.site_names[site]
    return name if len(name) <= LONGEST_NAME and not set(name) & set(",;:") else case.sites[site]


def codes(case: Case, numbers: Iterable[int]) -> str:
    """Site codes in words: ``HAM, MUC and 3 more``."""
    return listed([case.sites[j] for j in numbers]) or "none"


def listed(words: Sequence[str], last: str = "") -> str:
    """Up to six words, the rest counted; ``last`` joins the last one where all are named."""
    if last and 1 < len(words) <= 6:
        return f"{', '.join(words[:-1])} {last} {words[-1]}"
    return ", ".join(words[:6]) + (f" and {len(words) - 6} more" if len(words) > 6 else "")


def money(case: Case, value: float, rounding: Rounding = "nearest") -> str:
    """An amount in words."""
    return money_words(value, case.currency, rounding)
