"""Tables on a sheet: title rows, columns, matrices."""

import numpy as np

from ledgersolve.workbook.cells import Cell, Kind
from ledgersolve.workbook.tables import SEARCHED_ROWS, find_titles, read_list, read_matrix, read_rows

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


def test_a_matrix_is_read_in_one_pass():
    """Codes along both sides, numbers as arrays, the rest as cells."""
    raw = read_matrix(iter(cells(["Costs"], ["Site", "C1", "C2"], ["A", 1, 2], ["B", "x", 4])), ["A", "B"],
                      ["C1", "C2"])
    assert (raw.title_row, raw.code_column) == (2, 1)
    assert [cell.value for cell in raw.row_codes] == ["A", "B"]
    assert list(zip(raw.rows, raw.columns, raw.values, strict=True)) == [(3, 2, 1), (3, 3, 2), (4, 3, 4)]
    assert [cell.address for cell in raw.others] == ["B4"]


def test_a_matrix_of_numeric_codes_is_not_misread():
    """Costs that equal customer codes do not make a data row the title row, nor a slip in the titles."""
    codes = [str(k) for k in range(1, 11)]
    rows = [[None, *[float(k) for k in range(1, 10)], 99.0], *[[float(j), *[float(k) for k in range(10, 0, -1)]]
                                                          for j in range(1, 4)]]
    raw = read_matrix(iter(cells(*rows)), ["1", "2", "3"], codes)
    assert raw.title_row == 1
    assert raw.code_column == 1
    assert raw.values.size == 30


def test_the_code_column_is_where_the_codes_are():
    """A column of names between codes and figures is left alone."""
    raw = read_matrix(iter(cells(["No", "Site", "Town", "C1"], [1, "A", "Aachen", 5.0], [2, "B", "Bonn", 6.0])),
                      ["A", "B"], ["C1"])
    assert raw.code_column == 2
    assert [cell.value for cell in raw.row_codes] == ["A", "B"]
    assert raw.strays == []


def test_a_matrix_without_known_titles_is_none():
    """No row with a known code: no matrix. A code in front of figures is the code of a row, no title."""
    assert read_matrix(iter(cells(["x", "y"], ["A", 1])), ["A"], ["C1"]) is None
    assert read_matrix(iter(cells(["Customer", "A", "B"], ["C1", 1, 2], ["C2", 1, 2])), ["A", "B"],
                       ["C1", "C2"]) is None


def test_figures_under_no_code_are_strays():
    """Figures right of the titles are kept apart."""
    raw = read_matrix(iter(cells(["Site", "C1"], ["A", 1, 2])), ["A"], ["C1"])
    assert [cell.address for cell in raw.strays] == ["C2"]


def test_totals_rows_of_a_matrix_are_dropped():
    """A totals row of a table object is no row of the matrix."""
    raw = read_matrix(iter(cells(["Site", "C1"], ["A", 1], ["Sum", 1])), ["A"], ["C1"], lambda: [(3, 1, 2)])
    assert [cell.value for cell in raw.row_codes] == ["A"]
    assert raw.rows.tolist() == [2]


def test_short_lists_are_read_as_rows_of_cells():
    """Rows map titles to cells; blank cells are not there."""
    titles, rows = read_rows(iter(cells(["Setting", "Value"], ["Job", "x"], ["Currency", " "])),
                             ("Setting", "Value"), ())
    assert titles.row == 1
    assert [{title: cell.value for title, cell in row.items()} for row in rows] == [
        {"Setting": "Job", "Value": "x"}, {"Setting": "Currency"}]


def test_a_far_cell_costs_nothing():
    """A value in the last cell of the sheet neither makes a large array nor a row."""
    far = Cell(1_048_576, 16_384, Kind.NUMBER, 1.0, "1")
    raw = read_matrix(iter([*cells(["Site", "C1"], ["A", 1]), far]), ["A"], ["C1"])
    assert np.array_equal(raw.rows, [2])
    assert read_list(iter([*cells(["Site", "Capacity"], ["A", 1]), far]), WANTED, REQUIRED).rows.tolist() == [2]
