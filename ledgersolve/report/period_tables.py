"""Tables of codes x periods: the same columns on every sheet, a sum, and marks where something happens."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from ledgersolve.lot_sizing.case import Floats
from ledgersolve.report import style
from ledgersolve.report.lot_places import CODE, FIRST_PERIOD, NAME, SUM, UNIT, Block, LotPlaces
from ledgersolve.report.tables import Column, fitting_width
from ledgersolve.workbook.cells import column_letters
from ledgersolve.workbook.sheets import LiveFormat, ResultSheet, Style

MADE = Style(bold=True, colour=style.WHITE, fill=style.PETROL)
SOME = Style(fill=style.PALE)
NOISE = 1e-9
"""Figures closer to 0 are rounding of the machine and shown as 0."""
ALERT = Style(bold=True, colour=style.ALARM, fill=style.ALARM_GROUND)
Formula = Callable[[int, int], str]


@dataclass(frozen=True)
class PeriodTable:
    """A table of rows x periods.

    ``formula(row, period)`` is without the equals sign, "" for a constant; ``sum_title`` is empty where a sum
    means nothing; ``side`` are columns to the right of the periods.
    """

    block: Block
    rows: Sequence[str]
    row_names: Sequence[str]
    units: Sequence[str]
    values: Floats
    number_format: str
    formula: Formula | None = None
    sum_title: str = "Sum"
    side: Sequence[Column] = field(default=())
    code_title: str = "Item"


def settled(values: Floats) -> Floats:
    """Figures without the machine's rounding of what is 0."""
    return np.where(np.abs(values) < NOISE, 0.0, values)


def write_periods(at: LotPlaces, sheet: ResultSheet, table: PeriodTable) -> None:
    """Write titles (in the row above the block) and the table."""
    _titles(at, sheet, table)
    block, look = table.block, style.number(style.without_zeros(table.number_format))
    total = replace(style.number(table.number_format), bold=True, fill=style.SAND)
    last = column_letters(FIRST_PERIOD + block.periods)
    values = settled(table.values)
    for r, code in enumerate(table.rows):
        row = block.first_row + r
        sheet.put(row, CODE, code, style.CELL)
        sheet.put(row, NAME, table.row_names[r], style.CELL)
        sheet.put(row, UNIT, table.units[r], replace(style.SMALL, align="left", indent=1))
        if table.sum_title:
            formula = f"=SUM({column_letters(FIRST_PERIOD + 1)}{row + 1}:{last}{row + 1})"
            sheet.put(row, SUM, float(values[r].sum()), total, formula=formula)
        for t, value in enumerate(values[r].tolist()):
            formula = table.formula(r, t) if table.formula is not None else ""
            sheet.put(row, FIRST_PERIOD + t, value, look, formula=f"={formula}" if formula else "")
        for k, column in enumerate(table.side):
            formula = column.formulas[r] if column.formulas is not None else ""
            sheet.put(row, FIRST_PERIOD + block.periods + k, column.values[r], column.style,
                      formula=f"={formula}" if formula else "")


def _titles(at: LotPlaces, sheet: ResultSheet, table: PeriodTable) -> None:
    block, row = table.block, table.block.first_row - 1
    case = at.report.case
    for place, title in ((CODE, table.code_title), (NAME, "Name"), (UNIT, "Unit")):
        sheet.put(row, place, title, style.HEADER)
    sheet.put(row, SUM, table.sum_title, style.HEADER_RIGHT)
    for t, period in enumerate(case.periods):
        sheet.put(row, FIRST_PERIOD + t, period, style.HEADER_RIGHT)
    for k, column in enumerate(table.side):
        sheet.put(row, FIRST_PERIOD + block.periods + k, column.title,
                  style.HEADER_RIGHT if column.style.align == "right" else style.HEADER)
        sheet.widths[FIRST_PERIOD + block.periods + k] = column.width
    sheet.heights[row] = 40.0 if table.side else 28.0
    widths = {CODE: fitting_width([*table.rows, table.code_title]), NAME: fitting_width(table.row_names, 12.0),
              UNIT: fitting_width(table.units, 7.0), SUM: 12.0}
    for place, width in widths.items():
        sheet.widths[place] = max(width, sheet.widths.get(place, 0.0))
    wide = max(8.5, 2.0 + max((len(period) for period in case.periods), default=0) * 1.1)
    figures = max((len(f"{value:,.0f}") for value in table.values.max(axis=0, initial=0.0).tolist()), default=0)
    decimals = len(table.number_format.split(".")[1]) + 1 if "." in table.number_format else 0
    for place in range(FIRST_PERIOD, FIRST_PERIOD + block.periods):
        sheet.widths[place] = max(min(wide, 14.0), figures + decimals + 2.5, sheet.widths.get(place, 0.0))


def shade(sheet: ResultSheet, block: Block, condition: str, look: Style) -> None:
    """Mark cells of the block where ``condition`` (about its first cell, ``{cell}``) holds."""
    cell = f"{block.letter(0)}{block.first_row + 1}"
    sheet.live_formats.append(LiveFormat(
        block.first_row, FIRST_PERIOD, block.first_row + max(1, block.rows) - 1, FIRST_PERIOD + block.periods - 1,
        "=" + condition.format(cell=cell, row=block.first_row + 1), look,
    ))
