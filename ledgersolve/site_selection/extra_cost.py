"""What a change of sites costs above the plan: exact, a range or not known; and lists of that in sentences.

A bound that says nothing (nought more at least) is no answer: it is neither shown nor ranked by. Sentences
about a list name what is known and what is not known yet, and say nothing of sites that were not answered.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from ledgersolve.findings import NOT_ANSWERED
from ledgersolve.site_selection.asker import Asker, Found, listed, money
from ledgersolve.site_selection.case import Case

TINY = 1e-7
"""Differences below this share of the plan's cost are rounding."""
MOST_NAMED = 3
"""Sites named in a sentence with their figures; the rest is counted."""


@dataclass(frozen=True)
class Extra:
    """Cost above the plan, at least ``low`` and at most ``high``; below 0 where the change costs less.

    ``low`` is None where no bound says more than ``floor``, which holds for every plan (0 for a plan that is
    proven best; None = not even that is known); ``high`` is None where no plan was found.
    """

    low: float | None
    high: float | None
    impossible: bool = False
    floor: float | None = 0.0

    @property
    def exact(self) -> bool:
        """Whether low and high are one figure."""
        return self.low is not None and self.low == self.high

    @property
    def answered(self) -> bool:
        """Whether anything was found out."""
        return self.impossible or self.low is not None or self.high is not None

    def words(self, case: Case) -> str:
        """Say the figure, and how sure it is."""
        if self.impossible:
            return "no plan keeps the rules then"
        return f"{self.amount(case)}, exact" if self.exact else self.amount(case)

    def amount(self, case: Case) -> str:
        """Give the figure alone: ``31 244 EUR more``, ``between ... and ... more``, ``not known yet: ...``."""
        if self.high is None:
            return NOT_ANSWERED if self.low is None else f"at least {money(case, self.low, 'down')} more"
        if self.exact:
            return more(case, self.high)
        top = f"{money(case, self.high, 'up')} more" if self.high >= 0 else f"{money(case, -self.high, 'down')} less"
        if self.low is not None:
            return f"between {money(case, self.low, 'down')} and {top}"
        if self.floor is None:
            return f"not known yet: at most {top}" if self.high >= 0 else f"not known yet: at least {top}"
        least = "0" if self.floor >= 0 else f"{money(case, -self.floor, 'up')} less"
        return f"not known yet: between {least} and {top}"


def more(case: Case, value: float) -> str:
    """Amount above the plan in words."""
    if value == 0:
        return "nothing more"
    return f"{money(case, abs(value))} {'more' if value > 0 else 'less'}"


def extra(asker: Asker, found: Found, within: bool = True) -> Extra:
    """Cost above the plan of a changed case.

    ``within``: it is the workbook's own case with a rule added, and no plan of it is below the bound.
    """
    tiny = TINY * max(1.0, abs(asker.base_cost))
    floor = None if asker.base_bound is None or not within else min(0.0, _above(asker, asker.base_bound, tiny))
    if found.impossible:
        return Extra(None, None, impossible=True, floor=floor)
    high = None if found.high is None else _above(asker, found.high, tiny)
    low = None if found.low is None else _above(asker, found.low, tiny)
    lows = [value for value in (low, floor) if value is not None]
    if high is not None and lows and high - max(lows) <= tiny:
        return Extra(high, high, floor=floor)
    if low is not None and low <= 0:
        low, floor = None, max(lows)
    return Extra(low, high, floor=floor)


def _above(asker: Asker, cost: float, tiny: float) -> float:
    value = cost - asker.base_cost
    return 0.0 if abs(value) <= tiny else value


Told = Sequence[tuple[str, Extra]]
"""Codes of sites, each with what was found about it."""


def exact_ones(told: Told) -> list[tuple[float, str]]:
    """Figures that are exact, with their sites, the least first."""
    return sorted((one.high, code) for code, one in told if one.exact and one.high is not None)


def not_exact(case: Case, told: Told, way: str) -> list[str]:
    """Sentences about all that has no exact figure; ``way`` is ``with`` or ``without`` the site."""
    sentences = []
    impossible = [code for code, one in told if one.impossible]
    ranges = [(code, one) for code, one in told if one.answered and not one.impossible and not one.exact]
    missing = [code for code, one in told if not one.answered]
    if ranges:
        named = "; ".join(f"{way} {code}: {one.amount(case)}" for code, one in ranges[:MOST_NAMED])
        rest = f"; and so for {len(ranges) - MOST_NAMED} more" if len(ranges) > MOST_NAMED else ""
        sentences.append(f"No exact figure yet: {named}{rest}.")
    if impossible:
        sentences.append(f"No plan keeps the rules {way} {listed(impossible, 'or')}.")
    if missing:
        sentences.append(f"{NOT_ANSWERED.capitalize()}: {listed(missing)}.")
    return sentences
