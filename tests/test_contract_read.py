"""Reading whole workbooks: all problems at once, each with its cell, and nothing that follows from another."""

import dataclasses
import datetime

import numpy as np
import openpyxl
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ledgersolve.contract import Job, read_workbook
from ledgersolve.lot_sizing.case import Case as LotCase
from ledgersolve.lot_sizing.case import plain_case as plain_lots
from ledgersolve.site_selection.case import CLOSED, OPEN, Case, Variant, plain_case
from ledgersolve.workbook.package import open_package
from tests.books import (
    Formula,
    book_of_lot_case,
    book_of_site_case,
    errors,
    lot_sheets,
    notices,
    read_book,
    read_sheets,
    site_sheets,
    write_book,
)


def small_site(**more) -> dict[str, list[list[object]]]:
    """Give a right site-selection workbook of two sites and three customers."""
    sites = [{"Site": "HAM", "Fixed cost": 100}, {"Site": "MUC", "Fixed cost": 120}]
    customers = [{"Customer": f"C{i}", "Demand": 10 * i} for i in (1, 2, 3)]
    return site_sheets(sites, customers, **{"lane_costs": [[1, 2, 3], [3, 2, 1]], **more})


def small_lots(**more) -> dict[str, list[list[object]]]:
    """Give a right lot-sizing workbook of two items and three periods."""
    items = [{"Item": "A", "Setup cost": 50, "Holding cost": 1}, {"Item": "B", "Setup cost": 60, "Holding cost": 1}]
    return lot_sheets(items, [[10, 20, 30], [5, 5, 5]], **more)


def same_case(one: object, two: object) -> None:
    """Assert that two cases hold the same."""
    for field in dataclasses.fields(one):
        first, second = getattr(one, field.name), getattr(two, field.name)
        if isinstance(first, np.ndarray):
            np.testing.assert_array_equal(first, second, err_msg=field.name)
        else:
            assert first == second, field.name


SITE_FAULTS = {
    "Settings": [
        ["Setting", "Value", "Notes"],
        ["Job", "site selection", None],
        ["Currency", "EURO", None],                                   # 1 B3 no ISO code
        ["Time limit (seconds)", 0, None],                            # 2 B4 too small
        ["Accepted gap (%)", "1,5", None],                            # 3 B5 ambiguous
        ["Longest distance", "far", None],                            # 4 B6 number expected
        ["Share within distance (%)", 90, None],                      # 5 B7 half a rule
        ["Single sourcing", "maybe", None],                           # 6 B8 yes or no
        ["Lane cost basis", "per pallet", None],                      # 7 B9 unknown word
        ["Most sites", 2.5, None],                                    # 8 B10 whole number
        ["Most sites", 3, None],                                      # 9 A11 setting twice
        ["Period covered", Formula("=NA()", "#N/A"), None],           # 10 B12 error value
    ],
    "Sites": [
        ["Depots of the north"],
        [None],
        ["Site", "Fixed cost (EUR/year)", "Capacity", "Least volume", "Rule", "Group", "Latitude", "Longitude",
         "Today"],
        ["HAM", 1000, 500, None, "free", None, 53.5, 10.0, "yes"],
        ["MUC", "1.200,50", 500, None, "free", None, 48.1, 11.6, "no"],   # 11 B5 ambiguous
        ["BER", -5, 500, None, "free", None, 52.5, 13.4, "no"],           # 12 B6 negative
        ["ber", 900, 500, None, "free", None, 52.5, 13.5, "no"],          # 13 A7 codes alike
        ["HAM", 900, 500, None, "free", None, 53.6, 10.1, "no"],          # 14 A8 duplicate code
        ["LEJ", None, 500, None, "free", None, 51.3, 12.4, "no"],         # 15 B9 required empty
        ["FRA", 700, Formula("=B4*2"), None, "free", None, 50.1, 8.7, "no"],   # 16 C10 never calculated
        ["STR", 700, 100, 200, "free", None, 48.8, 9.2, "no"],            # 17 D11 rules conflict
        ["CGN", 700, 100, None, "often", None, 50.9, 7.0, "no"],          # 18 E12 unknown word
        ["DUS", 700, 100, None, "open", "Rhine", 51.2, 6.8, "no"],
        ["NUE", 700, 100, None, "open", "Rhine", 49.5, 11.1, "no"],       # 19 E14 two open in a group
        ["KSF", 700, 100, None, "free", None, 95.0, 9.4, "no"],           # 20 G15 latitude out of range
        ["DTM", 700, 100, None, "free", None, 51.5, None, "no"],          # 21 H16 half a coordinate
        ["HAJ", 700, datetime.date(2026, 5, 1), None, "free", None, 52.4, 9.7, "no"],   # 22 C17 date
        ["BRE", 700, 2e12, None, "free", None, 53.0, 8.8, "no"],          # 23 C18 too large
        ["KEL", 700, 100, None, "free", None, 54.3, 10.1, "sometimes"],   # 24 I19 yes or no
        ["Total", 12000, None, None, None, None, None, None, None],       # 25 A20 totals row
    ],
    "Customers": [
        ["Customer", "Demand", "Longest distance"],
        ["C1", 10, None],
        ["C2", True, None],                                               # 26 B3 number expected
        [None, 30, None],                                                 # 27 A4 required empty
        ["C4", 40, None],
    ],
    "Lanes": [
        ["Site", "Customer", "Unit cost", "Distance"],
        ["HAM", "C1", 4, 10],
        ["HAMM", "C2", 4, 10],                                            # 28 A3 unknown code
        ["HAM", "C1", 5, 10],                                             # 29 A4 duplicate pair
        ["MUC", "C4", None, None],                                        # 30 C5 neither cost nor distance
    ],
}

