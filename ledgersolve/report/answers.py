"""The questions a manager asks, each with its words, its table and its picture."""

from collections.abc import Sequence
from dataclasses import replace

from ledgersolve.findings import Answered, Column
from ledgersolve.report import names, style
from ledgersolve.report.tables import FOOTER, heading, paragraph
from ledgersolve.workbook.sheets import Area, Chart, ResultSheet, Series, Style

WIDTH = 8
PATTERNS = ("", "wide_upward_diagonal", "dotted_grid", "wide_downward_diagonal", "light_horizontal")
COLOURS = (style.PETROL, style.RUST, style.MOSS, style.QUIET, "6B4E8A")
CHART_ROWS = 17


def answers_sheet(name: str, answers: Sequence[Answered], currency: str, per: str) -> ResultSheet | None:
    """Write the answers one below the other; None where there are none."""
    if not answers:
        return None
    sheet = ResultSheet(name, tab_colour=style.MOSS, landscape=True)
    sheet.widths = {0: 34.0, **dict.fromkeys(range(1, WIDTH), 17.0)}
    heading(sheet, names.ANSWERS, "Questions that come up when a plan is discussed. Every answer was found by solving again, "
            "not by guessing; where time was short, the words say how far it is certain.", WIDTH)
    row = 3
    for answer in answers:
        row = _write(sheet, row, answer, (currency, per)) + 1
    sheet.footer = FOOTER
    return sheet


def _write(sheet: ResultSheet, row: int, answer: Answered, money: tuple[str, str]) -> int:
    for column in range(WIDTH):
        sheet.put(row, column, answer.question if column == 0 else None, style.SECTION)
    sheet.heights[row] = 22.0
    paragraph(sheet, row + 1, 0, WIDTH - 1, answer.words, style.TEXT)
    row += 2
    if not answer.rows:
        return row
    for column, given in enumerate(answer.columns):
        unit = f" ({money[0]}{money[1]})" if given.kind == "money" and "(" not in given.title else ""
        look = style.HEADER if given.kind == "text" else style.HEADER_RIGHT
        sheet.put(row, column, given.title + unit, look)
    sheet.heights[row] = 28.0
    for place, line in enumerate(answer.rows, start=row + 1):
        for column, (given, value) in enumerate(zip(answer.columns, line, strict=True)):
            sheet.put(place, column, value, _look(given, money[0], isinstance(value, str)))
    last = row + len(answer.rows)
    if answer.picture is not None:
        _picture(sheet, answer, row, last, money[0])
        return last + 2 + CHART_ROWS
    return last + 1


def _look(column: Column, currency: str, words: bool) -> Style:
    if column.kind == "text" or words:
        return replace(style.WRAPPED, size=9.0)
    formats = {"money": style.money_format(currency), "percent": style.PERCENT}
    return style.number(formats.get(column.kind, "#,##0.##"))


def _picture(sheet: ResultSheet, answer: Answered, row: int, last: int, currency: str) -> None:
    picture = answer.picture
    if picture is None:
        return
    stacked = picture.kind != "line"
    series = tuple(
        Series(answer.columns[column].title, Area(sheet.name, row + 1, picture.category, last, picture.category),
               Area(sheet.name, row + 1, column, last, column), COLOURS[k % len(COLOURS)],
               pattern=PATTERNS[k % len(PATTERNS)] if stacked else "", marker="" if stacked else "circle",
               dash="" if k % 2 == 0 else "dash")
        for k, column in enumerate(picture.values)
    )
    money = answer.columns[picture.values[0]].kind == "money"
    sheet.charts.append(Chart(
        "stacked column" if stacked else "line", picture.title, series, last + 1, 0, 760, CHART_ROWS * 20 - 10,
        x_title=answer.columns[picture.category].title, y_title=currency if money else "", number_format="#,##0",
        description=f"{picture.title}: the figures of the table above",
    ))
