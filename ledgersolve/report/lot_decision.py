"""The Decision page of a lot-sizing plan, in words."""

from dataclasses import replace

import numpy as np

from ledgersolve.findings import Audit
from ledgersolve.lot_sizing.case import Flags, Floats
from ledgersolve.lot_sizing.plan import Plan as LotPlan
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
from ledgersolve.report.lot_details import FULL, lots_row
from ledgersolve.report.lot_places import FIRST_PERIOD, LotPlaces
from ledgersolve.report.tables import Figure
from ledgersolve.workbook.figures import NO_BREAK, unit_words
from ledgersolve.workbook.sheets import Area, Chart, ResultSheet, Series

NOISE = 1e-6
"""Quantities below this are rounding of the machine."""
MOST_SHORT = 3
"""Items that the first sentence names as late or not delivered."""
GLOSSARY = (
    ("Cost of the plan", "everything in the ledger, over all periods"),
    ("Lot", "the quantity of an item made in one period, with one setup"),
    ("Stock", "what is there at the end of a period"),
    ("Could still be saved", "no plan that keeps the workbook's rules costs less than the cost of this one less "
                             "that amount"),
    ("Load", "time that lots and setups need on a resource"),
)


def lot_decision(at: LotPlaces, ledger: Ledger, checks: ChecksAt) -> ResultSheet:
    """Write the page."""
    report = at.report
    amounts = {part.name: part.amount for part in report.audit.parts}
    page = Decision(
        kicker="Lot sizing", title=report.workbook.title, headline=_headline(at), second=_against_today(at),
        tiles=_tiles(at, ledger, checks),
        changed=changed_since(ledger, at.name(names.RUN_RECORD), at.name(names.PROOF)),
        comparison=_comparison(at, ledger), compared=report.today is not None,
        parts=[(name, Figure(amounts[name], ledger.part(name))) for name in ledger.parts],
        total=Figure(report.audit.total, ledger.total),
        changes=_changes(at), changes_title="What changes" if report.today is not None else "What is made",
        sure=_sure(at), binding=_binding(at), check=_check(at),
        asked=asked_ahead(report.answers), glossary=GLOSSARY,
        provenance=provenance(report.workbook, report.run),
        currency=report.case.currency, per="",
    )
    return write_decision(at.name(names.DECISION), page, picture(at))


def _money(at: LotPlaces, amount: float, rounding: style.Rounding = "nearest") -> str:
    return style.money_words(amount, at.report.case.currency, rounding)


def _headline(at: LotPlaces) -> str:
    case, plan = at.report.case, at.report.plan
    cost = _money(at, at.report.audit.total)
    span = f"{case.period_unit} {case.periods[0]} to {case.periods[-1]}"
    items = style.counted(case.n, "item")
    made = f"Make {style.counted(plan.setups, 'lot')} of {items}, {span}. All together that costs {cost}."
    never = _undelivered(at, plan.lost.sum(axis=1), "{} will never be delivered.")
    return f"{made}{never}{_undelivered(at, plan.late.max(axis=1), 'Up to {} will be late at a time.')}"


def _undelivered(at: LotPlaces, by_item: Floats, sentence: str) -> str:
    """What the plan delivers late or never, item by item; "" where that is nothing."""
    case = at.report.case
    items = np.flatnonzero(by_item > NOISE).tolist()
    if not items:
        return ""
    if len(items) > MOST_SHORT:
        return f" {sentence.format(f'some of {len(items)} items').capitalize()}"
    units = [f"{style.quantity_words(float(by_item[i]))}{NO_BREAK}{unit_words(float(by_item[i]), case.units[i])}"
             for i in items]
    amounts = [f"{amount} of {case.item_names[i]}" for amount, i in zip(units, items, strict=True)]
    return f" {sentence.format(style.listed(amounts))}"


