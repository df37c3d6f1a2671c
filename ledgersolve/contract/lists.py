"""Checks a list sheet: every cell under a known title, and nothing that follows from another fault."""

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from ledgersolve.contract import mended, values
from ledgersolve.contract.columns import Entry, Holds, ListSheet, listed, quoted, shown
from ledgersolve.contract.faults import Fault, Faults, Place
from ledgersolve.contract.models import outside
from ledgersolve.workbook.cells import Cell
from ledgersolve.workbook.tables import NumberColumn, RawList, TextColumn
from ledgersolve.workbook.text import nearest, plain

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

TOTAL_WORDS = frozenset({"total", "totals", "sum", "sums", "grandtotal", "subtotal", "sub-total"})


@dataclass
class CheckedColumn:
    """Checked cells of one column, one place a row of the list.

    ``numbers`` (NaN where none) for numbers and yes/no (1 and 0); ``texts`` ("" where none) for the rest.
    ``good`` marks cells with a right value, ``bad`` those at fault (already reported); neither = empty.
    ``as_text`` marks numbers that stand as text.
    """

    entry: Entry
    column: int
    numbers: Floats
    texts: list[str]
    good: Flags
    bad: Flags
    as_text: Flags


@dataclass
class CheckedList:
    """A checked list sheet; ``rows`` are the sheet's row numbers of its rows.

    ``whole`` is False where a row's code is missing or at fault, or rows could not be told at all: a code
    that is not found then may be the one that is broken.
    """

    sheet: str
    contract: ListSheet
    title_row: int
    rows: Ints
    columns: dict[str, CheckedColumn] = field(default_factory=dict)
    headings: dict[int, str] = field(default_factory=dict)
    whole: bool = True

    @property
    def count(self) -> int:
        """Number of rows."""
        return len(self.rows)

    def place(self, number: int, title: str) -> Place:
        """Row and column of a cell; the first column of the list where the title is not there."""
        column = self.columns[title].column if title in self.columns else self.first_column
        return int(self.rows[number]), column

    @property
    def first_column(self) -> int:
        """Leftmost known column."""
        return min(column.column for column in self.columns.values())

    def numbers(self, title: str, default: float = np.nan) -> Floats:
        """Numbers under a title; the default where the cell is empty or at fault, or the title absent."""
        if title not in self.columns:
            return np.full(self.count, default)
        column = self.columns[title]
        return np.where(column.good, column.numbers, default)

    def flags(self, title: str, default: bool = False) -> Flags:
        """yes/no under a title as Booleans."""
        return np.asarray(self.numbers(title, float(default)) != 0)

    def texts(self, title: str) -> list[str]:
        """Texts under a title; "" where empty or absent."""
        return self.columns[title].texts if title in self.columns else [""] * self.count

    def good(self, title: str) -> Flags:
        """Cells under a title with a right value."""
        return self.columns[title].good if title in self.columns else np.zeros(self.count, dtype=bool)

    def bad(self, title: str) -> Flags:
        """Cells under a title at fault."""
        return self.columns[title].bad if title in self.columns else np.zeros(self.count, dtype=bool)


def check_list(sheet: str, contract: ListSheet, raw: RawList, faults: Faults, date1904: bool) -> CheckedList:
    """Check all cells of a list sheet and report what is wrong."""
    rows = _data_rows(sheet, contract, raw, faults)
    checked = CheckedList(sheet, contract, raw.titles.row, rows, headings=raw.titles.headings)
    for title, store in raw.columns.items():
        entry = contract.entry(title)
        checked.columns[title] = _check_column(sheet, entry, store, rows, faults, date1904)
    for title in contract.key:
        if title in checked.columns:
            column = checked.columns[title]
            checked.whole &= not bool((~column.good).any())
    for title, column in checked.columns.items():
        if column.entry.required:
            _report_empty(checked, title, faults)
    _report_sums(checked, raw, faults)
    return checked


def _report_sums(checked: CheckedList, raw: RawList, faults: Faults) -> None:
    """Notices for totals rows of table objects whose figure is no total, mean, count or extreme of the column."""
    for title, row, total in raw.totals:
        figures = checked.columns[title].numbers[checked.columns[title].good]
        if not len(figures) or bool(checked.columns[title].bad.any()):
            continue
        fitting = (figures.sum(), figures.mean(), len(figures), figures.min(), figures.max())
        if not any(np.isclose(total, value, rtol=1e-6, atol=1e-9) for value in fitting):
            faults.notice(checked.sheet, (row, checked.columns[title].column), title, "sum does not match",
                          f"a total of {shown(total)}, where the rows add up to {shown(round(figures.sum(), 6))}",
                          "a total of the rows above", "The rows were used; check whether one is missing.")


