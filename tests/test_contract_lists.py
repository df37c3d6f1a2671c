"""Checking list sheets and codes."""

import numpy as np
import pytest

from tests.books import Formula, errors, notices, read_sheets, site_sheets, write_book

CUSTOMERS = [{"Customer": "X", "Demand": 10}]


def read(tmp_path, sites: list[list[object]], **more):
    """Read a small workbook with these rows of Sites."""
    sheets = site_sheets([{"Site": "A", "Fixed cost": 1}], CUSTOMERS, lane_costs=[[2]], **more)
    sheets["Sites"] = sites
    return read_sheets(tmp_path, sheets)


def test_defaults_of_sites(tmp_path):
    """Every optional column takes the contract's default, whether its cell is empty or the column absent."""
    absent = read(tmp_path, [["Site", "Fixed cost"], ["A", 5]]).case
    titles = ["Site", "Fixed cost", "Name", "Capacity", "Least volume", "Handling cost", "Rule", "Today",
              "Opening cost",
              "Closing cost", "Group", "Latitude", "Longitude"]
    empty = read(tmp_path, [titles, ["A", 5]]).case
    for case in (absent, empty):
        assert case.site_names == ("A",)
        assert case.capacity.tolist() == [np.inf]
        assert case.least_volume.tolist() == [0]
        assert case.handling_cost.tolist() == [0]
        assert case.rule.tolist() == [0]
        assert case.today.tolist() == [False]
        assert case.opening_cost.tolist() == [0]
        assert case.closing_cost.tolist() == [0]
        assert case.group.tolist() == [-1]
        assert case.site_latitude is None
        assert not case.compare_today


def test_given_cells_win_over_defaults(tmp_path):
    """Every optional column of Sites reaches the case."""
    titles = ["Site", "Fixed cost", "Name", "Capacity", "Least volume", "Handling cost", "Rule", "Today",
              "Opening cost",
              "Closing cost", "Group", "Latitude", "Longitude"]
    case = read(tmp_path, [titles, ["A", 5, "Aachen", 100, 10, 0.5, "Open", "Y", 7, 8, "g", 50.8, 6.1]]).case
    assert case.site_names == ("Aachen",)
    given = (case.capacity, case.least_volume, case.handling_cost, case.opening_cost, case.closing_cost)
    assert [a.tolist() for a in given] == [[100], [10], [0.5], [7], [8]]
    assert case.rule.tolist() == [1]
    assert case.today.tolist() == [True]
    assert case.group_names == ("g",)


def test_defaults_of_customers(tmp_path):
    """Longest distance and Single source take the settings; the name is the code."""
    case = read(tmp_path, [["Site", "Fixed cost"], ["A", 5]], settings={"Single sourcing": "yes"}).case
    assert case.single_source.tolist() == [True]
    assert np.isnan(case.customer_longest).all()
    assert case.customer_names == ("X",)


@pytest.mark.parametrize("cell", [True, "Yes", "y", "TRUE", 1, "1", 1.0])
def test_yes_in_all_its_forms(tmp_path, cell):
    """Words, 1 and Boolean cells say yes."""
    assert read(tmp_path, [["Site", "Fixed cost", "Today"], ["A", 5, cell]]).case.today.tolist() == [True]


@pytest.mark.parametrize("cell", [False, "No", "n", "False", 0, "0"])
def test_no_in_all_its_forms(tmp_path, cell):
    """Words, 0 and Boolean cells say no."""
    assert read(tmp_path, [["Site", "Fixed cost", "Today"], ["A", 5, cell]]).case.today.tolist() == [False]


