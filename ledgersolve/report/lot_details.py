"""Detail sheets of a lot-sizing plan: lots, stock, late and lost demand, load of resources."""

import math
from collections.abc import Sequence

import numpy as np

from ledgersolve.report import names, style
from ledgersolve.report.lot_places import CODE, NAME, Block, LotPlaces
from ledgersolve.report.period_tables import ALERT, MADE, SOME, PeriodTable, shade, write_periods
from ledgersolve.report.tables import FIRST_ROW, FOOTER, TITLE_ROW, Column, heading
from ledgersolve.workbook.sheets import ResultSheet, Style


def plan_lots(at: LotPlaces) -> ResultSheet:
    """What is made when; dark cells are lots. Rules of lots stand to the right."""
    case, plan = at.report.case, at.report.plan
    sheet = ResultSheet(at.name(names.PLAN_LOTS), tab_colour=style.MOSS, landscape=True)
    table = PeriodTable(at.made, case.items, case.item_names, case.units, plan.made, at.quantity_format,
                        side=_lot_columns(at))
    write_periods(at, sheet, table)
    shade(sheet, at.made, "{cell}>0", MADE)
    _lots_by_period(at, sheet)
    words = (f"Quantity made in each {case.period_unit}: each dark cell is a lot with its setup. These cells are "
             "the plan: stock, load and ledger follow from them.")
    return _finished(at, sheet, "Lots in the plan", words)


def lots_row(at: LotPlaces) -> int:
    """Row (from 0) of the number of lots in each period; the periods stand above it."""
    return at.made.first_row + at.report.case.n + 3


def _lots_by_period(at: LotPlaces, sheet: ResultSheet) -> None:
    case, row = at.report.case, lots_row(at)
    sheet.put(row - 2, 0, f"Lots by {case.period_unit}", style.SECTION)
    counts = PeriodTable(Block(sheet.name, row, 1, case.t), ["Lots"], [""], ["number"],
                         at.report.plan.setup.sum(axis=0, keepdims=True).astype(float), style.WHOLE,
                         lambda _, t: f'COUNTIF({at.made.column(t)},">0")', code_title="All items")
    write_periods(at, sheet, counts)


def _lot_columns(at: LotPlaces) -> list[Column]:
    case, quantity = at.report.case, style.number(style.without_zeros(at.quantity_format))
    rate = style.number(style.figure_format([*case.time_per_unit.tolist(), *case.setup_time.tolist()], 4))

    def of(title: str, values: np.ndarray, unit: str, look: Style = quantity) -> Column:
        finite = [float(v) if np.isfinite(v) else None for v in values]
        formulas = [at.figure("Items", (code,), title, 0.0).formula if v is not None else ""
                    for code, v in zip(case.items, finite, strict=True)]
        return Column(title, f"{title} ({unit})", finite, look, 11, formulas)

    resource = [case.resources[r] if r >= 0 else None for r in case.item_resource.tolist()]
    family = [case.families[f] if f >= 0 else None for f in case.item_family.tolist()]
    return [
        Column("resource", "Resource", resource, width=11),
        of("Time per unit", case.time_per_unit, "time units", rate),
        of("Setup time", case.setup_time, "time units", rate),
        Column("family", "Family", family, width=11),
        of("Least lot", case.least_lot, "units"),
        of("Most lot", case.most_lot, "units"),
        of("Lot multiple", case.lot_multiple, "units"),
    ]


PERIODS_A_PAGE = 22
FULL = 0.9995
"""Part of the time available from which a period counts as full."""
RESOURCE, TIME, SETUP_TIME, FAMILY, LEAST, MOST, MULTIPLE = range(7)
"""Columns to the right of the periods of the lots."""
SAFETY, CLOSING, MOST_STOCK, OPENING = range(4)
"""Columns to the right of the periods of the stock."""


def plan_stock(at: LotPlaces) -> ResultSheet:
    """Stock at the end of each period, as a formula over demand, receipts and lots."""
    case, plan = at.report.case, at.report.plan
    sheet = ResultSheet(at.name(names.PLAN_STOCK), tab_colour=style.MOSS, landscape=True)
    table = PeriodTable(at.stock, case.items, case.item_names, case.units, plan.stock, at.quantity_format,
                        lambda i, t: _stock_formula(at, i, t), f"Sum (unit x {case.period_unit})",
                        side=_stock_columns(at))
    write_periods(at, sheet, table)
    shade(sheet, at.stock, "{cell}<0", ALERT)
    shade(sheet, at.stock, "{cell}>0", SOME)
    words = (f"Stock at the end of each {case.period_unit} = stock before + receipts + made - demand (less what is "
             "late or lost). Change a demand cell and the stock follows.")
    return _finished(at, sheet, "Stock in the plan", words)


