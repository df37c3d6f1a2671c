"""The Decision page of a site-selection plan, in words."""

from collections.abc import Sequence

import numpy as np

from ledgersolve.mip import Verdict
from ledgersolve.report import names, style
from ledgersolve.report.certainty import how_sure, made_of
from ledgersolve.report.checks import ChecksAt
from ledgersolve.report.decision import (
    Decision,
    Tile,
    Today,
    against_tile,
    asked_ahead,
    changed_since,
    checks_tile,
    cost_tile,
    provenance,
    still_tile,
    write_decision,
)
from ledgersolve.report.ledger import Ledger
from ledgersolve.report.site_details import main_sites
from ledgersolve.report.site_limits import site_limits, site_words
from ledgersolve.report.site_places import SitePlaces
from ledgersolve.report.site_proof import WEAK, SiteProof
from ledgersolve.report.tables import Figure
from ledgersolve.site_selection.plan import Plan
from ledgersolve.workbook.figures import NO_BREAK, unit_words
from ledgersolve.workbook.sheets import Chart, ResultSheet

NOISE = 1e-9
"""Parts of the demand below this are rounding of the machine."""
GLOSSARY = (
    ("Cost of the plan", "everything in the ledger, for the period covered; one-off opening and closing costs in "
                         "full"),
    ("Today", "the sites in use today, with deliveries at their best"),
    ("Could still be saved", "no plan that keeps the workbook's rules costs less than the cost of this one less "
                             "that amount"),
    ("Lane", "deliveries from one site to one customer"),
    ("Main site", "the site that delivers the largest share of a customer's demand"),
)


def site_decision(at: SitePlaces, ledger: Ledger, proof: SiteProof, picture: Chart | None) -> ResultSheet:
    """Write the page."""
    report, case = at.report, at.report.case
    name = at.name(names.DECISION)
    parts = [(part, Figure(_part(at, part), ledger.part(part))) for part in ledger.parts]
    page = Decision(
        kicker="Site selection", title=report.workbook.title, headline=_headline(at), second=_against_today(at),
        tiles=_tiles(at, ledger, proof.checks),
        changed=changed_since(ledger, at.name(names.RUN_RECORD), at.name(names.PROOF)),
        comparison=_comparison(at, ledger), compared=report.today is not None, parts=parts,
        total=Figure(report.audit.total, ledger.total),
        changes=_changes(at), changes_title="What changes" if at.has_today else "What each site does",
        sure=_sure(at, proof.bound), binding=site_limits(at), check=_check(at),
        asked=asked_ahead(report.answers), glossary=GLOSSARY,
        provenance=provenance(report.workbook, report.run), currency=case.currency, per=at.per,
    )
    return write_decision(name, page, picture)


def _part(at: SitePlaces, name: str) -> float:
    return next(part.amount for part in at.report.audit.parts if part.name == name)


def _money(at: SitePlaces, amount: float, rounding: style.Rounding = "nearest") -> str:
    return style.money_words(amount, at.report.case.currency, rounding)


def _headline(at: SitePlaces) -> str:
    case, plan = at.report.case, at.report.plan
    running = int(plan.open.sum())
    cost = _money(at, at.report.audit.total)
    if running == 0:
        cheapest = ", and no site makes that cheaper" if at.report.solved.verdict is Verdict.PROVEN_BEST else ""
        return f"Run no site at all: leaving all demand unmet costs {cost} per {case.period_covered}{cheapest}."
    sites = f"Run {running} of {_choices(at)}: {site_words(at, plan.open)}"
    return f"{sites}. All together that costs {cost} {_covered(at)}.{_undelivered(at)}"


def _choices(at: SitePlaces) -> str:
    """How many sites there are to choose from, sizes of one site counted once."""
    group = at.report.case.group
    count = int((group < 0).sum()) + np.unique(group[group >= 0]).size
    return style.counted(count, "site") + (" (sizes of one site counted once)" if count < group.size else "")


def _covered(at: SitePlaces) -> str:
    """What the cost covers: a period, and what is paid once."""
    period, once = at.report.case.period_covered, _once(at)
    if once <= 0:
        return f"per {period}"
    return f"in the first {period}, {_money(at, once)} of it once, for opening and closing"


def _undelivered(at: SitePlaces) -> str:
    """What the plan leaves undelivered, as a sentence; "" where that is nothing."""
    case, unmet = at.report.case, at.report.plan.unmet
    units, total = float(unmet @ case.demand), float(case.demand.sum())
    if not units > NOISE * total:
        return ""
    short = style.counted(int((unmet > NOISE).sum()), "customer does", "customers do")
    amount = f"{style.quantity_words(units)}{NO_BREAK}{unit_words(units, case.demand_unit)}"
    return (f" {amount} ({style.percent_words(units / total)} of the demand) will not be delivered: {short} not get "
            "everything.")