@pytest.mark.parametrize(("row", "kind", "cell"), [
    ([None, 5], "required cell empty", "A3"), (["B", None], "required cell empty", "B3"),
    (["B", "  "], "required cell empty", "B3"), ([Formula("=NA()", "#REF!"), 5], "error value", "A3"),
    ([Formula("=A1"), 5], "formula never calculated", "A3"), (["B", Formula("=A1")], "formula never calculated",
                                                              "B3"),
    (["B", Formula("=1/0", "#DIV/0!")], "error value", "B3"), (["B", True], "number expected", "B3"),
    (["a", 5], "codes alike", "A3"), (["A ", 5], "duplicate code", "A3"), (["Site", 5], "titles repeated", "A3"),
    (["Total", 5], "totals row", "A3"), (["Sum:", 5], "totals row", "A3"), (["GRAND TOTAL", 5], "totals row", "A3"),
])
def test_faults_of_rows(tmp_path, row, kind, cell):
    """Each fault of a row is one error at its cell."""
    assert errors(read(tmp_path, [["Site", "Fixed cost"], ["A", 5], row])) == [(kind, "Sites", cell)]


def test_a_total_inside_the_list_is_a_code(tmp_path):
    """Only at the foot is Total a totals row; a station of that name may stand inside."""
    assert read(tmp_path, [["Site", "Fixed cost"], ["Total", 5], ["A", 5]]).case.sites == ("Total", "A")


def test_inner_spacing_is_a_near_duplicate(tmp_path):
    """`A 1` and `A1` are nearly always one code."""
    reading = read(tmp_path, [["Site", "Fixed cost"], ["A", 1], ["A 1", 5], ["A1", 5]])
    assert errors(reading) == [("codes alike", "Sites", "A4")]
    assert "“A 1” in A3" in reading.problems[0].found


def test_calculated_formulas_are_used(tmp_path):
    """A formula counts by its value, number or text."""
    case = read(tmp_path, [["Site", "Fixed cost"], [Formula('="A"', "A"), Formula("=2+3", 5.0)]]).case
    assert (case.sites, case.fixed_cost.tolist()) == (("A",), [5])


def test_an_empty_list_is_an_error(tmp_path):
    """A required sheet without rows says so at the first row below its titles."""
    assert errors(read(tmp_path, [["Sites"], ["Site", "Fixed cost"]])) == [("empty list", "Sites", "A3")]
    assert errors(read(tmp_path, [])) == [("no title row", "Sites", "")]


def test_the_totals_row_of_a_table_object_is_no_data(tmp_path):
    """A table object's own totals row is skipped; a sum that does not match gives a notice."""
    import xlsxwriter

    for total, expected in ((12.0, []), (13.0, [("sum does not match", "Sites", "B4")])):
        path = tmp_path / f"{total}.xlsx"
        sheets = site_sheets([{"Site": "A", "Fixed cost": 1}], CUSTOMERS, lane_costs=[[2], ])
        write_book(path, sheets)
        book = xlsxwriter.Workbook(str(path))
        for name, rows in sheets.items():
            sheet = book.add_worksheet(name)
            if name == "Sites":
                sheet.add_table(0, 0, 3, 1, {
                    "data": [["A", 5], ["B", 7]], "total_row": True,
                    "columns": [{"header": "Site", "total_string": "Total"},
                                {"header": "Fixed cost", "total_function": "sum", "total_value": total}]})
                continue
            for r, row in enumerate(rows):
                sheet.write_row(r, 0, row)
        book.close()
        from tests.books import read_book

        reading = read_book(path)
        assert reading.case.sites == ("A", "B")
        assert notices(reading) == expected


def test_text_columns_take_numbers_dates_and_booleans(tmp_path):
    """A name may be a number; an error value under Name is an error all the same."""
    assert read(tmp_path, [["Site", "Fixed cost", "Name"], ["A", 5, 2026]]).case.site_names == ("2026",)
    reading = read(tmp_path, [["Site", "Fixed cost", "Name"], ["A", 5, Formula("=NA()", "#N/A")]])
    assert errors(reading) == [("error value", "Sites", "C2")]


def test_faults_in_unknown_columns_are_left_alone(tmp_path):
    """Error values beside the known columns do no harm."""
    assert read(tmp_path, [["Site", "Fixed cost", "Mine"], ["A", 5, Formula("=NA()", "#N/A")]]).case is not None
