"""A copy without a plan says first what already looked wrong when the workbook was read, and marks it."""

import re
import zipfile
from dataclasses import replace
from pathlib import Path

import openpyxl
import pytest

from ledgersolve.job import solve_workbook
from ledgersolve.report.inputs import NoPlan
from ledgersolve.report.outcomes import MOST_NOTICES, no_plan_sheets
from ledgersolve.workbook.problems import Problem
from tests import books
from tests.test_report_outcomes import FACTS, READING, SHORT, texts


def swapped_book(path: Path) -> Path:
    """A customer whose latitude and longitude are swapped, so that no site is near enough for the promise."""
    sites = [{"Site": f"S{j}", "Fixed cost": 100.0, "Latitude": 51.0 + j, "Longitude": 4.0 + j} for j in range(3)]
    customers = [{"Customer": f"C{i}", "Demand": 10.0, "Latitude": 51.2 + i / 10, "Longitude": 4.3 + i / 10}
                 for i in range(12)]
    customers[7] |= {"Latitude": customers[7]["Longitude"], "Longitude": customers[7]["Latitude"]}
    return books.site_book(path, sites, customers, settings={
        "Cost per unit and distance": 0.05, "Longest distance": 400, "Time limit (seconds)": 20})


def test_the_cause_stands_first_and_is_marked(tmp_path: Path) -> None:
    """Swapped coordinates: the first page leads to the cell before it speaks of rules, and the cell is marked."""
    answer = solve_workbook(swapped_book(tmp_path / "depots.xlsx"))
    assert answer.returned is not None
    page = openpyxl.load_workbook(answer.returned)["No plan"]
    words = [str(cell.value) for row in page.iter_rows() for cell in row if cell.value]
    first, rules = (next(k for k, text in enumerate(words) if text.startswith(start))
                    for start in ("Look at these cells first", "What cannot hold together"))
    assert first < rules
    assert any("wap" in text for text in words[first:rules])
    cell = next(match for text in words[first:rules] if (match := re.fullmatch(r"Customers, ([A-Z]+[0-9]+)", text)))
    with zipfile.ZipFile(answer.returned) as package:
        sheets = {name: package.read(name).decode() for name in package.namelist() if "/worksheets/" in name}
    marked = " ".join(area for text in sheets.values() if "ledgersolve-flag" in text
                      for area in re.findall(r'<conditionalFormatting sqref="([^"]*)"', text))
    assert cell[1] in marked.replace(":", " ").split()


def notice(number: int, cell: str = "B4") -> Problem:
    """A notice about a cell, or about none."""
    return Problem("notice", "k", "Resources", cell, "Capacity", f"odd figure {number}", "another", f"Look {number}.")


def with_notices(*problems: Problem) -> object:
    """The reading of a small workbook with these notices."""
    return replace(READING, problems=problems)


def test_notices_about_cells_stand_before_the_conflicts() -> None:
    """Found and remedy of each cell come first; a notice that names no cell stays in the run record."""
    given = NoPlan(with_notices(notice(1), notice(2, "")), "no plan exists", FACTS, conflicts=(SHORT,))
    page, record = no_plan_sheets(given, {})
    words = texts(page)
    assert words.index("Look 1.") < words.index("What cannot hold together")
    assert "Look 2." not in words
    assert "Look 2." in texts(record)


@pytest.mark.parametrize(("what", "count", "shown"), [("none found", 30, MOST_NOTICES), ("failed", 3, 0)])
def test_only_so_many_and_only_where_they_may_matter(what: str, count: int, shown: int) -> None:
    """Many notices are cut with a pointer to the rest; a failure of ours has nothing to do with them."""
    page = no_plan_sheets(NoPlan(with_notices(*map(notice, range(count))), what, FACTS), {})[0]
    assert sum(text.startswith("odd figure") for text in texts(page)) == shown
    assert any(f"{count - shown} more stand in the run record" in text for text in texts(page)) == (shown > 0)
