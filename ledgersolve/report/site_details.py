"""Detail sheets of a site-selection plan: sites, customers, deliveries."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from ledgersolve.report import names, style
from ledgersolve.report.ledger import Ledger
from ledgersolve.report.site_places import LEDGER_DELIVERIES, SitePlaces, distance_source, lane_source
from ledgersolve.report.tables import FIRST_ROW, Column, detail_sheet, fitting_width
from ledgersolve.site_selection.case import CLOSED, FREE, OPEN
from ledgersolve.workbook.sheets import LiveFormat, ResultSheet, Scalar, Style

OPEN_ROW = replace(style.TEXT, bold=True, fill=style.PALE)
MOVED_ROW = replace(style.TEXT, fill=style.SAND)
SERVED_CELLS = 30_000_000
"""Customers x deliveries up to which delivered shares are formulas; beyond, recalculating would take too long."""


def plan_sites(at: SitePlaces, ledger: Ledger) -> ResultSheet:
    """Every site: open or not, load, use of capacity, and what it costs."""
    case, plan, where = at.report.case, at.report.plan, at.sites_at
    rows = range(case.m)
    served = np.bincount(at.sites, minlength=case.m)
    total = float(case.demand.sum())
    deliveries = at.deliveries_at
    columns = [
        Column("site", "Site", case.sites, width=fitting_width(case.sites)),
        *_names(at.sites_named, "name", "Name", case.site_names),
        Column("open", "Open in the plan (yes/no)", ["yes" if o else "no" for o in plan.open], width=11),
        *_today_columns(at),
        Column("customers", "Customers served (number)", served.tolist(), style.number(style.WHOLE), 12,
               [f"COUNTIF({deliveries.span('site')},{where.here('site', j)})" for j in rows]),
        Column("load", f"Load ({case.demand_unit}{at.per})", at.load.tolist(), style.number(at.demand_format), 14,
               [f"SUMIF({deliveries.span('site')},{where.here('site', j)},{deliveries.span('volume')})"
                for j in rows]),
        *_capacity_columns(at),
        *_cost_columns(at, ledger),
        Column("part", "Part of all demand (%)", [load / total if total else None for load in at.load.tolist()],
               style.number(style.PERCENT), 11,
               [f"{where.here('load', j)}/SUM({at.customers_at.span('demand')})" if total else "" for j in rows]),
        *_rule_columns(at),
    ]
    words = "All sites of the workbook, open ones shaded. Loads follow from the deliveries, costs from the ledger."
    sheet = detail_sheet(at.name(names.PLAN_SITES), "Sites in the plan", words, columns, style.MOSS)
    _shade(sheet, where.letters["open"], len(columns), case.m, "yes", OPEN_ROW)
    return sheet


def _names(given: bool, key: str, title: str, names_: Sequence[str]) -> list[Column]:
    """A column of names; none where the workbook gives codes only."""
    return [Column(key, title, names_, width=fitting_width(names_, 14))] if given else []


def _today_columns(at: SitePlaces) -> list[Column]:
    if not at.has_today:
        return []
    case, plan, where = at.report.case, at.report.plan, at.sites_at
    change = [_change(bool(o), bool(t)) for o, t in zip(plan.open, case.today, strict=True)]
    open_, today = where.letters["open"], where.letters["today"]
    formulas = []
    for j in range(case.m):
        row = FIRST_ROW + j + 1
        formulas.append(f'IF({open_}{row}={today}{row},"no change","")&IF({open_}{row}>{today}{row},"opens","")'
                        f'&IF({open_}{row}<{today}{row},"closes","")')
    return [
        Column("today", "In use today (yes/no)", ["yes" if t else "no" for t in case.today], width=10),
        Column("change", "Change", change, width=11, formulas=formulas),
    ]


def _rule_columns(at: SitePlaces) -> list[Column]:
    case, columns = at.report.case, []
    if at.ruled:
        words = {FREE: "free", OPEN: "open", CLOSED: "closed"}
        columns.append(Column("rule", "Rule (free, open, closed)", [words[int(r)] for r in case.rule], width=12))
    if at.grouped:
        group = [case.group_names[g] if g >= 0 else None for g in case.group.tolist()]
        columns.append(Column("group", "Group", group, width=12))
    return columns


def _change(in_plan: bool, today: bool) -> str:
    return "no change" if in_plan == today else "opens" if in_plan else "closes"


def _capacity_columns(at: SitePlaces) -> list[Column]:
    case, where = at.report.case, at.sites_at
    origins, rows = at.report.workbook.origins, range(case.m)
    capped = np.isfinite(case.capacity)
    refs = [origins.number("Sites", (code,), "Capacity") for code in case.sites]
    used = [float(at.load[j] / case.capacity[j]) if capped[j] and case.capacity[j] > 0 else None for j in rows]
    figures = style.number(at.demand_format)
    columns = [
        Column("capacity", f"Capacity ({case.demand_unit}{at.per})",
               [float(case.capacity[j]) if capped[j] else "unlimited" for j in rows], figures, 14,
               [ref.formula if ref is not None and capped[j] else "" for j, ref in enumerate(refs)]),
        Column("use", "Load of capacity (%)", used, style.number(style.PERCENT), 11,
               [f"{where.here('load', j)}/{where.here('capacity', j)}" if used[j] is not None else "" for j in rows]),
    ]
    if case.least_volume.any():
        least = [origins.number("Sites", (code,), "Least volume") for code in case.sites]
        columns.append(Column("least", "Least volume if open "
                                       f"({case.demand_unit}{at.per})", case.least_volume.tolist(),
                              figures, 14, [ref.formula if ref is not None else "" for ref in least]))
    return columns


def _cost_columns(at: SitePlaces, ledger: Ledger) -> list[Column]:
    """Costs of each site, each a pointer at its ledger lines; nothing where there is no line."""
    case, where = at.report.case, at.sites_at
    money, rows = style.number(style.money_format(case.currency)), range(case.m)
    lane = np.bincount(at.sites, weights=_lane_amounts(at), minlength=case.m)
    running = at.report.plan.open
    values: dict[str, Sequence[float]] = {
        "fixed": np.where(running, case.fixed_cost, 0.0).tolist(),
        "once": (np.where(running & ~case.today, case.opening_cost, 0.0)
                 + np.where(case.today & ~running, case.closing_cost, 0.0)).tolist(),
        "lane": lane.tolist(),
        "handling": (at.load * case.handling_cost).tolist(),
    }
    keys = {"fixed": ["Fixed cost"], "once": ["Opening cost", "Closing cost"], "lane": ["Lanes"],
            "handling": ["Handling"]}
    titles = {"fixed": "Fixed cost", "once": "Opening or closing, once", "lane": "Lane cost",
              "handling": "Handling cost"}
    kept = [name for name in titles if (name != "once" or at.once) and (name != "handling" or at.handled)]
    columns = []
    for name in kept:
        title = titles[name]
        cells = [next(filter(None, (ledger.amount((key, j, 0)) for key in keys[name])), "") for j in rows]
        shown = [value if cell else None for value, cell in zip(values[name], cells, strict=True)]
        unit = case.currency if name == "once" else at.money_unit
        columns.append(Column(name, f"{title} ({unit})", shown, money, 16, cells))
    together = [sum(values[name][j] for name in kept) for j in rows]
    span = [f"SUM({where.here('fixed', j)}:{where.here(kept[-1], j)})" for j in rows]
    look = replace(money, bold=True, number_format=style.without_zeros(money.number_format))
    columns.append(Column("cost", f"Cost together ({at.money_unit})", together, look, 16, span))
    return columns


def _lane_amounts(at: SitePlaces) -> np.ndarray:
    case = at.report.case
    rate = case.lane_cost[at.sites, at.customers]
    return rate * at.lane_quantities


def plan_deliveries(at: SitePlaces, ledger: Ledger) -> ResultSheet:
    """Every delivery: who serves whom with how much, at what cost and distance."""
    case, where = at.report.case, at.deliveries_at
    count = range(at.sites.size)
    pairs = list(zip(at.sites.tolist(), at.customers.tolist(), strict=True))
    site_names, customer_names = case.site_names, case.customer_names
    columns = [
        Column("site", "Site", [case.sites[j] for j, _ in pairs], width=fitting_width(case.sites)),
        *_names(at.sites_named, "site name", "Site name", [site_names[j] for j, _ in pairs]),
        Column("customer", "Customer", [case.customers[i] for _, i in pairs],
               width=fitting_width(case.customers, 10)),
        *_names(at.customers_named, "customer name", "Customer name", [customer_names[i] for _, i in pairs]),
        Column("share", "Share of the customer's demand (%)", at.shares.tolist(), style.number(style.PERCENT), 14),
        Column("volume", f"Volume ({case.demand_unit}{at.per})", at.volumes.tolist(), style.number(at.demand_format),
               14, [f"{where.here('share', k)}*{at.customers_at.cell('demand', i)}" for k, (_, i) in
                    zip(count, pairs, strict=True)]),
        Column("cost", f"Lane cost ({at.money_unit})", _lane_amounts(at).tolist(),
               style.number(style.money_format(case.currency)), 16,
               _cost_formulas(at, ledger, pairs)),
        *_rate_column(at),
        *_distance_columns(at),
        *_limit_columns(at),
    ]
    words = "Who serves whom. Shares are the plan; volumes follow from the demand cells, "
    words += (f"costs are quantity x rate: above {LEDGER_DELIVERIES:,} deliveries the ledger has one line a site. "
              if at.compact else "costs stand in the ledger. ")
    words += "Sorted by site; use the filter for one site or customer."
    return detail_sheet(at.name(names.PLAN_DELIVERIES), "Deliveries in the plan", words, columns, style.MOSS)


def _cost_formulas(at: SitePlaces, ledger: Ledger, pairs: Sequence[tuple[int, int]]) -> list[str]:
    """Cost of each delivery: its ledger line, or quantity x rate where the ledger has one line a site."""
    if not at.compact:
        return [ledger.amount(("Lane", j, i)) for j, i in pairs]
    where, quantity = at.deliveries_at, "share" if at.report.case.cost_is_whole else "volume"
    return [f"{where.here(quantity, k)}*{where.here('rate', k)}" for k in range(len(pairs))]


def _rate_column(at: SitePlaces) -> list[Column]:
    if not at.compact:
        return []
    case = at.report.case
    sources = [lane_source(at, k).figure for k in range(at.sites.size)]
    basis = "whole demand" if case.cost_is_whole else case.demand_unit
    return [Column("rate", f"Rate ({case.currency} per {basis})", [s.value for s in sources],
                   style.number(style.rate_format(case.currency, [s.value for s in sources])), 14,
                   [s.formula for s in sources])]


def _distance_columns(at: SitePlaces) -> list[Column]:
    if not at.measured:
        return []
    unit = at.report.case.distance_unit
    values: list[Scalar] = []
    formulas: list[str] = []
    straight: list[Scalar] = []
    for k, measured in enumerate(np.isfinite(at.distances).tolist()):
        if not measured:
            values.append(None)
            formulas.append("")
            straight.append(None)
            continue
        figure, behind = distance_source(at, k)
        values.append(figure.value)
        formulas.append(figure.formula)
        straight.append(behind)
    look = style.number("#,##0.0")
    known = [Column("distance", f"Distance ({unit})", values, look, 12, formulas)]
    if not at.straight:
        return known
    return [*known, Column("straight", f"Straight line from coordinates ({unit})", straight, look, 14)]


def _limit_columns(at: SitePlaces) -> list[Column]:
    """Limits that deliveries keep: the farthest distance allowed, the most units on the lane."""
    case, columns = at.report.case, []
    if at.promised:
        promised = case.promised()[at.customers]
        columns.append(Column(
            "allowed", f"Longest distance allowed ({case.distance_unit})",
            [d if np.isfinite(d) else None for d in promised.tolist()], style.number("#,##0.0"), 14,
            [_promise_cell(at, i) if np.isfinite(d) else ""
             for i, d in zip(at.customers.tolist(), promised.tolist(), strict=True)],
        ))
    if case.lane_most is not None:
        most = case.lane_most[at.sites, at.customers].tolist()
        columns.append(Column("most", f"Most on the lane ({case.demand_unit}{at.per})",
                              [v if np.isfinite(v) else None for v in most], style.number(at.demand_format), 14))
    return columns


def _promise_cell(at: SitePlaces, customer: int) -> str:
    """Cell of the customer's own longest distance, or of the setting; "" where a formula can use neither."""
    origins, case = at.report.workbook.origins, at.report.case
    own = origins.number("Customers", (case.customers[customer],), "Longest distance")
    if np.isfinite(case.customer_longest[customer]):
        return "" if own is None else own.formula
    ref = origins.setting("Longest distance")
    return "" if ref is None else ref.formula


