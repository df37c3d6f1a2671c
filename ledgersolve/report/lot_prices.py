"""The sheet of prices of scarce time behind a lot-sizing bound, with the worth of the time at them."""

from dataclasses import dataclass

import numpy as np

from ledgersolve.lot_sizing.bound import Relaxation, price_bound
from ledgersolve.lot_sizing.case import Floats
from ledgersolve.report import names, style
from ledgersolve.report.lot_places import Block, LotPlaces
from ledgersolve.report.period_tables import PeriodTable, write_periods
from ledgersolve.report.tables import FIRST_ROW, FOOTER, Column, heading, quoted, write_table
from ledgersolve.workbook.sheets import ResultSheet


@dataclass(frozen=True)
class TimePrices:
    """The sheet, both parts of the bound, and the cells where they stand.

    ``items`` is what all items cost at their best by themselves (families and use of resources with them),
    ``given_back`` the worth of the resources' time, as a negative amount; the bound is their sum.
    """

    sheet: ResultSheet
    items: float
    items_cell: str
    given_back: float
    given_back_cell: str


def time_prices(at: LotPlaces) -> TimePrices | None:
    """Lay out the prices of time; None without resources, prices or a bound from them."""
    case, given = at.report.case, at.report.solved.prices
    limited = np.isfinite(case.capacity).all() and np.isfinite(case.overtime_limit).all()
    if not case.resources or not limited or given is None or given.shape != case.capacity.shape:
        return None
    prices = np.maximum(np.asarray(given, dtype=np.float64), 0.0)
    bound = price_bound(case, prices)
    if not np.isfinite(bound):
        return None
    sheet = ResultSheet(at.name(names.PROOF_PRICES), tab_colour=style.RUST, landscape=True, frozen=(0, 2))
    worth = _worth(at, prices)
    second = _blocks(at, sheet, prices, worth)
    given_back = float(worth.sum())
    row = second.first_row + second.rows + 2
    items_cell = _items(at, sheet, row, prices, bound - given_back)
    heading(sheet, "Prices behind the proof", "One price for each time unit of a resource in each period; 0 where "
                                              "time is not scarce. The sheet Proof adds the figures up.", 8)
    sheet.footer = FOOTER
    return TimePrices(sheet, bound - given_back, items_cell, given_back, f"SUM({second.sums()})")


def _worth(at: LotPlaces, prices: Floats) -> Floats:
    """Shape (R, T): - price x capacity - what overtime is worth above its own cost."""
    case = at.report.case
    over = np.maximum(prices - case.overtime_cost[:, None], 0.0) * case.overtime_limit[:, None]
    return np.asarray(-prices * case.capacity - over)


def _blocks(at: LotPlaces, sheet: ResultSheet, prices: Floats, worth: Floats) -> Block:
    """Write prices and, below, the worth of the time; gives the second block."""
    case = at.report.case
    count, unit = len(case.resources), f"{case.currency} per time unit"
    first = Block(sheet.name, FIRST_ROW + 1, count, case.t)
    second = Block(sheet.name, first.first_row + count + 4, count, case.t)
    blank = [""] * count

    def formula(r: int, t: int) -> str:
        price, origins = first.here(r, t), at.report.workbook.origins
        cell = origins.matrix_number("Capacity", case.resources[r], case.periods[t])
        cell = cell or origins.number("Resources", (case.resources[r],), "Capacity")
        extra, limit = (at.figure("Resources", (case.resources[r],), title, float(value)) for title, value in
                        (("Overtime cost", case.overtime_cost[r]), ("Overtime limit", case.overtime_limit[r])))
        if cell is None or (limit.value and not (limit.formula and extra.formula)):
            return ""
        tail = f"-MAX(0,{price}-{extra.formula})*{limit.formula}" if limit.value else ""
        return f"-{price}*{cell.formula}{tail}"

    sheet.put(first.first_row - 2, 0, f"Prices of time ({unit})", style.SECTION)
    rates = style.rate_format(case.currency, prices.ravel().tolist())
    write_periods(at, sheet, PeriodTable(first, case.resources, blank, [unit] * count, prices, rates, sum_title="",
                                         code_title="Resource"))
    sheet.put(second.first_row - 2, 0, f"Worth of the time available ({case.currency})", style.SECTION)
    write_periods(at, sheet, PeriodTable(second, case.resources, blank, [case.currency] * count, worth,
                                         style.money_format(case.currency), formula, code_title="Resource"))
    return second


def _items(at: LotPlaces, sheet: ResultSheet, row: int, prices: Floats, together: float) -> str:
    """Least costs of the items by themselves, one a row where they add up; gives the formula of their sum."""
    case = at.report.case
    relaxation = Relaxation(case)
    labels, names_, values = ["all items"], ["together"], [together]
    if not relaxation.coupled:
        costs = relaxation.at(relaxation.start(prices)).schedules.cost
        if np.isclose(costs.sum(), together, rtol=1e-9, atol=1e-6):
            labels, names_, values = list(case.items), list(case.item_names), costs.tolist()
    sheet.put(row, 0, "Least cost of each item by itself at these prices (found by the program)", style.SECTION)
    write_table(sheet, row + 1, [
        Column("item", "Item", labels, width=sheet.widths[0]),
        Column("name", "Name", names_, width=sheet.widths[1]),
        Column("unit", "Unit", [case.currency] * len(labels), width=sheet.widths[2]),
        Column("cost", f"Least cost ({case.currency})", values, style.number(style.money_format(case.currency)), 16),
    ])
    return f"SUM({quoted(sheet.name)}!$D${row + 3}:$D${row + 2 + len(labels)})"
