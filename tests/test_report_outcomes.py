"""Workbooks without a plan: what happened and what to do stand at the top, and never a 0 where no figure exists."""

from datetime import datetime
from pathlib import Path

import pytest

from ledgersolve.contract.reading import Job, Reading
from ledgersolve.findings import Conflict, Subject
from ledgersolve.lot_sizing.case import plain_case
from ledgersolve.report.inputs import NoPlan, RunFacts
from ledgersolve.report.names import wanted_names
from ledgersolve.report.outcomes import failed_sheets, fix_sheets, no_plan_sheets, unreadable_sheets
from ledgersolve.workbook.origins import MatrixMap, Origins, TableMap
from ledgersolve.workbook.problems import Problem
from ledgersolve.workbook.render import render
from ledgersolve.workbook.sheets import ResultSheet
from tests.sheet_rules import check_workbook

FACTS = RunFacts("book.xlsx", "0" * 64, datetime(2026, 12, 1, 12, 0))
ORIGINS = Origins(
    {"Resources": TableMap("Resources", {"Capacity": 2}, {("R1",): 4})},
    {"Capacity": MatrixMap("Capacity", {"R1": 3}, {"W7": 9})},
)
READING = Reading(Job.LOT_SIZING, "May on one press", "EUR", plain_case([[1.0]], 1.0, 1.0), (), origins=ORIGINS)
SHORT = Conflict("Capacity of R1 is 12 short in W7", "Give R1 12 more in W7.", 12.0,
                 (Subject("Capacity", ("R1", "W7"), ""), Subject("Resources", ("R1",), "Capacity")))


def texts(sheet: ResultSheet) -> list[str]:
    """Texts of a sheet from the top down."""
    return [str(cell.value) for _, cell in sorted(sheet.cells.items(), key=lambda entry: entry[0])
            if isinstance(cell.value, str)]


def test_an_impossible_workbook_says_what_cannot_hold() -> None:
    """The first lines say that no plan exists; each conflict has its cell, what is at stake and what helps."""
    sheets = no_plan_sheets(NoPlan(READING, "no plan exists", FACTS, "It nearly fits.", (SHORT,)), {})
    assert [sheet.name for sheet in sheets] == ["No plan", "Run record"]
    words = texts(sheets[0])
    assert words[:2] == ["May on one press", "No plan can keep all the rules of this workbook."]
    assert "It nearly fits." in words
    assert SHORT.words in words
    assert SHORT.remedy in words
    assert "Capacity: R1, W7; Resources: R1 (Capacity)" in words
    assert [cell.link for cell in sheets[0].cells.values() if cell.link] == ["'Capacity'!I3"]


def test_a_run_without_a_plan_is_not_called_impossible() -> None:
    """Nothing found in time is said to prove nothing; the bound is rounded down."""
    sheet = no_plan_sheets(NoPlan(READING, "none found", FACTS, bound=1234.9), {})[0]
    words = " ".join(texts(sheet))
    assert "No plan was found within the time limit." in words
    assert "does not mean that there is none" in words
    assert "costs at least 1\u00a0234\u00a0EUR" in words


def test_a_failure_is_not_laid_on_the_analyst() -> None:
    """A failed run says so, with the reason."""
    sheet = no_plan_sheets(NoPlan(READING, "failed", FACTS, "the audit found another cost"), {})[0]
    words = " ".join(texts(sheet))
    assert "for a reason that does not lie in it" in words
    assert "the audit found another cost" in words


@pytest.mark.parametrize("what", ["no plan exists", "none found", "failed"])
def test_no_figure_stands_where_none_exists(what: str, tmp_path: Path) -> None:
    """WB-12: there is no number at all on the first sheet, and all other rules hold."""
    sheets = no_plan_sheets(NoPlan(READING, what, FACTS, conflicts=(SHORT,)), {})
    assert not any(isinstance(cell.value, int | float) for cell in sheets[0].cells.values())
    render([*sheets, ResultSheet("Resources"), ResultSheet("Capacity")], tmp_path / "book.xlsx")
    assert check_workbook(tmp_path / "book.xlsx") == []


def test_names_are_taken_as_settled() -> None:
    """Sheets carry the names they were given."""
    settled = {"No plan": "No plan (2)", "Run record": "Record"}
    sheets = no_plan_sheets(NoPlan(READING, "none found", FACTS), settled)
    assert [sheet.name for sheet in sheets] == ["No plan (2)", "Record"]


def test_a_file_that_cannot_be_read_gets_a_list_of_its_own(tmp_path: Path) -> None:
    """A fresh workbook holds the one fault of the file, and speaks of no cells, marks or sheets that were read."""
    problem = Problem("error", "empty file", "", "", "", "a file of 0 bytes", "a workbook", "Copy it again.")
    sheets = unreadable_sheets(problem, FACTS)
    words = texts(sheets[0])
    assert "To fix: book.xlsx cannot be read" in words
    assert "Copy it again." in words
    assert not any("marked" in text or "mended" in text for text in words)
    render(sheets, tmp_path / "book.xlsx")
    assert check_workbook(tmp_path / "book.xlsx") == []


def test_a_failure_before_reading_has_a_sheet(tmp_path: Path) -> None:
    """A fault of ours before the workbook could be read is said in a fresh workbook."""
    sheets = failed_sheets("The program met a fault of its own.", FACTS)
    assert "The program met a fault of its own." in texts(sheets[0])
    render(sheets, tmp_path / "book.xlsx")
    assert check_workbook(tmp_path / "book.xlsx") == []


def test_a_faulty_workbook_gets_its_list_and_record(tmp_path: Path) -> None:
    """The list comes first, then the record with the notices."""
    problems = (Problem("error", "k", "Resources", "B4", "Capacity", "nothing", "a number", "Fill it.",
                        recheck="number"),
                Problem("notice", "k", "Resources", "A1", "", "a title like Capacity", "Capacity", "Rename it."))
    reading = Reading(Job.LOT_SIZING, "May", "EUR", None, problems, origins=ORIGINS)
    sheets = fix_sheets(reading, FACTS, {})
    assert [sheet.name for sheet in sheets] == ["To fix", "Run record"]
    assert "Rename it." in texts(sheets[1])
    render([*sheets, ResultSheet("Resources")], tmp_path / "book.xlsx")
    assert check_workbook(tmp_path / "book.xlsx") == []


@pytest.mark.parametrize("kind", ["site selection", "lot sizing", "to fix", "no plan"])
def test_wanted_names_fit_every_program(kind: str) -> None:
    """WB-14: names of result sheets are short, plain and no two alike."""
    names = wanted_names(kind)
    assert len({name.casefold() for name in names}) == len(names)
    assert all(len(name) <= 24 and name.replace(" ", "").isalpha() for name in names)
