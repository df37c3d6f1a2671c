"""A workbook as a whole: sheets, tables, names, and the same values as a second, independent reader."""

import datetime
import math
from pathlib import Path

import openpyxl
import pytest
import xlsxwriter
from openpyxl.utils.datetime import from_excel

from ledgersolve.workbook.cells import Kind
from ledgersolve.workbook.package import SheetInfo, TableArea, open_package
from tests.packages import book_of, parts_of, second_reader, sheet_xml, workbook_xml, zipped

TEXTS = ["HAM", " two  spaces ", "00123", "12345678901234567", "=1+1", "Größe", "東京", "😀", "مرحبا", "a\nb\tc",
         "<b>&amp;</b>", "_x000A_", "#N/A", "TRUE", "N/A", "x" * 32_767, "é", "1,200.50", "\u202eabc", "'quoted"]


def mixed_book(path: Path) -> Path:
    """A workbook of the usual kinds of cells, made by a common writer."""
    book = xlsxwriter.Workbook(str(path))
    sheet = book.add_worksheet("Mixed")
    dated = book.add_format({"num_format": "dd.mm.yyyy hh:mm"})
    for row, text in enumerate(TEXTS):
        sheet.write_string(row, 0, text)
    for row, number in enumerate((0.1 + 0.2, 1 / 3, 1e-300, -0.0, 1e15 + 0.5, 123456789012345, 5e-324, 2**53)):
        sheet.write_number(row, 1, number)
    for row, date in enumerate((datetime.datetime(2026, 2, 28, 12), datetime.datetime(1900, 3, 1))):
        sheet.write_datetime(row, 2, date, dated)
    for row, value in enumerate((4.5, "text", True, "#DIV/0!")):
        sheet.write_formula(row, 3, "=A1", None, value)
    sheet.write_boolean(0, 4, True)
    sheet.write_boolean(1, 4, False)
    sheet.write_rich_string(0, 5, "plain ", book.add_format({"bold": True}), "bold", " more")
    sheet.write_blank(1, 5, None, dated)
    sheet.write_number(299, 39, 7)
    book.close()
    return path


def test_values_equal_those_of_a_second_reader(tmp_path: Path) -> None:
    """Every cell another reader finds is found with the same value, and no other."""
    path = mixed_book(tmp_path / "a.xlsx")
    theirs = {}
    for row in second_reader(path, values=True)["Mixed"].iter_rows():
        for cell in row:
            if cell.value is not None:
                theirs[cell.row, cell.column] = cell.value
    with open_package(path) as package:
        ours = {(cell.row, cell.column): cell for cell in package.cells("Mixed")}
    assert ours.keys() == theirs.keys()
    for place, cell in ours.items():
        value = from_excel(cell.value) if cell.kind is Kind.DATE else cell.value
        assert value == theirs[place], place
    assert [ours[row, 1].value for row in range(1, len(TEXTS) + 1)] == TEXTS
    assert math.copysign(1, ours[4, 2].value) == -1


def test_an_error_a_text_and_an_empty_cell_are_told_apart(tmp_path: Path) -> None:
    """An error value, the text of one, a formula never calculated and an empty cell are four things."""
    path = book_of(tmp_path / "a.xlsx", '<row r="1"><c r="A1" t="e"><v>#N/A</v></c><c r="B1" t="inlineStr"><is>'
                   '<t>#N/A</t></is></c><c r="C1"><f>NA()</f></c><c r="D1" s="0"/></row>')
    with open_package(path) as package:
        assert [(cell.address, cell.kind) for cell in package.cells("Sites")] == [
            ("A1", Kind.ERROR), ("B1", Kind.TEXT), ("C1", Kind.UNCALCULATED)]


def test_formulas_saved_without_values_are_told(tmp_path: Path) -> None:
    """A workbook saved by a library that does not calculate has formulas never calculated."""
    book = openpyxl.Workbook()
    book.active.append(["=1+1", "=A1&\"x\"", 3])
    book.save(tmp_path / "a.xlsx")
    with open_package(tmp_path / "a.xlsx") as package:
        assert [(cell.kind, cell.value) for cell in package.cells("Sheet")] == [
            (Kind.UNCALCULATED, "=1+1"), (Kind.UNCALCULATED, '=A1&"x"'), (Kind.NUMBER, 3.0)]


