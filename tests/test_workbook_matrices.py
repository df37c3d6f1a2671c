"""Matrices on a sheet."""

import numpy as np

from ledgersolve.workbook.cells import Cell, Kind
from ledgersolve.workbook.matrices import read_matrix
from tests.test_workbook_tables import cells


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


def test_a_far_cell_costs_nothing():
    """A value in the last cell of the sheet does not make a large array."""
    far = Cell(1_048_576, 16_384, Kind.NUMBER, 1.0, "1")
    raw = read_matrix(iter([*cells(["Site", "C1"], ["A", 1]), far]), ["A"], ["C1"])
    assert np.array_equal(raw.rows, [2])