SITE_EXPECTED = [
    ("currency expected", "Settings", "B3"), ("number too small", "Settings", "B4"),
    ("ambiguous number", "Settings", "B5"), ("number expected", "Settings", "B6"),
    ("half a rule", "Settings", "B7"), ("yes or no expected", "Settings", "B8"),
    ("unknown word", "Settings", "B9"), ("whole number expected", "Settings", "B10"),
    ("setting twice", "Settings", "A11"), ("error value", "Settings", "B12"),
    ("ambiguous number", "Sites", "B5"), ("negative number", "Sites", "B6"), ("codes alike", "Sites", "A7"),
    ("duplicate code", "Sites", "A8"), ("required cell empty", "Sites", "B9"),
    ("formula never calculated", "Sites", "C10"), ("rules conflict", "Sites", "D11"),
    ("unknown word", "Sites", "E12"), ("rules conflict", "Sites", "E14"), ("number too large", "Sites", "G15"),
    ("half a coordinate", "Sites", "H16"), ("date instead of number", "Sites", "C17"),
    ("number too large", "Sites", "C18"), ("yes or no expected", "Sites", "I19"), ("totals row", "Sites", "A20"),
    ("number expected", "Customers", "B3"), ("required cell empty", "Customers", "A4"),
    ("unknown code", "Lanes", "A3"), ("duplicate pair", "Lanes", "A4"), ("required cell empty", "Lanes", "C5"),
]


def test_thirty_planted_faults_of_a_site_workbook_are_reported_exactly(tmp_path):
    """A workbook with 30 different faults over four sheets reports these 30 and no other."""
    reading = read_sheets(tmp_path, SITE_FAULTS)
    assert sorted(errors(reading)) == sorted(SITE_EXPECTED)
    assert len(SITE_EXPECTED) == 30
    assert reading.case is None
    assert reading.job is Job.SITE_SELECTION


@pytest.mark.parametrize(("sheet", "cell", "word"), [
    ("Lanes", "A3", "Did you mean “HAM”?"),
    ("Settings", "B3", "Did you mean EUR?"),
    ("Sites", "G15", "swapped"),
    ("Sites", "B5", "Type 1200.5 as a number"),
])
def test_remedies_say_what_to_do(tmp_path, sheet, cell, word):
    """Remedies name the near miss or the way out."""
    problems = read_sheets(tmp_path, SITE_FAULTS).problems
    assert any(p.sheet == sheet and p.cell == cell and word in p.remedy for p in problems)


def test_every_problem_has_all_its_words(tmp_path):
    """Each problem says what was found, what is expected and what to do."""
    for problem in read_sheets(tmp_path, SITE_FAULTS).problems:
        assert problem.found
        assert problem.expected
        assert problem.remedy
        assert problem.title or problem.severity == "notice"