def _against_today(at: SitePlaces) -> str:
    today = at.report.today
    if today is None:
        return ""
    if today.solved.cost is None:
        why = f" {today.why}." if today.why else ""
        return f"Today's sites alone cannot keep the rules of this workbook, so that they have no cost here.{why}"
    saved = today.solved.cost - at.report.audit.total
    count = style.counted(int(at.report.case.today.sum()), "site")
    if abs(saved) < 0.5 * 10.0 ** -style.money_digits(at.report.case.currency):
        return f"That is what today's {count} cost with deliveries at their best: no change pays."
    part = style.percent_words(abs(saved) / today.solved.cost, "down") if today.solved.cost else ""
    if saved > 0:
        less = f"{_money(at, saved, 'down')} ({part}) less"
        of = made_of(today.audit, at.report.audit, at.report.case.currency)
        return f"That is {less} than today's {count} cost with deliveries at their best.{of}{_paid_once(at, saved)}"
    return (f"That is {_money(at, -saved, 'up')} ({part}) more than today's {count}: today's sites break a count or "
            "group rule of this workbook that the plan keeps.")


def _once(at: SitePlaces) -> float:
    """What opening and closing sites costs, which comes once."""
    case, running = at.report.case, at.report.plan.open
    return float(case.opening_cost[running & ~case.today].sum() + case.closing_cost[case.today & ~running].sum())


def _paid_once(at: SitePlaces, saved: float) -> str:
    """What the plan saves when all that is paid once is paid."""
    once = _once(at)
    if once <= 0:
        return ""
    return (f" Once opening and closing are paid, it costs {_money(at, saved + once, 'down')} per "
            f"{at.report.case.period_covered} less than today.")


def _tiles(at: SitePlaces, ledger: Ledger, checks: ChecksAt) -> list[Tile]:
    report = at.report
    cost, currency = report.audit.total, report.case.currency
    per = f"{'in the first' if _once(at) > 0 else 'per'} {report.case.period_covered}"
    today = report.today
    if today is None:
        count = f'=COUNTIF({at.sites_at.span("open")},"yes")'
        against = Tile("Open sites", int(report.plan.open.sum()), f"of {_choices(at)}", count,
                       style.WHOLE)
    elif today.solved.cost is None:
        against = Tile("Against today", "no figure", "today's sites cannot keep the rules")
    else:
        against = against_tile(today.solved.cost - cost, f"{currency} {per}")
    return [cost_tile(cost, currency, ledger, per), against, still_tile(report.solved, currency), checks_tile(checks)]


def _comparison(at: SitePlaces, ledger: Ledger) -> list[Today]:
    case, report = at.report.case, at.report
    money = style.money_format(case.currency)
    before = report.today.solved.plan if report.today is not None else None
    cost = report.today.solved.cost if report.today is not None else None
    missing = None if report.today is None else "not possible"
    rows = [
        Today(f"Cost ({at.money_unit})", missing if cost is None else cost, report.audit.total, money,
              f"={ledger.total}"),
        Today("Open sites (number)", int(case.today.sum()) if at.has_today else missing, int(report.plan.open.sum()),
              style.WHOLE, f'=COUNTIF({at.sites_at.span("open")},"yes")'),
    ]
    if at.measured:
        rows.append(Today(f"Average distance ({case.distance_unit})", missing if before is None else
                          _average_distance(at, before), _average_distance(at, report.plan), "#,##0.0",
                          _average_formula(at)))
    if case.unmet_cost is not None:
        was = missing if before is None else float(before.unmet @ case.demand)
        where = at.customers_at
        rows.append(Today(f"Unmet demand ({case.demand_unit})", was, float(report.plan.unmet @ case.demand),
                          at.demand_format, f"=SUMPRODUCT({where.span('unmet')}*{where.span('demand')})"))
    moved, volume = _moved(at)
    if before is not None:
        total = float(case.demand.sum())
        rows.append(Today("Customers with another main site (number)", None, moved, style.WHOLE))
        rows.append(Today("Their share of all demand (%)", None, volume / total if total else 0.0, style.PERCENT))
    return rows


def _average_distance(at: SitePlaces, plan: Plan) -> float | str:
    """Average distance of a delivered unit; words where no distance is known."""
    case = at.report.case
    if case.distance is None:
        return "not known"
    far = case.distance[plan.site, plan.customer]
    volume = np.where(np.isfinite(far), plan.share * case.demand[plan.customer], 0.0)
    total = float(volume.sum())
    return float((np.where(np.isfinite(far), far, 0.0) * volume).sum() / total) if total > 0 else "not known"


