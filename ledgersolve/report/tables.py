"""Tables of result sheets: a heading, a title row in the house style, columns of values or formulas."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

from ledgersolve.report import style
from ledgersolve.workbook.cells import column_letters
from ledgersolve.workbook.sheets import ResultSheet, Scalar, Style

TITLE_ROW = 3
"""Row (from 0) of a detail sheet's column titles; the data begin below."""
FIRST_ROW = TITLE_ROW + 1
LINE_HEIGHT = 13.0
ONE_LINE = 16.5
LONGEST_HEIGHT = 400.0


@dataclass(frozen=True)
class Figure:
    """A figure with the formula that gives it (without the equals sign; "" for a constant)."""

    value: float
    formula: str = ""

    @property
    def written(self) -> str:
        """The formula as a cell takes it."""
        return f"={self.formula}" if self.formula else ""


@dataclass(frozen=True)
class Column:
    """A column of a table: ``key`` for formulas, ``title`` with its unit, values and maybe formulas.

    ``formulas`` are without the equals sign; "" where the value is a constant. ``styles`` win over ``style``.
    """

    key: str
    title: str
    values: Sequence[Scalar]
    style: Style = style.CELL
    width: float = 12.0
    formulas: Sequence[str] | None = None
    links: Sequence[str] | None = None
    styles: Sequence[Style] | None = None

    def look(self, place: int) -> Style:
        """Style of the value at ``place``."""
        return self.style if self.styles is None else self.styles[place]


@dataclass(frozen=True)
class Places:
    """Where a table stands, for formulas that point at it."""

    sheet: str
    letters: dict[str, str]
    first_row: int
    count: int

    def cell(self, key: str, number: int) -> str:
        """Cell of the row ``number`` (from 0), for a formula on another sheet."""
        return f"{self.sheet}!${self.letters[key]}${self.first_row + number + 1}"

    def span(self, key: str) -> str:
        """The whole column, for a formula on another sheet."""
        letter = self.letters[key]
        last = self.first_row + max(self.count, 1)
        return f"{self.sheet}!${letter}${self.first_row + 1}:${letter}${last}"

    def here(self, key: str, number: int) -> str:
        """Cell of the row ``number`` for a formula in the same row."""
        return f"{self.letters[key]}{self.first_row + number + 1}"


def quoted(sheet: str) -> str:
    """Sheet name as a formula names it."""
    return "'" + sheet.replace("'", "''") + "'"


def places(sheet: str, keys: Sequence[str], count: int, first_row: int = FIRST_ROW) -> Places:
    """Say where a table with these columns will stand, before it is written."""
    letters = {key: column_letters(number + 1) for number, key in enumerate(keys)}
    return Places(quoted(sheet), letters, first_row, count)


def heading(sheet: ResultSheet, title: str, words: str, columns: int) -> None:
    """Write title and explanation above a table that is ``columns`` wide."""
    sheet.put(0, 0, title, style.TITLE)
    sheet.heights[0] = 24.0
    paragraph(sheet, 1, 0, columns - 1, words, style.NOTE)


def paragraph(sheet: ResultSheet, row: int, first: int, last: int, words: str, look: Style) -> None:
    """Write running text over the columns ``first`` to ``last`` of one row, high enough to show it all."""
    sheet.put(row, first, words, replace(look, wrap=True, valign="top"))
    if last > first:
        sheet.merges.append((row, first, row, last))
    wide = sum(sheet.widths.get(column, 8.43) for column in range(first, last + 1))
    height = text_height(words, wide, look.size)
    sheet.heights[row] = max(sheet.heights.get(row, 0.0), height)


def text_height(words: str, width: float, size: float = 10.0) -> float:
    """Height in points of wrapped text in a column ``width`` characters wide."""
    fits = max(1.0, width * 10.0 / size * 1.17)
    lines = sum(max(1, math.ceil(len(line) / fits)) for line in words.split("\n"))
    return min(LONGEST_HEIGHT, lines * LINE_HEIGHT * size / 10.0 + 3.0)


def write_table(sheet: ResultSheet, row: int, columns: Sequence[Column], first_column: int = 0) -> None:
    """Write column titles at ``row`` and the columns below; sets widths."""
    tallest = 1
    for number, column in enumerate(columns, start=first_column):
        right = column.style.align == "right"
        sheet.put(row, number, column.title, style.HEADER_RIGHT if right else style.HEADER)
        sheet.widths[number] = max(column.width, sheet.widths.get(number, 0.0))
        tallest = max(tallest, _title_lines(column.title, sheet.widths[number]))
        formulas, links = column.formulas, column.links
        for place, value in enumerate(column.values):
            formula = formulas[place] if formulas is not None else ""
            link = links[place] if links is not None else ""
            sheet.put(row + 1 + place, number, value, column.look(place),
                      formula=f"={formula}" if formula else "",
                      link=link)
    sheet.heights[row] = max(sheet.heights.get(row, 0.0), 12.0 * tallest + 5.0)
    _fit_rows(sheet, row + 1, columns, first_column)


def _fit_rows(sheet: ResultSheet, first: int, columns: Sequence[Column], first_column: int) -> None:
    """Make rows as high as their wrapped texts need; rows of one line keep the standard height."""
    wrapped = [(column, sheet.widths[number]) for number, column in enumerate(columns, start=first_column)
               if column.style.wrap]
    for place in range(len(columns[0].values) if wrapped else 0):
        texts = [(value, width, column.style.size) for column, width in wrapped
                 if isinstance(value := column.values[place], str)]
        height = max((text_height(*text) for text in texts), default=0.0)
        if height > ONE_LINE:
            sheet.heights[first + place] = max(sheet.heights.get(first + place, 0.0), height)


def detail_sheet(name: str, title: str, words: str, columns: Sequence[Column], tab: str) -> ResultSheet:
    """Give a sheet that is one table: heading, frozen titles, filter, titles repeated in print."""
    sheet = ResultSheet(name, tab_colour=tab, landscape=True)
    count = len(columns[0].values)
    write_table(sheet, TITLE_ROW, columns)
    heading(sheet, title, words, min(len(columns), 10))
    sheet.frozen = (FIRST_ROW, 1)
    sheet.repeat_rows = (TITLE_ROW, TITLE_ROW)
    if count:
        sheet.filter = (TITLE_ROW, 0, TITLE_ROW + count, len(columns) - 1)
    sheet.footer = FOOTER
    return sheet


FOOTER = "&L&8&F&C&8&A&R&8Page &P of &N"


def fitting_width(values: Sequence[str], least: float = 8.0, most: float = 30.0) -> float:
    """Width that shows nearly all of the texts."""
    longest = max((len(value) for value in values), default=0)
    return min(most, max(least, longest * 1.1 + 2.0))


def _title_lines(title: str, width: float) -> int:
    lines, used = 1, 0.0
    for word in title.split():
        need = len(word) * 1.1
        if used and used + 1 + need > width:
            lines, used = lines + 1, need
        else:
            used += need + (1 if used else 0)
    return lines