LOT_FAULTS = {
    "Settings": [
        ["Setting", "Value"],
        ["Job", "Lot  Sizing"],
        ["Currency", "eur"],
        ["Yearly holding rate (%)", 20],                                  # 1 B4 half a rule: no Periods a year
        ["Compare with today", "yes"],                                    # 2 B5 nothing to compare
    ],
    "Periods": [
        ["Period", "Start"],
        ["W1", datetime.date(2026, 1, 5)],
        ["W2", datetime.date(2026, 1, 12)],
        ["W3", datetime.date(2026, 1, 8)],                                # 3 B4 out of order
        ["W4", "19.01.2026"],                                             # 4 B5 date as text
        ["W2", None],                                                     # 5 A6 named twice
    ],
    "Items": [
        ["Item", "Setup cost", "Holding cost", "Unit value", "Least lot", "Most lot", "Lot multiple", "Safety stock",
         "Most stock", "Resource", "Setup time", "Family"],
        ["A", 10, 1, None, None, None, None, None, None, "M1", 1, "F1"],
        ["B", 10, None, None, None, None, None, None, None, "M1", None, None],      # 6 D3 neither cost nor value
        ["C", 10, 1, None, 50, 40, None, None, None, "M1", None, None],             # 7 E4 least above most
        ["D", 10, 1, None, 5, 6, 4, None, None, "M1", None, None],                  # 8 G5 no multiple fits
        ["E", 10, 1, None, None, None, None, 20, 10, "M1", None, None],             # 9 H6 safety above most
        ["F", 10, 1, None, None, None, None, None, None, None, 2, None],            # 10 J7 time without resource
        ["G", 10, 1, None, None, None, None, None, None, "M9", None, None],         # 11 J8 unknown resource
        ["H", 10, 1, None, None, None, None, None, None, "M1", None, "F2"],         # 12 L9 unknown family
        ["I", "n/a", 1, None, None, None, None, None, None, "M1", None, None],      # 13 B10 number expected
    ],
    "Demand": [
        ["Demand in pieces"],
        ["Item", "W1", "W2", "W3", "W4", "W5"],                           # 14 F2 unknown period
        ["A", 10, 20, 30, 40, 1],
        ["B", 10, -1, 30, 40, None],                                      # 15 C4 negative
        ["C", 10, "1,000", 30, 40, None],                                 # 16 C5 ambiguous
        ["Z", 10, 10, 30, 40, None],                                      # 17 A6 unknown item
        ["A", 10, 10, 30, 40, None],                                      # 18 A7 item twice
        [None, 10, 10, 30, 40, None],                                     # 19 A8 no code
        ["D", Formula("=1/0", "#DIV/0!"), 1, 1, 1, None],                 # 20 B9 error value
        ["Sum", 10, 10, 30, 40, None],                                    # 21 A10 totals
    ],
    "Resources": [
        ["Resource", "Capacity", "Overtime limit"],
        ["M1", 100, "plenty"],                                            # 22 C2 number expected
        ["M2", None, None],                                               # 23 B3 required empty
    ],
    "Families": [
        ["Family", "Setup cost", "Setup time"],
        ["F1", 10, 3],                                                    # 24 C2 time without resource
    ],
    "Period costs": [
        ["Item", "Period", "Setup cost", "Setup allowed"],
        ["A", "W1", 5, "no"],
        ["A", "W1", 6, None],                                             # 25 A3 pair twice
        ["A", "W7", 6, None],                                             # 26 B4 unknown period
        ["A", "W3", 6, "perhaps"],                                        # 27 D5 yes or no
    ],
    "Receipts": [
        ["Item", "Period", "Quantity"],
        ["A", "W1", None],                                                # 28 C2 required empty
        ["AA", "W1", 5],                                                  # 29 A3 unknown item
        ["B", "W1", Formula("=C2")],                                      # 30 C4 never calculated
    ],
}

LOT_EXPECTED = [
    ("half a rule", "Settings", "B4"), ("nothing to compare", "Settings", "B5"),
    ("periods out of order", "Periods", "B4"), ("date expected", "Periods", "B5"),
    ("duplicate code", "Periods", "A6"),
    ("holding cost not known", "Items", "D3"), ("rules conflict", "Items", "E4"), ("rules conflict", "Items", "G5"),
    ("rules conflict", "Items", "H6"), ("time without resource", "Items", "J7"), ("unknown code", "Items", "J8"),
    ("unknown code", "Items", "L9"), ("number expected", "Items", "B10"), ("unknown code", "Demand", "F2"),
    ("negative number", "Demand", "C4"), ("ambiguous number", "Demand", "C5"), ("unknown code", "Demand", "A6"),
    ("duplicate code", "Demand", "A7"), ("required cell empty", "Demand", "A8"), ("error value", "Demand", "B9"),
    ("totals row", "Demand", "A10"), ("number expected", "Resources", "C2"),
    ("required cell empty", "Resources", "B3"), ("time without resource", "Families", "C2"),
    ("duplicate pair", "Period costs", "A3"), ("unknown code", "Period costs", "B4"),
    ("yes or no expected", "Period costs", "D5"), ("required cell empty", "Receipts", "C2"),
    ("unknown code", "Receipts", "A3"), ("formula never calculated", "Receipts", "C4"),
]


def test_thirty_planted_faults_of_a_lot_workbook_are_reported_exactly(tmp_path):
    """A lot-sizing workbook with 30 different faults over eight sheets reports these 30 and no other."""
    reading = read_sheets(tmp_path, LOT_FAULTS)
    assert sorted(errors(reading)) == sorted(LOT_EXPECTED)
    assert len(LOT_EXPECTED) == 30
    assert reading.job is Job.LOT_SIZING
    assert reading.currency == "EUR"