def plan_customers(at: SitePlaces) -> ResultSheet:
    """Every customer: demand, what is delivered, from where, and what changes against today."""
    case, plan, where = at.report.case, at.report.plan, at.customers_at
    rows = range(case.n)
    delivered = np.bincount(at.customers, weights=at.shares, minlength=case.n)
    sources = np.bincount(at.customers, minlength=case.n)
    main = main_sites(plan.site, plan.customer, plan.share, case.n)
    live = case.n * at.sites.size <= SERVED_CELLS
    deliveries = at.deliveries_at
    figures = style.number(at.demand_format)
    columns = [
        Column("customer", "Customer", case.customers, width=fitting_width(case.customers, 10)),
        *_names(at.customers_named, "name", "Name", case.customer_names),
        Column("demand", f"Demand ({case.demand_unit}{at.per})", case.demand.tolist(), figures, 14,
               [at.demand(i).formula for i in rows]),
        Column("delivered", "Delivered (% of demand)", delivered.tolist(), style.number(style.PERCENT), 12,
               [f"SUMIF({deliveries.span('customer')},{where.here('customer', i)},{deliveries.span('share')})"
                for i in rows] if live else None),
        Column("unmet", "Unmet (% of demand)", plan.unmet.tolist(), style.number(style.PERCENT), 12),
        Column("sites", "Served by (number of sites)", sources.tolist(), style.number(style.WHOLE), 12,
               [f"COUNTIF({deliveries.span('customer')},{where.here('customer', i)})" for i in rows]
               if live else None),
        Column("main", "Main site", [case.sites[j] if j >= 0 else "" for j in main], width=12),
        *_names(at.sites_named, "main name", "Name of main site",
                [case.site_names[j] if j >= 0 else "" for j in main]),
        *_single_columns(at),
        *_reach_columns(at),
        *_move_columns(at, main),
    ]
    words = "Every customer with its demand cell, what the plan delivers, and from where."
    if not live:
        words += " At this size, delivered shares and numbers of sites are figures, not formulas."
    sheet = detail_sheet(at.name(names.PLAN_CUSTOMERS), "Customers in the plan", words, columns, style.MOSS)
    if "moves" in where.letters:
        _shade(sheet, where.letters["moves"], len(columns), case.n, "yes", MOVED_ROW)
    return sheet


