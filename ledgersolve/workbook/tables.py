"""Lists on a sheet: the title row, columns by title, their cells; knows no job.

A list is read in one pass over the cells, numbers into flat arrays, so that a sheet of a million cells costs
some sixteen bytes a number; whatever is no plain number is kept as a cell.
"""

from array import array
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
        elif not is_blank(cell):
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
    """A list sheet as it stands: its title row, a store a column, and the rows that hold anything.

    ``totals`` are the numbers of totals rows of table objects: title, row, value.
    """

    titles: TitleRow
    columns: dict[str, NumberColumn | TextColumn]
    rows: Ints
    totals: tuple[tuple[str, int, float], ...] = ()


def is_blank(cell: Cell) -> bool:
    """Whether a cell holds spaces only."""
    return cell.kind is Kind.TEXT and not str(cell.value).strip()


def first_rows(cells: Iterable[Cell]) -> tuple[dict[int, list[Cell]], Iterator[Cell]]:
    """The filled cells of the rows in which the titles are searched, and the cells after them."""
    top: dict[int, list[Cell]] = {}
    stream = iter(cells)
    for cell in stream:
        if cell.row > SEARCHED_ROWS:
            return top, chain([cell], stream)
        if not is_blank(cell):
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
    top, rest = first_rows(cells)
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
    sums = _take_out_totals(columns, totals())
    every = [np.frombuffer(store.rows, dtype=np.int64) for store in columns.values() if store.rows]
    odd = [cell.row for store in columns.values() for cell in store.others]
    return RawList(titles, columns, _all_rows([*every, np.array(odd, dtype=np.int64)]), sums)


def _all_rows(parts: Sequence[Ints]) -> Ints:
    """The rows of all columns, each once, in order; in a large list the columns mostly fill the same rows."""
    filled = [part for part in parts if len(part)]
    if filled and np.all(np.diff(filled[0]) > 0) and all(np.array_equal(filled[0], part) for part in filled[1:]):
        return filled[0].copy()
    return np.unique(np.concatenate(parts))


def _take_out_totals(columns: Mapping[str, NumberColumn | TextColumn], totals: Sequence[tuple[int, int, int]],
                     ) -> tuple[tuple[str, int, float], ...]:
    """Take totals rows out of the columns; gives their numbers with title and row."""
    sums: list[tuple[str, int, float]] = []
    for title, store in columns.items():
        dropped = {row for row, first, last in totals if first <= store.column <= last}
        if dropped and isinstance(store, NumberColumn):
            numbers = zip(store.rows, store.values, strict=True)
            sums += [(title, row, value) for row, value in numbers if row in dropped]
        _drop_rows(store, dropped)
    return tuple(sums)


def read_rows(cells: Iterable[Cell], wanted: Collection[str],
              required: Sequence[tuple[str, ...]]) -> tuple[TitleRow, list[dict[str, Cell]]] | None:
    """Read a short list sheet whole: its title row, and a mapping from title to cell for every row."""
    top, rest = first_rows(cells)
    titles = find_titles(top, wanted, required)
    if titles is None:
        return None
    title_of = {column: title for title, column in titles.columns.items()}
    rows: dict[int, dict[str, Cell]] = {}
    below = (cell for row, filled in top.items() if row > titles.row for cell in filled)
    for cell in chain(below, rest):
        if cell.column in title_of and not is_blank(cell):
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
