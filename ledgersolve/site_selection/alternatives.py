"""Questions 1, 2 and 4: why this site and not that one, how many sites, the runner-up."""

from dataclasses import replace

import numpy as np

from ledgersolve.findings import Answered, Column, Picture
from ledgersolve.site_selection.asker import Asker, Found, codes, interval, money, service_part, site_part
from ledgersolve.site_selection.case import CLOSED, OPEN, Ints

CURVE_REACH = 3
"""Counts of sites shown on either side of the plan's own."""
MOST_ASKED = 60
"""Closed sites asked about at most, the most promising first."""


def why_open(asker: Asker) -> Answered:
    """For each open site: the cost of doing without it, everything else re-optimised."""
    case = asker.case
    rows: list[tuple[str | float | None, ...]] = []
    dear: list[tuple[float, str]] = []
    for j in np.flatnonzero(asker.base.open):
        if case.rule[j] == OPEN:
            rows.append((case.sites[j], case.site_names[j], None, None, "must be open by its rule"))
            continue
        answer = asker.flip(int(j))
        rows.append((case.sites[j], case.site_names[j], *_above(asker, answer), _words(asker, answer)))
        if answer.low is not None:
            dear.append((answer.low - asker.base_cost, case.sites[j]))
    words = "No site of the plan can be judged in the time given."
    if dear:
        (least, easy), (most, hard) = min(dear), max(dear)
        words = (f"Doing without one of them costs from {money(case, max(least, 0.0))} more ({easy}, missed least) "
                 f"to {money(case, max(most, 0.0))} more ({hard}, missed most), all else re-planned.")
    columns = (Column("Site"), Column("Name"), Column("Without it, dearer by at least", "money"),
               Column("and at most", "money"), Column("What that means"))
    return Answered("Why each of these sites?", words, columns, tuple(rows), headline=True)


def why_closed(asker: Asker) -> Answered:
    """For each closed site: the cost of insisting on it, and the fixed cost at which it would pay."""
    case = asker.case
    rows: list[tuple[str | float | None, ...]] = []
    for j in promising(asker)[:MOST_ASKED]:
        answer = asker.flip(int(j))
        pays = None
        if answer.low is not None:
            worth = float(case.fixed_cost[j]) - (answer.low - asker.base_cost)
            pays = worth if worth > 0 else None
        meaning = _words(asker, answer)
        if answer.low is not None and pays is None:
            meaning += "; not worth opening even at no fixed cost"
        rows.append((case.sites[j], case.site_names[j], *_above(asker, answer), float(case.fixed_cost[j]),
                     pays, meaning))
    ruled = int((case.rule == CLOSED).sum())
    near = [row for row in rows if isinstance(row[2], float)]
    words = "No closed site could be opened under the rules of the workbook."
    if near:
        first = min(near, key=lambda row: (float(str(row[2])), str(row[0])))
        words = (f"The closed site that comes nearest is {first[0]}: insisting on it costs "
                 f"{money(case, float(str(first[2])))} more at least.")
    left = int((~asker.base.open & (case.rule == 0)).sum()) - len(rows)
    if left > 0:
        words += f" {left} less promising sites were not asked about."
    if ruled:
        words += f" {ruled} sites are closed by their rule."
    columns = (Column("Site"), Column("Name"), Column("With it, dearer by at least", "money"),
               Column("and at most", "money"), Column("Its fixed cost", "money"),
               Column("Would pay at a fixed cost of", "money"), Column("What that means"))
    return Answered("Why not another site?", words, columns, tuple(rows), headline=True)


def promising(asker: Asker) -> Ints:
    """Closed sites left to us, those first whose opening would save most of its cost at once."""
    case = asker.case
    closed = np.flatnonzero(~asker.base.open & (case.rule == 0))
    now = service_part(case, asker.base)
    with np.errstate(invalid="ignore"):
        rate = case.lane_cost[closed] + case.handling_cost[closed, None]
        cost = case.lane_cost[closed] + np.outer(case.handling_cost[closed], case.demand) if (
            case.cost_is_whole) else rate * case.demand
    saving = np.maximum(0.0, now - np.where(np.isfinite(cost), cost, np.inf)).sum(axis=1)
    extra = case.fixed_cost[closed] + np.where(case.today[closed], 0.0, case.opening_cost[closed]) - saving
    return closed[np.argsort(extra, kind="stable")]


def how_many(asker: Asker) -> Answered:
    """Best plan for each count of sites around the plan's own, split into site and service cost."""
    case, own = asker.case, int(asker.base.open.sum())
    lowest = max(1, int((case.rule == OPEN).sum()), own - CURVE_REACH)
    highest = min(case.m - int((case.rule == CLOSED).sum()), own + CURVE_REACH)
    nearest_first = sorted(range(lowest, highest + 1), key=lambda p: abs(p - own))
    rows = [_of_count(asker, count, own) for count in nearest_first]
    rows.sort(key=lambda row: float(str(row[0])))
    costs = {int(float(str(row[0]))): float(str(row[3])) for row in rows if row[3] is not None}
    words = f"The plan runs {own} {'site' if own == 1 else 'sites'}."
    for step, name in ((own - 1, "one fewer"), (own + 1, "one more")):
        if step in costs:
            words += f" With {name}, the best plan found costs {money(case, costs[step] - asker.base_cost)} more."
    columns = (Column("Open sites", "number"), Column("Site cost", "money"), Column("Service cost", "money"),
               Column("Total", "money"), Column("No plan with this count costs less than", "money"),
               Column("Open"))
    picture = Picture("stacked column", "Cost by number of open sites", 0, (1, 2))
    return Answered("How many sites?", words, columns, tuple(rows), picture, headline=True)


