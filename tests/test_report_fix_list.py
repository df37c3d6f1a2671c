"""The list of faults: entries, links, live status, and what LibreOffice makes of it as cells are mended."""

from datetime import datetime
from pathlib import Path

import openpyxl
import pytest

from ledgersolve.report.fix_list import fix_list
from ledgersolve.report.inputs import RunFacts
from ledgersolve.report.live_status import DONE, DROP_AGAIN, TO_FIX
from ledgersolve.workbook.problems import Problem
from ledgersolve.workbook.render import render
from ledgersolve.workbook.sheets import ResultSheet
from tests.recalculation import OFFICE, recalculated_all

FACTS = RunFacts("book.xlsx", "0" * 64, datetime(2026, 12, 1, 12, 0))
needs_office = pytest.mark.skipif(OFFICE is None, reason="LibreOffice is not installed")


def fault(**how: object) -> Problem:
    """A fault with these fields."""
    given: dict[str, object] = {
        "severity": "error", "kind": "number expected", "sheet": "Sites", "cell": "B2", "title": "Fixed cost",
        "found": "the text \u201c1,200\u201d", "expected": "a number of 0 or more", "remedy": "Type the number.",
    }
    return Problem(**{**given, **how})  # type: ignore[arg-type]


def entries(sheet: ResultSheet) -> list[list[object]]:
    """Rows of the list of errors: sheet, cell, title, found, expected, remedy, places, status."""
    start = next(row for (row, column), cell in sheet.cells.items() if column == 1 and cell.value == "Cell")
    rows = []
    while (start + 1 + len(rows), 0) in sheet.cells:
        place = start + 1 + len(rows)
        rows.append([sheet.cells[place, k].value if (place, k) in sheet.cells else None for k in range(8)])
    return rows


def test_an_entry_says_where_what_and_how() -> None:
    """An entry holds sheet, cell with a link, title, found, expected, remedy, count and status."""
    sheet = fix_list("To fix", [fault()], FACTS, "Depots")
    assert entries(sheet) == [[
        "Sites", "B2", "Fixed cost", "the text \u201c1,200\u201d", "a number of 0 or more", "Type the number.", 1,
        DROP_AGAIN]]
    links = [cell.link for cell in sheet.cells.values() if cell.link]
    assert links == ["'Sites'!B2"]


def test_a_thousand_faults_of_a_kind_are_one_entry() -> None:
    """Further cells are named, the rest counted."""
    more = tuple(f"B{row}" for row in range(3, 20))
    sheet = fix_list("To fix", [fault(more=more, count=1000)], FACTS, "")
    found = entries(sheet)[0]
    assert found[3] == "the text \u201c1,200\u201d; also B3, B4, B5, B6, B7, B8, B9, B10 and 991 more"
    assert found[6:] == [1000, DROP_AGAIN]


def test_notices_stand_apart() -> None:
    """Notices come after the errors under a heading of their own, and are not counted as places to fix."""
    sheet = fix_list("To fix", [fault(severity="notice", cell="A1"), fault()], FACTS, "Depots")
    assert len(entries(sheet)) == 1
    assert sheet.cells[0, 0].value == "To fix: 1 place in Depots"
    assert any(str(cell.value).startswith("Notices") for cell in sheet.cells.values())


def test_counts_by_sheet() -> None:
    """Places are counted for each sheet, in the order in which they are met."""
    sheet = fix_list("To fix", [fault(count=3), fault(sheet="Lanes"), fault(sheet="")], FACTS, "Depots")
    assert [(sheet.cells[row, 0].value, sheet.cells[row, 1].value) for row in (6, 7, 8)] == [
        ("Sites", 3), ("Lanes", 1), ("the workbook", 1)]


CASES = {
    "a number": (fault(recheck="number"), "text", 5, None),
    "a number from 0": (fault(recheck="number", low=0.0), -1, 0, -0.5),
    "a number from 1 to 100": (fault(recheck="number", low=1.0, high=100.0), 0.5, 99.5, 101),
    "not negative": (fault(recheck="not negative"), -2, 2, "two"),
    "filled": (fault(recheck="filled"), None, "x", None),
    "empty": (fault(recheck="empty"), "x", None, 7),
    "no error": (fault(recheck="no error"), "#N/A", 3, "#REF!"),
}
"""By kind: the fault, a cell value that is wrong, one that is right, and another wrong one."""


@needs_office
def test_the_status_follows_the_cells(tmp_path: Path) -> None:
    """In LibreOffice an entry reads "to fix" for wrong cells and "done" for right ones; all its cells count."""
    several = fault(recheck="number", more=("B3", "B4", "B9"), count=4)
    books = {}
    for number, (name, (problem, wrong, right, also_wrong)) in enumerate(CASES.items()):
        for state, value in (("wrong", wrong), ("right", right), ("also wrong", also_wrong)):
            books[name, state] = written(tmp_path / f"{number} {state}.xlsx", problem, {"B2": value})
    books["several", "wrong"] = written(tmp_path / "s1.xlsx", several, {"B2": 1, "B3": 1, "B4": 1, "B9": "x"})
    books["several", "right"] = written(tmp_path / "s2.xlsx", several, {"B2": 1, "B3": 1, "B4": 1, "B9": 1})
    values = recalculated_all(list(books.values()), tmp_path)
    for (name, state), book in books.items():
        cells = [cell.value for row in values[book]["To fix"].iter_rows() for cell in row]
        assert (DONE in cells, TO_FIX in cells) == (state == "right", state != "right"), (name, state)


def written(path: Path, problem: Problem, values: dict[str, object]) -> Path:
    """Write a workbook with a list and the sheet it watches."""
    watched = ResultSheet("Sites")
    watched.put(0, 0, "Site")
    render([fix_list("To fix", [problem], FACTS, "Depots"), watched], path)
    book = openpyxl.load_workbook(path)
    for cell, value in values.items():
        book["Sites"][cell].value = value
    book.save(path)
    return path


def test_cells_beyond_what_a_formula_can_watch_wait_for_the_next_drop() -> None:
    """Far scattered cells of one entry are not watched, and the status says so."""
    more = tuple(f"B{row}" for row in range(4, 400, 2))
    sheet = fix_list("To fix", [fault(recheck="number", more=more, count=1 + len(more))], FACTS, "")
    assert entries(sheet)[0][7] == DROP_AGAIN


def test_a_whole_file_can_be_the_place() -> None:
    """An entry about the file names no cell and has no link."""
    sheet = fix_list("To fix", [fault(sheet="", cell="", title="")], FACTS, "")
    assert entries(sheet)[0][:2] == ["the workbook", None]
    assert not any(cell.link for cell in sheet.cells.values())