def test_a_thousand_faults_of_one_kind_are_one_entry(tmp_path):
    """A thousand bad cells in one column are one problem with its count, its first cell and all cells."""
    sheets = small_site()
    sheets["Customers"] = [["Customer", "Demand"], *[[f"C{i}", "many"] for i in range(1, 1001)]]
    problems = [p for p in read_sheets(tmp_path, sheets).problems if p.is_error]
    assert [(p.kind, p.cell, p.count, len(p.more)) for p in problems] == [("number expected", "B2", 1000, 999)]
    assert problems[0].more[:2] == ("B3", "B4")
    assert "999 more like it" in problems[0].as_json()["found"]


def test_a_few_faults_of_one_kind_are_listed_one_by_one(tmp_path):
    """Up to five bad cells of a column are separate entries, so that each says what it found."""
    sheets = small_site()
    sheets["Customers"] = [["Customer", "Demand"], *[[f"C{i}", f"no {i}"] for i in range(1, 6)]]
    problems = [p for p in read_sheets(tmp_path, sheets).problems if p.is_error]
    assert [p.cell for p in problems] == ["B2", "B3", "B4", "B5", "B6"]
    assert "no 3" in problems[2].found


def test_unknown_codes_are_grouped_by_code(tmp_path):
    """Two hundred lanes to one unknown site are one entry that names the near miss; another code is another."""
    lanes = [["Site", "Customer", "Unit cost"], *[["HAMM", f"C{i}", 1] for i in range(1, 4)], ["XYZ", "C1", 1]]
    sheets = small_site()
    sheets["Lanes"] = [*lanes, *[["HAMM", "C1", 1]] * 7]
    unknown = [p for p in read_sheets(tmp_path, sheets).problems if p.kind == "unknown code"]
    assert [(p.cell, p.count) for p in unknown] == [("A2", 10), ("A5", 1)]
    assert "Did you mean “HAM”?" in unknown[0].remedy


def test_hundreds_of_different_unknown_codes_are_one_entry(tmp_path):
    """Where hardly any code fits, one entry says so; it is not a list of hundreds."""
    sheets = small_site()
    sheets["Lanes"] = [["Site", "Customer", "Unit cost"], *[[f"{i:05}", "C1", 1] for i in range(300)]]
    unknown = [p for p in read_sheets(tmp_path, sheets).problems if p.kind == "unknown code"]
    assert [(p.cell, p.count) for p in unknown] == [("A2", 300)]


def test_a_broken_site_row_does_not_make_its_lanes_faults(tmp_path):
    """A site whose code cell is an error value is one fault; the lanes that name it are none."""
    sheets = small_site(lane_costs=None, lanes=[
        {"Site": site, "Customer": f"C{i}", "Unit cost": 1} for site in ("HAM", "MUC") for i in (1, 2, 3)])
    sheets["Sites"][2][0] = Formula("=NA()", "#N/A")
    assert errors(read_sheets(tmp_path, sheets)) == [("error value", "Sites", "A3")]


def test_a_site_row_with_a_bad_figure_keeps_its_code(tmp_path):
    """A bad capacity is one fault, and a lane to a site that is nowhere is another."""
    sheets = small_site(lanes=[{"Site": "MUC", "Customer": "C1", "Unit cost": 1},
                               {"Site": "OSL", "Customer": "C1", "Unit cost": 1}])
    sheets["Sites"][2][1] = "dear"
    assert sorted(errors(read_sheets(tmp_path, sheets))) == [
        ("number expected", "Sites", "B3"), ("unknown code", "Lanes", "A3")]


def test_a_missing_sheet_is_one_fault(tmp_path):
    """Without Customers, neither lanes nor matrix columns are reported as unknown."""
    sheets = small_site(lanes=[{"Site": "HAM", "Customer": "C1", "Unit cost": 1}])
    del sheets["Customers"]
    assert errors(read_sheets(tmp_path, sheets)) == [("missing sheet", "Customers", "")]


def test_figures_of_a_matrix_are_checked_without_its_code_lists(tmp_path):
    """A missing Customers sheet does not hide a text among the lane costs."""
    sheets = small_site(lane_costs=[[1, "x", 3], [3, 2, 1]])
    del sheets["Customers"]
    assert sorted(errors(read_sheets(tmp_path, sheets))) == [
        ("missing sheet", "Customers", ""), ("number expected", "Lane costs", "C2")]


def test_a_near_miss_of_a_sheet_name_is_named(tmp_path):
    """`Custmers` in place of Customers is an error that names it; an unused `Variant` gives a notice."""
    sheets = small_site()
    sheets["Custmers"] = sheets.pop("Customers")
    sheets["Variant"] = [["Variant"], ["v"]]
    reading = read_sheets(tmp_path, sheets)
    assert errors(reading) == [("missing sheet", "Customers", "")]
    assert "Custmers" in reading.problems[0].found
    assert notices(reading) == [("sheet like a known one", "Variant", "")]


