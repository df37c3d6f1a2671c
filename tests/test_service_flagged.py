"""The workbook that goes back where the program could not make one."""

from io import BytesIO

import openpyxl

from ledgersolve.service.flagged import flagged_workbook


def test_it_says_what_happened_in_text_alone():
    """An independent reader finds the sentences, as text also where they look like formulas."""
    made = flagged_workbook("=plan|'/c'!A1.xlsx", "Not possible", ["=1+1", "Do this."], "J-1")
    sheet = openpyxl.load_workbook(BytesIO(made)).worksheets[0]
    cells = [cell for row in sheet.iter_rows() for cell in row if cell.value is not None]
    assert [cell.value for cell in cells][:4] == ["Not possible", "=plan|'/c'!A1.xlsx", "=1+1", "Do this."]
    assert {cell.data_type for cell in cells} == {"s"}
    assert "J-1" in cells[-1].value


def test_endless_words_are_cut():
    """Texts above what a cell holds are cut, not refused."""
    made = flagged_workbook("x" * 50_000, "h", ["y" * 50_000], "J")
    sheet = openpyxl.load_workbook(BytesIO(made)).worksheets[0]
    assert max(len(str(cell.value)) for row in sheet.iter_rows() for cell in row if cell.value) == 32_000
