"""The live status of an entry: what its formula asks, and that every program takes it."""

import re
from html import unescape

import pytest

from ledgersolve.contract import mended
from ledgersolve.contract.columns import Entry, Holds
from ledgersolve.report.live_status import DROP_AGAIN, TO_FIX, status
from ledgersolve.workbook.marks import with_marks
from ledgersolve.workbook.problems import Problem
from tests.books import read_sheets
from tests.faults.corpus import FAULTS

SHEET = (b'<worksheet xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main"><sheetData/>'
         b"</worksheet>")


def problem(*cells: str, **more) -> Problem:
    """An error at cells of the sheet Sites."""
    return Problem("error", "", "Sites", cells[0], "", "", "", "", more=cells[1:], count=len(cells), **more)


def taken(formula: str) -> bool:
    """Whether a formula keeps the limits of programs: 8,192 characters, texts of 255, all brackets closed."""
    bare = re.sub(r'"[^"]*"|\'[^\']*\'', "", formula)
    depth = 0
    for sign in bare:
        depth += (sign == "(") - (sign == ")")
        if depth < 0:
            return False
    texts = re.findall(r'"([^"]*)"', formula)
    return depth == 0 and len(formula) <= 8192 and all(len(text) <= 255 for text in texts) and "{" not in bare


@pytest.mark.parametrize("fault", FAULTS, ids=[fault.name for fault in FAULTS])
def test_every_program_takes_the_formulas(tmp_path, fault) -> None:
    """Status and mark of every fault of the corpus: short enough, no array constants, marks look at one sheet."""
    sheets = fault.base()
    fault.change(sheets)
    for found in read_sheets(tmp_path, sheets).problems:
        word, formula = status(found)
        assert (word == TO_FIX) == bool(formula)
        assert taken(formula)
        for mark in re.findall(rb"<formula>(.*?)</formula>", with_marks(SHEET, [found], 0, 1)):
            asked = unescape(mark.decode())
            assert taken(asked)
            assert "!" not in re.sub(r'"[^"]*"', "", asked)


def test_most_faults_of_the_corpus_show_that_they_are_mended(tmp_path) -> None:
    """Of the faults that name a cell, nine in ten have a status that needs no new drop."""
    live = []
    for fault in FAULTS:
        sheets = fault.base()
        fault.change(sheets)
        live += [bool(status(p)[1]) for p in read_sheets(tmp_path, sheets).problems if p.is_error and p.cell]
    assert sum(live) >= 0.85 * len(live)


def test_a_row_that_is_gone_is_no_longer_asked() -> None:
    """Each cell and each run of cells is asked only while its reference is one."""
    assert "ISREF('Sites'!$B$2)*IFERROR(ROWS('Sites'!$B$2)-COUNTA('Sites'!$B$2),1)" in status(
        problem("B2", recheck="filled"))[1]
    formula = status(problem("B2", "B3", "B7", recheck="number", low=1.0, above=True, may_be_empty=True))[1]
    assert ("ISREF('Sites'!$B$2:$B$3)*IFERROR(ROWS('Sites'!$B$2:$B$3)-(COUNTIFS('Sites'!$B$2:$B$3,\">\"&1))"
            "-COUNTBLANK(") in formula
    assert "-COUNTBLANK('Sites'!$B$7)" in formula


def test_few_cells_are_asked_one_by_one_and_many_by_runs() -> None:
    """A test is asked of each cell; of hundreds of cells a tally counts the right ones, else only a drop can tell."""
    rule = Entry("Rule", "", Holds.CHOICE, choices=("free", "open"))
    test = mended.one_of(rule.choices)
    few, many = ("E2", "E3"), tuple(f"E{row}" for row in range(2, 400))
    assert status(problem(*few, test=test))[1].count("ISREF") == 2
    counted = status(problem(*many, test=test, tally='COUNTIF({cell},"free")'))[1]
    assert counted.count("ISREF") == 1
    assert "COUNTIF('Sites'!$E$2:$E$399,\"free\")" in counted
    assert status(problem(*many, test=test)) == (DROP_AGAIN, "")


def test_long_columns_are_not_searched_again_and_again() -> None:
    """A list of more rows than a formula should search gives no test, and a search is asked of few cells."""
    assert mended.down(1, 2, 5_000) == "{own}$A$2:$A$5500"
    assert mended.down(1, 2, 30_000) == ""
    assert mended.unique("") == mended.listed("") == ""
    cells = tuple(f"A{row}" for row in range(2, 14))
    assert status(problem(*cells, test=mended.unique(mended.down(1, 2, 50)))) == (DROP_AGAIN, "")
