"""The workbook part as text: sheets, local names and views shifted together."""

import pytest

from ledgersolve.workbook import book
from ledgersolve.workbook.book import LocalName, Tab
from tests.packages import workbook_xml

NAMES = ('<definedNames><definedName name="Rate">A!$A$1</definedName>'
         '<definedName name="x" localSheetId="0">A!$A$1</definedName>'
         '<definedName name="x" localSheetId="2">C!$A$1</definedName>'
         '<definedName name="_ledgersolve_sheet" localSheetId="0" hidden="1">A!$A$1</definedName>'
         '<definedName name="_LedgerSolve_Marks" localSheetId="1">B!$A$1</definedName></definedNames>')
VIEWS = '<bookViews><workbookView activeTab="2" firstSheet="1" tabRatio="600"/></bookViews>'
ADDED = [Tab("Decision", 9, "k1"), Tab("A & <b>", 10, "k2")]


def locals_of(text: str) -> list[tuple[str, str | None]]:
    """Names with the sheet they are local to."""
    section = book.section(text, "definedNames")
    return [] if section is None else [
        (entry.attributes["name"], entry.attributes.get("localSheetId"))
        for entry in book.splice.children(text, section.inner, section.outer)]


def test_sheets_leave_with_all_that_is_local_to_them() -> None:
    """Taking out the first sheet takes its names and our marks, and shifts the names of the others."""
    text = book.without_sheets(workbook_xml(["A", "B", "C"], inside=NAMES), frozenset({"A"}))
    assert [tab.name for tab in book.tabs(text)] == ["B", "C"]
    assert locals_of(text) == [("Rate", None), ("x", "1")]


def test_nothing_changes_where_nothing_is_ours() -> None:
    """A workbook part without our sheets and names comes back character for character."""
    text = workbook_xml(["A", "B"], inside="<definedNames><definedName name='x' localSheetId='1'>B!$A$1</definedName>"
                                           "</definedNames>", front=VIEWS)
    assert book.without_sheets(text, frozenset()) == text


def test_a_list_of_names_that_were_all_ours_goes() -> None:
    """Where all names were ours, the list of names goes with them."""
    inside = '<definedNames><definedName name="_ledgersolve_sheet">A!$A$1</definedName></definedNames><calcPr/>'
    text = book.without_sheets(workbook_xml(["A", "B"], inside=inside), frozenset({"A"}))
    assert "definedName" not in text
    assert text.endswith("</sheets><calcPr/></workbook>")


def test_sheets_in_front_shift_what_is_counted() -> None:
    """Sheets in front shift the sheets that names are local to; the first sheet becomes the active one."""
    text = book.with_sheets_in_front(workbook_xml(["A", "B", "C"], inside=NAMES, front=VIEWS), ADDED, [
        LocalName("_xlnm.Print_Area", 0, "'A & <b>'!$A$1", hidden=True)])
    assert [tab.name for tab in book.tabs(text)] == ["Decision", "A & <b>", "A", "B", "C"]
    assert [tab.link for tab in book.tabs(text)][:2] == ["k1", "k2"]
    assert [local for _, local in locals_of(text)] == [None, "2", "4", "2", "3", "0"]
    assert book.defined_names(text)[-1] == ("_xlnm.Print_Area", "'A & <b>'!$A$1")
    assert '<workbookView tabRatio="600"/>' in text


@pytest.mark.parametrize("inside", ["", "<functionGroups/>", '<externalReferences/><calcPr/>'])
def test_new_lists_stand_where_the_schema_wants_them(inside: str) -> None:
    """Views come before the sheets, names behind sheets and external references."""
    text = book.with_sheets_in_front(workbook_xml(["A"], inside=inside), ADDED, [LocalName("n", 0, "A!$A$1")])
    order = [place for place in map(text.find, ("<bookViews>", "<sheets>", "<functionGroups", "<externalReferences",
                                                "<definedNames>", "<calcPr")) if place >= 0]
    assert order == sorted(order)


def test_the_wish_to_be_calculated_is_set_and_taken_back() -> None:
    """The wish is added to the settings of calculation that are there, or to new ones at their place."""
    for inside in ("", '<definedNames/><calcPr calcId="1"/>', "<pivotCaches/>"):
        text = workbook_xml(["A"], inside=inside)
        asked = book.recalculated_on_load(text)
        assert asked.count('fullCalcOnLoad="1"') == 1
        assert "fullCalcOnLoad" not in book.calculated_as_written(asked)
    assert '</sheets><calcPr fullCalcOnLoad="1"/><pivotCaches/>' in asked


def test_free_ids() -> None:
    """New sheet ids follow the largest; near the limit the smallest free ones are taken."""
    text = workbook_xml(["A", "B"])
    assert book.free_sheet_ids(text, 2) == [3, 4]
    assert book.free_sheet_ids(text.replace('sheetId="2"', 'sheetId="65534"'), 2) == [2, 3]