def test_tables_filters_and_hidden_rows_are_told(tmp_path: Path) -> None:
    """Table objects come with their title and totals rows; hidden rows, filters and merges are known."""
    book = xlsxwriter.Workbook(str(tmp_path / "a.xlsx"))
    sheet = book.add_worksheet("Sites")
    sheet.add_table("B3:D9", {"name": "SiteTable", "total_row": True, "columns": [
        {"header": "Site", "total_string": "Total"}, {"header": "Cost", "total_function": "sum"}, {"header": "x"}]})
    sheet.add_table("F3:G5", {"header_row": False, "name": "Plain"})
    sheet.merge_range("A1:C1", "Heading")
    sheet.set_row(4, None, None, {"hidden": True})
    sheet.set_row(5, None, None, {"hidden": True})
    sheet.set_column("E:E", None, None, {"hidden": True})
    filtered = book.add_worksheet("Lanes")
    filtered.autofilter("A1:B9")
    filtered.filter_column(0, "x > 3")
    book.add_worksheet("Plain")
    book.close()
    with open_package(tmp_path / "a.xlsx") as package:
        details = package.details("Sites")
        assert details.tables == (TableArea("SiteTable", 3, 2, 9, 4, 1, 1), TableArea("Plain", 3, 6, 5, 7, 0, 0))
        assert (details.hidden_rows, details.hidden_columns) == (((5, 6),), ((5, 5),))
        assert details.merged == ((1, 1, 1, 3),)
        assert not details.filtered
        assert package.details("Lanes").filtered
        assert package.details("Plain").tables == ()


def test_details_cost_nothing_after_the_cells(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Once the cells were read to their end, the sheet is not read again for its details."""
    with open_package(mixed_book(tmp_path / "a.xlsx")) as package:
        assert sum(1 for _ in package.cells("Mixed")) > 30
        monkeypatch.setattr(type(package), "cells", None)
        assert package.details("Mixed").merged == ()


def test_hidden_sheets_and_other_kinds_of_sheets(tmp_path: Path) -> None:
    """Hidden sheets are told as such; a chart sheet is no sheet with cells."""
    book = xlsxwriter.Workbook(str(tmp_path / "a.xlsx"))
    book.add_worksheet("Sites").write(0, 0, 1)
    book.add_worksheet("Lanes").hide()
    book.add_worksheet("Deep").very_hidden()
    chart = book.add_chart({"type": "column"})
    chart.add_series({"values": "=Sites!$A$1:$A$1"})
    book.add_chartsheet("Picture").set_chart(chart)
    book.close()
    with open_package(tmp_path / "a.xlsx") as package:
        assert package.sheets == (
            SheetInfo("Sites"), SheetInfo("Lanes", "hidden"), SheetInfo("Deep", "veryHidden"))
        assert [sheet.hidden for sheet in package.sheets] == [False, True, True]
        assert package.own_sheets == ()


def test_the_date_system_is_told(tmp_path: Path) -> None:
    """A workbook that counts dates from 1904 says so."""
    for flag, expected in (("1", True), ("true", True), ("0", False)):
        parts = parts_of({"Sites": sheet_xml("")})
        parts["xl/workbook.xml"] = workbook_xml(["Sites"], front=f'<workbookPr date1904="{flag}"/>')
        with open_package(zipped(tmp_path / "a.xlsx", parts)) as package:
            assert package.date1904 is expected


def test_our_own_sheets_are_known_by_the_name_in_their_mark(tmp_path: Path) -> None:
    """A sheet that a mark names is ours, however it is called and wherever it stands."""
    parts = parts_of({"Sites": sheet_xml(""), "It's ours": sheet_xml(""), "Lanes": sheet_xml("")}, inside=(
        '<definedNames><definedName name="_ledgersolve_sheet" localSheetId="0" hidden="1">'
        "'It''s ours'!$A$1</definedName><definedName name=\"_ledgersolve_sheet\">#REF!</definedName>"
        "</definedNames>"))
    with open_package(zipped(tmp_path / "a.xlsx", parts)) as package:
        assert [sheet.name for sheet in package.sheets] == ["Sites", "Lanes"]
        assert [sheet.name for sheet in package.own_sheets] == ["It's ours"]


def test_an_unknown_sheet_is_a_key_error(tmp_path: Path) -> None:
    """Asking for a sheet that is not there is a fault of ours, not of the file."""
    with open_package(book_of(tmp_path / "a.xlsx", "")) as package, pytest.raises(KeyError):
        next(package.cells("None"))


def test_the_file_is_closed_after_use_and_after_a_refusal(tmp_path: Path) -> None:
    """Leaving the block closes the file, so that it can be moved."""
    with open_package(book_of(tmp_path / "a.xlsx", "")) as package:
        file = package.container.file
    assert file.closed