def _stock_formula(at: LotPlaces, i: int, t: int) -> str:
    """Stock before + made + receipts - demand + lost + late - late before; "" where a demand is not a number cell."""
    case, block = at.report.case, at.stock
    demand = at.demand_cell(i, t)
    if demand is None:
        return ""
    opening = f"{block.letter(case.t + OPENING)}{block.first_row + i + 1}"
    parts = [f"{opening if t == 0 else block.here(i, t - 1)}+{at.made.cell(i, t)}-{demand.formula}"]
    receipt = at.report.workbook.origins.number("Receipts", (case.items[i], case.periods[t]), "Quantity")
    if receipt is not None:
        parts.append(receipt.formula)
    elif case.receipts[i, t]:
        return ""
    if at.may_lose:
        parts.append(at.lost.cell(i, t))
    if at.may_wait:
        parts.append(at.late.cell(i, t) + (f"-{at.late.cell(i, t - 1)}" if t else ""))
    return "+".join(parts)


def _stock_columns(at: LotPlaces) -> list[Column]:
    case, look = at.report.case, style.number(style.without_zeros(at.quantity_format))

    def of(title: str, values: np.ndarray) -> Column:
        finite = [float(v) if np.isfinite(v) else None for v in values]
        formulas = [at.figure("Items", (code,), title, 0.0).formula if v is not None else ""
                    for code, v in zip(case.items, finite, strict=True)]
        return Column(title, f"{title} (units)", finite, look, 11, formulas)

    return [of("Safety stock", case.safety_stock), of("Closing stock", case.closing_stock),
            of("Most stock", case.most_stock), of("Opening stock", case.opening_stock)]


def plan_late(at: LotPlaces) -> ResultSheet:
    """Units late at the end of each period."""
    return _service(at, names.PLAN_LATE, at.late, at.report.plan.late, "Late deliveries in the plan",
                    "Units ordered and not yet delivered at the end of each period.")


def plan_lost(at: LotPlaces) -> ResultSheet:
    """Demand that is never met."""
    return _service(at, names.PLAN_LOST, at.lost, at.report.plan.lost, "Lost sales in the plan",
                    "Demand of each period that is never met.")


def _service(at: LotPlaces, wanted: str, block: Block, values: np.ndarray, title: str, words: str) -> ResultSheet:
    case = at.report.case
    sheet = ResultSheet(at.name(wanted), tab_colour=style.MOSS, landscape=True)
    write_periods(at, sheet, PeriodTable(block, case.items, case.item_names, case.units, values, at.quantity_format))
    shade(sheet, block, "{cell}>0", ALERT)
    return _finished(at, sheet, title, words)


def plan_load(at: LotPlaces) -> ResultSheet:
    """Time each resource needs against the time it has."""
    case = at.report.case
    sheet = ResultSheet(at.name(names.PLAN_LOAD), tab_colour=style.MOSS, landscape=True)
    resources = case.resources
    time = ["time units"] * len(resources)
    load, capacity, overtime, available, part, in_use = (
        at.load_block(key) for key in ("load", "capacity", "overtime", "available", "part", "in use"))
    share = np.divide(at.need, at.available, out=np.zeros_like(at.need), where=at.available > 0)
    blocks = [
        ("Load (time units)", load, at.need, at.time_format, lambda r, t: _load_formula(at, r, t), time, "Sum"),
        ("Capacity (time units)", capacity, case.capacity, at.time_format,
         lambda r, t: _capacity_formula(at, r, t), time, "Sum"),
        ("Overtime in the plan (time units)", overtime, at.report.plan.overtime, at.time_format, None, time, "Sum"),
        ("Load of the time available (%)", part, share, "0%",
         lambda r, t: f"IF({available.here(r, t)}>0,{load.here(r, t)}/{available.here(r, t)},0)",
         ["%"] * len(resources), ""),
        (f"In use (1 = a setup in the {case.period_unit})", in_use, at.used, style.WHOLE,
         lambda r, t: _use_formula(at, r, t), ["1 or 0"] * len(resources), "Sum"),
    ]
    if at.may_overrun:
        blocks.insert(3, ("Time available: capacity and all overtime allowed (time units)", available, at.available,
                          at.time_format, lambda r, t: _available_formula(at, r, t), time, "Sum"))
    for title, block, values, number_format, formula, units, total in blocks if resources else []:
        sheet.put(block.first_row - 2, 0, title, style.SECTION)
        write_periods(at, sheet, PeriodTable(block, resources, [""] * len(resources), units, values, number_format,
                                             formula, total, code_title="Resource"))
    if case.families:
        _families(at, sheet)
    if resources:
        shade(sheet, part, f"{{cell}}>={FULL}", MADE)
        shade(sheet, overtime, "{cell}>0", SOME)
    words = ("Time that lots and setups need on each resource, against the time that can be had. Dark periods are "
             f"full{': all overtime allowed is worked' if at.may_overrun else ''}.")
    return _finished(at, sheet, "Load of resources in the plan", words, frozen_row=0)