def _against_today(at: LotPlaces) -> str:
    today = at.report.today
    if today is None or today.solved.cost is None or today.audit is None:
        return ""
    saved = today.solved.cost - at.report.audit.total
    part = f" ({style.percent_words(abs(saved) / today.solved.cost, 'down')})" if today.solved.cost else ""
    lots = "" if today.solved.plan is None else f" with {style.counted(today.solved.plan.setups, 'lot')}"
    of = made_of(today.audit, at.report.audit, at.report.case.currency)
    words = f"That is {_money(at, saved, 'down')}{part} less than today's plan{lots} costs.{of}" if saved >= 0 else (
        f"That is {_money(at, -saved, 'up')}{part} more than today's plan{lots} costs on paper.{of}")
    broken = today.audit.broken()
    if broken:
        words += (f" Today's plan breaks {style.counted(len(broken), 'rule')} of this workbook, first of all: "
                  f"{broken[0].rule.lower()} ({broken[0].subject}).")
    return words


def _tiles(at: LotPlaces, ledger: Ledger, checks: ChecksAt) -> list[Tile]:
    report, currency = at.report, at.report.case.currency
    cost, today = report.audit.total, report.today
    if today is None or today.solved.cost is None:
        count = f'=COUNTIF({at.made.whole()},">0")'
        against = Tile("Lots", report.plan.setups, f"of {style.counted(report.case.n, 'item')}", count, style.WHOLE)
    else:
        broken = "; today's plan breaks rules" if today.audit is not None and not today.audit.ok else ""
        against = against_tile(today.solved.cost - cost, currency + broken)
    span = cost_tile(cost, currency, ledger, f"over {style.counted(report.case.t, report.case.period_unit)}")
    return [span, against, still_tile(report.solved, currency), checks_tile(checks)]


def _comparison(at: LotPlaces, ledger: Ledger) -> list[Today]:
    case, report = at.report.case, at.report
    before = report.today.solved.plan if report.today is not None else None
    cost = report.today.solved.cost if report.today is not None else None
    missing = None
    rows = [
        Today(f"Cost ({case.currency})", missing if cost is None else cost, report.audit.total,
              style.money_format(case.currency), f"={ledger.total}"),
        Today("Lots (number)", missing if before is None else before.setups, report.plan.setups, style.WHOLE,
              f'=COUNTIF({at.made.whole()},">0")'),
        _stock_row(at, before),
    ]
    if at.may_wait:
        late = None if before is None else before.late
        rows.append(_sum_row(f"Late (units x {case.period_unit}s)", late, report.plan.late, at.late.whole()))
    if at.may_lose:
        lost = None if before is None else before.lost
        rows.append(_sum_row("Never delivered (units)", lost, report.plan.lost, at.lost.whole()))
    if case.resources:
        overtime = None if before is None else before.overtime
        block = at.load_block("overtime").whole()
        rows.append(_sum_row("Overtime (time units)", overtime, report.plan.overtime, block))
    return rows


def _stock_row(at: LotPlaces, before: LotPlan | None) -> Today:
    """Stock on average; what holding it costs, where items are counted in different units."""
    case, report = at.report.case, at.report
    units = set(case.units)
    if len(units) > 1:
        was, now = (None if audit is None else _holding(audit)
                    for audit in (None if report.today is None else report.today.audit, report.audit))
        return Today(f"Cost of holding stock ({case.currency})", was, now, style.money_format(case.currency))
    mean = _average_stock_value
    return Today(f"Stock on average ({units.pop()})", None if before is None else mean(before.stock),
                 mean(report.plan.stock), "#,##0.0", f"=SUM({at.stock.whole()})/COLUMNS({at.stock.line(0)})")


def _holding(audit: Audit) -> float:
    return next((part.amount for part in audit.parts if part.name == "Holding cost"), 0.0)


def _sum_row(label: str, before: Floats | None, now: Floats, cells: str) -> Today:
    """Sums of today and of the plan; ``cells`` are those of the plan."""
    figures = [float(now.sum())] + ([] if before is None else [float(before.sum())])
    look = style.figure_format(figures)
    return Today(label, None if before is None else figures[1], figures[0], look, f"=SUM({cells})")


