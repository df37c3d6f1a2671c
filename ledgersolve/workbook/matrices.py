"""Matrices on a sheet: codes down the first column and along the title row, figures between; knows no job.

Read in one pass like lists: numbers into flat arrays, everything else kept as cells.
"""

from array import array
from collections import Counter
from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from ledgersolve.workbook.cells import Cell, Kind
from ledgersolve.workbook.tables import Floats, Ints, Totals, first_rows, is_blank, no_totals
from ledgersolve.workbook.text import cell_text


@dataclass(frozen=True)
class RawMatrix:
    """A matrix sheet as it stands.

    ``row_codes`` and ``column_codes`` are the cells of the codes; ``rows``, ``columns``, ``values`` its
    numbers (rows and columns of the sheet); ``others`` all other cells inside; ``strays`` cells with
    something in them right of the table or under no code.
    """

    title_row: int
    code_column: int
    row_codes: list[Cell]
    column_codes: list[Cell]
    rows: Ints
    columns: Ints
    values: Floats
    others: list[Cell]
    strays: list[Cell]


def _known_in(cells: Sequence[Cell], known: Collection[str], date1904: bool) -> list[Cell]:
    return [cell for cell in cells if cell_text(cell, date1904) in known]


def _matrix_titles(top: Mapping[int, Sequence[Cell]], codes: Collection[str], date1904: bool) -> int | None:
    """The first row holding at least half as many known codes as the row that holds most of them.

    A data row can hold known codes by chance (cost 7, customer 7), and a title row can hold slips; without
    known codes, the first row with two filled cells.
    """
    if not codes:
        return next((row for row, cells in top.items() if len(cells) > 1), None)
    counts = {row: _count_titles(cells, codes, date1904) for row, cells in top.items()}
    most = max(counts.values(), default=0)
    return None if most == 0 else next(row for row, count in counts.items() if 2 * count >= most)


def _count_titles(cells: Sequence[Cell], codes: Collection[str], date1904: bool) -> int:
    """Known codes in a row; one in front of other cells alone is the code of a row, not a title."""
    known = _known_in(cells, codes, date1904)
    return 0 if known == cells[:1] and len(cells) > 1 else len(known)


def _code_column(top: Mapping[int, Sequence[Cell]], title_row: int, first_title: int,
                 codes: Collection[str], date1904: bool) -> int:
    """The column left of the titles in which most known codes stand; else the leftmost filled one."""
    below = [cell for row, cells in top.items() if row > title_row for cell in cells]
    left = [cell for cell in below if cell.column < first_title]
    counts = Counter(cell.column for cell in _known_in(left, codes, date1904))
    if counts:
        return min(counts, key=lambda column: (-counts[column], column))
    return min((cell.column for cell in left), default=max(first_title - 1, 1))


def read_matrix(cells: Iterable[Cell], row_codes: Collection[str], column_codes: Collection[str],
                totals: Totals = no_totals, date1904: bool = False) -> RawMatrix | None:
    """Read a matrix sheet in one pass; None where no title row was found within the first 30 rows.

    Parameters
    ----------
    cells
        The sheet's cells in row order.
    row_codes, column_codes
        Codes known to stand down the first column and along the title row; empty where not known.
    totals
        Totals rows of table objects.
    date1904
        The workbook's date system.
    """
    top, rest = first_rows(cells)
    title_row = _matrix_titles(top, column_codes, date1904)
    if title_row is None:
        return None
    titles = top[title_row]
    known = _known_in(titles, column_codes, date1904) if column_codes else titles[1:]
    first_title = min(cell.column for cell in known)
    code_column = _code_column(top, title_row, first_title, row_codes, date1904)
    heads = [cell for cell in titles if cell.column > code_column]
    matrix = _MatrixStore(code_column, first_title, {cell.column for cell in heads})
    for row, filled in top.items():
        if row > title_row:
            matrix.take(filled)
    matrix.take(rest)
    skipped = {row for row, first, last in totals() if first <= code_column <= last}
    notes = _note_columns(heads, first_title, set(matrix.columns))
    heads = [cell for cell in heads if cell.column not in notes]
    matrix.others = [cell for cell in matrix.others if cell.column not in notes]
    rows = np.array(matrix.rows, dtype=np.int64)
    kept = ~np.isin(rows, list(skipped))
    return RawMatrix(
        title_row, code_column, _outside(matrix.codes, skipped), heads, rows[kept],
        np.array(matrix.columns, dtype=np.int64)[kept], np.array(matrix.values, dtype=np.float64)[kept],
        _outside(matrix.others, skipped), _outside(matrix.strays, skipped),
    )


def _note_columns(heads: Sequence[Cell], first_title: int, with_figures: set[int]) -> set[int]:
    """Columns left of the first known code that hold no figures: names and notes, no part of the matrix."""
    return {cell.column for cell in heads if cell.column < first_title and cell.column not in with_figures}


def _outside(cells: list[Cell], rows: set[int]) -> list[Cell]:
    return [cell for cell in cells if cell.row not in rows] if rows else cells


class _MatrixStore:
    """Sorts the cells below the title row into codes, numbers, other cells and strays."""

    def __init__(self, code_column: int, first: int, heads: set[int]) -> None:
        self.code_column = code_column
        self.first = first
        self.heads = heads
        self.codes: list[Cell] = []
        self.rows = array("q")
        self.columns = array("q")
        self.values = array("d")
        self.others: list[Cell] = []
        self.strays: list[Cell] = []

    def take(self, cells: Iterable[Cell]) -> None:
        """Store cells in row order."""
        for cell in cells:
            column = cell.column
            if column in self.heads:
                if cell.kind is Kind.NUMBER:
                    self.rows.append(cell.row)
                    self.columns.append(column)
                    self.values.append(float(cell.value))
                elif not is_blank(cell):
                    self.others.append(cell)
            elif is_blank(cell):
                continue
            elif column == self.code_column:
                self.codes.append(cell)
            elif column >= self.first:
                self.strays.append(cell)