def _data_rows(sheet: str, contract: ListSheet, raw: RawList, faults: Faults) -> Ints:
    """Rows of the list without totals rows at its foot and repeated titles, which are reported."""
    rows = raw.rows
    title = next((name for name in contract.key if name in raw.columns), None)
    store = raw.columns[title] if title is not None else None
    if title is None or not isinstance(store, TextColumn):
        return rows
    dropped: list[int] = []
    codes = dict(zip(store.rows, store.texts, strict=True))
    for row in reversed(rows.tolist()):
        if plain(codes.get(row, "")) not in TOTAL_WORDS:
            break
        dropped.append(row)
        faults.add(sheet, (row, store.column), title, Fault(
            "totals row", f"a totals row ({quoted(codes[row])}) at the foot of the list",
            f"a row of {sheet}, or nothing",
            "Take the totals row out, or make the list a table object with a totals row.", "empty"))
    itself = plain(title)
    repeated = {code for code in set(store.texts) if plain(code) == itself}
    for row, code in codes.items() if repeated else ():
        if code in repeated:
            dropped.append(row)
            faults.add(sheet, (row, store.column), title, Fault(
                "titles repeated", f"the title {quoted(code)} again, inside the list",
                contract.entry(title).expected(),
                "Take the second title row out; two lists on one sheet have to become one.", "empty"))
    return rows[~np.isin(rows, dropped)] if dropped else rows


def _check_column(sheet: str, entry: Entry, store: NumberColumn | TextColumn, rows: Ints, faults: Faults,
                  date1904: bool) -> CheckedColumn:
    count = len(rows)
    checked = CheckedColumn(
        entry, store.column, np.full(count, np.nan), [], np.zeros(count, dtype=bool),
        np.zeros(count, dtype=bool), np.zeros(count, dtype=bool))
    if isinstance(store, NumberColumn):
        _take_numbers(sheet, store, rows, checked, faults)
    others = [(cell, place) for cell, place in zip(store.others, _places(rows, [c.row for c in store.others]),
                                                   strict=True) if place >= 0]
    if not entry.numeric:
        checked.texts = [""] * count
    if isinstance(store, TextColumn):
        _take_texts(sheet, store, rows, checked, faults)
    for cell, place in others:
        _take_other(sheet, cell, place, checked, faults, date1904)
    if entry.numeric:
        _check_limits(sheet, rows, checked, faults)
    return checked


def _places(rows: Ints, wanted: Sequence[int] | Ints) -> Ints:
    """Places of row numbers among the list's rows; -1 where a row is none of them."""
    asked = np.asarray(wanted, dtype=np.int64)
    if not len(rows) or not len(asked):
        return np.full(len(asked), -1, dtype=np.int64)
    found = np.minimum(np.searchsorted(rows, asked), len(rows) - 1)
    return np.where(rows[found] == asked, found, -1)


def _take_numbers(sheet: str, store: NumberColumn, rows: Ints, checked: CheckedColumn,
                  faults: Faults) -> None:
    places = _places(rows, np.frombuffer(store.rows, dtype=np.int64) if store.rows else [])
    numbers = np.frombuffer(store.values, dtype=np.float64) if store.values else np.zeros(0)
    inside = places >= 0
    places, numbers = places[inside], numbers[inside]
    entry = checked.entry
    if entry.holds is Holds.DATE:
        for place, serial in zip(places.tolist(), numbers.tolist(), strict=True):
            fault = values.bare_serial(serial, entry)
            checked.bad[place] = True
            faults.add(sheet, (int(rows[place]), checked.column), entry.title, fault)
        return
    checked.numbers[places] = numbers
    checked.good[places] = True


def _take_texts(sheet: str, store: TextColumn, rows: Ints, checked: CheckedColumn, faults: Faults) -> None:
    entry = checked.entry
    meaning: dict[str, str | bool | Fault] = {}
    places = _places(rows, store.rows)
    as_written = entry.holds not in (Holds.CHOICE, Holds.YES_NO)
    if as_written and np.array_equal(places, np.arange(len(rows))):  # filled in every row, as codes are
        checked.texts[:] = store.texts
        checked.good[:] = True
        return
    for place, text in zip(places.tolist(), store.texts, strict=True):
        if place < 0:
            continue
        if as_written:
            checked.texts[place] = text
            checked.good[place] = True
            continue
        word = meaning.get(text)
        if word is None:
            word = values.choice(text, entry) if entry.holds is Holds.CHOICE else values.yes_no(text, entry)
            meaning[text] = word
        _put(sheet, (int(rows[place]), checked.column), place, word, checked, faults)


