"""The questions a manager asks, each with its words, its table and its picture."""

from collections.abc import Sequence

from ledgersolve.findings import NOT_ANSWERED, Answered
from ledgersolve.findings import Column as AnswerColumn
from ledgersolve.report import names, style
from ledgersolve.report.tables import FOOTER, Column, heading, paragraph, write_table
from ledgersolve.workbook.sheets import Area, Chart, ResultSheet, Series, Style

WIDEST, NARROWEST = 34.0, 13.0
LEAST_COLUMNS = 7
PATTERNS = ("", "wide_upward_diagonal", "dotted_grid", "wide_downward_diagonal", "light_horizontal")
COLOURS = (style.PETROL, style.RUST, style.MOSS, style.QUIET, "6B4E8A")
CHART_ROWS = 17


def answers_sheet(name: str, answers: Sequence[Answered], currency: str, per: str) -> ResultSheet | None:
    """Write the answers one below the other; None where there are none."""
    if not answers:
        return None
    sheet = ResultSheet(name, tab_colour=style.MOSS, landscape=True, widths=_widths(answers))
    last = len(sheet.widths) - 1
    heading(sheet, names.ANSWERS, "Questions that come up when a plan is discussed. Every figure comes from solving "
                                  f"or costing your workbook again; none is a guess. {_missing(answers)}", last + 1)
    row = 3
    for answer in answers:
        for column in range(last + 1):
            sheet.put(row, column, answer.question if column == 0 else None, style.SECTION)
        sheet.heights[row] = 22.0
        paragraph(sheet, row + 1, 0, last, answer.words, style.TEXT)
        row = _table(sheet, row + 2, answer, (currency, per)) + 1
    sheet.footer = FOOTER
    return sheet


def _missing(answers: Sequence[Answered]) -> str:
    """What was not answered, and what to do about it."""
    count = sum(answer.unanswered for answer in answers)
    if not count:
        return "Where only a range is proven, the words say so."
    rows = style.counted(count, "line says", "lines say")
    return (f'{rows} "{NOT_ANSWERED}": to have more answered, raise "Time limit (seconds)" or "Share of time for '
            'questions (%)" in Settings, and drop the workbook again.')


def _widths(answers: Sequence[Answered]) -> dict[int, float]:
    """Widths that suit the columns of all answers, which stand one below the other."""
    widths = dict.fromkeys(range(LEAST_COLUMNS), NARROWEST)
    for answer in answers:
        for column, given in enumerate(answer.columns):
            texts = [line[column] for line in answer.rows]
            longest = max((len(text) for text in texts if isinstance(text, str)), default=0)
            wanted = max(longest * 0.95 + 3.0, len(given.title) * 0.6 + 3.0, NARROWEST + 3.0)
            widths[column] = max(widths.get(column, NARROWEST), min(WIDEST, wanted))
    return widths


def _table(sheet: ResultSheet, row: int, answer: Answered, money: tuple[str, str]) -> int:
    """Write the figures behind an answer; gives the next free row."""
    if not answer.rows:
        return row
    by_row = _unit_formats(answer, money[0])
    columns = []
    for number, given in enumerate(answer.columns):
        values = [line[number] for line in answer.rows]
        units = {"money": f" ({money[0]}{money[1]})", "percent": " (%)", "number": " (number)"}
        unit = "" if "(" in given.title or by_row else units.get(given.kind, "")
        look = _look(given, money[0], [value for value in values if isinstance(value, int | float)])
        looks = [look] * len(values)
        if by_row and given.kind == "number":
            looks = [style.number(shown) for shown in by_row]
        styles = [WORDS if isinstance(value, str) else own for value, own in zip(values, looks, strict=True)]
        columns.append(Column(given.title, given.title + unit, values, look, sheet.widths[number], styles=styles))
    write_table(sheet, row, columns)
    last = row + len(answer.rows)
    if answer.picture is None:
        return last + 1
    _picture(sheet, answer, row, last, money[0])
    return last + 2 + CHART_ROWS


def _unit_formats(answer: Answered, currency: str) -> list[str]:
    """Number format of each row where rows have units of their own, in a column ``Unit``; else nothing."""
    titles = [column.title for column in answer.columns]
    if "Unit" not in titles:
        return []
    numbers = [place for place, column in enumerate(answer.columns) if column.kind == "number"]
    formats = []
    for line in answer.rows:
        figures = [value for place in numbers if isinstance(value := line[place], int | float)]
        is_money = line[titles.index("Unit")] == currency
        formats.append(style.money_format(currency) if is_money else style.figure_format(figures, most=1))
    return formats


WORDS = style.WRAPPED_CELL


def _look(column: AnswerColumn, currency: str, figures: Sequence[float]) -> Style:
    if column.kind == "text":
        return WORDS
    formats = {"money": style.money_format(currency), "percent": style.PERCENT}
    return style.number(formats.get(column.kind) or style.figure_format(figures))


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
