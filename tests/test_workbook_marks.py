"""Fault marks: rules that look at the cell, put in one place, and taken out without a trace."""

import io
import re
from collections.abc import Sequence
from html import unescape
from pathlib import Path

import openpyxl
import pytest
import xlsxwriter

from ledgersolve.workbook.graft import graft
from ledgersolve.workbook.marks import (
    FLAG,
    MOST_RANGES,
    by_sheet,
    is_selected,
    with_marks,
    with_tab_freed,
    with_tab_selected,
    without_marks,
)
from ledgersolve.workbook.package import open_package
from ledgersolve.workbook.problems import Problem, Recheck
from ledgersolve.workbook.sheets import ResultSheet
from tests.office import needs_office, saved_by_office
from tests.packages import MAIN, contents, parts_of, second_reader, sheet_xml, styles_xml, zipped

ROWS = '<row r="1"><c r="A1"><v>1</v></c></row>'
RULES = ('<conditionalFormatting sqref="B2:B9"><cfRule type="cellIs" dxfId="0" priority="1" operator="greaterThan">'
         '<formula>3</formula></cfRule><cfRule type="expression" priority="12"><formula>1</formula></cfRule>'
         "</conditionalFormatting>")
EXTENDED = ('<extLst><ext uri="{x}" xmlns:x14="urn:x"><x14:conditionalFormattings><x14:conditionalFormatting>'
            '<x14:cfRule type="iconSet" priority="2" id="{y}"/></x14:conditionalFormatting>'
            "</x14:conditionalFormattings></ext></extLst>")
TAILS = {
    "nothing": "",
    "everything before and behind": (
        '<sheetProtection sheet="1"/><autoFilter ref="A1:B2"/><mergeCells count="1"><mergeCell ref="A1:B1"/>'
        '</mergeCells><phoneticPr fontId="1"/><dataValidations count="0"/><hyperlinks/>'
        '<pageMargins left="1" right="1" top="1" bottom="1" header="1" footer="1"/><drawing r:id="rId1"/>'),
    "rules": f'<mergeCells><mergeCell ref="A1:B1"/></mergeCells>\n  {RULES}\n  <pageMargins left="1"/>',
    "extended rules": RULES + '<tableParts count="0"/>' + EXTENDED,
    "only before": "<sheetCalcPr/>\n",
    "comment": '<!-- </sheetData> <cfRule priority="1"> --><pageMargins left="1"/>',
}


def problem(cell: str, *more: str, recheck: Recheck = "number", severity: str = "error", **limits: float) -> Problem:
    """A problem of the sheet Sites."""
    return Problem(severity, "kind", "Sites", cell, "Cost", "x", "y", "z", more, 1 + len(more), recheck,  # type: ignore[arg-type]
                   **limits)


def marked(sheet: str | bytes, *problems: Problem) -> bytes:
    """The sheet with marks in formats 4 (errors) and 5 (notices)."""
    return with_marks(sheet if isinstance(sheet, bytes) else sheet.encode(), problems, 4, 5)


def rules_of(sheet: bytes) -> list[tuple[str, str, str, str]]:
    """Area, format, priority and formula of every rule of ours."""
    return [match for match in re.findall(
        r'sqref="([^"]*)"><cfRule type="expression" dxfId="(\d+)" priority="(\d+)"><formula>(.*?)</formula>',
        sheet.decode()) if FLAG in match[3]]


@pytest.mark.parametrize("case", TAILS)
def test_clearing_gives_the_original_bytes_again(case: str) -> None:
    """Whatever stands behind the cells, a marked sheet is cleared to the byte, once and twice marked."""
    sheet = sheet_xml(ROWS, after=TAILS[case]).encode()
    once = marked(sheet, problem("D8", "D9", "D12"), problem("B2", recheck="filled"))
    assert once != sheet
    assert without_marks(once) == sheet
    twice = marked(once, problem("E1", severity="notice"))
    assert without_marks(twice) == sheet