def test_a_near_miss_of_a_required_title_is_named(tmp_path):
    """`Fixd cost` for the missing Fixed cost is one error at its cell; other columns are still checked."""
    sheets = small_site()
    sheets["Sites"] = [["Site", "Fixd cost", "Capacity"], ["HAM", 1, "big"], ["MUC", 1, 2]]
    reading = read_sheets(tmp_path, sheets)
    assert errors(reading) == [("missing column", "Sites", "B1"), ("number expected", "Sites", "C2")]
    assert "Fixd cost" in reading.problems[0].found


def test_a_near_miss_of_an_optional_title_is_a_notice(tmp_path):
    """`Capasity` is left alone with a notice; a title like one that is there as well gives none."""
    sheets = small_site()
    sheets["Sites"] = [["Site", "Fixed cost", "Capasity", "Fixed costs old"], ["HAM", 1, 5, 9], ["MUC", 1, 2, 9]]
    reading = read_sheets(tmp_path, sheets)
    assert notices(reading) == [("title like a known one", "Sites", "C1")]
    assert reading.problems[0].title == "Capacity"
    assert np.isinf(reading.case.capacity).all()


def test_titles_are_found_whatever_case_spacing_and_unit(tmp_path):
    """Titles and sheet names are found in any case and spacing, with units behind them, in any order."""
    sheets = small_site()
    sheets["SITES "] = [["capa city (pallets)", "FIXED  COST [EUR/year]", "site*"], [7, 1, "HAM"], [8, 2, "MUC"]]
    sheets["lane  COSTS (EUR)"] = sheets.pop("Lane costs")
    del sheets["Sites"]
    case = read_sheets(tmp_path, sheets).case
    assert case.sites == ("HAM", "MUC")
    assert case.capacity.tolist() == [7, 8]
    assert case.fixed_cost.tolist() == [1, 2]


def test_the_title_row_may_stand_below_a_heading(tmp_path):
    """The title row is the first of the first 30 rows with all required titles; row 31 is too late."""
    sheets = small_site()
    body = sheets["Sites"]
    sheets["Sites"] = [["Sites of the north", "Site"], *[[None]] * 28, *body]
    assert read_sheets(tmp_path, sheets).case is not None
    sheets["Sites"] = [["Sites of the north"], *[["note"]] * 29, *body]
    assert errors(read_sheets(tmp_path, sheets)) == [("no title row", "Sites", "")]


def test_a_heading_above_a_matrix_does_no_harm(tmp_path):
    """A matrix may have headings above, and columns before its first customer that are not codes."""
    sheets = small_site()
    sheets["Lane costs"] = [["Costs 2026"], [None, "C1 to C3"], ["Code", "Town", "C1", "C2", "C3"],
                            ["HAM", "Hamburg", 1, 2, 3], ["MUC", "Munich", 3, 2, 1]]
    assert read_sheets(tmp_path, sheets).case.lane_cost.tolist() == [[1, 2, 3], [3, 2, 1]]


def test_numeric_codes_are_one_code_however_they_are_typed(tmp_path):
    """7, 7.0 and the text " 7 " are the same code."""
    sheets = site_sheets(
        [{"Site": 7, "Fixed cost": 1}, {"Site": "8.0", "Fixed cost": 1}], [{"Customer": " 7 ", "Demand": 1}],
        lanes=[{"Site": "7", "Customer": 7.0, "Unit cost": 2}, {"Site": 8, "Customer": "7.0", "Unit cost": 3}])
    case = read_sheets(tmp_path, sheets).case
    assert case.sites == ("7", "8")
    assert case.lane_cost.tolist() == [[2], [3]]


def test_long_and_padded_codes_are_not_rounded(tmp_path):
    """Codes of 17 digits and with leading zeros stay what they are; 12 is no 0012, and is told so."""
    sheets = site_sheets(
        [{"Site": "00012345678901234567", "Fixed cost": 1}, {"Site": "0012", "Fixed cost": 1}],
        [{"Customer": "A", "Demand": 1}],
        lanes=[{"Site": "00012345678901234567", "Customer": "A", "Unit cost": 2},
               {"Site": 12, "Customer": "A", "Unit cost": 2}])
    reading = read_sheets(tmp_path, sheets)
    assert errors(reading) == [("unknown code", "Lanes", "A3")]
    assert "“0012”" in reading.problems[0].remedy


def test_composed_and_decomposed_letters_are_one_code(tmp_path):
    """Codes are compared in Unicode normal form C."""
    sheets = site_sheets([{"Site": "K\u00f6ln", "Fixed cost": 1}], [{"Customer": "A", "Demand": 1}],
                         lanes=[{"Site": "Ko\u0308ln", "Customer": "A", "Unit cost": 2}])
    assert read_sheets(tmp_path, sheets).case.sites == ("K\u00f6ln",)


