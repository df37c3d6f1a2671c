"""Writes the empty workbook of a job from its description: titles, units, notes, drop-down lists, examples.

Above the titles of each sheet stand its meaning, what is required, and an example row; reading starts below
the titles, so the example is never taken for data.
"""

import datetime
import textwrap
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import xlsxwriter

from ledgersolve.contract import settings
from ledgersolve.contract.columns import LARGEST, Entry, Holds, JobContract, ListSheet, MatrixSheet
from ledgersolve.contract.read import CONTRACTS
from ledgersolve.contract.reading import Job

HEADING, MEANING, NEEDED, EXAMPLE, TITLES, FIRST = range(6)
"""Rows of a list or matrix sheet, from 0: heading, meaning, what is needed, example, titles, first data row."""

LIST_ROWS, LANE_ROWS, MATRIX_ROWS, MATRIX_COLUMNS = 5000, 100_000, 1000, 500
"""How far validation reaches; rows below it are read all the same."""

LINE = 16.0
"""Height of a line of text in points."""

GUIDE = "How to fill this in"

_UNIT_WORDS = {
    Job.SITE_SELECTION: ": demand units are those of Demand unit in Settings, distance units those of Distance unit",
    Job.LOT_SIZING: ": an item's units are those of Unit in its row; time units, such as hours, are one and the same",
}

_ISSUED = datetime.datetime(2026, 1, 1, tzinfo=datetime.UTC)
_INK, _PETROL, _QUIET, _PALE = "#1F2933", "#0B4F5C", "#52606D", "#E6EEF0"

_GUIDE_LINES = (
    "Fill in the sheet Settings first: Currency has to be given, everything else has a default.",
    "Each sheet has its titles in row 5. Type or paste below them; row 4 is an example and is never read.",
    "Columns marked “required” have to be filled in every row; an empty cell elsewhere takes the default "
    "named above its title.",
    "Titles may stand in any order. Do not rename them; your own further columns and sheets are left alone.",
    "Codes tie the sheets together: write each one in the same way everywhere.",
    "All money is in the one Currency of Settings, all figures cover the same period. Units stand in brackets in "
    "the titles{units}.",
    "Numbers are plain numbers: no thousands separators typed as text, no units behind them.",
    "Sheets you do not need stay empty: {optional}.",
    "No totals rows below a list; empty rows do no harm.",
    "Drop the file into the inbox. It comes back solved, or with a list of the cells to mend; mend and drop "
    "it again.",
)


@dataclass
class _Formats:
    heading: Any
    meaning: Any
    wrapped: Any
    needed: Any
    example: Any
    title: Any
    title_optional: Any
    text: Any
    date: Any
    number: Any


def write_template(job: Job, target: Path) -> None:
    """Write the empty workbook of a job to ``target``.

    Raises
    ------
    OSError
        Where the file cannot be written.
    """
    contract = CONTRACTS[job]
    book = xlsxwriter.Workbook(str(target))
    book.set_properties({"title": f"LedgerSolve: {job}", "created": _ISSUED})
    formats = _formats(book)
    _write_guide(book, contract, formats)
    _write_settings(book, contract, formats)
    for sheet in sheets_in_order(contract):
        if isinstance(sheet, ListSheet):
            _write_list(book, sheet, contract, formats)
        else:
            _write_matrix(book, sheet, contract, formats)
    book.close()


def sheets_in_order(contract: JobContract) -> list[ListSheet | MatrixSheet]:
    """Sheets for people: required ones first."""
    return sorted(contract.sheets, key=lambda sheet: not sheet.required)


def _formats(book: Any) -> _Formats:
    base = {"font_name": "Calibri", "font_size": 11, "font_color": _INK, "valign": "vcenter"}

    def made(**more: object) -> Any:
        return book.add_format({**base, **more})

    title = {"bold": True, "text_wrap": True, "bottom": 2, "bottom_color": _PETROL, "valign": "bottom"}
    return _Formats(
        heading=made(bold=True, font_size=14, font_color=_PETROL), meaning=made(font_color=_QUIET),
        wrapped=made(font_color=_QUIET, text_wrap=True),
        needed=made(font_color=_QUIET, italic=True, text_wrap=True, valign="top", font_size=9),
        example=made(font_color=_QUIET, italic=True, align="left", bg_color="#F4F6F7"),
        title=made(**title, bg_color=_PALE), title_optional=made(**{**title, "bold": False},
                                                                 bg_color="#F4F6F7"),
        text=made(num_format="@"), date=made(num_format=14), number=made(),
    )


def title_of(entry: Entry) -> str:
    """Title with its unit in brackets."""
    return f"{entry.title} ({entry.unit})" if entry.unit and "(" not in entry.title else entry.title


