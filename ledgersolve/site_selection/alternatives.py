"""Questions 1 and 4: why this site and not that one, and the runner-up."""

from collections.abc import Sequence

import numpy as np

from ledgersolve.findings import NOT_ANSWERED, Answered, Column
from ledgersolve.site_selection.asker import Asker, Found, codes, interval, listed, service_part, spoken
from ledgersolve.site_selection.case import CLOSED, OPEN, Ints
from ledgersolve.site_selection.extra_cost import Extra, Told, exact_ones, extra, more, not_exact
from ledgersolve.site_selection.neighbours import cost_neighbours
from ledgersolve.site_selection.plan import Plan

MOST_LISTED = 200
"""Closed sites listed at most, those that come nearest first."""

MOST_PAIRED = 150
"""Sites in each direction that are paired for the plan that differs in two."""

Row = tuple[str | float | None, ...]


def why_open(asker: Asker) -> Answered:
    """For each open site: the cost of doing without it, everything else re-optimised."""
    case = asker.case
    sites = [int(j) for j in np.flatnonzero(asker.base.open)]
    told = _flips(asker, [j for j in sites if case.rule[j] != OPEN])
    rows: list[Row] = []
    for j in sites:
        figures = (told[j].low, told[j].high, told[j].words(case)) if j in told else (
            None, None, "must be open by its rule")
        rows.append((case.sites[j], case.site_names[j], *figures))
    columns = (Column("Site"), Column("Name"), Column("Without it, more by at least", "money"),
               Column("and at most", "money"), Column("What that means"))
    words = _without_words(asker, [(spoken(case, j), one) for j, one in told.items()])
    answered = any(one.answered for one in told.values())
    return Answered("Why each of these sites?", words, columns, tuple(rows), headline=answered)


def _flips(asker: Asker, sites: Sequence[int]) -> dict[int, Extra]:
    """Ask about every site; what each costs by all that is known in the end."""
    cost_neighbours(asker, sites)
    asker.asks = len(sites)
    for j in sorted(sites, key=lambda j: asker.flip_lows[j]):
        asker.flip(j)
    return {j: extra(asker, asker.known_flip(j)) for j in sites}


def _without_words(asker: Asker, told: Told) -> str:
    if not told:
        return "All sites of the plan must be open by their rule." if asker.base.open.any() else "No site is open."
    case, exact = asker.case, exact_ones(told)
    sentences = []
    if len(exact) == 1:
        sentences = [f"Doing without {exact[0][1]} costs {more(case, exact[0][0])}, all else re-planned."]
    elif exact:
        (least, easy), (most, hard) = exact[0], exact[-1]
        of = "" if len(exact) == len(told) else f"Of the {len(exact)} sites with an exact figure: "
        easiest = f"{easy} is the easiest to do without ({more(case, least)})"
        sentences = [f"{of}{easiest}, {hard} the hardest ({more(case, most)}), all else re-planned."]
    return " ".join(sentences + not_exact(case, told, "without"))


def why_closed(asker: Asker) -> Answered:
    """For each closed site: the cost of insisting on it, and the fixed cost at which it would pay."""
    case = asker.case
    order = [int(j) for j in promising(asker)]
    told = dict(sorted(_flips(asker, order).items(), key=lambda pair: _nearness(pair[1])))
    rows: list[Row] = []
    for j, one in list(told.items())[:MOST_LISTED]:
        fixed, meaning = float(case.fixed_cost[j]), one.words(case)
        worth = fixed - one.low if one.low is not None else None
        if worth is not None and worth <= 0:
            meaning += "; not worth opening even at no fixed cost"
        pays = worth if one.exact and worth is not None and worth > 0 else None
        rows.append((case.sites[j], case.site_names[j], one.low, one.high, fixed, pays, meaning))
    words = _with_words(asker, [(spoken(case, j), one) for j, one in told.items()])
    columns = (Column("Site"), Column("Name"), Column("With it, more by at least", "money"),
               Column("and at most", "money"), Column("Its fixed cost", "money"),
               Column("Would pay at a fixed cost of", "money"), Column("What that means"))
    answered = any(one.answered for one in told.values())
    return Answered("Why not another site?", words, columns, tuple(rows), headline=answered)


def _nearness(one: Extra) -> float:
    """Order of the list: by what the site costs more, as far as it is known."""
    known = one.low if one.low is not None else one.high
    return np.inf if known is None else known


def _with_words(asker: Asker, told: Told) -> str:
    case, exact, sentences = asker.case, exact_ones(told), []
    if not told:
        sentences.append("Every site that its rule leaves open or closed at will is open in the plan.")
    if exact:
        least, near = exact[0]
        nearest = all(one.impossible or (one.low is not None and one.low >= least) for _, one in told)
        who = "The closed site that comes nearest" if nearest else (
            "Of the closed sites with an exact figure, the one that comes nearest")
        if len(told) == 1 and nearest:
            who = "The only closed site"
        sentences.append(f"{who} is {near}: insisting on it costs {more(case, least)}.")
    sentences += not_exact(case, told, "with")
    ruled = int((case.rule == CLOSED).sum())
    if len(told) > MOST_LISTED:
        sentences.append(f"The {MOST_LISTED} nearest of {len(told)} are listed.")
    if ruled:
        sentences.append(f"{_sites(ruled)} {'is' if ruled == 1 else 'are'} closed by rule.")
    return " ".join(sentences)


