"""Tables on a sheet: the title row, columns by title, their cells; knows no job.

A list has known titles along its title row. A matrix has codes down its first column and codes along its
title row. Both are read in one pass over the cells, numbers into flat arrays, so that a sheet of a
million cells costs some ten bytes a number; whatever is no plain number is kept as a cell.
"""

from array import array
from collections import Counter
from collections.abc import Callable, Collection, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from itertools import chain

import numpy as np
from numpy.typing import NDArray

from ledgersolve.workbook.cells import Cell, Kind
from ledgersolve.workbook.text import cell_text, code_text, plain

SEARCHED_ROWS = 30
"""The title row stands within the first so many rows."""

Ints = NDArray[np.int64]
Floats = NDArray[np.float64]
Totals = Callable[[], Sequence[tuple[int, int, int]]]
"""Gives the totals rows of table objects (row, first and last column); asked once all cells are read."""


def no_totals() -> Sequence[tuple[int, int, int]]:
    """No totals rows."""
    return ()


@dataclass
class NumberColumn:
    """Cells of a column that should hold numbers: rows and values of number cells, all other cells whole."""

    column: int
    rows: "array[int]" = field(default_factory=lambda: array("q"))
    values: "array[float]" = field(default_factory=lambda: array("d"))
    others: list[Cell] = field(default_factory=list)

    def take(self, cell: Cell) -> None:
        """Store one cell."""
        if cell.kind is Kind.NUMBER:
            self.rows.append(cell.row)
            self.values.append(float(cell.value))
        elif not _blank(cell):
            self.others.append(cell)


@dataclass
class TextColumn:
    """Cells of a column of texts or codes: rows and cleaned texts, all cells that are no text whole."""

    column: int
    rows: "array[int]" = field(default_factory=lambda: array("q"))
    texts: list[str] = field(default_factory=list)
    others: list[Cell] = field(default_factory=list)
    met: dict[str, str] = field(default_factory=dict)

    def take(self, cell: Cell) -> None:
        """Store one cell."""
        if cell.kind is Kind.TEXT:
            written = str(cell.value)
            text = self.met.get(written)
            if text is None:
                text = self.met[written] = code_text(written)
        elif cell.kind is Kind.NUMBER:
            text = cell_text(cell) or ""
        else:
            self.others.append(cell)
            return
        if text:
            self.rows.append(cell.row)
            self.texts.append(text)


@dataclass(frozen=True)
class TitleRow:
    """Where the titles of a list stand.

    ``columns`` maps each title found to its column; ``headings`` each column to its title as written;
    ``strangers`` are title cells that are none of the wanted; ``twice`` repeated titles with their second
    cell; ``missing`` the required titles (alternatives together) that are not there.
    """

    row: int
    columns: dict[str, int]
    headings: dict[int, str]
    strangers: tuple[Cell, ...]
    twice: tuple[tuple[str, Cell], ...]
    missing: tuple[tuple[str, ...], ...]


@dataclass(frozen=True)
class RawList:
    """A list sheet as it stands: its title row, a store a column, and the rows that hold anything."""

    titles: TitleRow
    columns: dict[str, NumberColumn | TextColumn]
    rows: Ints


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


def _blank(cell: Cell) -> bool:
    return cell.kind is Kind.TEXT and not str(cell.value).strip()


def _first_rows(cells: Iterable[Cell]) -> tuple[dict[int, list[Cell]], Iterator[Cell]]:
    """The filled cells of the rows in which the titles are searched, and the cells after them."""
    top: dict[int, list[Cell]] = {}
    stream = iter(cells)
    for cell in stream:
        if cell.row > SEARCHED_ROWS:
            return top, chain([cell], stream)
        if not _blank(cell):
            top.setdefault(cell.row, []).append(cell)
    return top, stream


def _titles_of(row: int, cells: Sequence[Cell], wanted: Mapping[str, str],
               required: Sequence[tuple[str, ...]]) -> TitleRow:
    columns: dict[str, int] = {}
    headings: dict[int, str] = {}
    strangers: list[Cell] = []
    twice: list[tuple[str, Cell]] = []
    for cell in cells:
        if cell.kind is not Kind.TEXT:
            continue
        title = wanted.get(plain(str(cell.value)))
        if title is None:
            strangers.append(cell)
        elif title in columns:
            twice.append((title, cell))
        else:
            columns[title] = cell.column
            headings[cell.column] = str(cell.value)
    missing = tuple(names for names in required if not any(name in columns for name in names))
    return TitleRow(row, columns, headings, tuple(strangers), tuple(twice), missing)