def _put(sheet: str, where: Place, place: int, outcome: float | str | Fault, checked: CheckedColumn,
         faults: Faults) -> None:
    """Store a value at its place in the column, or report what is wrong with it."""
    if isinstance(outcome, Fault):
        checked.bad[place] = True
        faults.add(sheet, where, checked.entry.title, outcome)
    elif isinstance(outcome, str):
        checked.texts[place] = outcome
        checked.good[place] = bool(outcome)
    else:
        checked.numbers[place] = float(outcome)
        checked.good[place] = True


def _take_other(sheet: str, cell: Cell, place: int, checked: CheckedColumn, faults: Faults,
                date1904: bool) -> None:
    """Take a cell that is neither a plain number in a number column nor a text in a text column."""
    entry = checked.entry
    outcome: float | str | Fault
    if entry.numeric:
        outcome = values.number(cell, entry)
        checked.as_text[place] = True
    elif entry.holds is Holds.DATE:
        outcome = values.date(cell, entry, date1904)
    else:
        outcome = values.text(cell, entry, date1904)
        if isinstance(outcome, str) and entry.holds is Holds.CHOICE:
            outcome = values.choice(outcome, entry)
        elif isinstance(outcome, str) and entry.holds is Holds.YES_NO:
            outcome = values.yes_no(outcome, entry)
    _put(sheet, (cell.row, cell.column), place, outcome, checked, faults)


def _check_limits(sheet: str, rows: Ints, checked: CheckedColumn, faults: Faults) -> None:
    given = np.flatnonzero(checked.good)
    refused = given[outside(checked.entry, checked.numbers[given].tolist())]
    for place in refused.tolist():
        fault = values.limit_fault(checked.entry, float(checked.numbers[place]))
        if fault is not None:
            faults.add(sheet, (int(rows[place]), checked.column), checked.entry.title, fault)
    checked.good[refused] = False
    checked.bad[refused] = True


def _report_empty(checked: CheckedList, title: str, faults: Faults) -> None:
    """Report empty cells of a required column."""
    column = checked.columns[title]
    empty = np.flatnonzero(~column.good & ~column.bad)
    entry = column.entry
    fault = mended.watched(Fault(
        "required cell empty", "an empty cell", entry.expected(), "Fill the cell, or clear the whole row."), entry)
    known = [each.column for each in checked.columns.values()]
    fault = replace(fault, test=mended.or_cleared(mended.test_of(entry), min(known), max(known)))
    faults.many(checked.sheet, [checked.place(n, title) for n in empty.tolist()], title, lambda _: fault)


def report_titles(sheet: str, contract: ListSheet, raw: RawList, faults: Faults) -> None:
    """Report missing and repeated titles, and titles that are close to a known one."""
    titles = raw.titles
    absent = [entry.title for entry in contract.entries if entry.title not in titles.columns]
    near = {cell: nearest(str(cell.value), absent, plain) for cell in titles.strangers}
    for names in titles.missing:
        slip = next((cell for cell, name in near.items() if name in names), None)
        wanted = " or ".join(map(quoted, names))
        place = (slip.row, slip.column) if slip else (titles.row, min(titles.headings))
        known = listed(str(text) for text in titles.headings.values())
        found = f"the title {quoted(slip.value)}" if slip else f"a title row with {known}"
        remedy = f"Did you mean {wanted}? Change the title." if slip else f"Add a column {wanted}."
        test = mended.any_of(*map(mended.title, names)) if slip else ""
        faults.add(sheet, place, names[0], Fault("missing column", found, f"a column {wanted}", remedy, test=test))
    missing = {name for names in titles.missing for name in names}
    for cell, name in near.items():
        if name is not None and name not in missing:
            faults.notice(sheet, (cell.row, cell.column), name, "title like a known one",
                          f"the title {quoted(cell.value)}; the column was not used",
                          f"{quoted(name)}, if that is what it means",
                          "Change the title if the column should be used.")
    for name, cell in titles.twice:
        faults.add(sheet, (cell.row, cell.column), name, Fault(
            "title twice", f"the title {quoted(cell.value)} a second time", f"one column {quoted(name)}",
            "Rename or take out one of the two columns.",
            test=mended.unique(mended.along(titles.row, min(titles.headings), max(titles.headings)))))
