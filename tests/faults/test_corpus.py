"""Each bad workbook comes back with exactly the list it should, and can be mended and dropped again."""

import re

import openpyxl
import pytest

from ledgersolve import Outcome, check_workbook
from tests.books import write_book
from tests.faults.corpus import FAULTS, lot, site

NAMES = [fault.name for fault in FAULTS]


def test_the_corpus_is_large_enough_and_its_names_differ() -> None:
    """At least sixty bad workbooks of filled-in faults, each with its own name."""
    assert len(FAULTS) >= 60
    assert len(set(NAMES)) == len(NAMES)


@pytest.mark.parametrize("base", [site, lot])
def test_the_good_workbooks_are_good(tmp_path, base) -> None:
    """Without a change there is nothing to mend, so that each list below is due to its change alone."""
    answer = check_workbook(write_book(tmp_path / "good.xlsx", base()))
    assert answer.outcome is Outcome.SOLVED
    assert not [problem for problem in answer.problems if problem.is_error]


@pytest.mark.parametrize("fault", FAULTS, ids=NAMES)
def test_a_fault_gives_exactly_its_list(tmp_path, fault) -> None:
    """Sheet, cell and kind are as expected, the words are plain, and the returned copy leads with the list."""
    sheets = fault.base()
    fault.change(sheets)
    answer = check_workbook(write_book(tmp_path / "bad.xlsx", sheets))
    errors = [problem for problem in answer.problems if problem.is_error]
    assert [(p.sheet, p.cell, p.kind) for p in errors] == list(fault.errors)
    assert answer.outcome is Outcome.TO_FIX
    for problem in errors:
        for words in (problem.found, problem.expected, problem.remedy):
            assert words
            assert not re.search(r"Traceback|Error:|None|nan|ledgersolve\.|pydantic", words)
    book = openpyxl.load_workbook(answer.returned)
    assert book.sheetnames[0] == "To fix"
    listed = {str(cell.value) for row in book["To fix"].iter_rows() for cell in row if cell.value is not None}
    for problem in errors:
        assert problem.remedy in listed
