"""Lists on a sheet: title rows and columns."""

from ledgersolve.workbook.cells import Cell, Kind
from ledgersolve.workbook.tables import SEARCHED_ROWS, find_titles, read_list, read_rows

WANTED = {"Site": True, "Fixed cost": False, "Capacity": False}
REQUIRED = (("Site",), ("Fixed cost", "Capacity"))


def cells(*rows: list[object], first: int = 1) -> list[Cell]:
    """Give the cells of rows of values; numbers, texts and Booleans."""
    kinds = {str: Kind.TEXT, float: Kind.NUMBER, int: Kind.NUMBER, bool: Kind.BOOLEAN}
    return [
        Cell(r, c, kinds[type(value)], float(value) if type(value) is int else value, str(value))
        for r, row in enumerate(rows, start=first) for c, value in enumerate(row, start=1) if value is not None
    ]


def test_a_list_is_read_in_one_pass():
    """Numbers go into flat arrays, texts are cleaned, everything else stays a cell with its address."""
    raw = read_list(iter(cells(["Site", "Fixed cost"], [" A ", 5], [7, "x"], [None, True])), WANTED, REQUIRED)
    assert raw.rows.tolist() == [2, 3, 4]
    assert raw.columns["Site"].texts == ["A", "7"]
    assert list(raw.columns["Fixed cost"].values) == [5]
    assert [cell.address for cell in raw.columns["Fixed cost"].others] == ["B3", "B4"]


def test_the_first_row_with_all_required_titles_is_the_title_row():
    """A row with some titles does not win over the first with all; one of two alternatives is enough."""
    top = {1: cells(["Site"]), 4: cells(["Site", "Note", "Capacity"], first=4),
           5: cells(["Site", "Fixed cost"], first=5)}
    titles = find_titles(top, WANTED, REQUIRED)
    assert titles.row == 4
    assert titles.columns == {"Site": 1, "Capacity": 3}
    assert [cell.value for cell in titles.strangers] == ["Note"]


def test_without_all_titles_the_best_row_is_taken_and_what_is_missing_said():
    """The row with most known titles is the title row; missing alternatives are named together."""
    top = {1: cells(["Notes"]), 2: cells(["Site", "Fixd cost"], first=2)}
    titles = find_titles(top, WANTED, REQUIRED)
    assert (titles.row, titles.missing) == (2, (("Fixed cost", "Capacity"),))
    assert find_titles({1: cells(["Notes"])}, WANTED, REQUIRED) is None


def test_titles_are_searched_in_thirty_rows():
    """A title row in row 30 is found, one in row 31 is not."""
    for row, found in ((SEARCHED_ROWS, True), (SEARCHED_ROWS + 1, False)):
        given = cells(["Site", "Capacity"], ["A", 1], first=row)
        assert (read_list(iter(given), WANTED, REQUIRED) is not None) is found


def test_rows_after_the_searched_ones_are_read():
    """The cells behind row 30 come from the stream, none is lost at the seam."""
    given = cells(["Site", "Capacity"], *[[f"S{k}", k] for k in range(100)])
    raw = read_list(iter(given), WANTED, REQUIRED)
    assert len(raw.rows) == 100
    assert list(raw.columns["Capacity"].values) == list(range(100))


def test_a_title_twice_is_told():
    """The second column of a title is reported with its cell and not read."""
    raw = read_list(iter(cells(["Site", "Capacity", "capacity (t)"], ["A", 1, 2])), WANTED, REQUIRED)
    assert [(title, cell.address) for title, cell in raw.titles.twice] == [("Capacity", "C1")]
    assert list(raw.columns["Capacity"].values) == [1]


def test_the_totals_row_of_a_table_object_is_no_data():
    """Cells of a totals row under the table's columns are dropped, others stay."""
    given = cells(["Site", "Fixed cost"], ["A", 1], ["Sum", 1], ["B", 2])
    raw = read_list(iter(given), WANTED, REQUIRED, lambda: [(3, 1, 2)])
    assert raw.rows.tolist() == [2, 4]
    assert raw.columns["Site"].texts == ["A", "B"]
    assert list(raw.columns["Fixed cost"].values) == [1, 2]


def test_blank_texts_are_empty():
    """Spaces and empty texts do not make a row."""
    raw = read_list(iter(cells(["Site", "Capacity"], [" ", "  "], ["", None], ["A", 1])), WANTED, REQUIRED)
    assert raw.rows.tolist() == [4]


def test_short_lists_are_read_as_rows_of_cells():
    """Rows map titles to cells; blank cells are not there."""
    titles, rows = read_rows(iter(cells(["Setting", "Value"], ["Job", "x"], ["Currency", " "])),
                             ("Setting", "Value"), ())
    assert titles.row == 1
    assert [{title: cell.value for title, cell in row.items()} for row in rows] == [
        {"Setting": "Job", "Value": "x"}, {"Setting": "Currency"}]


def test_a_far_cell_costs_nothing():
    """A value in the last cell of the sheet is under no title and makes no row."""
    far = Cell(1_048_576, 16_384, Kind.NUMBER, 1.0, "1")
    assert read_list(iter([*cells(["Site", "Capacity"], ["A", 1]), far]), WANTED, REQUIRED).rows.tolist() == [2]
