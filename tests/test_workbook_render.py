"""What the renderer writes: values, formulas with cached values, text as text, page and charts."""

import io
import math
import zipfile
from pathlib import Path

import openpyxl
import pytest

from ledgersolve.workbook.cleaning import CUT_MARK, MOST_TEXT, clean_text
from ledgersolve.workbook.render import render
from ledgersolve.workbook.sheets import Area, Chart, LiveFormat, ResultSheet, RowGroup, Series, Style


def written(*sheets: ResultSheet) -> io.BytesIO:
    """Render to memory."""
    target = io.BytesIO()
    render(sheets, target)
    target.seek(0)
    return target


def one_cell(value: object, **how: object) -> openpyxl.cell.Cell:
    """First cell of a sheet that holds one value."""
    sheet = ResultSheet("Decision")
    sheet.put(0, 0, value, **how)  # type: ignore[arg-type]
    return openpyxl.load_workbook(written(sheet))["Decision"]["A1"]


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@SUM(A1)", "\tx", "{=1}", "000123", "1.20", "http://x.y",
                                  "=cmd|' /C calc'!A0", "12345678901234567890", " two  spaces "])
def test_text_stays_text(text: str) -> None:
    """Text comes back as the same text, whatever it looks like."""
    cell = one_cell(text)
    assert (cell.data_type, cell.value) == ("s", text)


def test_text_like_a_formula_is_quoted() -> None:
    """A text that starts like a formula stays text when a person edits the cell."""
    assert one_cell("=1+1").quotePrefix
    assert not one_cell("plain").quotePrefix


def test_formula_carries_its_cached_value() -> None:
    """A formula is written with the value it has, so that viewers that do not calculate show it."""
    sheet = ResultSheet("Ledger")
    sheet.put(0, 0, 12.5, formula="='Lane costs'!$D$8*B1")
    sheet.put(1, 0, "ok", formula='=IF(A1>0,"ok","look")')
    sheet.put(2, 0, None, formula='=IF(A1>0,"","x")')
    book = written(sheet)
    formulas = openpyxl.load_workbook(book)["Ledger"]
    values = openpyxl.load_workbook(book, data_only=True)["Ledger"]
    assert formulas["A1"].value == "='Lane costs'!$D$8*B1"
    assert (values["A1"].value, values["A2"].value, values["A3"].value) == (12.5, "ok", None)


def test_a_sheet_name_like_a_function_makes_no_array() -> None:
    """A reference to a sheet called FILTER(2) is written as it is, not as an array formula."""
    cell = one_cell(1.0, formula="='FILTER(2)'!$A$1")
    assert cell.value == "='FILTER(2)'!$A$1"


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_only_finite_numbers(value: float) -> None:
    """A number that is not finite is refused with its place."""
    with pytest.raises(ValueError, match="'Decision', A1"):
        one_cell(value)


def test_fifteen_digits_survive() -> None:
    """A number keeps 15 significant digits."""
    assert one_cell(123456789.012345).value == 123456789.012345


def test_booleans_are_words() -> None:
    """A Boolean is written as yes or no, since some programs show 1."""
    assert (one_cell(True).value, one_cell(False).value) == ("yes", "no")


def test_clean_text_drops_what_xml_cannot_hold() -> None:
    """Control characters go, half characters become a visible sign, line ends are one kind."""
    assert clean_text("a\x01b\x0bc\ud83dd\r\ne\rf") == "abc\ufffdd\ne\nf"
    assert one_cell("a\x00\x1fb\ud800").value == "ab\ufffd"


def test_emoji_and_right_to_left_text_survive() -> None:
    """Every script comes back as it is."""
    text = "🚚 مستودع 仓库 Łódź"
    assert one_cell(text).value == text


@pytest.mark.parametrize(("text", "cut"), [("x" * MOST_TEXT, False), ("x" * (MOST_TEXT + 1), True),
                                           ("🚚" * 16_384, True), ("🚚" * 16_383, False)])
def test_long_text_is_cut_with_a_mark(text: str, cut: bool) -> None:
    """Text over 32,767 units ends in a visible mark and fits; text at the limit stays whole."""
    got = one_cell(text).value
    assert got.endswith(CUT_MARK) == cut
    assert len(got.encode("utf-16-le")) // 2 <= MOST_TEXT
    assert cut or got == text


def test_links_lead_to_cells() -> None:
    """A link inside the workbook keeps its target, also with a quoted sheet name, and the cell its value."""
    sheet = ResultSheet("To fix")
    sheet.put(0, 0, "D8", link="'Lane costs & more'!D8")
    sheet.put(1, 0, 7.0, link="'Sites'!A1")
    sheet.put(2, 0, 3.0, formula="=A2", link="'Sites'!A2")
    cells = openpyxl.load_workbook(written(sheet))["To fix"]
    assert cells["A1"].hyperlink.location == "'Lane costs & more'!D8"
    assert cells["A1"].value == "D8"
    assert cells["A2"].value == 7
    assert cells["A3"].value == "=A2"


