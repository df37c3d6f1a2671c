"""The ledger of a site-selection plan: sites, deliveries, handling and unmet demand."""

import numpy as np

from ledgersolve.report import names, style
from ledgersolve.report.ledger import Group, Ledger, Line, Part, group_of_lines, write_ledger
from ledgersolve.report.site_places import SitePlaces, Source, column_source, lane_source
from ledgersolve.report.tables import Figure

FIXED, OPENING, CLOSING, LANE, HANDLING, UNMET = (
    "Fixed cost of open sites", "Opening cost", "Closing cost", "Lane cost", "Handling cost", "Unmet demand cost"
)


def site_ledger(at: SitePlaces) -> Ledger:
    """Write the ledger of the plan; parts carry the audit's names."""
    case, plan = at.report.case, at.report.plan
    running = np.flatnonzero(plan.open)
    started = np.flatnonzero(plan.open & ~case.today)
    ended = np.flatnonzero(case.today & ~plan.open)
    unit, money = case.demand_unit, case.currency
    site_rate = f"{money} per site{at.per}"
    parts = [
        _sites(at, FIXED, "Fixed cost", running, case.fixed_cost, site_rate),
        _sites(at, OPENING, "Opening cost", started, case.opening_cost, f"{money} per site, once"),
        _sites(at, CLOSING, "Closing cost", ended, case.closing_cost, f"{money} per site, once", closing=True),
        _lanes(at),
        Part(HANDLING, f"{unit}{at.per}", f"{money} per {unit}", at.demand_format, [_handling(at)]),
        Part(UNMET, f"{unit}{at.per}", f"{money} per {unit}", at.demand_format, [_unmet(at)]),
    ]
    return write_ledger(at.name(names.LEDGER), parts, money, at.per, "Site", "Customer or matter")


def _sites(at: SitePlaces, name: str, title: str, which: np.ndarray, cost: np.ndarray, rate_unit: str,
           closing: bool = False) -> Part:
    case, lines = at.report.case, []
    used = bool(cost[which].any()) or title == "Fixed cost"
    for j in which.tolist() if used else []:
        source = column_source(at, "Sites", case.sites[j], title, float(cost[j]))
        word = "no" if closing else "yes"
        quantity = Figure(1.0, f'IF({at.sites_at.cell("open", j)}="{word}",1,0)')
        lines.append(_line((title, j, 0), case.sites[j], _site_words(at, j, closing), quantity, source))
    return Part(name, "site closed" if closing else "site open", rate_unit, style.WHOLE, [group_of_lines(lines)])


def _site_words(at: SitePlaces, j: int, closing: bool) -> str:
    name = at.report.case.site_names[j]
    words = "" if name == at.report.case.sites[j] else name
    return f"{words} (closes)".strip() if closing else words


def _lanes(at: SitePlaces) -> Part:
    case = at.report.case
    whole = case.cost_is_whole
    groups = []
    bounds = np.flatnonzero(np.diff(at.sites, prepend=-1))
    ends = [*bounds[1:].tolist(), at.sites.size][: bounds.size]  # without deliveries, no group
    for first, last in zip(bounds.tolist(), ends, strict=True):
        j = int(at.sites[first])
        count = style.counted(last - first, "delivery", "deliveries")
        if at.compact:
            groups.append(group_of_lines([_all_deliveries(at, j, count)]))
            continue
        lines = [_delivery(at, k) for k in range(first, last)]
        groups.append(Group(("Lanes", j, 0), case.sites[j], count, lines))
    unit = "share of the demand" if whole else f"{case.demand_unit}{at.per}"
    rate = f"{case.currency} for the whole demand" if whole else f"{case.currency} per {case.demand_unit}"
    return Part(LANE, unit, rate, "0.00####" if whole else at.demand_format, groups)


def _all_deliveries(at: SitePlaces, j: int, count: str) -> Line:
    """One line for all deliveries of a site; each delivery has its rate and cost in the table of deliveries."""
    case, where = at.report.case, at.deliveries_at
    own = at.sites == j
    amount = float((case.lane_cost[j, at.customers[own]] * at.lane_quantities[own]).sum())
    site = at.sites_at.cell("site", j)
    rate = Figure(amount, f"SUMIF({where.span('site')},{site},{where.span('cost')})")
    return Line(("Lanes", j, 0), case.sites[j], f"all {count}", Figure(1.0), rate, None,
                f"sum of the costs in {at.name(names.PLAN_DELIVERIES)}", "all together",
                f"{case.currency} for all together")


def _delivery(at: SitePlaces, k: int) -> Line:
    case = at.report.case
    j, i = int(at.sites[k]), int(at.customers[k])
    key = "share" if case.cost_is_whole else "volume"
    value = float(at.shares[k] if case.cost_is_whole else at.volumes[k])
    quantity = Figure(value, at.deliveries_at.cell(key, k))
    what = style.named(case.customers[i], case.customer_names[i])
    return _line(("Lane", j, i), case.sites[j], what, quantity, lane_source(at, k))


def _handling(at: SitePlaces) -> Group:
    case, lines = at.report.case, []
    if case.handling_cost.any():
        for j in np.flatnonzero(at.report.plan.open).tolist():
            source = column_source(at, "Sites", case.sites[j], "Handling cost", float(case.handling_cost[j]))
            quantity = Figure(float(at.load[j]), at.sites_at.cell("load", j))
            lines.append(_line(("Handling", j, 0), case.sites[j], "volume through the site", quantity, source))
    return group_of_lines(lines)


def _unmet(at: SitePlaces) -> Group:
    case, plan = at.report.case, at.report.plan
    lines: list[Line] = []
    if case.unmet_cost is None:
        return group_of_lines(lines)
    ref = at.report.workbook.origins.setting("Unmet demand cost")
    note = "" if ref is not None else "a number written as text: taken as a constant"
    source = Source(Figure(case.unmet_cost, "" if ref is None else ref.formula), ref, note)
    for i in np.flatnonzero(plan.unmet > 0).tolist():
        where = at.customers_at
        quantity = Figure(
            float(plan.unmet[i] * case.demand[i]), f"{where.cell('unmet', i)}*{where.cell('demand', i)}"
        )
        what = style.named(case.customers[i], case.customer_names[i])
        lines.append(_line(("Unmet", 0, i), "", what, quantity, source))
    return group_of_lines(lines)


def _line(key: tuple[str, int, int], who: str, what: str, quantity: Figure, source: Source) -> Line:
    return Line(key, who, what, quantity, source.figure, source.ref, source.note)
