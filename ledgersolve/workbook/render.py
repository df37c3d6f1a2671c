"""Result sheets written as a workbook of their own, every formula with its cached value.

The graft takes the parts of this workbook into the analyst's package; where that cannot be done, it is the
returned workbook itself.
"""

from collections.abc import Sequence
from datetime import datetime
from pathlib import Path
from typing import BinaryIO

import xlsxwriter
from xlsxwriter.format import Format

from ledgersolve.workbook.charts import insert_chart
from ledgersolve.workbook.sheets import ResultSheet, Style
from ledgersolve.workbook.worksheet import ResultWorksheet

FONT = "Arial"
MOST_LINKS = 65_000


def _properties(style: Style) -> dict[str, object]:
    properties: dict[str, object] = {
        "font_name": FONT, "font_size": style.size, "font_color": f"#{style.colour}", "valign": style.valign,
    }
    given: dict[str, object] = {
        "num_format": style.number_format, "bold": style.bold, "italic": style.italic,
        "align": style.align, "text_wrap": style.wrap, "indent": style.indent,
        "underline": 1 if style.underline else 0, "top": style.top, "bottom": style.bottom,
        "left": style.left,
    }
    properties |= {name: value for name, value in given.items() if value}
    if style.fill:
        properties |= {"bg_color": f"#{style.fill}", "pattern": 1}
    if style.top:
        properties["top_color"] = f"#{style.border_colour}"
    if style.left:
        properties["left_color"] = f"#{style.border_colour}"
    if style.bottom:
        properties["bottom_color"] = f"#{style.border_colour}"
    return properties


class _Formats:
    """The formats of one workbook: equal styles share one."""

    def __init__(self, book: xlsxwriter.Workbook) -> None:
        self._book = book
        self._made: dict[tuple[Style, bool], Format] = {}

    def cell(self, style: Style, quoted: bool = False) -> Format:
        """Format of a cell; ``quoted`` keeps text text when the cell is edited by hand."""
        made = self._made.get((style, quoted))
        if made is None:
            properties = _properties(style)
            if quoted:
                properties["quote_prefix"] = True
            made = self._made[style, quoted] = self._book.add_format(properties)
        return made

    def live(self, style: Style) -> Format:
        """Format of a live (conditional) format: only what it changes."""
        changes: dict[str, object] = {"font_color": f"#{style.colour}", "bold": style.bold}
        if style.fill:
            changes["bg_color"] = f"#{style.fill}"
        return self._book.add_format(changes)


def render(sheets: Sequence[ResultSheet], target: Path | BinaryIO, created: datetime | None = None) -> None:
    """Write the sheets, in order, as a workbook.

    Parameters
    ----------
    sheets
        At least one; their names must be settled (unique whatever the case, 1 to 31 characters).
    target
        Path or open binary file to write to.
    created
        Date of making for the file's properties; a fixed date when None, so that equal sheets give
        equal bytes.

    Raises
    ------
    ValueError
        A number that is not finite, a cell outside a sheet, a clash of names: a fault of ours.
    """
    _check_names(sheets)
    options = {"strings_to_formulas": False, "strings_to_urls": False, "strings_to_numbers": False}
    book = xlsxwriter.Workbook(target if not isinstance(target, Path) else str(target), options)
    book.set_properties({"created": created or datetime(2000, 1, 1)})
    formats = _Formats(book)
    made = [(sheet, book.add_worksheet(sheet.name, ResultWorksheet)) for sheet in sheets]
    for sheet, worksheet in made:
        _frame(worksheet, sheet)
        worksheet.take(sheet, formats.cell)
        _page(worksheet, sheet)
        _live(worksheet, sheet, formats)
        for chart in sheet.charts:
            insert_chart(book, worksheet, chart)
    book.close()


def _check_names(sheets: Sequence[ResultSheet]) -> None:
    names = [sheet.name for sheet in sheets]
    if not names or len({name.casefold() for name in names}) != len(names):
        raise ValueError(f"result sheets need names of their own, not {names!r}")


def _frame(worksheet: ResultWorksheet, sheet: ResultSheet) -> None:
    """Widths, outline levels, merged blocks of running text, and links."""
    for column, width in sheet.widths.items():
        worksheet.set_column(column, column, min(width, 254.0))
    for group in sheet.groups:
        worksheet.outline_row_level = max(worksheet.outline_row_level, group.level)
    if sheet.groups:
        worksheet.outline_settings(True, False, True, False)
    worksheet.merge.extend(list(block) for block in sheet.merges)
    links = [(place, cell.link) for place, cell in sheet.cells.items() if cell.link]
    for (row, column), link in links[:MOST_LINKS]:
        worksheet.write_url(row, column, f"internal:{link}", string=" ")


def _page(worksheet: ResultWorksheet, sheet: ResultSheet) -> None:
    if not sheet.gridlines:
        worksheet.hide_gridlines(2)
    if sheet.tab_colour:
        worksheet.set_tab_color(f"#{sheet.tab_colour}")
    if sheet.frozen != (0, 0):
        worksheet.freeze_panes(*sheet.frozen)
    if sheet.filter is not None:
        worksheet.autofilter(*sheet.filter)
    if sheet.landscape:
        worksheet.set_landscape()
    worksheet.fit_to_pages(sheet.pages_wide, sheet.pages_tall)  # no paper is named: the reader's own holds
    worksheet.set_margins(left=0.5, right=0.5, top=0.5, bottom=0.65)
    worksheet.center_horizontally()
    if sheet.repeat_rows is not None:
        worksheet.repeat_rows(*sheet.repeat_rows)
    if sheet.repeat_columns is not None:
        worksheet.repeat_columns(*sheet.repeat_columns)
    if sheet.print_area is not None:
        worksheet.print_area(*sheet.print_area)
    worksheet.set_footer(sheet.footer)


def _live(worksheet: ResultWorksheet, sheet: ResultSheet, formats: _Formats) -> None:
    for live in sheet.live_formats:
        worksheet.conditional_format(
            live.first_row, live.first_column, live.last_row, live.last_column,
            {"type": "formula", "criteria": live.formula, "format": formats.live(live.style)},
        )