def main_sites(site: np.ndarray, customer: np.ndarray, share: np.ndarray, n: int) -> list[int]:
    """Site with the largest share of each customer; -1 where nothing is delivered."""
    main = np.full(n, -1, dtype=np.int64)
    order = np.argsort(share, kind="stable")
    main[customer[order]] = site[order]
    return [int(j) for j in main]


def _single_columns(at: SitePlaces) -> list[Column]:
    single = at.report.case.single_source
    if not single.any():
        return []
    return [Column("single", "From one site only (yes/no)", ["yes" if one else "no" for one in single], width=12)]


def _reach_columns(at: SitePlaces) -> list[Column]:
    if not at.measured:
        return []
    case = at.report.case
    far = np.full(case.n, -1.0)
    known = np.isfinite(at.distances)
    np.maximum.at(far, at.customers[known], at.distances[known])
    look = style.number("#,##0.0")
    columns = [Column("farthest", f"Farthest delivery ({case.distance_unit})",
                      [d if d >= 0 else None for d in far.tolist()], look, 12)]
    if at.promised:
        promised = case.promised().tolist()
        columns.append(Column("promise", f"Longest distance allowed ({case.distance_unit})",
                              [d if np.isfinite(d) else "no limit" for d in promised], look, 13))
    return columns


def _move_columns(at: SitePlaces, main: list[int]) -> list[Column]:
    today = None if at.report.today is None else at.report.today.solved.plan
    if today is None:
        return []
    case = at.report.case
    was = main_sites(today.site, today.customer, today.share, case.n)
    before = [case.sites[j] if j >= 0 else "" for j in was]
    moves = ["yes" if old != new else "no" for old, new in zip(was, main, strict=True)]
    return [
        Column("today", "Main site today", before, width=12),
        Column("moves", "Changes its main site (yes/no)", moves, width=12),
    ]


def _shade(sheet: ResultSheet, letter: str, columns: int, rows: int, word: str, look: Style) -> None:
    formula = f'=${letter}{FIRST_ROW + 1}="{word}"'
    sheet.live_formats.append(LiveFormat(FIRST_ROW, 0, FIRST_ROW + rows - 1, columns - 1, formula, look))
