"""Question 5: how firm the plan is when demand, lane rates or fixed costs turn out otherwise."""

from dataclasses import dataclass

import numpy as np

from ledgersolve.findings import NOT_ANSWERED, Answered, Column
from ledgersolve.site_selection.asker import Asker, Found, listed, money, only
from ledgersolve.site_selection.case import Case, Variant

STEP, WIDEST = 5, 50
STEPS = tuple(range(-WIDEST, 0, STEP)), tuple(range(STEP, WIDEST + STEP, STEP))
"""Changes tried, in percent, downwards and upwards."""
SAME = 1e-4
"""The sites stay best where keeping them costs at most this much more than the best known plan (0.01 %)."""
RIVALS = 3
"""Other sets of sites that are costed for a changed case before it is re-planned."""
ASKS = 10
"""Re-solves that one lever takes about."""
DEMAND_OFF = (10, -10, 20, -20)

LEVERS = ("demand", "lane rates", "fixed costs")

Row = tuple[str | float | None, ...]


# ------------------------------------------------------------------ demand off


@dataclass(frozen=True)
class _Off:
    """Demand off by so many percent: the plan's sites against the best ones."""

    percent: int
    kept: Found
    best: Found

    @property
    def regret(self) -> float | None:
        """What keeping the sites costs more than the best, at most; None = not known, or no such plan."""
        return None if self.kept.high is None or self.best.low is None else max(0.0, self.kept.high - self.best.low)

    def words(self) -> str:
        if self.best.impossible:
            return "no plan keeps the rules then, with whatever sites"
        if self.kept.impossible:
            other = "" if self.best.high is not None else f"; whether others can: {NOT_ANSWERED}"
            return f"{_fail(self.percent)}{other}"
        if self.regret is None:
            return NOT_ANSWERED
        return "exact" if self.best.exact and self.kept.exact else "at most; the figure itself is not known yet"


def _fail(percent: int) -> str:
    return "these sites cannot carry it" if percent > 0 else "these sites cannot keep the rules then"


def demand_off(asker: Asker) -> Answered:
    """What following this plan's sites costs against the best when demand is off."""
    asker.asks = 2 * len(DEMAND_OFF)
    told = sorted((_off(asker, percent) for percent in DEMAND_OFF), key=lambda one: one.percent)
    rows: list[Row] = [(one.percent / 100, one.kept.high, one.best.high, one.regret, one.words()) for one in told]
    columns = (Column("Demand", "percent"), Column("With these sites", "money"),
               Column("With the best sites found", "money"), Column("These sites cost more, by at most", "money"),
               Column("How sure"))
    answered = any(one.regret is not None or one.kept.impossible or one.best.impossible for one in told)
    return Answered("What if demand is off?", _off_words(asker.case, told), columns, tuple(rows), headline=answered)


def _off(asker: Asker, percent: int) -> _Off:
    case = changed(asker.case, "demand", percent)
    kept, best = asker.kept(case, ("demand", percent)), asker.ask(case, ("demand", percent))
    if kept.plan is not None and (best.high is None or (kept.high is not None and kept.high < best.high)):
        best = best.joined(Found(None, kept.high, kept.plan))
    return _Off(percent, kept, best)


def _off_words(case: Case, told: list[_Off]) -> str:
    """Name first what the sites cannot carry, then what keeping them costs, then what is not known."""
    nobody = [one for one in told if one.best.impossible]
    unable = [one for one in told if one.kept.impossible and one not in nobody]
    costed = [one for one in told if one.regret is not None and one not in [*nobody, *unable]]
    missing = [one for one in told if one not in [*nobody, *unable, *costed]]
    sentences = []
    for group in ([one for one in unable if one.percent > 0], [one for one in unable if one.percent < 0]):
        if group:
            other = "; other sites can" if all(one.best.high is not None for one in group) else ""
            sentences.append(f"With demand {_percents(group)} {_fail(group[0].percent)}{other}.")
    if nobody:
        sentences.append(f"With demand {_percents(nobody)} no sites can keep the rules.")
    if costed:
        worst = max(one.regret or 0.0 for one in costed)
        sentences.append(f"With demand {_percents(costed)} these sites stay the best." if worst == 0 else (
            f"With demand {_percents(costed)} keeping these sites costs at most {money(case, worst, 'up')} more than "
            "the best ones would."))
    if missing:
        sentences.append(f"{NOT_ANSWERED.capitalize()}: demand {_percents(missing)}.")
    return " ".join(sentences)


def _percents(told: list[_Off]) -> str:
    return listed([f"{_signed(one.percent)}" for one in told], "and")


def _signed(percent: int) -> str:
    return "0 %" if percent == 0 else f"{percent:+d} %".replace("-", "\u2212")


# ------------------------------------------------------------------ ranges


@dataclass(frozen=True)
class _Reach:
    """Over how many steps the sites were seen to stay best, and whether the step after that was seen to end it."""

    percent: int
    ended: bool
    widest: bool

    @property
    def known(self) -> bool:
        """Whether the end of the range is known, as far as it is looked for."""
        return self.ended or self.widest


