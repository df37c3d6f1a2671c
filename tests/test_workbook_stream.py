"""One pass over a sheet: each kind of cell told apart, true addresses, flat memory, nothing believed."""

import tracemalloc
from pathlib import Path

import pytest

from ledgersolve.workbook.cells import Cell, Kind
from ledgersolve.workbook.container import Limits
from ledgersolve.workbook.package import open_package
from ledgersolve.workbook.problems import UnreadableWorkbookError
from ledgersolve.workbook.stream import COLUMNS, Surroundings, Texts, area_of, corner_of, stream_cells
from tests.packages import book_of, parts_of, sheet_xml, strings_xml, styles_xml, zipped

DATES = styles_xml('<numFmt numFmtId="164" formatCode="yyyy\\-mm\\-dd"/>'
                   '<numFmt numFmtId="165" formatCode="[Red]0.00"/>'
                   '<numFmt numFmtId="166" formatCode="0&quot; days&quot;"/>', 164, 14, 165, 166, 21, 57)


def cells_of(rows: str, *, shared: list[str] | None = None, dates: frozenset[int] = frozenset(),
             limits: Limits | None = None, date1904: bool = False) -> list[Cell]:
    """Cells of a sheet with the given rows."""
    return list(stream_cells("Sites", "sheet1.xml", (sheet_xml(rows).encode(),),
                             Texts(shared or [], dates, date1904), limits or Limits(), Surroundings()))


def one(inside: str, attributes: str = "", **more: object) -> Cell | None:
    """The only cell of a sheet; None where it is not given."""
    found = cells_of(f'<row r="1"><c r="A1"{attributes}>{inside}</c></row>', **more)  # type: ignore[arg-type]
    assert len(found) <= 1
    return found[0] if found else None


NUMBER, TEXT, ERROR = Kind.NUMBER, Kind.TEXT, Kind.ERROR
SINGLE: dict[str, tuple[str, str, tuple[Kind, object, str, bool] | None]] = {
    "number": ("<v>12.5</v>", "", (NUMBER, 12.5, "12.5", False)),
    "number by type": ("<v>1E3</v>", ' t="n"', (NUMBER, 1000.0, "1E3", False)),
    "seventeen digits": ("<v>12345678901234567</v>", "",
                         (NUMBER, 12345678901234568.0, "12345678901234567", False)),
    "formula": ("<f>1+1</f><v>2</v>", "", (NUMBER, 2.0, "2", True)),
    "shared formula": ('<f t="shared" si="0"/><v>2</v>', "", (NUMBER, 2.0, "2", True)),
    "formula never calculated": ("<f>A2*2</f>", "", (Kind.UNCALCULATED, "=A2*2", "", True)),
    "formula with empty value": ("<f>A2&gt;2</f><v></v>", "", (Kind.UNCALCULATED, "=A2>2", "", True)),
    "formula with an empty text": ('<f>""</f><v></v>', ' t="str"', None),
    "text formula never calculated": ("<f>A2</f>", ' t="str"', (Kind.UNCALCULATED, "=A2", "", True)),
    "text by formula": ("<f>A2</f><v>x_x000A_y</v>", ' t="str"', (TEXT, "x\ny", "", True)),
    "shared text": ("<v>1</v>", ' t="s"', (TEXT, "two", "", False)),
    "shared text by formula": ("<f>A2</f><v>0</v>", ' t="s"', (TEXT, "one", "", True)),
    "empty shared text": ("<v>2</v>", ' t="s"', None),
    "inline text": ("<is><t>a &lt;b&gt;</t></is>", ' t="inlineStr"', (TEXT, "a <b>", "", False)),
    "inline runs": ("<is><r><t>a</t></r><r><t xml:space=\"preserve\"> b</t></r><rPh><t>X</t></rPh></is>",
                    ' t="inlineStr"', (TEXT, "a b", "", False)),
    "white space": ('<is><t xml:space="preserve">  </t></is>', ' t="inlineStr"', (TEXT, "  ", "", False)),
    "yes": ("<v>1</v>", ' t="b"', (Kind.BOOLEAN, True, "", False)),
    "no": ("<v>0</v>", ' t="b"', (Kind.BOOLEAN, False, "", False)),
    "error": ("<v>#N/A</v>", ' t="e"', (ERROR, "#N/A", "", False)),
    "new error": ("<f>x</f><v>#SPILL!</v>", ' t="e"', (ERROR, "#SPILL!", "", True)),
    "date written out": ("<v>2026-12-01</v>", ' t="d"', (Kind.DATE, 46357.0, "", False)),
    "moment written out": ("<v>2026-12-01T12:00:00Z</v>", ' t="d"', (Kind.DATE, 46357.5, "", False)),
    "date that is none": ("<v>soon</v>", ' t="d"', (TEXT, "soon", "", False)),
    "comma in a number": ("<v>1,5</v>", "", (TEXT, "1,5", "1,5", False)),
    "hexadecimal": ("<v>0x10</v>", "", (TEXT, "0x10", "0x10", False)),
    "underscore": ("<v>1_000</v>", "", (TEXT, "1_000", "1_000", False)),
    "digits of another script": ("<v>١٢</v>", "", (TEXT, "١٢", "١٢", False)),
    "infinite": ("<v>1e999</v>", "", (NUMBER, float("inf"), "1e999", False)),
    "empty": ("", ' s="1"', None),
    "empty value": ("<v></v>", "", None),
    "unknown type": ("<v>x</v>", ' t="new"', (TEXT, "x", "", False)),
}