def test_numbers_as_text_are_read_and_kept_out_of_formulas(tmp_path):
    """" 12 ", "1200" and "12.5" are numbers; the map of cells says that no formula can use them."""
    sheets = small_site()
    sheets["Customers"] = [["Customer", "Demand"], ["C1", " 12 "], ["C2", "1200"], ["C3", "12.5"]]
    reading = read_sheets(tmp_path, sheets)
    assert reading.case.demand.tolist() == [12, 1200, 12.5]
    assert reading.origins.number("Customers", ("C2",), "Demand") is None
    assert reading.origins.cell("Customers", ("C2",), "Demand").address == "B3"


def test_empty_rows_are_skipped(tmp_path):
    """Empty rows and rows with notes in unknown columns only are no data; blank texts are empty."""
    sheets = small_site()
    sheets["Sites"] = [["Site", "Fixed cost", "Remark"], ["HAM", 1, None], [None], [None, None, "note"],
                       [Formula('=" "', " "), Formula('=" "', " "), None], ["MUC", 2, None]]
    assert read_sheets(tmp_path, sheets).case.sites == ("HAM", "MUC")


def test_both_jobs_in_one_workbook_are_told_apart_by_job(tmp_path):
    """Sheets of the other job are left alone with one notice."""
    reading = read_sheets(tmp_path, {**small_lots(), **small_site()})
    assert reading.job is Job.SITE_SELECTION
    assert reading.case is not None
    assert notices(reading) == [("sheets of the other job", "Periods", "")]


def test_a_wrong_job_is_guessed_from_the_sheets_so_that_all_faults_are_told(tmp_path):
    """An unknown word under Job does not hide the faults of the other sheets."""
    sheets = small_lots(settings={"Job": "lots"})
    sheets["Demand"][1][1] = "x"
    reading = read_sheets(tmp_path, sheets)
    assert sorted(errors(reading)) == [("number expected", "Demand", "B2"), ("unknown word", "Settings", "B2")]
    assert reading.job is None


def test_without_settings_the_other_sheets_are_checked(tmp_path):
    """A missing Settings sheet is one error; Job and Currency are not reported besides."""
    sheets = small_site()
    del sheets["Settings"]
    sheets["Sites"][1][1] = -1
    assert sorted(errors(read_sheets(tmp_path, sheets))) == [
        ("missing sheet", "Settings", ""), ("negative number", "Sites", "B2")]


def test_a_workbook_of_something_else_is_answered(tmp_path):
    """A workbook with none of the sheets says that Settings is missing."""
    assert errors(read_sheets(tmp_path, {"Sheet1": [["a", 1]]})) == [("missing sheet", "Settings", "")]


def test_a_job_that_nothing_tells_is_reported_with_the_other_common_settings(tmp_path):
    """Without a job and without sheets of a job, the common settings are still checked."""
    reading = read_sheets(tmp_path, {"Settings": [["Setting", "Value"], ["Job", None], ["Currency", "X"]]})
    assert sorted(errors(reading)) == [("currency expected", "Settings", "B3"),
                                       ("required cell empty", "Settings", "B2")]


def test_every_setting_of_the_run_is_read(tmp_path):
    """Time limit, gap, questions and their share reach the run; the gap becomes a fraction."""
    run = read_sheets(tmp_path, small_site(settings={
        "Time limit": 12, "accepted gap (%)": 2, "Questions": "n", "Share of time for questions": "35"})).run
    assert (run.time_limit, run.accepted_gap, run.questions, run.questions_share) == (12, 0.02, False, 0.35)


def test_defaults_of_settings_are_listed_and_used(tmp_path):
    """Settings that are not given take the contract's defaults, and the reading lists them."""
    reading = read_sheets(tmp_path, small_site())
    shown = dict(reading.settings)
    assert shown["Time limit (seconds)"] == "300"
    assert shown["Accepted gap (%)"] == "0.01"
    assert shown["Title"] == "book"
    assert reading.run.accepted_gap == pytest.approx(1e-4)
    assert ("Settings", "Demand unit", "unit") in {(d.sheet, d.title, d.value) for d in reading.defaults}
    assert ("Sites", "Capacity", "unlimited", 2) in {(d.sheet, d.title, d.value, d.cells) for d in reading.defaults}


def test_hidden_rows_are_said(tmp_path):
    """Hidden rows are used, and said."""
    reading = read_sheets(tmp_path, small_site(), hidden_rows={"Customers": [3]})
    assert notices(reading) == [("hidden rows", "Customers", "")]
    assert reading.case.n == 3


