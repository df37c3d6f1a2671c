"""Question 2: how many sites, as the cost curve over their number."""

from dataclasses import replace

import numpy as np

from ledgersolve.findings import NOT_ANSWERED, Answered, Column, Picture
from ledgersolve.site_selection.asker import Asker, Found, codes, listed, service_part, site_part
from ledgersolve.site_selection.case import CLOSED, OPEN, Case
from ledgersolve.site_selection.extra_cost import Extra, extra

CURVE_REACH = 3
"""Counts of sites shown on either side of the plan's own."""

Row = tuple[str | float | None, ...]


def how_many(asker: Asker) -> Answered:
    """Best plan for each count of sites around the plan's own, split into site and service cost."""
    case, own = asker.case, int(asker.base.open.sum())
    lowest = max(1, int((case.rule == OPEN).sum()), own - CURVE_REACH)
    highest = min(case.m - int((case.rule == CLOSED).sum()), own + CURVE_REACH)
    others = sorted((p for p in range(lowest, highest + 1) if p != own), key=lambda p: abs(p - own))
    asker.asks = len(others)
    told = {count: _of_count(asker, count) for count in others}
    extras = {count: extra(asker, one, _allowed(case, count)) for count, one in told.items()}
    rows = [_row(asker, count, told[count], extras[count]) for count in others]
    rows.append(_row(asker, own, Found(None, asker.base_cost, asker.base), None))
    rows.sort(key=lambda row: float(str(row[0])))
    words = f"The plan runs {own} {'site' if own == 1 else 'sites'}."
    words += "".join(_step(asker, extras, own + step, name) for step, name in ((-1, "one fewer"), (1, "one more")))
    missing = [str(count) for count in sorted(others) if not extras[count].answered and abs(count - own) > 1]
    if missing:
        words += f" {NOT_ANSWERED.capitalize()}: {listed(missing, 'and')} sites."
    columns = (Column("Open sites", "number"), Column("Site cost", "money"), Column("Service cost", "money"),
               Column("Total", "money"), Column("No plan with this count costs less than", "money"),
               Column("Open"), Column("Against the plan"))
    picture = Picture("stacked column", "Cost by number of open sites", 0, (1, 2))
    answered = any(extras[count].answered for count in (own - 1, own + 1) if count in extras)
    return Answered("How many sites?", words, columns, tuple(rows), picture, headline=answered)


def _of_count(asker: Asker, count: int) -> Found:
    """Give the cheapest plan with so many sites, from re-solving or from plans found on the way."""
    changed = replace(asker.case, fewest_sites=count, most_sites=count, variants=())
    if not _allowed(asker.case, count):
        return asker.ask(changed, ("count", count))
    told = asker.ask_within(changed, ("count", count))
    return asker.with_plans(told, [pair for pair in asker.plans if int(pair[1].open.sum()) == count])


def _allowed(case: Case, count: int) -> bool:
    """Whether the workbook's own counts allow so many sites; the curve goes beyond them."""
    return (case.fewest_sites or 0) <= count <= (case.m if case.most_sites is None else case.most_sites)


def _step(asker: Asker, extras: dict[int, Extra], count: int, name: str) -> str:
    one = extras.get(count)
    if one is None:
        return ""
    beyond = "" if _allowed(asker.case, count) else " (which the counts in Settings do not allow)"
    if one.impossible:
        return f" No plan has {name}{beyond}."
    joint = "it costs" if one.low is not None else "this is"
    return f" With {name}{beyond} {joint} {one.amount(asker.case)}."


def _row(asker: Asker, count: int, told: Found, one: Extra | None) -> Row:
    case, plan = asker.case, told.plan
    above = "the plan" if one is None else one.words(case)
    if not _allowed(case, count):
        above += "; the counts in Settings do not allow it"
    low = None if one is None or one.low is None else asker.base_cost + one.low
    if plan is None:
        return (float(count), None, None, None, low, "", above)
    site, service = site_part(case, plan), float(service_part(case, plan).sum())
    opened = codes(case, np.flatnonzero(plan.open).tolist())
    return (float(count), site, service, site + service, low, opened, above)