def test_page_and_panes() -> None:
    """Titles stay in view and repeat in print, one page is wide enough, groups stay open, any paper fits."""
    sheet = ResultSheet("Ledger", frozen=(2, 1), filter=(1, 0, 9, 2), landscape=True, repeat_rows=(0, 1),
                        print_area=(0, 0, 9, 2), tab_colour="0F4C5C", widths={0: 300.0}, heights={0: 500.0},
                        groups=[RowGroup(2, 8, 1), RowGroup(3, 5, 2)])
    for row in range(10):
        sheet.put(row, 0, float(row))
    page = openpyxl.load_workbook(written(sheet))["Ledger"]
    assert page.freeze_panes == "B3"
    assert page.auto_filter.ref == "A2:C10"
    assert (page.print_title_rows, page.sheet_properties.pageSetUpPr.fitToPage) == ("$1:$2", True)
    assert (page.page_setup.fitToWidth, page.page_setup.fitToHeight) == (None, 0)
    assert page.page_setup.paperSize is None
    assert (page.column_dimensions["A"].width <= 255, page.row_dimensions[1].height) == (True, 409)
    assert [page.row_dimensions[row].outlineLevel for row in (3, 4, 6, 7, 9)] == [1, 2, 2, 1, 1]
    assert not any(dimension.hidden for dimension in page.row_dimensions.values())


def test_equal_sheets_give_equal_bytes() -> None:
    """The same sheets render to the same bytes."""
    def sheet() -> ResultSheet:
        made = ResultSheet("Decision")
        made.put(0, 0, "x", Style(bold=True))
        made.put(1, 0, 1.0, formula="=1")
        return made
    assert written(sheet()).getvalue() == written(sheet()).getvalue()


def test_names_must_differ() -> None:
    """Two sheets whose names differ in case only are refused."""
    with pytest.raises(ValueError, match="names of their own"):
        written(ResultSheet("Plan"), ResultSheet("plan"))


def test_cells_outside_a_sheet_are_refused() -> None:
    """A row beyond the last one of a sheet is refused, not lost."""
    sheet = ResultSheet("Plan", cells={})
    sheet.put(1_048_576, 0, 1.0)
    with pytest.raises(ValueError, match="has no row or column"):
        written(sheet)


def test_equal_styles_share_a_format(tmp_path: Path) -> None:
    """Ten thousand cells of one style make one format."""
    sheet = ResultSheet("Plan")
    for row in range(10_000):
        sheet.put(row, 0, float(row), Style(number_format="#,##0", italic=True))
    target = tmp_path / "out.xlsx"
    render([sheet], target)
    with zipfile.ZipFile(target) as package:
        assert b'<cellXfs count="2">' in package.read("xl/styles.xml")


def chart_sheet(kind: str, **how: object) -> ResultSheet:
    """Three figures and a chart of them."""
    sheet = ResultSheet("Decision")
    for row, figure in enumerate((3.0, 1.0, 2.0)):
        sheet.put(row, 0, f"part {row}" if kind != "scatter" else row)
        sheet.put(row, 1, figure, formula=f"={figure}*1")
    places = (Area("Decision", 0, 0, 2, 0), Area("Decision", 0, 1, 2, 1))
    series = [Series("Cost", *places, "0F4C5C", pattern="wide_upward_diagonal", marker="diamond")]
    if kind == "column":
        series.append(Series("Limit", *places, "8A3B12", kind="line"))
    sheet.charts.append(Chart(kind, "Costs", tuple(series), 4, 0, x_title="part", y_title="EUR",
                              number_format="#,##0", description="What it shows", **how))  # type: ignore[arg-type]
    return sheet


@pytest.mark.parametrize("kind", ["column", "bar", "stacked column", "stacked bar", "line", "step"])
def test_charts_have_caches_and_alternative_text(kind: str) -> None:
    """Every chart carries its figures (for viewers that do not calculate), RGB colours and a description."""
    with zipfile.ZipFile(written(chart_sheet(kind))) as package:
        chart = package.read("xl/charts/chart1.xml").decode()
        drawing = package.read("xl/drawings/drawing1.xml").decode()
    assert "<c:v>3.0</c:v>" in chart
    assert "part 1" in chart
    assert 'srgbClr val="0F4C5C"' in chart
    assert "schemeClr" not in chart
    assert 'descr="What it shows"' in drawing


def test_scatter_marks_can_be_open() -> None:
    """A scatter chart has marks and no line; an open mark has no fill."""
    sheet = chart_sheet("scatter")
    with zipfile.ZipFile(written(sheet)) as package:
        chart = package.read("xl/charts/chart1.xml").decode()
    assert '<c:symbol val="diamond"/>' in chart


def test_live_formats_are_written() -> None:
    """A live format stands on its cells with its own formula and colours."""
    red = LiveFormat(0, 0, 9, 0, '=$A1<>"ok"', Style(bold=True, fill="F6D5C9"))
    sheet = ResultSheet("Proof", live_formats=[red])
    sheet.put(0, 0, "ok")
    page = openpyxl.load_workbook(written(sheet))["Proof"]
    formats = {str(area.sqref): [rule.formula for rule in area.rules] for area in page.conditional_formatting}
    assert formats == {"A1:A10": [['$A1<>"ok"']]}


def test_merged_text_keeps_its_value() -> None:
    """A merged block of running text shows its first cell."""
    sheet = ResultSheet("Decision", merges=[(0, 0, 1, 4)])
    sheet.put(0, 0, "Run two sites")
    sheet.put(1, 1, "under the merge")
    page = openpyxl.load_workbook(written(sheet))["Decision"]
    assert page["A1"].value == "Run two sites"
    assert page["B2"].value is None
    assert [str(area) for area in page.merged_cells.ranges] == ["A1:E2"]


def test_text_like_mark_up_stays_text() -> None:
    """Text that looks like the mark-up of the file format is shown, not obeyed."""
    for text in ("<r>x</r>", "<v>1</v>", "&amp;", "_x0041_", "]]>"):
        assert one_cell(text).value.rstrip() == text


def test_a_figure_keeps_every_digit() -> None:
    """A figure is written with as many digits as it takes to read the same number back."""
    assert one_cell(0.1 + 0.2).value == 0.1 + 0.2
    assert one_cell(-0.0).value == 0