def test_hidden_sheets_and_merged_cells_are_said(tmp_path):
    """A hidden sheet is used, merged cells below the titles are named; a merged heading is nothing."""
    path = write_book(tmp_path / "plain.xlsx", {**small_site(), "Sites": [["Heading", None], *small_site()["Sites"]]})
    book = openpyxl.load_workbook(path)
    book["Customers"].sheet_state = "hidden"
    book["Sites"].merge_cells("A1:B1")
    book["Customers"]["D2"] = "note"
    book["Customers"].merge_cells("D2:D3")
    book.save(path)
    assert notices(read_book(path)) == [("hidden sheet", "Customers", ""), ("merged cells", "Customers", "D2")]


def test_links_to_other_workbooks_and_macros_are_said(tmp_path):
    """External links are used as saved, macros are not run: two notices about the whole file."""
    with open_package(write_book(tmp_path / "book.xlsx", small_site())) as package:
        package.external_links = package.macros = True
        reading = read_workbook(package, "book.xlsx")
    assert notices(reading) == [("external links", "", ""), ("macros", "", "")]


def test_a_transposed_matrix_has_its_own_words(tmp_path):
    """Customers down and sites across are recognised."""
    sheets = small_site()
    sheets["Lane costs"] = [["Customer", "HAM", "MUC"], ["C1", 1, 2], ["C2", 2, 3], ["C3", 4, 5]]
    assert errors(read_sheets(tmp_path, sheets)) == [("matrix transposed", "Lane costs", "A1")]


def test_an_empty_optional_sheet_is_no_sheet(tmp_path):
    """Optional sheets with titles and no rows change nothing."""
    sheets = small_site(variants=[])
    sheets["Lanes"] = [["Site", "Customer", "Unit cost"]]
    sheets["Distances"] = [["Site"]]
    sheets["Variants"] = [["Variant"]]
    same_case(read_sheets(tmp_path, sheets).case, read_sheets(tmp_path, small_site()).case)


figures = st.floats(0, 1e6, allow_nan=False).map(lambda x: round(x, 3))


@st.composite
def site_cases(draw) -> Case:
    """Any site-selection case a workbook can say."""
    m, n = draw(st.integers(1, 4)), draw(st.integers(1, 5))

    def many(size: int, kind=figures) -> list:
        return draw(st.lists(kind, min_size=size, max_size=size))

    groups = ("g", "h")
    distance = np.array(many(m * n)).reshape(m, n)
    rule = np.array(many(m, st.sampled_from([0, CLOSED])), dtype=np.int64)
    if draw(st.booleans()):
        rule[0] = OPEN
    cost = np.array(many(m * n)).reshape(m, n)
    if m * n > 1:
        cost[draw(st.integers(0, m - 1)), draw(st.integers(0, n - 1))] = np.inf
    used = np.array(many(m, st.integers(-1, 1)), dtype=np.int64)
    names = [g for k, g in enumerate(groups) if k in used]
    order = list(dict.fromkeys(groups[k] for k in used if k >= 0))
    group = np.array([order.index(groups[k]) if k >= 0 else -1 for k in used], dtype=np.int64)
    assert sorted(names) == sorted(order)
    today = np.array(many(m, st.booleans()))
    return plain_case(
        many(m), cost, many(n), title="Any case", demand_unit="pallet", cost_is_whole=draw(st.booleans()),
        capacity=np.array(many(m)), handling_cost=np.array(many(m)), rule=rule, today=today,
        opening_cost=np.array(many(m)), closing_cost=np.array(many(m)), group=group, group_names=tuple(order),
        single_source=np.array(many(n, st.booleans())), distance=distance,
        lane_most=np.where(np.isfinite(cost), np.array(many(m * n)).reshape(m, n), np.inf)
        if draw(st.booleans()) and np.isfinite(cost).any() else None,
        longest_distance=draw(st.none() | figures), unmet_cost=draw(st.none() | figures),
        fewest_sites=draw(st.none() | st.integers(0, 1)), most_sites=draw(st.none() | st.integers(1, 5)),
        compare_today=bool(today.any()) and draw(st.booleans()),
        customer_longest=np.array(many(n, st.just(np.nan) | figures)),
        variants=(Variant("low", 0.5, 1.25, 2.0, None, 3, None, ("S1",), ()),) if draw(st.booleans()) else (),
    )


@settings(max_examples=40, deadline=None)
@given(case=site_cases())
def test_a_site_case_written_as_a_workbook_is_read_back_the_same(tmp_path_factory, case):
    """Every field of any case survives the way through a workbook."""
    path = book_of_site_case(tmp_path_factory.mktemp("round") / "case.xlsx", case)
    reading = read_book(path)
    assert errors(reading) == []
    same_case(reading.case, case)