def _average_formula(at: SitePlaces) -> str:
    """Formula of the average distance over the sheet of deliveries; deliveries without a distance do not count."""
    where = at.deliveries_at
    far, volume = where.span("distance"), where.span("volume")
    return f"=SUMPRODUCT({far},{volume})/SUMPRODUCT(ISNUMBER({far})*{volume})"


def _moved(at: SitePlaces) -> tuple[int, float]:
    """Customers whose main site changes against today, and their demand."""
    which = _movers(at)
    return len(which), float(at.report.case.demand[which].sum())


def _movers(at: SitePlaces) -> list[int]:
    today, plan, n = at.report.today, at.report.plan, at.report.case.n
    if today is None or today.solved.plan is None:
        return []
    before = today.solved.plan
    was, now = (main_sites(p.site, p.customer, p.share, n) for p in (before, plan))
    return [i for i in range(n) if was[i] != now[i]]


def _changes(at: SitePlaces) -> list[str]:
    case, plan = at.report.case, at.report.plan
    points = []
    if at.has_today:
        for word, which in (("Opens", plan.open & ~case.today), ("Closes", case.today & ~plan.open),
                            ("Stays open", plan.open & case.today)):
            if which.any():
                points.append(f"{word}: {site_words(at, which)}.")
    else:
        points += _tasks(at)
    movers = _movers(at)
    if movers:
        largest = sorted(movers, key=lambda i: -case.demand[i])[:4]
        who = style.listed([style.short(case.customers[i], case.customer_names[i]) for i in largest])
        moved = style.counted(len(movers), "customer gets", "customers get")
        points.append(f"{moved} another main site; the largest: {who}. All of them are shaded in "
                      f"{at.name(names.PLAN_CUSTOMERS)}.")
    elif at.report.today is not None and at.report.today.solved.plan is not None:
        points.append("No customer gets another main site.")
    return points


def _tasks(at: SitePlaces, most: int = 6) -> list[str]:
    """What the largest open sites do: customers and part of the demand."""
    case, total = at.report.case, float(at.report.case.demand.sum())
    served = np.bincount(at.sites, minlength=case.m)
    running = np.flatnonzero(at.report.plan.open).tolist()
    points = []
    for j in sorted(running, key=lambda j: -at.load[j])[:most]:
        part = f", {style.percent_words(at.load[j] / total)} of the demand" if total else ""
        site = style.short(case.sites[j], case.site_names[j])
        points.append(f"{site}: {style.counted(int(served[j]), 'customer')}{part}.")
    if len(running) > most:
        points.append(f"{len(running) - most} more in {at.name(names.PLAN_SITES)}.")
    return points


def _sure(at: SitePlaces, checkable: float | None) -> list[str]:
    """How good the plan is; ``checkable`` is what the sheet Proof shows by itself that no plan can cost less than."""
    report, cost = at.report, at.report.audit.total
    points = how_sure(report.solved, report.case.currency, report.workbook.run.accepted_gap)
    if checkable is not None and cost - checkable <= WEAK * abs(cost):
        points.append(f"You can check most of this yourself: {at.name(names.PROOF)} shows, by prices and sums, that "
                      f"no plan costs less than {_money(at, checkable, 'down')}.")
    elif checkable is not None:
        points.append(f"What you can check yourself, in {at.name(names.PROOF)}: no plan costs less than "
                      f"{_money(at, checkable, 'down')}. The rest of this certainty rests on the program's search.")
    points.append("The plan was recomputed by a second, separate part of the program: every rule holds, and the "
                  "costs agree.")
    return points


def _check(at: SitePlaces) -> Sequence[str]:
    case, plan = at.report.case, at.report.plan
    points = ["Inputs: are the costs, demands and capacities of the open sites, and of the best closed ones, still "
              "right?"]
    if at.report.workbook.road_cost is not None and case.site_latitude is not None:
        points.append("Distances: straight lines times a road factor; check water, mountains and borders.")
    opened, closed = plan.open & ~case.today, case.today & ~plan.open
    if at.has_today and opened.any():
        points.append("Sites that open: permits, building, staff, time to start.")
    if at.has_today and closed.any():
        points.append("Sites that close: people, leases, contracts, and what customers were promised.")
    points.append("Local rules (labour, zoning, customs, transport), and matters that only licensed professionals "
                  "may decide, are not in this workbook.")
    return points