def _average_stock_value(stock: np.ndarray) -> float:
    return float(stock.sum()) / max(1, int(stock.shape[1]))


def _changes(at: LotPlaces) -> list[str]:
    case, plan, today = at.report.case, at.report.plan, at.report.today
    first = [case.item_names[i] for i in np.flatnonzero(plan.setup[:, 0]).tolist()]
    points = [f"Start now ({case.period_unit} {case.periods[0]}): {style.listed(first, 6)}."]
    if today is None or today.solved.plan is None:
        return [*points, *_largest(at)]
    before = today.solved.plan
    changed = np.flatnonzero((np.abs(before.made - plan.made) > 1e-6).any(axis=1))
    saved = _saved_by_item(at)
    if changed.size:
        top = sorted(changed.tolist(), key=lambda i: -abs(saved[i]))[:4]
        words = style.listed([case.item_names[i] for i in top])
        who = f"All {case.n} items" if changed.size == case.n > 1 else (
            f"{changed.size} of {style.counted(case.n, 'item')}")
        points.append(f"Made in other lots than today: {who.lower()}; most of the money moves with {words}.")
    fewer = before.setups - plan.setups
    if fewer:
        points.append(f"{style.counted(abs(fewer), 'setup')} {'fewer' if fewer > 0 else 'more'} than today.")
    stock = _stock_row(at, before)
    if isinstance(stock.today, float) and isinstance(stock.plan, float) and abs(stock.plan - stock.today) > NOISE:
        was, now = (style.quantity_words(figure) for figure in (stock.today, stock.plan))
        points.append(f"{stock.label}: {now}, today {was}.")
    late = int(np.count_nonzero(plan.late.max(axis=1) > NOISE))
    if late:
        points.append(f"{style.counted(late, 'item is', 'items are')} late at some time: see "
                      f"{at.name(names.PLAN_LATE)}.")
    return points


def _largest(at: LotPlaces) -> list[str]:
    """The lots that cost most to make."""
    case, plan = at.report.case, at.report.plan
    worth = plan.made * np.maximum(case.unit_cost, 1e-9) + case.setup_cost * plan.setup
    order = np.argsort(-worth, axis=None, kind="stable")[:3].tolist()
    points = []
    for place in order:
        i, t = divmod(place, case.t)
        if plan.setup[i, t]:
            made = float(plan.made[i, t])
            points.append(f"{case.item_names[i]}: {style.quantity_words(made)} {unit_words(made, case.units[i])} in "
                          f"{case.period_unit} {case.periods[t]}.")
    return [f"Dearest lots: {' '.join(points)}"] if points else []


def _saved_by_item(at: LotPlaces) -> list[float]:
    """Setup, production and holding cost of each item, today's less the plan's."""
    case, today = at.report.case, at.report.today
    if today is None or today.solved.plan is None:
        return [0.0] * case.n
    costs = [(case.setup_cost * p.setup + case.unit_cost * p.made + case.holding_cost * p.stock).sum(axis=1)
             for p in (today.solved.plan, at.report.plan)]
    return [float(x) for x in costs[0] - costs[1]]


def _sure(at: LotPlaces) -> list[str]:
    report = at.report
    return [
        *how_sure(report.solved, report.case.currency, report.workbook.run.accepted_gap),
        "The plan was recomputed by a second, separate part of the program: every rule holds, and the costs agree.",
        f"Stock, load and cost are formulas over the lots and your own cells: {at.name(names.PROOF)} watches every "
        "rule.",
    ]