@st.composite
def lot_cases(draw) -> LotCase:
    """Any lot-sizing case a workbook can say."""
    n, t, r, f = (draw(st.integers(low, high)) for low, high in ((1, 4), (1, 5), (1, 2), (1, 2)))

    def table(*shape: int, kind=figures) -> np.ndarray:
        size = int(np.prod(shape))
        return np.array(draw(st.lists(kind, min_size=size, max_size=size))).reshape(shape)

    safety = table(n)
    return plain_lots(
        table(n, t), table(n, t), table(n, t), title="Any lots", period_unit="week", unit_cost=table(n, t),
        receipts=table(n, t), setup_allowed=table(n, t, kind=st.booleans()), opening_stock=table(n),
        safety_stock=safety, closing_stock=table(n), most_stock=np.full(n, 1e7), least_lot=table(n),
        most_lot=np.full(n, 1e7), lot_multiple=table(n, kind=st.sampled_from([0.0, 5.0, 12.5])),
        backlog_cost=table(n, kind=st.just(np.nan) | figures), lost_cost=table(n, kind=st.just(np.nan) | figures),
        item_resource=table(n, kind=st.integers(0, r - 1)), time_per_unit=table(n), setup_time=table(n),
        item_family=table(n, kind=st.integers(-1, f - 1)), resources=("M1", "M2")[:r], capacity=table(r, t),
        overtime_limit=table(r), overtime_cost=table(r), use_cost=table(r), families=("F1", "F2")[:f],
        family_cost=table(f), family_time=table(f), family_resource=table(f, kind=st.integers(0, r - 1)),
        today=table(n, t) if draw(st.booleans()) else None,
    )


@settings(max_examples=40, deadline=None)
@given(case=lot_cases())
def test_a_lot_case_written_as_a_workbook_is_read_back_the_same(tmp_path_factory, case):
    """Every field of any case survives the way through a workbook."""
    path = book_of_lot_case(tmp_path_factory.mktemp("round") / "case.xlsx", case)
    reading = read_book(path)
    assert errors(reading) == []
    same_case(reading.case, case)


def test_a_1904_workbook_keeps_its_dates(tmp_path):
    """Periods named by dates are read under the workbook's own date system."""
    sheets = small_lots(periods=[{"Period": datetime.date(2026, 1, day)} for day in (5, 12, 19)])
    assert read_sheets(tmp_path, sheets).case.periods == ("2026-01-05", "2026-01-12", "2026-01-19")
    path = write_book(tmp_path / "mac.xlsx", sheets, date1904=True)
    assert read_book(path).case.periods == ("2026-01-05", "2026-01-12", "2026-01-19")


def test_periods_over_new_year_keep_their_order(tmp_path):
    """ISO week labels over New Year (2026-W53 is one of the 53-week years, ISO 8601) stand in the order given."""
    sheets = small_lots(periods=[{"Period": code, "Start": start} for code, start in (
        ("2026-W52", datetime.date(2026, 12, 21)), ("2026-W53", datetime.date(2026, 12, 28)),
        ("2027-W01", datetime.date(2027, 1, 4)))])
    case = read_sheets(tmp_path, sheets).case
    assert case.periods == ("2026-W52", "2026-W53", "2027-W01")
    assert case.period_starts == ("2026-12-21", "2026-12-28", "2027-01-04")


def test_tables_too_large_for_memory_are_refused(tmp_path):
    """Lists that make more pairs than fit into memory are one error, found before any memory is taken."""
    sites = [{"Site": k, "Fixed cost": 1, "Latitude": 1, "Longitude": 1} for k in range(7000)]
    customers = [{"Customer": k, "Demand": 1, "Latitude": 1, "Longitude": 1} for k in range(7000)]
    sheets = site_sheets(sites, customers, settings={"Cost per unit and distance": 1})
    sheets["Distances"] = [["Site", 1], [1, 5]]
    reading = read_sheets(tmp_path, sheets)
    assert errors(reading) == [("too large", "Sites", "")]
    assert "7,000 sites and 7,000 customers" in reading.problems[0].found
    items = [{"Item": k, "Setup cost": 1, "Holding cost": 1} for k in range(3000)]
    sheets = lot_sheets(items, [[1]] * 3000)
    sheets["Periods"] = [["Period"], *[[k] for k in range(1, 2001)]]
    assert errors(read_sheets(tmp_path, sheets)) == [("too large", "Items", "")]


def test_hostile_texts_are_quoted_short_and_clean(tmp_path):
    """Codes of 30,000 characters, control characters and formula-like text come back short, on one line."""
    sheets = small_site(lanes=[{"Site": "x" * 30_000, "Customer": "C1", "Unit cost": 1},
                               {"Site": "a\u202eb\tc\nd", "Customer": "=cmd|x", "Unit cost": 1}])
    for problem in read_sheets(tmp_path, sheets).problems:
        assert len(problem.found) < 150
        assert problem.found.isprintable()
    assert any("=cmd|x" in p.found for p in read_sheets(tmp_path, sheets).problems)