def _of_count(asker: Asker, count: int, own: int) -> tuple[str | float | None, ...]:
    case = asker.case
    if count == own:
        plan, low = asker.base, None
    else:
        answer = asker.ask(replace(case, fewest_sites=count, most_sites=count, variants=()))
        if answer.plan is None:
            reason = "no plan with this count" if answer.impossible else "not found in the time given"
            return (float(count), None, None, None, answer.low, reason)
        plan, low = answer.plan, answer.low
    site, service = site_part(case, plan), float(service_part(case, plan).sum())
    shown = "the plan" if count == own else codes(case, np.flatnonzero(plan.open).tolist())
    return (float(count), site, service, site + service, low, shown)


def runner_up(asker: Asker) -> Answered:
    """Best plan that differs in at least one site, then in at least two.

    A plan that differs either lacks a site of the plan or has one more: the cheapest of all flips is the
    cheapest plan that differs in one. Of those that differ in exactly one, the next best is found by flipping
    a second site.
    """
    case = asker.case
    free = [j for j in range(case.m) if asker.may_flip(j)]
    order = [j for j in free if asker.base.open[j]] + [int(j) for j in promising(asker)[:MOST_ASKED]]
    flips = {j: asker.flip(j) for j in order}
    skipped = len(free) - len(order)
    first = _cheapest(flips)
    rows = [_differing(asker, "at least one site", first, flips, skipped)]
    second = _second(asker, flips)
    rows.append(_differing(asker, "at least two sites", second, flips, skipped))
    words = "No other set of sites was found that keeps the rules."
    if first is not None and first.plan is not None and first.high is not None:
        words = (f"The best plan found with other sites costs {money(case, first.high - asker.base_cost)} more: "
                 f"{codes(case, np.flatnonzero(first.plan.open).tolist())}.")
    columns = (Column("Differs in"), Column("Costs more, by at least", "money"), Column("and at most", "money"),
               Column("Opens"), Column("Closes"), Column("How sure"))
    return Answered("What is the runner-up?", words, columns, tuple(rows), headline=True)


def _cheapest(flips: dict[int, Found]) -> Found | None:
    known = [answer for answer in flips.values() if answer.high is not None]
    return min(known, key=lambda answer: float(answer.high or 0.0), default=None)


def _second(asker: Asker, flips: dict[int, Found]) -> Found | None:
    """Cheapest plan known that differs in two or more sites; flips that lead to one only are flipped again."""
    best: Found | None = None
    for j, answer in sorted(flips.items(), key=lambda pair: _high(pair[1])):
        if _high(answer) >= _high(best) or answer.plan is None:
            continue
        if int((answer.plan.open != asker.base.open).sum()) >= 2:
            best = answer
            continue
        for k in _neighbours(asker, flips, j):
            again = asker.ask(asker.flipped(asker.flipped(asker.case, j), k))
            if _high(again) < _high(best):
                best = again
    return best


def _neighbours(asker: Asker, flips: dict[int, Found], j: int) -> list[int]:
    """Second flips worth trying: the five cheapest single ones."""
    others = sorted((k for k in flips if k != j and asker.may_flip(k)), key=lambda k: _high(flips[k]))
    return others[:5]


def _high(answer: Found | None) -> float:
    return np.inf if answer is None or answer.high is None else answer.high


def _differing(
    asker: Asker, label: str, answer: Found | None, flips: dict[int, Found], skipped: int
) -> tuple[str | float | None, ...]:
    if answer is None or answer.plan is None or answer.high is None:
        return (label, None, None, "", "", "none was found in the time given")
    opens = codes(asker.case, np.flatnonzero(answer.plan.open & ~asker.base.open).tolist())
    closes = codes(asker.case, np.flatnonzero(asker.base.open & ~answer.plan.open).tolist())
    lows = [found.low for found in flips.values() if not found.impossible]
    # every plan that differs in two sites differs in one: the lows of the single flips hold for both
    told = bool(lows) and not skipped and all(low is not None for low in lows)
    low = max(0.0, min(float(low or 0.0) for low in lows) - asker.base_cost) if told else None
    proven = low is not None and low >= answer.high - asker.base_cost - 1e-6 * abs(answer.high)
    sure = "proven: every single change was solved" if proven else "the best found; a cheaper one is possible"
    return (label, low, answer.high - asker.base_cost, opens, closes, sure)


def _above(asker: Asker, answer: Found) -> tuple[float | None, float | None]:
    low = None if answer.low is None else max(0.0, answer.low - asker.base_cost)
    high = None if answer.high is None else max(0.0, answer.high - asker.base_cost)
    return low, high


def _words(asker: Asker, answer: Found) -> str:
    if answer.impossible:
        return "no plan exists then"
    if not answer.known:
        return "not answered in the time given"
    exact = "exact" if answer.exact else "a proven range"
    return f"{interval(asker.case, answer, asker.base_cost)} more, {exact}"