def _binding(at: LotPlaces) -> list[str]:
    case, plan, points = at.report.case, at.report.plan, []
    for r, code in enumerate(case.resources):
        full = at.need[r] >= FULL * at.available[r]
        if full.any():
            spent = ", with all the overtime allowed" if case.overtime_limit[r] > 0 else ""
            points.append(f"{code} is full in {case.period_unit} {_when(at, full)}{spent}.")
        over = (plan.overtime[r] > 1e-9) & ~full
        if over.any():
            points.append(f"{code} needs some overtime in {case.period_unit} {_when(at, over)}.")
        regular = (at.need[r] >= FULL * case.capacity[r]) & (at.need[r] > 0) & ~full & ~over
        if regular.any():
            points.append(f"{code} has no regular time left in {case.period_unit} {_when(at, regular)}; the overtime "
                          "allowed is not used.")
    for label, which in (
        ("Most stock reached", plan.stock >= FULL * case.most_stock[:, None]),
        ("Least lot reached", plan.setup & (plan.made <= case.least_lot[:, None] / FULL)),
        ("Most lot reached", plan.setup & (plan.made >= FULL * case.most_lot[:, None])),
    ):
        items = np.flatnonzero(which.any(axis=1)).tolist()
        if items:
            points.append(f"{label}: {style.listed([case.item_names[i] for i in items], 6)}.")
    return points[:8] or ["No capacity, stock or lot rule holds the plan back: costs alone decide."]


def _when(at: LotPlaces, which: Flags, most: int = 8) -> str:
    """Periods as a list in a sentence."""
    return style.listed([at.report.case.periods[t] for t in np.flatnonzero(which).tolist()], most)


def _check(at: LotPlaces) -> list[str]:
    case = at.report.case
    points = ["Inputs: are demand, opening stock, setup costs and times still right?"]
    if case.resources:
        points.append("Capacity: holidays, maintenance and staff in the full periods; whether overtime may be "
                      "asked for.")
    points.append("Order of lots within a period, shelf life, tools, quality holds and suppliers are not in this "
                  "workbook.")
    if at.may_lose and at.report.plan.lost.any():
        points.append("Lost sales: who tells the customers, and what was promised to them.")
    points.append("Labour rules and contracts, and matters that only licensed professionals may decide, are not in "
                  "this workbook.")
    return points


def picture(at: LotPlaces) -> Chart:
    """Load against time available of the fullest resource; without resources, lots by period."""
    case = at.report.case
    last = FIRST_PERIOD + case.t - 1
    if not case.resources:
        row = lots_row(at)
        series = (Series("Lots", Area(at.made.sheet, row - 1, FIRST_PERIOD, row - 1, last),
                         Area(at.made.sheet, row, FIRST_PERIOD, row, last), style.PETROL),)
        return Chart("column", f"Lots by {case.period_unit}", series, 0, 0, x_title=case.period_unit, y_title="lots",
                     legend="", number_format="0", description="Number of lots in each period")
    hours = at.available
    r = int(np.argmax((at.need / np.where(hours > 0, hours, np.inf)).mean(axis=1)))
    load, available, capacity = (at.load_block(key) for key in ("load", "available", "capacity"))
    titles = Area(load.sheet, load.first_row - 1, FIRST_PERIOD, load.first_row - 1, last)
    lines = [
        Series("Load", titles, Area(load.sheet, load.first_row + r, FIRST_PERIOD, load.first_row + r, last),
               style.PETROL),
        Series("Time available", titles,
               Area(load.sheet, available.first_row + r, FIRST_PERIOD, available.first_row + r, last), style.RUST,
               kind="line", marker="square", marker_size=5),
    ]
    if case.overtime_limit[r] > 0:
        lines[1] = replace(lines[1], name="Time available with all overtime")
        lines.append(Series(
            "Capacity", titles, Area(load.sheet, capacity.first_row + r, FIRST_PERIOD, capacity.first_row + r, last),
            style.QUIET, kind="line", dash="dash", marker="circle", marker_size=4))
    return Chart("column", f"Load of {case.resources[r]} by {case.period_unit}", tuple(lines), 0, 0,
                 x_title=case.period_unit, y_title="time units", number_format="#,##0", from_zero=True,
                 description="Columns of the load and a line of the time available in each period")