def _families(at: LotPlaces, sheet: ResultSheet) -> None:
    case, block = at.report.case, at.load_block("families")
    resource = [case.resources[r] if r >= 0 else None for r in case.family_resource.tolist()]
    time = [at.figure("Families", (code,), "Setup time", float(case.family_time[f]))
            for f, code in enumerate(case.families)]
    time_look = style.number(style.figure_format([figure.value for figure in time]))
    side = [Column("resource", "Resource", resource, width=11),
            Column("time", "Setup time (time units)", [f.value for f in time], time_look, 11,
                   [f.formula for f in time])]
    sheet.put(block.first_row - 2, 0, "Family setups (1 = any member is made)", style.SECTION)
    made, family = at.made, at.made.side(FAMILY)

    def runs(f: int, t: int) -> str:
        code = f"$A{block.first_row + f + 1}"
        return f"IF(SUMPRODUCT(({family}={code})*({made.column(t)}>0))>0,1,0)"

    count = len(case.families)
    write_periods(at, sheet, PeriodTable(block, case.families, [""] * count, ["1 or 0"] * count, at.family_runs,
                                         style.WHOLE, runs, side=side, code_title="Family"))
    shade(sheet, block, "{cell}>0", MADE)


def _load_formula(at: LotPlaces, r: int, t: int) -> str:
    made, block = at.made, at.load_block("load")
    code = f"$A{block.first_row + r + 1}"
    own = (f"SUMPRODUCT(({made.side(RESOURCE)}={code})*({made.side(TIME)}*{made.column(t)}"
           f"+{made.side(SETUP_TIME)}*({made.column(t)}>0)))")
    if not at.report.case.families:
        return own
    family = at.load_block("families")
    return f"{own}+SUMPRODUCT(({family.side(0)}={code})*{family.side(1)}*{family.column(t)})"


def _use_formula(at: LotPlaces, r: int, t: int) -> str:
    made, block = at.made, at.load_block("in use")
    code = f"$A{block.first_row + r + 1}"
    counted = f"SUMPRODUCT(({made.side(RESOURCE)}={code})*({made.column(t)}>0))"
    if at.report.case.families:
        family = at.load_block("families")
        counted += f"+SUMPRODUCT(({family.side(0)}={code})*{family.column(t)})"
    return f"IF({counted}>0,1,0)"


def _capacity_formula(at: LotPlaces, r: int, t: int) -> str:
    case, origins = at.report.case, at.report.workbook.origins
    ref = origins.matrix_number("Capacity", case.resources[r], case.periods[t])
    ref = ref or origins.number("Resources", (case.resources[r],), "Capacity")
    return "" if ref is None else ref.formula


def _available_formula(at: LotPlaces, r: int, t: int) -> str:
    case = at.report.case
    own = at.load_block("capacity").here(r, t)
    if not case.overtime_limit[r]:
        return own
    limit = at.figure("Resources", (case.resources[r],), "Overtime limit", 0.0).formula
    return f"{own}+{limit}" if limit else ""


def _finished(at: LotPlaces, sheet: ResultSheet, title: str, words: str, frozen_row: int = FIRST_ROW) -> ResultSheet:
    heading(sheet, title, words, 8)
    sheet.frozen = (frozen_row, 2)
    sheet.repeat_rows = (TITLE_ROW, TITLE_ROW) if frozen_row else None
    sheet.repeat_columns = (CODE, NAME)
    sheet.pages_wide = max(1, math.ceil((at.report.case.t + 9) / PERIODS_A_PAGE))
    sheet.footer = FOOTER
    return sheet


def optional_sheets(at: LotPlaces) -> Sequence[ResultSheet]:
    """Sheets for late, lost and load, where the workbook has such things."""
    sheets = []
    if at.may_wait:
        sheets.append(plan_late(at))
    if at.may_lose:
        sheets.append(plan_lost(at))
    if at.has_load:
        sheets.append(plan_load(at))
    return sheets