def find_titles(top: Mapping[int, Sequence[Cell]], wanted: Collection[str],
                required: Sequence[tuple[str, ...]]) -> TitleRow | None:
    """The first row that holds all required titles, else the row that holds most known ones.

    ``required`` lists alternatives: one title of each tuple has to be there. None where no row holds a
    known title.
    """
    by_plain = {plain(title): title for title in wanted}
    best: TitleRow | None = None
    for row, cells in top.items():
        titles = _titles_of(row, cells, by_plain, required)
        if titles.columns and not titles.missing:
            return titles
        if titles.columns and (best is None or len(titles.columns) > len(best.columns)):
            best = titles
    return best


def read_list(cells: Iterable[Cell], wanted: Mapping[str, bool], required: Sequence[tuple[str, ...]],
              totals: Totals = no_totals) -> RawList | None:
    """Read a list sheet in one pass.

    Parameters
    ----------
    cells
        The sheet's cells in row order.
    wanted
        Known titles; True where the column holds texts or codes, False where numbers.
    required
        Titles that have to be there, alternatives together.
    totals
        Totals rows of table objects, which are no data.

    Returns
    -------
    RawList or None
        None where no row of the first 30 holds a known title.
    """
    top, rest = _first_rows(cells)
    titles = find_titles(top, wanted, required)
    if titles is None:
        return None
    columns: dict[str, NumberColumn | TextColumn] = {
        title: TextColumn(column) if wanted[title] else NumberColumn(column)
        for title, column in titles.columns.items()
    }
    take = {store.column: store.take for store in columns.values()}
    for row, filled in top.items():
        if row > titles.row:
            _hand_out(filled, take)
    _hand_out(rest, take)
    totals_rows = totals()
    for store in columns.values():
        _drop_rows(store, {row for row, first, last in totals_rows if first <= store.column <= last})
    every = [np.frombuffer(store.rows, dtype=np.int64) for store in columns.values() if store.rows]
    odd = [cell.row for store in columns.values() for cell in store.others]
    rows = np.unique(np.concatenate([*every, np.array(odd, dtype=np.int64)]))
    return RawList(titles, columns, rows)


def read_rows(cells: Iterable[Cell], wanted: Collection[str],
              required: Sequence[tuple[str, ...]]) -> tuple[TitleRow, list[dict[str, Cell]]] | None:
    """Read a short list sheet whole: its title row, and a mapping from title to cell for every row."""
    top, rest = _first_rows(cells)
    titles = find_titles(top, wanted, required)
    if titles is None:
        return None
    title_of = {column: title for title, column in titles.columns.items()}
    rows: dict[int, dict[str, Cell]] = {}
    below = (cell for row, filled in top.items() if row > titles.row for cell in filled)
    for cell in chain(below, rest):
        if cell.column in title_of and not _blank(cell):
            rows.setdefault(cell.row, {})[title_of[cell.column]] = cell
    return titles, list(rows.values())


def _hand_out(cells: Iterable[Cell], take: Mapping[int, Callable[[Cell], None]]) -> None:
    for cell in cells:
        store = take.get(cell.column)
        if store is not None:
            store(cell)


def _drop_rows(store: NumberColumn | TextColumn, rows: set[int]) -> None:
    """Take rows out of a column."""
    if not rows:
        return
    store.others = [cell for cell in store.others if cell.row not in rows]
    keep = [place for place, row in enumerate(store.rows) if row not in rows]
    if len(keep) == len(store.rows):
        return
    store.rows = array("q", [store.rows[place] for place in keep])
    if isinstance(store, NumberColumn):
        store.values = array("d", [store.values[place] for place in keep])
    else:
        store.texts = [store.texts[place] for place in keep]


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
    """Read a matrix sheet in one pass.

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

    Returns
    -------
    RawMatrix or None
        None where no title row was found within the first 30 rows.
    """
    top, rest = _first_rows(cells)
    title_row = _matrix_titles(top, column_codes, date1904)
    if title_row is None:
        return None
    titles = top[title_row]
    known = _known_in(titles, column_codes, date1904) if column_codes else titles[1:]
    first_title = min(cell.column for cell in known)
    code_column = _code_column(top, title_row, first_title, row_codes, date1904)
    heads = [cell for cell in titles if cell.column > code_column and cell.column >= first_title]
    matrix = _MatrixStore(code_column, first_title, {cell.column for cell in heads})
    for row, filled in top.items():
        if row > title_row:
            matrix.take(filled)
    matrix.take(rest)
    skipped = {row for row, first, last in totals() if first <= code_column <= last}
    rows = np.array(matrix.rows, dtype=np.int64)
    kept = ~np.isin(rows, list(skipped))
    return RawMatrix(
        title_row, code_column, _outside(matrix.codes, skipped), heads, rows[kept],
        np.array(matrix.columns, dtype=np.int64)[kept], np.array(matrix.values, dtype=np.float64)[kept],
        _outside(matrix.others, skipped), _outside(matrix.strays, skipped),
    )


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
                elif not _blank(cell):
                    self.others.append(cell)
            elif _blank(cell):
                continue
            elif column == self.code_column:
                self.codes.append(cell)
            elif column >= self.first:
                self.strays.append(cell)