@pytest.mark.parametrize("case", SINGLE)
def test_each_kind_of_cell(case: str) -> None:
    """Each way to fill a cell gives its kind, its value, its stored text and whether it is a formula."""
    inside, attributes, expected = SINGLE[case]
    cell = one(inside, attributes, shared=["one", "two", ""])
    assert (cell if cell is None else (cell.kind, cell.value, cell.raw, cell.formula)) == expected


def test_not_a_number_is_a_number_cell() -> None:
    """NaN stored in a number cell arrives as NaN, for the check of figures to refuse."""
    cell = one("<v>NaN</v>")
    assert cell is not None
    assert cell.kind is NUMBER
    assert cell.value != cell.value


def test_dates_are_numbers_with_a_date_format(tmp_path: Path) -> None:
    """Own, built-in and East Asian date formats make a date; a colour or a word with a d in it does not."""
    row = "".join(f'<c r="{letter}1" s="{style}"><v>45000</v></c>'
                  for style, letter in enumerate("ABCDEFG"))
    with open_package(book_of(tmp_path / "a.xlsx", f'<row r="1">{row}</row>', styles=DATES)) as package:
        kinds = "".join(cell.kind.value[0] for cell in package.cells("Sites"))
    assert kinds == "nddnndd"


def test_dates_from_1904_count_from_there() -> None:
    """A date written out is counted in the workbook's own date system."""
    cell = one("<v>1904-01-02</v>", ' t="d"', date1904=True)
    assert cell is not None
    assert cell.value == 1.0


def test_positions_may_be_left_out() -> None:
    """Rows and cells without an address follow their neighbours."""
    found = cells_of('<row><c><v>1</v></c><c><v>2</v></c></row><row r="5"><c r="C5"><v>3</v></c>'
                     '<c><v>4</v></c></row><row><c r="B6"><v>5</v></c></row>')
    assert [cell.address for cell in found] == ["A1", "B1", "C5", "D5", "B6"]


@pytest.mark.parametrize("rows", [
    '<row r="1"><c r="XFE1"><v>1</v></c></row>', '<row r="1"><c r="A2"><v>1</v></c></row>',
    '<row r="12"><c r="A2"><v>1</v></c></row>', '<row r="1"><c r="1"><v>1</v></c></row>',
    '<row r="1"><c r=""><v>1</v></c></row>', '<row r="1048577"><c><v>1</v></c></row>', '<row r="0"/>',
    '<row r="x"/>', '<row r="2"/><row r="2"/>', '<row r="3"/><row r="2"/>', '<row r="-1"/>',
    '<row r="1"><c r="A1" t="s"><v>3</v></c></row>', '<row r="1"><c r="A1" t="s"><v>-1</v></c></row>',
    '<row r="1"><c r="A1" t="s"><v>x</v></c></row>',
])
def test_impossible_places_and_texts_are_refused(rows: str) -> None:
    """A cell outside its row or the sheet, rows out of order, a text that does not exist: damaged."""
    with pytest.raises(UnreadableWorkbookError, match="damaged"):
        cells_of(rows, shared=["one"])