def _sites(count: int) -> str:
    return "1 site" if count == 1 else f"{count} sites"


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
    added = case.fixed_cost[closed] + np.where(case.today[closed], 0.0, case.opening_cost[closed]) - saving
    return closed[np.argsort(added, kind="stable")]


def runner_up(asker: Asker) -> Answered:
    """Best plan that differs in one site at least, then in two; another site in place of one counts as one.

    A plan that differs lacks a site of the plan or has one more: the cheapest of all flips is the cheapest plan
    that differs. One that differs in two lacks two sites of the plan, or has two more: the cheapest of all pairs of
    flips in one direction. What the prices of the bound, or a flip already solved, put above a plan found needs no
    asking.
    """
    lows = _lows(asker)
    asker.asks = 2 * len(lows)
    first = _search(asker, sorted((low, (j,)) for j, low in lows.items()), 1)
    second = _search(asker, _pairs(asker, _lows(asker)), 2)
    rows = (_row(asker, "one site or more", *first), _row(asker, "two sites or more", *second))
    columns = (Column("Differs in"), Column("Costs more, by at least", "money"), Column("and at most", "money"),
               Column("Opens"), Column("Closes"), Column("How sure"))
    words = _runner_up_words(asker, *first)
    if not second[1].answered and first[1].answered:
        words += f" One that differs in two sites: {NOT_ANSWERED}."
    return Answered("What is the runner-up?", words, columns, rows, headline=first[1].answered)


Changes = list[tuple[float, tuple[int, ...]]]
"""Sites to flip together, with what every plan in which they are flipped costs at least; the least first."""


def _lows(asker: Asker) -> dict[int, float]:
    """What every plan with a site flipped costs at least, for each site that may be."""
    told = {j: asker.known_flip(j) for j in range(asker.case.m) if asker.may_flip(j)}
    return {j: np.inf if one.impossible else -np.inf if one.low is None else one.low for j, one in told.items()}


def _pairs(asker: Asker, lows: dict[int, float]) -> Changes:
    """Pairs of sites that are both closed, or both opened."""
    pairs: Changes = []
    for way in (True, False):
        there = sorted((j for j in lows if bool(asker.base.open[j]) is way), key=lambda j: lows[j])
        pairs += [(lows[k], (j, k)) for n, k in enumerate(there[:MOST_PAIRED]) for j in there[:n]]
        if len(there) > MOST_PAIRED:  # stands for all pairs with a site beyond; it is never asked about
            pairs.append((lows[there[MOST_PAIRED]], ()))
    return sorted(pairs)


def _search(asker: Asker, changes: Changes, least: int) -> tuple[Found, Extra]:
    """Give the cheapest plan that differs in so many sites, asking about changes in the order of their lows."""
    lows = [low for low, _ in changes]
    for number, (_, change) in enumerate(changes):
        if not change or lows[number] >= _cheapest(asker, least)[0] or asker.clock.over():
            break
        changed = asker.case
        for j in change:
            changed = asker.flipped(changed, j)
        told = asker.ask_within(changed, ("flip", *change) if len(change) == 1 else ("flips", *sorted(change)))
        lows[number] = np.inf if told.impossible else max(lows[number], -np.inf if told.low is None else told.low)
    cost, plan = _cheapest(asker, least)
    low = min(lows, default=np.inf)
    if plan is None:
        told = Found(None, None, None, impossible=True) if low == np.inf else Found(
            low if np.isfinite(low) else None, None, None)
    else:
        told = interval(min(low, cost) if low > -np.inf else None, cost, plan)
    return told, extra(asker, told)


def _cheapest(asker: Asker, least: int) -> tuple[float, Plan | None]:
    """Cheapest plan found so far that differs in so many sites."""
    found = [(cost, plan) for cost, plan in asker.plans if _differs(asker, plan) >= least]
    return min(found, key=lambda pair: pair[0]) if found else (np.inf, None)


def _differs(asker: Asker, plan: Plan) -> int:
    """Sites that are others: so many are opened, or so many closed, whatever is more."""
    opened = int((plan.open & ~asker.base.open).sum())
    return max(opened, int((asker.base.open & ~plan.open).sum()))


def _runner_up_words(asker: Asker, told: Found, one: Extra) -> str:
    if one.impossible:
        return "No other set of sites keeps the rules."
    if told.plan is None:
        return f"{NOT_ANSWERED.capitalize()}: no plan with other sites was found yet." if not one.answered else (
            f"A plan with other sites costs {one.amount(asker.case)}; none was found yet.")
    opened = listed([spoken(asker.case, j) for j in np.flatnonzero(told.plan.open).tolist()])
    which = "The best plan with other sites" if one.exact else "The best plan found with other sites"
    words = f"{which} costs {more(asker.case, one.high or 0.0)}: {opened}."
    if (one.high or 0.0) < 0:
        words += " So the plan is not the best yet: give it more time (Time limit in Settings)."
    return words


def _row(asker: Asker, label: str, told: Found, one: Extra) -> Row:
    if told.plan is None:
        return (label, one.low, None, "", "", one.words(asker.case))
    opens = codes(asker.case, np.flatnonzero(told.plan.open & ~asker.base.open).tolist())
    closes = codes(asker.case, np.flatnonzero(asker.base.open & ~told.plan.open).tolist())
    sure = "proven: none is cheaper" if one.exact else "the best found; a cheaper one is possible"
    return (label, one.low, one.high, opens, closes, sure)