@pytest.mark.parametrize(("case", "before", "behind"), [
    ("nothing", "</sheetData>", "</worksheet>"),
    ("everything before and behind", '<phoneticPr fontId="1"/>', "<dataValidations"),
    ("rules", "</mergeCells>\n  ", '<conditionalFormatting sqref="B2:B9">'),
    ("only before", "<sheetCalcPr/>", "\n</worksheet>"),
])
def test_marks_stand_where_the_schema_wants_them(case: str, before: str, behind: str) -> None:
    """Marks come behind what must stand before conditional formats and before the analyst's own ones."""
    text = marked(sheet_xml(ROWS, after=TAILS[case]), problem("D8")).decode()
    start = text.index("<conditionalFormatting")
    assert text[:start].endswith(before)
    end = text.index("</conditionalFormatting>") + len("</conditionalFormatting>")
    assert text[end:].startswith(behind)


def test_the_only_other_change_is_the_order_of_rules() -> None:
    """Ours have priorities 1 to k; the analyst's, extended ones too, are raised by k and lowered again."""
    text = marked(sheet_xml(ROWS, after=TAILS["extended rules"]), problem("D8"), problem("E8")).decode()
    assert re.findall(r'priority="(\d+)"', text) == ["1", "2", "3", "14", "4"]
    stripped = re.sub(r'<conditionalFormatting sqref="[DE]8">.*?</conditionalFormatting>', "", text)
    lowered = re.sub(r'priority="(\d+)"', lambda match: f'priority="{int(match[1]) - 2}"', stripped)
    assert lowered == sheet_xml(ROWS, after=TAILS["extended rules"])


def test_rules_of_a_pivot_table_keep_their_priorities() -> None:
    """A pivot table names its rules by priority: ours come last in priority, and all is restored."""
    sheet = sheet_xml(ROWS, after=RULES.replace("<conditionalFormatting ", '<conditionalFormatting pivot="1" '))
    text = marked(sheet, problem("D8")).decode()
    assert re.findall(r'priority="(\d+)"', text) == ["13", "1", "12"]
    assert without_marks(text.encode()).decode() == sheet


def test_a_rule_a_column_and_kind() -> None:
    """Cells of one column and kind share a rule in ranges; errors come before notices."""
    sheet = marked(sheet_xml(ROWS), problem("D8", "D9", "D10", "D3", "E9"), problem("D4", "A1", severity="notice"),
                   problem("D20", recheck="filled"), problem("D30", low=0.0, high=100.0))
    assert [(area, style, priority) for area, style, priority, _ in rules_of(sheet)] == [
        ("D20", "4", "1"), ("D30", "4", "2"), ("D3 D8:D10", "4", "3"), ("E9", "4", "4"), ("A1", "5", "5"),
        ("D4", "5", "6")]
    formulas = {area: formula for area, _, _, formula in rules_of(sheet)}
    assert formulas["D3 D8:D10"] == f'AND(NOT(ISNUMBER(D3)),"{FLAG}"="{FLAG}")'
    assert formulas["D30"] == f'AND(IF(ISNUMBER(D30),OR(D30&lt;0,D30&gt;100),TRUE),"{FLAG}"="{FLAG}")'


def test_many_cells_are_split() -> None:
    """No rule names more than 150 ranges, and no cell is lost."""
    cells = [f"C{row}" for row in range(2, 2002, 2)]
    rules = rules_of(marked(sheet_xml(ROWS), problem(cells[0], *cells[1:])))
    assert max(len(area.split()) for area, *_ in rules) == MOST_RANGES
    assert [cell for area, *_ in rules for cell in area.split()] == cells
    assert [formula.split("ISNUMBER(")[1].split(")")[0] for *_, formula in rules] == [
        area.split()[0] for area, *_ in rules]


def test_problems_without_a_cell_mark_nothing() -> None:
    """Whole sheets, files and nonsense addresses are left to the list."""
    found = by_sheet([problem("D8"), problem(""), problem("D8:E9"), Problem("error", "k", "", "D8", "", "", "", "")])
    assert {name: [entry.cell for entry in entries] for name, entries in found.items()} == {"Sites": ["D8"]}
    sheet = sheet_xml(ROWS).encode()
    assert with_marks(sheet, [], 4, 5) is sheet