def test_the_last_cell_of_a_sheet_costs_nothing(tmp_path: Path) -> None:
    """A value in XFD1048576 is read with its address, in the memory of one cell."""
    path = book_of(tmp_path / "a.xlsx", '<row r="1048576"><c r="XFD1048576"><v>7</v></c></row>')
    with open_package(path) as package:
        tracemalloc.start()
        found = list(package.cells("Sites"))
        peak = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
    assert [(cell.address, cell.value) for cell in found] == [("XFD1048576", 7.0)]
    assert peak < 1_000_000


def test_a_wrong_dimension_is_not_believed(tmp_path: Path) -> None:
    """All rows are read whatever the sheet says about its size."""
    rows = "".join(f'<row r="{row}"><c r="A{row}"><v>{row}</v></c></row>' for row in range(1, 5001))
    sheet = sheet_xml(rows, before='<dimension ref="A1:B2"/>')
    with open_package(zipped(tmp_path / "a.xlsx", parts_of({"Sites": sheet}))) as package:
        assert sum(1 for _ in package.cells("Sites")) == 5000


def test_a_merge_of_the_whole_sheet_is_one_area(tmp_path: Path) -> None:
    """A merged area is kept as its corners, and a value under it is read."""
    sheet = sheet_xml('<row r="1"><c r="A1"><v>1</v></c><c r="B1"><v>2</v></c></row>',
                      after='<mergeCells><mergeCell ref="A1:XFD1048576"/></mergeCells>')
    with open_package(zipped(tmp_path / "a.xlsx", parts_of({"Sites": sheet}))) as package:
        assert [cell.value for cell in package.cells("Sites")] == [1.0, 2.0]
        assert package.details("Sites").merged == ((1, 1, 1_048_576, 16_384),)


def test_formatted_empty_rows_stay_flat(tmp_path: Path) -> None:
    """Formatted empty cells in row after row give no cell and take no memory."""
    head, tail = sheet_xml("@").split("@")
    body = "".join(f'<row r="{row}" s="1" customFormat="1"><c r="A{row}" s="1"/></row>'
                   for row in range(1, 50_001))
    path = zipped(tmp_path / "a.xlsx", parts_of({"Sites": head + body + tail}, styles=styles_xml("", 14)))
    del body
    with open_package(path) as package:
        tracemalloc.start()
        assert list(package.cells("Sites")) == []
        peak = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
    assert peak < 2_000_000


def test_reading_is_lazy_and_flat(tmp_path: Path) -> None:
    """Cells stream: reading 60,000 of them holds a fraction of them at a time."""
    rows = "".join(f'<row r="{row}"><c r="A{row}"><v>{row}</v></c><c r="B{row}"><v>{row / 7}</v></c></row>'
                   for row in range(1, 30_001))
    with open_package(book_of(tmp_path / "a.xlsx", rows)) as package:
        tracemalloc.start()
        assert sum(1 for _ in package.cells("Sites")) == 60_000
        peak = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
    assert peak < 3_000_000


@pytest.mark.parametrize(("limits", "rows"), [
    (Limits(cells=3), '<row r="1">' + "<c><v>1</v></c>" * 4 + "</row>"),
    (Limits(cell_elements=3), '<row r="1">' + '<c s="1"/>' * 4 + "</row>"),
])
def test_too_many_cells_are_refused(limits: Limits, rows: str) -> None:
    """Filled cells and empty formatted ones have limits of their own."""
    with pytest.raises(UnreadableWorkbookError, match="has more than 3"):
        cells_of(rows, limits=limits)


