"""Checks a matrix sheet: codes along both sides, figures between them."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ledgersolve.contract import mended, values
from ledgersolve.contract.codes import Codes, resolve
from ledgersolve.contract.columns import Entry, Holds, MatrixSheet, quoted
from ledgersolve.contract.faults import Fault, Faults, Place
from ledgersolve.contract.lists import TOTAL_WORDS
from ledgersolve.contract.models import outside
from ledgersolve.workbook.cells import Cell, Kind
from ledgersolve.workbook.matrices import RawMatrix
from ledgersolve.workbook.text import plain

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]


@dataclass
class CheckedMatrix:
    """A checked matrix over two code lists.

    ``figures`` has a row and a column for every code of the lists, NaN where the sheet has none; ``bad``
    marks cells at fault, ``as_text`` numbers that stand as text. ``rows`` and ``columns`` map a code's
    number to its row and column on the sheet.
    """

    sheet: str
    contract: MatrixSheet
    figures: Floats
    bad: Flags
    as_text: frozenset[Place]
    rows: Mapping[int, int]
    columns: Mapping[int, int]
    title_row: int

    def place(self, row: int, column: int) -> Place:
        """Row and column of the sheet for a pair of code numbers."""
        return self.rows[row], self.columns[column]

    def covered(self) -> Flags:
        """Pairs whose codes both stand on the sheet, whether or not the cell is filled."""
        down = np.zeros(self.figures.shape[0], dtype=bool)
        down[list(self.rows)] = True
        across = np.zeros(self.figures.shape[1], dtype=bool)
        across[list(self.columns)] = True
        return down[:, None] & across[None, :]


def check_matrix(sheet: str, contract: MatrixSheet, raw: RawMatrix, down: Codes, across: Codes,
                 faults: Faults, date1904: bool) -> CheckedMatrix:
    """Check the codes along both sides and every figure, and report what is wrong."""
    filled_rows = set(raw.rows.tolist()) | {cell.row for cell in raw.others}
    filled_columns = set(np.unique(raw.columns).tolist()) | {cell.column for cell in raw.others}
    rows = _side(sheet, contract.corner, raw.row_codes, [c.row for c in raw.row_codes], filled_rows, down,
                 faults, date1904)
    columns = _side(sheet, contract.across, raw.column_codes, [c.column for c in raw.column_codes],
                    filled_columns, across, faults, date1904)
    _report_without_code(sheet, raw, filled_rows, faults, contract)
    figures = np.full((len(down.codes), len(across.codes)), np.nan)
    bad = np.zeros(figures.shape, dtype=bool)
    row_number = _lookup(rows, raw.rows, filled_rows)
    column_number = _lookup(columns, raw.columns, filled_columns)
    inside = (row_number >= 0) & (column_number >= 0)
    figures[row_number[inside], column_number[inside]] = raw.values[inside]
    _check_limits(sheet, contract.figure, raw, inside, row_number, column_number, figures, bad, faults)
    as_text = _take_others(sheet, contract.figure, raw.others, rows, columns, figures, bad,
                           faults)
    return CheckedMatrix(sheet, contract, figures, bad, frozenset(as_text),
                         {number: line for line, number in rows.items()},
                         {number: line for line, number in columns.items()}, raw.title_row)


def _lookup(lines: Mapping[int, int], wanted: Ints, filled: set[int]) -> Ints:
    """Code numbers of many sheet lines at once; -1 where a line has no code."""
    table = np.full(max(filled, default=0) + 1, -1, dtype=np.int64)
    for line, number in lines.items():
        if line < len(table):
            table[line] = number
    return table[wanted]


def _side(sheet: str, title: str, cells: Sequence[Cell], lines: Sequence[int], filled: set[int], known: Codes,
          faults: Faults, date1904: bool) -> dict[int, int]:
    """Codes along one side: sheet line (row or column) -> number of the code; what is wrong is reported."""
    named = _named_lines(sheet, title, cells, lines, filled, known, faults, date1904)
    numbers = resolve(sheet, title, [code for _, _, code in named],
                      lambda i: (named[i][0].row, named[i][0].column), known, faults)
    found: dict[int, int] = {}
    met: dict[str, Cell] = {}
    for (cell, line, code), number in zip(named, numbers.tolist(), strict=True):
        if code in met:
            faults.add(sheet, (cell.row, cell.column), title, Fault(
                "duplicate code", f"{quoted(code)}, which stands in {met[code].address} already", "each code once",
                "Take one of the two out, or rename it.", test=mended.unique(_range(cells))))
        elif number >= 0:
            met[code] = cell
            found[line] = number
    return found


def _range(cells: Sequence[Cell]) -> str:
    """The cells of the codes along one side, as formulas name them."""
    first, last = cells[0], cells[-1]
    if first.column == last.column:
        return mended.down(first.column, first.row, last.row)
    return mended.along(first.row, first.column, last.column)


def _named_lines(sheet: str, title: str, cells: Sequence[Cell], lines: Sequence[int], filled: set[int],
                 known: Codes, faults: Faults, date1904: bool) -> list[tuple[Cell, int, str]]:
    """Code cells along one side with their line and code, without totals at the end.

    Words over no figures may be notes and are left alone.
    """
    entry = Entry(title, "", Holds.CODE, refers=known.sheet)
    named: list[tuple[Cell, int, str]] = []
    for cell, line in zip(cells, lines, strict=True):
        code = values.text(cell, entry, date1904)
        if isinstance(code, Fault):
            if line in filled:
                faults.add(sheet, (cell.row, cell.column), title, code)
        elif line in filled or code in known.number:
            named.append((cell, line, code))
    if named and plain(named[-1][2]) in TOTAL_WORDS and named[-1][2] not in known.number:
        cell, _, code = named.pop()
        faults.add(sheet, (cell.row, cell.column), title, Fault(
            "totals row", f"totals ({quoted(code)}) at the end of the matrix", entry.expected(),
            "Take the totals out of the matrix.", "empty"))
    return named


def _report_without_code(sheet: str, raw: RawMatrix, filled_rows: set[int], faults: Faults,
                         contract: MatrixSheet) -> None:
    """Report figures in rows and columns of the matrix that have no code."""
    coded = {cell.row for cell in raw.row_codes}
    lost_rows = sorted(filled_rows - coded)
    faults.many(sheet, [(row, raw.code_column) for row in lost_rows], contract.corner, lambda _: Fault(
        "required cell empty", "an empty cell beside figures", f"a code of the sheet {contract.rows_of}",
        "Type the code, or clear the row.", "filled"))
    last = max(cell.column for cell in raw.column_codes)
    lost_columns = sorted({cell.column for cell in raw.strays if cell.kind is Kind.NUMBER
                           and cell.column <= last + 1})
    places = [(raw.title_row, column) for column in lost_columns]
    faults.many(sheet, places, contract.across, lambda _: Fault(
        "required cell empty", "an empty cell above figures", f"a code of the sheet {contract.columns_of}",
        "Type the code, or clear the column.", "filled"))


def _check_limits(sheet: str, entry: Entry, raw: RawMatrix, inside: Flags, row_number: Ints,
                  column_number: Ints, figures: Floats, bad: Flags, faults: Faults) -> None:
    asked = np.flatnonzero(inside)
    refused = asked[outside(entry, raw.values[asked].tolist())]
    by_kind: dict[str, list[int]] = {}
    for place in refused.tolist():
        fault = values.limit_fault(entry, float(raw.values[place]))
        if fault is not None:
            by_kind.setdefault(fault.kind, []).append(place)
    for places in by_kind.values():
        def describe(i: int, places: list[int] = places) -> Fault:
            return values.limit_fault(entry, float(raw.values[places[i]])) or _unclear(entry)

        faults.many(sheet, [(int(raw.rows[p]), int(raw.columns[p])) for p in places], entry.title, describe)
    figures[row_number[refused], column_number[refused]] = np.nan
    bad[row_number[refused], column_number[refused]] = True


def _unclear(entry: Entry) -> Fault:
    return Fault("number expected", "a value that does not fit", entry.expected(), "Type a number.")


def _take_others(sheet: str, entry: Entry, others: Sequence[Cell], rows: Mapping[int, int],
                 columns: Mapping[int, int], figures: Floats, bad: Flags, faults: Faults) -> list[Place]:
    """Take figures that stand as text, and report cells that hold no number."""
    as_text: list[Place] = []
    for cell in others:
        row, column = rows.get(cell.row, -1), columns.get(cell.column, -1)
        if row < 0 or column < 0:
            continue
        outcome = values.number(cell, entry)
        fault = outcome if isinstance(outcome, Fault) else values.limit_fault(entry, outcome)
        if fault is not None:
            bad[row, column] = True
            faults.add(sheet, (cell.row, cell.column), entry.title, fault)
        elif not isinstance(outcome, Fault):
            figures[row, column] = outcome
            as_text.append((cell.row, cell.column))
    return as_text
