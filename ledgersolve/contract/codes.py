"""Codes: the list that defines them, and the sheets that name them."""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import partial

import numpy as np
from numpy.typing import NDArray

from ledgersolve.contract import mended
from ledgersolve.contract.columns import quoted
from ledgersolve.contract.faults import Fault, Faults, Place
from ledgersolve.contract.lists import CheckedList
from ledgersolve.workbook.cells import address
from ledgersolve.workbook.ownership import quoted as sheet_quoted
from ledgersolve.workbook.problems import OWN
from ledgersolve.workbook.text import alike, nearest

Ints = NDArray[np.int64]

LONGEST_TYPED = 200
"""A longer code is not compared with by marks."""

NAMED = 20
"""So many unknown codes of a column are looked up for near misses and listed apart; more become one entry."""


@dataclass(frozen=True)
class Codes:
    """The different codes of a list, in its order; ``number`` maps a code to its place among them.

    ``rows`` are the places in the list where each first stands; without faults 0, 1, 2, ...
    ``whole`` is False where the list has rows whose code is broken: an unknown code may be one of them.
    ``doubled`` counts rows that repeat another's code: one of them may be a code lost to a slip.
    ``cells`` are the cells of the codes as formulas name them; "" where they are too many or not known.
    """

    sheet: str
    codes: tuple[str, ...] = ()
    number: Mapping[str, int] = field(default_factory=dict)
    rows: tuple[int, ...] = ()
    whole: bool = True
    doubled: int = 0
    cells: str = ""


def codes_of(table: CheckedList, faults: Faults) -> Codes:
    """Take the codes of a list; report those that stand twice or differ in case or spacing only."""
    title = table.contract.key[0]
    rows: dict[str, int] = {}
    forms: dict[str, str] = {}
    doubled = 0
    for row, code in enumerate(table.texts(title)):
        if not code:
            continue
        form = alike(code)
        if code in rows:
            _report_twice(table, title, row, rows[code], code, faults)
            doubled += 1
        elif form in forms:
            _report_alike(table, title, row, forms[form], rows[forms[form]], faults)
            rows[code] = row
            doubled += 1
        else:
            rows[code] = row
            forms[form] = code
    number = {code: place for place, code in enumerate(rows)}
    cells = _cells(table, title).replace(OWN, f"{sheet_quoted(table.sheet)}!")
    return Codes(table.sheet, tuple(rows), number, tuple(rows.values()), table.whole, doubled,
                 "" if "{" in table.sheet else cells)


def _cells(table: CheckedList, title: str) -> str:
    """Cells under a title, from the sheet itself."""
    return mended.down(table.columns[title].column, table.title_row + 1, int(table.rows[-1]))


def _report_twice(table: CheckedList, title: str, row: int, first: int, code: str, faults: Faults) -> None:
    where = address(*table.place(first, title))
    faults.add(table.sheet, table.place(row, title), title, Fault(
        "duplicate code", f"{quoted(code)}, which stands in {where} already", "each code once",
        "Take one of the two rows out, or rename it.", test=mended.unique(_cells(table, title))))


def report_alike(table: CheckedList, title: str, faults: Faults) -> None:
    """Report names under a title that differ in case or spacing only, where no list of its own defines them."""
    forms: dict[str, tuple[str, int]] = {}
    for row, name in enumerate(table.texts(title)):
        first, first_row = forms.setdefault(alike(name), (name, row))
        if name and name != first:
            _report_alike(table, title, row, first, first_row, faults)


def _report_alike(table: CheckedList, title: str, row: int, first: str, first_row: int, faults: Faults) -> None:
    where, code = address(*table.place(first_row, title)), table.texts(title)[row]
    test = mended.unique(_cells(table, title)) if title == table.contract.key[0] else ""
    faults.add(table.sheet, table.place(row, title), title, Fault(
        "codes alike", f"{quoted(code)}, which differs from {quoted(first)} in {where} in case or spacing only",
        "codes that differ clearly", f"Write {quoted(first)} in both cells if they are one, or rename one.",
        test=test))


