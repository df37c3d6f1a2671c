"""What travels beside a case: where each figure stands, and which defaults were taken."""

from collections.abc import Iterator, Mapping

import numpy as np
from numpy.typing import NDArray

from ledgersolve.contract.book import Book
from ledgersolve.contract.columns import ListSheet
from ledgersolve.contract.lists import CheckedList
from ledgersolve.contract.matrices import CheckedMatrix
from ledgersolve.contract.reading import Default
from ledgersolve.workbook.origins import MatrixMap, Origins, TableMap

Ints = NDArray[np.int64]


class PairRows(Mapping[tuple[str, ...], int]):
    """Pair of codes -> row of the sheet, for lists of hundreds of thousands of rows.

    Holds two numbers a row in place of a tuple and a hash entry.
    """

    def __init__(self, first: list[str], second: list[str], rows: Ints) -> None:
        self._numbers = tuple(
            {code: number for number, code in enumerate(dict.fromkeys(texts))} for texts in (first, second))
        keys = self._key(np.array([self._numbers[0][code] for code in first], dtype=np.int64),
                         np.array([self._numbers[1][code] for code in second], dtype=np.int64))
        order = np.argsort(keys, kind="stable")
        self._keys, self._rows = keys[order], rows[order]

    def _key(self, first: Ints, second: Ints) -> Ints:
        return np.asarray(first * len(self._numbers[1]) + second, dtype=np.int64)

    def __getitem__(self, pair: tuple[str, ...]) -> int:
        first, second = pair
        key = self._numbers[0][first] * len(self._numbers[1]) + self._numbers[1][second]
        place = int(np.searchsorted(self._keys, key))
        if place == len(self._keys) or self._keys[place] != key:
            raise KeyError(pair)
        return int(self._rows[place])

    def __iter__(self) -> Iterator[tuple[str, ...]]:
        names = [list(numbers) for numbers in self._numbers]
        for key in self._keys.tolist():
            first, second = divmod(key, len(names[1]))
            yield names[0][first], names[1][second]

    def __len__(self) -> int:
        return len(self._keys)


class ListCells:
    """Cells of a list, told by (row, column): a container that makes no tuple a cell."""

    def __init__(self, table: CheckedList, which: str) -> None:
        self._rows = {
            column.column: np.asarray(table.rows[~column.good if which == "blank" else column.as_text])
            for column in table.columns.values()
        }

    def __contains__(self, place: object) -> bool:
        row, column = place if isinstance(place, tuple) else (0, 0)
        rows = self._rows.get(column)
        if rows is None or not len(rows):
            return False
        found = int(np.searchsorted(rows, row))
        return found < len(rows) and bool(rows[found] == row)


class BlankFigures:
    """Empty cells of a matrix, told by (row, column)."""

    def __init__(self, matrix: CheckedMatrix) -> None:
        self._row_number = {row: number for number, row in matrix.rows.items()}
        self._column_number = {column: number for number, column in matrix.columns.items()}
        self._blank = np.isnan(matrix.figures)

    def __contains__(self, place: object) -> bool:
        row, column = place if isinstance(place, tuple) else (0, 0)
        down, across = self._row_number.get(row), self._column_number.get(column)
        return down is not None and across is not None and bool(self._blank[down, across])


def origins_of(book: Book) -> Origins:
    """Where each figure of the workbook stands."""
    tables = {name: _list_map(table) for name, table in book.tables.items()}
    values = book.settings
    if "Value" in values.columns:
        tables["Settings"] = TableMap(
            values.sheet, {"Value": values.columns["Value"]},
            {(name,): row for name, row in values.rows.items()},
            frozenset(place for name in values.rows
                      if name not in values.given and (place := values.place(name))),
            frozenset(values.given[name] for name in values.as_text))
    matrices = {}
    for name, matrix in book.matrices.items():
        down = book.codes.get(matrix.contract.rows_of)
        across = book.codes.get(matrix.contract.columns_of)
        if down is not None and across is not None:
            matrices[name] = MatrixMap(
                matrix.sheet, {down.codes[number]: row for number, row in matrix.rows.items()},
                {across.codes[number]: column for number, column in matrix.columns.items()},
                BlankFigures(matrix), matrix.as_text)
    return Origins(tables, matrices)


def _list_map(table: CheckedList) -> TableMap:
    keys = [table.texts(title) for title in table.contract.key]
    rows: Mapping[tuple[str, ...], int]
    if len(keys) == 2:
        rows = PairRows(keys[0], keys[1], table.rows)
    else:
        rows = {(code,): row for code, row in zip(keys[0], table.rows.tolist(), strict=True) if code}
    columns = {title: column.column for title, column in table.columns.items()}
    return TableMap(table.sheet, columns, rows, ListCells(table, "blank"), ListCells(table, "text"))


def defaults_of(book: Book) -> tuple[Default, ...]:
    """Defaults taken: settings not given and empty cells of optional columns, in contract order.

    A cell at fault is no empty one: nothing was taken in its place.
    """
    taken = [
        Default("Settings", entry.title, entry.default_text(), 1)
        for entry in book.contract.settings
        if not entry.required and entry.title not in book.settings.given and entry.title not in book.settings.bad
    ]
    for sheet in book.contract.sheets:
        if isinstance(sheet, ListSheet) and sheet.name in book.tables:
            table = book.tables[sheet.name]
            taken += [
                Default(sheet.name, entry.title, entry.default_text(), int(empty.sum()))
                for entry in table.contract.entries
                if not entry.required and (empty := ~(table.good(entry.title) | table.bad(entry.title))).any()
            ]
        elif sheet.name in book.matrices:
            matrix = book.matrices[sheet.name]
            figure = matrix.contract.figure
            count = int((np.isnan(matrix.figures) & ~matrix.bad).sum())
            if count and figure.default is not None:
                taken.append(Default(sheet.name, figure.title, figure.default_text(), count))
    return tuple(taken)