@pytest.mark.parametrize("encoding", ["utf-16", "utf-16-le", "utf-16-be", "latin-1", "utf-8-sig"])
def test_sheets_in_any_encoding_are_marked_and_cleared(tmp_path: Path, encoding: str) -> None:
    """A sheet in another encoding is marked in that encoding, read again, and cleared to the byte."""
    declared = {"utf-8-sig": "UTF-8", "latin-1": "ISO-8859-1"}.get(encoding, "UTF-16")
    text = sheet_xml('<row r="1"><c r="A1" t="inlineStr"><is><t>Größe</t></is></c></row>', after=RULES)
    sheet = text.replace("UTF-8", declared).encode(encoding)
    changed = marked(sheet, problem("A1"))
    assert without_marks(changed) == sheet
    parts = parts_of({"Sites": ""}) | {"xl/worksheets/sheet1.xml": changed}
    with open_package(zipped(tmp_path / "a.xlsx", parts)) as package:
        assert [cell.value for cell in package.cells("Sites")] == ["Größe"]
    assert FLAG.encode() in changed.replace(b"\0", b"")


def test_prefixed_sheets_are_marked_and_cleared(tmp_path: Path) -> None:
    """In a sheet whose elements carry a prefix, marks name their namespace and can be cleared."""
    sheet = (f'<x:worksheet xmlns:x="{MAIN}"><x:sheetData/><x:conditionalFormatting sqref="B1"><x:cfRule '
             'type="expression" priority="3"><x:formula>1</x:formula></x:cfRule></x:conditionalFormatting>'
             "</x:worksheet>").encode()
    changed = with_marks(sheet, [problem("A1")], 0, 0)
    assert without_marks(changed) == sheet
    styles = styles_xml().replace("</styleSheet>", '<dxfs count="1"><dxf/></dxfs></styleSheet>')
    parts = parts_of({"Sites": ""}, styles=styles) | {"xl/worksheets/sheet1.xml": changed}
    path = zipped(tmp_path / "a.xlsx", parts)
    areas = [str(area.sqref) for area in second_reader(path)["Sites"].conditional_formatting]
    assert areas == ["A1", "B1"]


def test_a_rule_of_theirs_in_one_element_with_ours_stays() -> None:
    """Programs gather rules on the same cells in one element: only ours is taken out of it."""
    inside = (f'<cfRule type="expression" priority="1"><formula>AND(1,"{FLAG}"="{FLAG}")</formula></cfRule>'
              '<cfRule type="expression" priority="2"><formula>A1=2</formula></cfRule>')
    sheet = sheet_xml(ROWS, after=f'<conditionalFormatting sqref="D8">{inside}</conditionalFormatting>')
    assert without_marks(sheet.encode()).decode() == sheet_xml(
        ROWS, after='<conditionalFormatting sqref="D8"><cfRule type="expression" priority="1"><formula>A1=2'
                    "</formula></cfRule></conditionalFormatting>")


def test_a_sheet_that_only_speaks_of_the_flag_stays() -> None:
    """The word of our mark in a cell or in a formula of the analyst's own is no mark."""
    sheet = sheet_xml(f'<row r="1"><c r="A1" t="inlineStr"><is><t>{FLAG}</t></is></c></row>', after=RULES).encode()
    assert without_marks(sheet) == sheet


def test_the_selection_of_a_tab_is_taken_and_given_back() -> None:
    """A selected tab is freed and selected again by one attribute, however it is written."""
    for written, freed in (('tabSelected="1"', 'tabSelected="0"'), ("tabSelected='true'", "tabSelected='false'")):
        sheet = sheet_xml(ROWS, before=f'<sheetViews><sheetView showGridLines="0" {written} workbookViewId="0"/>'
                                       "</sheetViews>").encode()
        assert is_selected(sheet)
        changed = with_tab_freed(sheet)
        assert changed == sheet.replace(written.encode(), freed.encode())
        assert not is_selected(changed)
        assert with_tab_selected(changed) == sheet
    assert not is_selected(sheet_xml(ROWS).encode())