def resolve(sheet: str, title: str, texts: Sequence[str], place: Callable[[int], Place], known: Codes | None,
            faults: Faults) -> Ints:
    """Numbers of the codes that texts name; -1 where a text is empty or no code. ``place`` gives their cells.

    Unknown codes are reported, unless the list they belong to could not be read, or may hold them in a row
    whose own code is broken.
    """
    if known is None:
        return np.full(len(texts), -1, dtype=np.int64)
    number = known.number
    found = np.array([number.get(text, -1) for text in texts], dtype=np.int64)
    lost: dict[str, list[Place]] = {}
    for which in np.flatnonzero(found < 0).tolist():
        if texts[which]:
            lost.setdefault(texts[which], []).append(place(which))
    if lost:
        _report_unknown(sheet, title, lost, known, faults)
    return found


def _report_unknown(sheet: str, title: str, lost: Mapping[str, Sequence[Place]], known: Codes,
                    faults: Faults) -> None:
    one_by_one = len(lost) <= NAMED
    gathered: list[tuple[Place, str]] = []
    slips = known.doubled
    for code, places in lost.items():
        near = nearest(code, known.codes) if one_by_one or len(gathered) < NAMED else None
        if near is None and not known.whole:
            continue
        if near is None and slips > 0 and len(places) > 1:
            slips -= 1  # used again and again: most likely the code that a repeated row has lost
            continue
        if one_by_one:
            faults.many(sheet, places, title, partial(_same, unknown_code(code, near, known, alone=True)),
                        group=code)
        else:
            gathered.extend((place, code) for place in places)
    if gathered:
        faults.many(sheet, [place for place, _ in gathered], title, lambda i: unknown_code(
            gathered[i][1], nearest(gathered[i][1], known.codes), known))


def resolve_column(table: CheckedList, title: str, known: Codes | None, faults: Faults) -> Ints:
    """Numbers of the codes in a column of a list; as ``resolve``."""
    return resolve(table.sheet, title, table.texts(title), partial(table.place, title=title), known, faults)


def _same(fault: Fault, _: int) -> Fault:
    return fault


def unknown_code(code: str, near: str | None, known: Codes, *, alone: bool = False) -> Fault:
    """The fault of a code that its list does not hold; ``alone``: the entry is about cells with this code only."""
    sheet = known.sheet
    remedy = f"Did you mean {quoted(near)}?" if near else f"Correct the code, or add it to {sheet}."
    return Fault("unknown code", f"{quoted(code)}, which is not in {sheet}", f"a code of the sheet {sheet}", remedy,
                 test=mended.listed(known.cells),
                 tally=mended.count_listed(known.cells, code, near) if alone else "",
                 typed=code if alone and len(code) < LONGEST_TYPED and code.isprintable() else "")


def report_pairs(table: CheckedList, first: Ints, second: Ints, faults: Faults) -> None:
    """Report pairs of codes that stand in more than one row, at each row but the first."""
    named = np.flatnonzero((first >= 0) & (second >= 0))
    keys = first[named] * (int(second.max(initial=0)) + 1) + second[named]
    unique, starts, counts = np.unique(keys, return_index=True, return_counts=True)
    if len(unique) == len(named):
        return
    original = {int(unique[k]): int(named[starts[k]]) for k in np.flatnonzero(counts > 1)}
    again = [(row, original[key]) for row, key in zip(named.tolist(), keys.tolist(), strict=True)
             if original.get(key, row) != row]
    titles = table.contract.key
    texts = [table.texts(title) for title in titles]
    test = mended.unique_pair(*(part for title in titles for part in (
        _cells(table, title), mended.beside(table.columns[title].column))))

    def describe(i: int) -> Fault:
        row, earlier = again[i]
        pair = " and ".join(f"{quoted(column[row])}" for column in texts)
        return Fault("duplicate pair", f"{pair}, a pair that stands in row {table.rows[earlier]} already",
                     "each pair once", "Take one of the two rows out.", test=test)

    faults.many(table.sheet, [table.place(row, titles[0]) for row, _ in again], titles[0], describe)