@pytest.mark.parametrize("size", [40, 100, 10_000])
def test_too_many_filled_rows_are_refused_and_only_filled_ones_count(size: int) -> None:
    """Three filled rows among empty ones pass a limit of three, wherever the pieces end; four do not."""
    empty = "".join(f'<row r="{row}" s="1"><c r="A{row}" s="1"/></row>' for row in range(10, 200))
    filled = ['<row r="{0}">' + "".join(f'<c r="{letter}{{0}}"><v>1</v></c>' for letter in "ABCDEF") + "</row>"] * 4
    for count in (3, 4):
        rows = "".join(row.format(number) for number, row in enumerate(filled[:count - 1], 1))
        sheet = sheet_xml(rows + empty + filled[0].format(500)).encode()
        pieces = [sheet[first:first + size] for first in range(0, len(sheet), size)]
        stream = stream_cells("Sites", "s", pieces, Texts([], frozenset()), Limits(rows=3), Surroundings())
        if count == 3:
            assert len(list(stream)) == 18
        else:
            with pytest.raises(UnreadableWorkbookError, match="more than 3 filled rows"):
                list(stream)


def test_a_text_without_end_is_refused(tmp_path: Path) -> None:
    """A text of five million characters in one cell is refused while it is read."""
    letters = "".join(chr(97 + (number * number) % 23) for number in range(1000))
    rows = f'<row r="1"><c r="A1" t="inlineStr"><is><t>{letters * 5000}</t></is></c></row>'
    sheet = sheet_xml(rows).encode()
    pieces = (sheet[first:first + 65_536] for first in range(0, len(sheet), 65_536))
    with pytest.raises(UnreadableWorkbookError, match="more than 1,000,000 characters"):
        list(stream_cells("Sites", "s", pieces, Texts([], frozenset()), Limits(), Surroundings()))


def test_surroundings_are_found() -> None:
    """Hidden rows (joined), hidden columns, merges, filters and tables are told after the pass."""
    around = Surroundings()
    sheet = sheet_xml(
        '<row r="2" hidden="1"/><row r="3" hidden="true"/><row r="4" hidden="0"/><row r="9" hidden="1"/>',
        before='<cols><col min="2" max="3" hidden="1"/><col min="4" max="4"/></cols>',
        after='<autoFilter ref="A1:B9"><filterColumn colId="0"/></autoFilter><mergeCells>'
              '<mergeCell ref="B2:A1"/><mergeCell ref="nonsense"/></mergeCells>'
              '<tableParts><tablePart r:id="rId7"/></tableParts>')
    assert not list(stream_cells("S", "s", (sheet.encode(),), Texts([], frozenset()), Limits(), around))
    assert around == Surroundings([(2, 3), (9, 9)], [(2, 3)], [(1, 1, 2, 2)], True, ["rId7"], True)


def test_places_and_areas() -> None:
    """Addresses and areas are read with their limits; what is none gives None."""
    assert (COLUMNS["A"], COLUMNS["XFD"], len(COLUMNS)) == (1, 16_384, 16_384)
    assert corner_of("D8") == (8, 4)
    assert [corner_of(text) for text in ("", "8", "D", "D0", "XFE1", "A1048577", "D8x", "Ä1")] == [None] * 8
    assert area_of("$B$2:A9") == (2, 1, 9, 2)
    assert area_of("C3") == (3, 3, 3, 3)
    assert [area_of(text) for text in ("", "A1:", "A1:B2:C3", "A:A")] == [None] * 4


def test_texts_missing_from_a_workbook_without_any(tmp_path: Path) -> None:
    """A cell that refers to a shared text in a workbook without shared texts is refused with its address."""
    path = book_of(tmp_path / "a.xlsx", '<row r="3"><c r="B3" t="s"><v>0</v></c></row>')
    with open_package(path) as package, pytest.raises(UnreadableWorkbookError, match="B3"):
        list(package.cells("Sites"))


def test_shared_texts_are_read_once_for_all_sheets(tmp_path: Path) -> None:
    """Every sheet of the workbook sees the same shared texts."""
    rows = '<row r="1"><c r="A1" t="s"><v>0</v></c></row>'
    parts = parts_of({"Sites": sheet_xml(rows), "Lanes": sheet_xml(rows)}, strings=strings_xml("<t>HAM</t>"))
    with open_package(zipped(tmp_path / "a.xlsx", parts)) as package:
        assert [cell.value for name in ("Sites", "Lanes") for cell in package.cells(name)] == ["HAM", "HAM"]