# What stands in the cell -> for which kinds it is still wrong.
CONTENTS: Sequence[tuple[str, object, set[str]]] = [
    ("a number", 5, {"empty", "static", "word"}),
    ("zero", 0, {"empty", "static", "word", "above 0"}),
    ("below", -1, {"empty", "static", "not negative", "within", "word", "above 0", "optional"}),
    ("above", 101, {"empty", "static", "within", "word"}),
    ("text", "abc", {"empty", "static", "number", "not negative", "within", "date", "above 0", "optional", "typed"}),
    ("text of a number", "12", {"empty", "static", "number", "not negative", "within", "date", "word",
     "above 0", "optional"}),
    ("blank text", "  ", {"empty", "static", "number", "not negative", "within", "date", "filled", "word",
     "above 0", "optional"}),
    ("empty", None, {"static", "number", "not negative", "within", "date", "filled", "word", "above 0"}),
    ("error", "=NA()", {"empty", "static", "number", "not negative", "within", "date", "no error", "word",
     "above 0", "optional", "typed"}),
]
KINDS: Sequence[tuple[str, Problem]] = [
    ("number", problem("A1")),
    ("not negative", problem("A1", recheck="not negative")),
    ("filled", problem("A1", recheck="filled")),
    ("empty", problem("A1", recheck="empty")),
    ("no error", problem("A1", recheck="no error")),
    ("date", problem("A1", recheck="date")),
    ("static", problem("A1", recheck="static")),
    ("within", problem("A1", low=0.0, high=100.0)),
    ("above 0", problem("A1", low=0.0, above=True)),
    ("optional", problem("A1", recheck="not negative", may_be_empty=True)),
    ("word", problem("A1", recheck="static", test='IFERROR(TRIM({cell})="abc",FALSE)')),
    ("typed", problem("A1", recheck="static", test="COUNTIF('Other'!$A$1:$A$9,{cell})>0", typed="abc")),
]


@needs_office
def test_a_mark_vanishes_exactly_when_the_cell_is_right(tmp_path: Path) -> None:
    """Each kind's condition, calculated by LibreOffice on each content, is true only while the cell is wrong."""
    book = openpyxl.Workbook()  # writes no values, so that every formula is calculated
    for row, (_, value, _) in enumerate(CONTENTS, 2):
        cell = book.active.cell(row, 1, value)
        cell.data_type = "s" if value == "12" else cell.data_type
        for column, (_, found) in enumerate(KINDS, 2):
            formula = unescape(rules_of(marked(sheet_xml(ROWS), found))[0][3])
            book.active.cell(row, column, "=" + formula.replace("A1", f"$A{row}"))
    book.save(tmp_path / "a.xlsx")
    saved = second_reader(saved_by_office(tmp_path / "a.xlsx", tmp_path / "saved"), values=True)["Sheet"]
    for row, (content, _, wrong) in enumerate(CONTENTS, 2):
        for column, (kind, _) in enumerate(KINDS, 2):
            assert saved.cell(row, column).value is (kind in wrong), (content, kind)


@needs_office
def test_marks_are_cleared_after_another_program_has_saved(tmp_path: Path) -> None:
    """LibreOffice saves a marked workbook; dropped again, its sheet has no mark and the analyst's rules."""
    memory = io.BytesIO()
    book = xlsxwriter.Workbook(memory)
    sheet = book.add_worksheet("Sites")
    sheet.write_column(0, 3, ["Cost", 1, 2, "x", 4])
    sheet.conditional_format("D2:D5", {"type": "cell", "criteria": ">", "value": 2,
                                       "format": book.add_format({"bold": True})})
    book.close()
    (tmp_path / "a.xlsx").write_bytes(memory.getvalue())
    listed = ResultSheet("Fix list")
    listed.put(0, 0, "One cell to mend")
    graft(tmp_path / "a.xlsx", tmp_path / "b.xlsx", [listed], [problem("D4"), problem("D5", severity="notice")])
    saved = saved_by_office(tmp_path / "b.xlsx", tmp_path / "saved")
    assert any(FLAG.encode() in content for content in contents(saved).values())
    graft(saved, tmp_path / "c.xlsx", [listed])
    assert not any(FLAG.encode() in content for content in contents(tmp_path / "c.xlsx").values())
    rules = [(str(area.sqref), rule.priority) for area in second_reader(tmp_path / "c.xlsx")["Sites"]
             .conditional_formatting for rule in area.rules]
    assert rules == [("D2:D5", rules[0][1])]
