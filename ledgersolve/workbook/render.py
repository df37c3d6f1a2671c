"""Result sheets written as a workbook of their own, every formula with its cached value.

The graft takes the parts of this workbook into the analyst's package; where that cannot be done, it is the
returned workbook itself.
"""

import math
from collections.abc import Sequence
from datetime import datetime
from pathlib import Path
from typing import BinaryIO

import xlsxwriter
from xlsxwriter.format import Format
from xlsxwriter.worksheet import CellFormulaTuple, Worksheet

from ledgersolve.workbook.charts import insert_chart
from ledgersolve.workbook.cleaning import clean_text
from ledgersolve.workbook.sheets import ResultSheet, Style, Written

FONT = "Arial"
MOST_ROWS, MOST_COLUMNS = 1_048_576, 16_384
MOST_LINKS = 65_000
_LIKE_A_FORMULA = ("=", "+", "-", "@", "\t")


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


class _ResultWorksheet(Worksheet):  # type: ignore[misc]
    """A worksheet that takes formulas as they are.

    The library searches every formula some thirty times for functions newer than the file format, also
    inside sheet names (a sheet called ``FILTER(2)`` would make an array formula). Result sheets use none of
    those functions; without the search, formulas are written four times faster.
    """

    def _write_formula(self, row: int, col: int, formula: str, cell_format: Format | None = None,
                       value: float | str = 0) -> int:
        if self._check_dimensions(row, col):
            return -1
        self.table[row][col] = CellFormulaTuple(formula.removeprefix("="), cell_format, value)
        return 0


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
    made = [(sheet, book.add_worksheet(sheet.name, _ResultWorksheet)) for sheet in sheets]
    for sheet, worksheet in made:
        _rows(worksheet, sheet)
        _cells(worksheet, sheet, formats)
        _page(worksheet, sheet)
        _live(worksheet, sheet, formats)
        for chart in sheet.charts:
            insert_chart(book, worksheet, chart)
    book.close()


def _check_names(sheets: Sequence[ResultSheet]) -> None:
    names = [sheet.name for sheet in sheets]
    if not names or len({name.casefold() for name in names}) != len(names):
        raise ValueError(f"result sheets need names of their own, not {names!r}")


def _rows(worksheet: Worksheet, sheet: ResultSheet) -> None:
    for column, width in sheet.widths.items():
        worksheet.set_column(column, column, min(width, 255.0))
    levels: dict[int, int] = {}
    for group in sheet.groups:
        for row in range(group.first, group.last + 1):
            levels[row] = max(levels.get(row, 0), group.level)
    for row in sorted(levels.keys() | sheet.heights.keys()):
        height = sheet.heights.get(row)
        options = {"level": levels[row]} if row in levels else {}
        worksheet.set_row(row, None if height is None else min(height, 409.0), None, options)
    if sheet.groups:
        worksheet.outline_settings(True, False, True, False)


def _cells(worksheet: Worksheet, sheet: ResultSheet, formats: _Formats) -> None:
    covered = _merge(worksheet, sheet, formats)
    links = 0
    for (row, column), cell in sheet.cells.items():
        if not (0 <= row < MOST_ROWS and 0 <= column < MOST_COLUMNS):
            raise ValueError(f"sheet {sheet.name!r} has no row {row}, column {column}")
        if (row, column) in covered:
            continue
        if cell.link and links < MOST_LINKS:
            links += 1
            style = formats.cell(cell.style)
            worksheet.write_url(row, column, f"internal:{cell.link}", style, string=" ")
        _write(worksheet, sheet.name, row, column, cell, formats)


def _write(worksheet: Worksheet, sheet: str, row: int, column: int, cell: Written, formats: _Formats) -> None:
    value = cell.value
    if isinstance(value, bool):
        value = "yes" if value else "no"  # some programs show 1 for a Boolean cell
    if isinstance(value, str):
        value = clean_text(value)
    elif value is not None and not math.isfinite(value):
        raise ValueError(f"sheet {sheet!r}, row {row}, column {column}: {value!r} is not a figure to write")
    if cell.formula:
        shown = "" if value is None else value if isinstance(value, str) else _plain_number(value)
        worksheet.write_formula(row, column, cell.formula, formats.cell(cell.style), shown)
    elif isinstance(value, str):
        quoted = value.startswith(_LIKE_A_FORMULA)
        worksheet.write_string(row, column, value, formats.cell(cell.style, quoted))
    elif value is None:
        worksheet.write_blank(row, column, None, formats.cell(cell.style))
    else:
        worksheet.write_number(row, column, _plain_number(value), formats.cell(cell.style))


def _plain_number(value: float) -> float | int:
    return int(value) if isinstance(value, int) else float(value) + 0.0  # no numpy scalar, no minus zero


def _merge(worksheet: Worksheet, sheet: ResultSheet, formats: _Formats) -> set[tuple[int, int]]:
    """Merge the blocks of running text; gives the cells under them, which hold nothing."""
    covered: set[tuple[int, int]] = set()
    for first_row, first_column, last_row, last_column in sheet.merges:
        head = sheet.cells.get((first_row, first_column), Written(None))
        worksheet.merge_range(
            first_row, first_column, last_row, last_column, "", formats.cell(head.style)
        )
        covered |= {
            (row, column)
            for row in range(first_row, last_row + 1)
            for column in range(first_column, last_column + 1)
        } - {(first_row, first_column)}
    return covered


def _page(worksheet: Worksheet, sheet: ResultSheet) -> None:
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
    if sheet.print_area is not None:
        worksheet.print_area(*sheet.print_area)
    worksheet.set_footer(sheet.footer)


def _live(worksheet: Worksheet, sheet: ResultSheet, formats: _Formats) -> None:
    for live in sheet.live_formats:
        worksheet.conditional_format(
            live.first_row, live.first_column, live.last_row, live.last_column,
            {"type": "formula", "criteria": live.formula, "format": formats.live(live.style)},
        )