def _write_guide(book: Any, contract: JobContract, formats: _Formats) -> None:
    sheet = book.add_worksheet(GUIDE)
    sheet.hide_gridlines(2)
    sheet.set_column(0, 0, 4)
    sheet.set_column(1, 1, 110, book.add_format({"text_wrap": True, "valign": "vcenter"}))
    sheet.write_string(0, 0, f"Template: {contract.job}", formats.heading)
    optional = ", ".join(each.name for each in contract.sheets if not each.required)
    for number, line in enumerate(_GUIDE_LINES, start=1):
        sheet.write_number(number + 1, 0, number, formats.meaning)
        words = line.format(optional=optional, units=_UNIT_WORDS[contract.job])
        sheet.write_string(number + 1, 1, words)
        _fold(sheet, number + 1, [(words, 110)])
    _print_setup(sheet)


def _print_setup(sheet: Any) -> None:
    sheet.set_landscape()
    sheet.set_paper(9)
    sheet.fit_to_pages(1, 0)


def _write_settings(book: Any, contract: JobContract, formats: _Formats) -> None:
    sheet = book.add_worksheet(settings.SHEET)
    for column, width in enumerate((34, 22, 90, 34, 22)):
        sheet.set_column(column, column, width)
    sheet.write_string(HEADING, 0, settings.SHEET, formats.heading)
    sheet.write_string(MEANING, 0, settings.LIST.meaning, formats.meaning)
    for column, title in enumerate(("Setting", "Value", "Meaning", "If empty", "Example")):
        sheet.write_string(TITLES, column, title, formats.title if column < 2 else formats.title_optional)
    for row, entry in enumerate(contract.settings, start=FIRST):
        default = "required" if entry.required else entry.default_text()
        sheet.write_string(row, 0, entry.title, formats.title if entry.required else formats.number)
        if entry is settings.JOB:
            sheet.write_string(row, 1, contract.job.value, formats.text)
        else:
            sheet.write_blank(row, 1, None, formats.number if entry.numeric else formats.text)
        sheet.write_string(row, 2, entry.meaning, formats.wrapped)
        sheet.write_string(row, 3, default, formats.wrapped)
        example = settings.EXAMPLES.get((contract.job, entry.title), example_text(entry))
        sheet.write_string(row, 4, example, formats.example)
        _fold(sheet, row, [(entry.title, 34), (entry.meaning, 90), (default, 34)])
        sheet.data_validation(row, 1, row, 1, _validation(entry, ""))
    sheet.freeze_panes(FIRST, 1)
    _print_setup(sheet)


def _height(texts: Sequence[tuple[str, float]], line: float = LINE) -> float:
    """Height in points of a row that shows each (text, column width) whole, folded between words."""
    return line * max(len(textwrap.wrap(text, max(int(width) - 2, 8))) for text, width in texts)


def example_text(entry: Entry) -> str:
    """The example of an entry as text."""
    value = entry.example
    return f"{value:.15g}" if isinstance(value, int | float) else str(value)


def _write_list(book: Any, contract: ListSheet, job: JobContract, formats: _Formats) -> None:
    sheet = book.add_worksheet(contract.name)
    sheet.write_string(HEADING, 0, contract.name, formats.heading)
    sheet.write_string(MEANING, 0, contract.meaning, formats.meaning)
    columns = [(entry, _width(entry)) for entry in contract.entries]
    sheet.set_row(NEEDED, _height([(needed_text(entry, contract), width) for entry, width in columns], 13.0))
    sheet.set_row(TITLES, _height([(title_of(entry), width) for entry, width in columns]))
    last = FIRST + (LANE_ROWS if len(contract.key) > 1 else LIST_ROWS) - 1
    for column, entry in enumerate(contract.entries):
        _write_column(sheet, column, entry, contract, job, last, formats)
    sheet.freeze_panes(FIRST, len(contract.key))
    sheet.repeat_rows(TITLES)
    _print_setup(sheet)


def _write_column(sheet: Any, column: int, entry: Entry, contract: ListSheet, job: JobContract, last: int,
                  formats: _Formats) -> None:
    body = formats.date if entry.holds is Holds.DATE else formats.number if entry.numeric else formats.text
    sheet.set_column(column, column, _width(entry), body)
    sheet.write_string(NEEDED, column, needed_text(entry, contract), formats.needed)
    lead = "Example: " if column == 0 else ""
    sheet.write_string(EXAMPLE, column, lead + example_text(entry), formats.example)
    look = formats.title if entry.required else formats.title_optional
    sheet.write_string(TITLES, column, title_of(entry), look)
    sheet.data_validation(FIRST, column, last, column, _validation(entry, _code_range(entry, job)))