def how_firm(asker: Asker) -> Answered:
    """Range of each lever over which the same sites stay best, in steps of five percent."""
    rows: list[Row] = []
    ranges, missing = [], []
    for number, lever in enumerate(LEVERS):
        with asker.part(1 / (len(LEVERS) - number), ASKS):
            down, up = (_reach(asker, lever, steps) for steps in (tuple(reversed(STEPS[0])), STEPS[1]))
        none = not any(end.known or end.percent for end in (down, up))
        low, high = (end.percent / 100 if end.known or end.percent else None for end in (down, up))
        rows.append((lever.capitalize(), low, high, _sure(down, up)))
        if none:
            missing.append(lever)
        else:
            ranges.append(_range_words(lever, down, up))
    words = "The same sites stay best, one figure changed at a time by steps of 5 %: " if ranges else ""
    words += "; ".join(ranges) + ("." if ranges else "")
    if any("at least" in told for told in ranges):
        words += f" What lies beyond \"at least\" was {NOT_ANSWERED}."
    if missing:
        words += f" {NOT_ANSWERED.capitalize()}: {', '.join(missing)}."
    columns = (Column("What changes"), Column("Same sites best from", "percent"), Column("to", "percent"),
               Column("How sure"))
    return Answered("How firm is the choice of sites?", words.strip(), columns, tuple(rows), headline=bool(ranges))


def _range_words(lever: str, down: _Reach, up: _Reach) -> str:
    if all(end.known and end.percent for end in (down, up)):
        return f"{lever} from {_signed(down.percent)} to {_signed(up.percent)}"
    return f"{lever}: downwards {_side(down, -STEP)}, upwards {_side(up, STEP)}"


def _side(end: _Reach, step: int) -> str:
    """One direction in words: as far as it is known, never farther."""
    if end.percent:
        return f"{'' if end.known else 'at least '}to {_signed(end.percent)}"
    return f"not even at {_signed(step)}" if end.ended else NOT_ANSWERED


def _sure(down: _Reach, up: _Reach) -> str:
    told = [f"{side}: {NOT_ANSWERED}{' beyond that' if end.percent else ''}"
            for side, end in (("downwards", down), ("upwards", up)) if not end.known]
    if told:
        return "; ".join(told)
    ended = [_signed(end.percent + side * STEP) for side, end in ((-1, down), (1, up)) if end.ended]
    widest = [_signed(end.percent) for end in (down, up) if end.widest]
    words = [f"other sites are better at {listed(ended, 'and')}"] if ended else []
    return "; ".join([*words, *([f"nothing beyond {listed(widest, 'and')} was tried"] if widest else [])])


def changed(case: Case, lever: str, percent: int) -> Case:
    """Give the case with one lever moved by so many percent."""
    factor = 1.0 + percent / 100
    variant = Variant(
        case.title, demand_factor=factor if lever == "demand" else 1.0,
        lane_cost_factor=factor if lever == "lane rates" else 1.0,
        fixed_cost_factor=factor if lever == "fixed costs" else 1.0,
    )
    return case.under(variant)


def _reach(asker: Asker, lever: str, steps: tuple[int, ...]) -> _Reach:
    """Last step up to which the sites are seen to be best.

    Bisection finds the end where the steps at which they are best form one range; else each step is asked
    about. A step that time did not suffice for ends the range that is told.
    """
    kept, lost, ended = -1, len(steps), False
    halve = _one_range(asker.case, lever)
    while lost - kept > 1:
        middle = (kept + lost) // 2 if halve else kept + 1
        best = _still_best(asker, lever, steps[middle])
        if best:
            kept = middle
        else:
            lost, ended = middle, best is not None
    return _Reach(steps[kept] if kept >= 0 else 0, ended, kept == len(steps) - 1)


def _one_range(case: Case, lever: str) -> bool:
    """Whether the plan's sites are best over one range of the lever.

    So it is where their cost is linear in it, because the best cost is concave: where no volume is limited and
    lane, handling and unmet costs keep their proportions, or where the lever leaves deliveries as they are.
    """
    if lever == "fixed costs":
        return True
    if lever == "lane rates":
        return bool(np.ptp(case.handling_cost) == 0) and case.unmet_cost is None
    free = not np.isfinite(case.capacity).any() and not (case.least_volume > 0).any()
    return free and case.lane_most is None


def _still_best(asker: Asker, lever: str, percent: int) -> bool | None:
    """Whether the plan's sites are best for a changed case; None where the time did not allow to tell.

    Sets of sites of other plans come first: fixed sites are costed quickly, and one that is cheaper decides.
    """
    case = changed(asker.case, lever, percent)
    kept = asker.kept(case, (lever, percent))
    if kept.impossible:
        return False
    for number, sites in enumerate(asker.rivals(RIVALS)):
        other = asker.ask(only(case, sites), (lever, percent, number, sites.tobytes()))
        if _cheaper(other, kept):
            return False
    answer = asker.ask(case, (lever, percent), SAME / 2)
    if answer.impossible or _cheaper(answer, kept):
        return False
    if answer.plan is not None and bool((answer.plan.open == asker.base.open).all()) and answer.exact:
        return True
    known = kept.high is not None and answer.low is not None
    return True if known and (kept.high or 0.0) <= (answer.low or 0.0) + SAME * abs(answer.low or 0.0) else None


def _cheaper(other: Found, kept: Found) -> bool:
    """Whether another plan surely costs less than the plan's sites, by more than what counts as the same."""
    return other.high is not None and kept.low is not None and kept.low > other.high + SAME * abs(other.high)
