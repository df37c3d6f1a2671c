"""Questions 1 and 4: why this site and not that one, and the runner-up."""

from collections.abc import Sequence

import numpy as np

from ledgersolve.findings import NOT_ANSWERED, Answered, Column
from ledgersolve.site_selection.asker import NOTHING, Asker, Found, codes, service_part
from ledgersolve.site_selection.case import CLOSED, OPEN, Ints
from ledgersolve.site_selection.extra_cost import Extra, Told, exact_ones, extra, more, not_exact

MOST_ASKED = 60
"""Closed sites asked about at most, the most promising first."""
MOST_SECOND = 5
"""Second changes tried after a first one that leads to a plan with one site different."""

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
    words = _without_words(asker, [(case.sites[j], one) for j, one in told.items()])
    answered = any(one.answered for one in told.values())
    return Answered("Why each of these sites?", words, columns, tuple(rows), headline=answered)


def _flips(asker: Asker, sites: Sequence[int]) -> dict[int, Extra]:
    """Ask about every site; what each costs by all that is known in the end."""
    asker.asks = len(sites)
    for j in sites:
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
    told = _flips(asker, order[:MOST_ASKED])
    rows: list[Row] = []
    for j, one in told.items():
        fixed, meaning = float(case.fixed_cost[j]), one.words(case)
        worth = fixed - one.low if one.low is not None else None
        if worth is not None and worth <= 0:
            meaning += "; not worth opening even at no fixed cost"
        pays = worth if one.exact and worth is not None and worth > 0 else None
        rows.append((case.sites[j], case.site_names[j], one.low, one.high, fixed, pays, meaning))
    words = _with_words(asker, [(case.sites[j], one) for j, one in told.items()], len(order) - len(told))
    columns = (Column("Site"), Column("Name"), Column("With it, more by at least", "money"),
               Column("and at most", "money"), Column("Its fixed cost", "money"),
               Column("Would pay at a fixed cost of", "money"), Column("What that means"))
    answered = any(one.answered for one in told.values())
    return Answered("Why not another site?", words, columns, tuple(rows), headline=answered)


def _with_words(asker: Asker, told: Told, not_asked: int) -> str:
    case, exact, sentences = asker.case, exact_ones(told), []
    if not told:
        sentences.append("Every site that its rule leaves open or closed at will is open in the plan.")
    if exact:
        least, near = exact[0]
        nearest = not not_asked and all(
            one.impossible or (one.low is not None and one.low >= least) for _, one in told)
        who = "The closed site that comes nearest" if nearest else (
            "Of the closed sites with an exact figure, the one that comes nearest")
        if len(told) == 1 and nearest:
            who = "The only closed site"
        sentences.append(f"{who} is {near}: insisting on it costs {more(case, least)}.")
    sentences += not_exact(case, told, "with")
    ruled = int((case.rule == CLOSED).sum())
    if not_asked > 0:
        sentences.append(f"{_sites(not_asked)} with less promise {_were(not_asked)} not asked about.")
    if ruled:
        sentences.append(f"{_sites(ruled)} {'is' if ruled == 1 else 'are'} closed by rule.")
    return " ".join(sentences)


def _sites(count: int) -> str:
    return "1 site" if count == 1 else f"{count} sites"


def _were(count: int) -> str:
    return "was" if count == 1 else "were"


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
    """Best plan that differs in at least one site, then in at least two.

    A plan that differs either lacks a site of the plan or has one more: the cheapest of all flips is the
    cheapest plan that differs in one. Of those that differ in exactly one, the next best is found by flipping
    a second site.
    """
    free = [j for j in range(asker.case.m) if asker.may_flip(j)]
    order = [j for j in free if asker.base.open[j]] + [int(j) for j in promising(asker)[:MOST_ASKED]]
    asker.asks = len(order) + MOST_SECOND
    flips = {j: asker.flip(j) for j in order}
    _second(asker, flips)
    lows = [told.low for told in flips.values() if not told.impossible]
    proven = len(order) == len(free) and all(low is not None for low in lows)
    low = min((low for low in lows if low is not None), default=None) if proven else None
    none = len(order) == len(free) and not lows
    one, two = (_best_differing(asker, least, low, none) for least in (1, 2))
    rows = (_row(asker, "at least one site", *one), _row(asker, "at least two sites", *two))
    columns = (Column("Differs in"), Column("Costs more, by at least", "money"), Column("and at most", "money"),
               Column("Opens"), Column("Closes"), Column("How sure"))
    words = _runner_up_words(asker, *one)
    return Answered("What is the runner-up?", words, columns, rows, headline=one[1].answered)


def _best_differing(asker: Asker, least: int, low: float | None, none: bool) -> tuple[Found, Extra]:
    """Give the cheapest plan found that differs in so many sites; the least any flip costs holds for it too."""
    if none:
        told = Found(None, None, None, impossible=True)
    else:
        others = [pair for pair in asker.plans if int((pair[1].open != asker.base.open).sum()) >= least]
        told = asker.with_plans(NOTHING, others).joined(Found(low, None, None))
    return told, extra(asker, told)


def _runner_up_words(asker: Asker, told: Found, one: Extra) -> str:
    if one.impossible:
        return "No other set of sites keeps the rules."
    if told.plan is None:
        return f"{NOT_ANSWERED.capitalize()}: no plan with other sites was found yet." if not one.answered else (
            f"A plan with other sites costs {one.amount(asker.case)}; none was found yet.")
    opened = codes(asker.case, np.flatnonzero(told.plan.open).tolist())
    which = "The best plan with other sites" if one.exact else "The best plan found with other sites"
    words = f"{which} costs {more(asker.case, one.high or 0.0)}: {opened}."
    if (one.high or 0.0) < 0:
        words += " So the plan is not the best yet: give it more time (Time limit in Settings)."
    return words


def _second(asker: Asker, flips: dict[int, Found]) -> None:
    """Look for plans that differ in two or more sites: flips that lead to one only are flipped again."""
    def two() -> float:
        return min((cost for cost, plan in asker.plans if int((plan.open != asker.base.open).sum()) >= 2),
                   default=np.inf)

    for j, told in sorted(flips.items(), key=lambda pair: _high(pair[1])):
        if _high(told) >= two() or told.plan is None or int((told.plan.open != asker.base.open).sum()) >= 2:
            continue
        others = sorted((k for k in flips if k != j and asker.may_flip(k)), key=lambda k: _high(flips[k]))
        for k in others[:MOST_SECOND]:
            both = asker.flipped(asker.flipped(asker.case, j), k)
            asker.ask_within(both, ("flip", min(j, k), max(j, k)))


def _high(told: Found) -> float:
    return np.inf if told.high is None else told.high


def _row(asker: Asker, label: str, told: Found, one: Extra) -> Row:
    if told.plan is None:
        return (label, one.low, None, "", "", one.words(asker.case))
    opens = codes(asker.case, np.flatnonzero(told.plan.open & ~asker.base.open).tolist())
    closes = codes(asker.case, np.flatnonzero(asker.base.open & ~told.plan.open).tolist())
    sure = "proven: none is cheaper" if one.exact else "the best found; a cheaper one is possible"
    return (label, one.low, one.high, opens, closes, sure)