def _fold(sheet: Any, row: int, texts: Sequence[tuple[str, float]]) -> None:
    """Give a row the height that its texts need; one of a single line fits itself to whatever font is there."""
    height = _height(texts)
    if height > LINE:
        sheet.set_row(row, height)


def _width(entry: Entry) -> float:
    """Width of a column in characters."""
    return float(max(13, min(len(entry.title) + 4, 22)))


def needed_text(entry: Entry, contract: ListSheet) -> str:
    """Whether a column is required, else what an empty cell means."""
    if entry.required:
        return "required"
    if entry.title in contract.one_of:
        return f"one of {' and '.join(contract.one_of)} is required"
    return f"if empty: {entry.default_text()}"


def _code_range(entry: Entry, job: JobContract) -> str:
    """Cells that hold the codes a column names, for its drop-down list."""
    if not entry.refers or entry.holds is Holds.CODES:
        return ""
    return f"='{entry.refers}'!$A${FIRST + 1}:$A${FIRST + LIST_ROWS}" if job.list_sheet(entry.refers) else ""


def _validation(entry: Entry, codes: str) -> dict[str, Any]:
    """Native validation of a column: a list, limits, or an input message alone."""
    rule: dict[str, Any] = {
        "validate": "any", "input_title": entry.title[:32],
        "input_message": f"{entry.meaning} Expected: {entry.expected()}."[:255],
        "error_title": "Not what is expected", "error_message": f"Expected: {entry.expected()}."[:255],
    }
    if codes:
        rule |= {"validate": "list", "source": codes, "error_type": "warning"}
    elif entry.holds is Holds.YES_NO:
        rule |= {"validate": "list", "source": ["yes", "no"]}
    elif entry.holds is Holds.CHOICE:
        rule |= {"validate": "list", "source": list(entry.choices)}
    elif entry.numeric:
        rule |= _limits(entry)
    elif entry.holds is Holds.DATE:
        rule |= {"validate": "date", "criteria": ">=", "value": datetime.date(1950, 1, 1)}
    return rule


def _limits(entry: Entry) -> dict[str, Any]:
    kind = "integer" if entry.holds is Holds.WHOLE else "decimal"
    if entry.above:
        return {"validate": kind, "criteria": ">", "value": entry.low}
    return {"validate": kind, "criteria": "between", "minimum": entry.low,
            "maximum": min(entry.high, LARGEST)}


def _write_matrix(book: Any, contract: MatrixSheet, job: JobContract, formats: _Formats) -> None:
    sheet = book.add_worksheet(contract.name)
    sheet.write_string(HEADING, 0, contract.name, formats.heading)
    sheet.write_string(MEANING, 0, contract.meaning, formats.meaning)
    sheet.write_string(EXAMPLE, 0, matrix_example(contract, job), formats.example)
    sheet.set_column(0, 0, 16, formats.text)
    sheet.set_column(1, MATRIX_COLUMNS, 11, formats.number)
    sheet.set_row(TITLES, None, formats.text)
    sheet.write_string(TITLES, 0, contract.corner, formats.title)
    last_row, last_column = FIRST + MATRIX_ROWS - 1, MATRIX_COLUMNS
    across = job.list_sheet(contract.columns_of)
    sheet.data_validation(FIRST, 0, last_row, 0, _code_rule(contract.rows_of, "down this column"))
    sheet.data_validation(TITLES, 1, TITLES, last_column, _code_rule(across.name, "along this row"))
    sheet.data_validation(FIRST, 1, last_row, last_column, _validation(contract.figure, ""))
    sheet.freeze_panes(FIRST, 1)
    _print_setup(sheet)


def matrix_example(contract: MatrixSheet, job: JobContract) -> str:
    """The example of a matrix, in words: a drawn one could be taken for data."""
    down, across = job.list_sheet(contract.rows_of), job.list_sheet(contract.columns_of)
    return (f"Example: {down.key[0]} {down.entries[0].example} down the first column, "
            f"{across.key[0]} {across.entries[0].example} along the title row, "
            f"{example_text(contract.figure)} where they meet.")


def _code_rule(sheet: str, where: str) -> dict[str, Any]:
    source = f"='{sheet}'!$A${FIRST + 1}:$A${FIRST + LIST_ROWS}"
    return {
        "validate": "list", "source": source, "error_type": "warning", "input_title": f"Codes of {sheet}",
        "input_message": f"Codes of the sheet {sheet} stand {where}.", "error_title": "Not in the list",
        "error_message": f"This code is not in the sheet {sheet}.",
    }
