"""What a cell means under its column."""

import pytest

from ledgersolve.contract import values
from ledgersolve.contract.columns import Entry, Holds
from ledgersolve.contract.faults import Fault
from ledgersolve.workbook.cells import Cell, Kind

COST = Entry("Fixed cost", "", required=True)
CAPACITY = Entry("Capacity", "", default=float("inf"))
LATITUDE = Entry("Latitude", "", low=-90, high=90)
START = Entry("Start", "", Holds.DATE, "2027-01-04")


@pytest.mark.parametrize(("text", "meant"), [
    ("12", (12,)), ("12.5", (12.5,)), ("1200", (1200,)), ("-3", (-3,)), ("+4", (4,)), (".5", (0.5,)), ("5.", (5,)),
    ("1e3", (1000,)), ("0.125", (0.125,)), ("1200.500", (1200.5,)), ("\u22123", (-3,)), ("1 200", (1200,)),
    ("1\u202f200\u202f000.5", (1200000.5,)), ("1'200", (1200,)), ("007", (7,)),
    ("1,200", (1200, 1.2)), ("1.200,50", (1200.5, 1.2005)), ("1,200.50", (1200.5, 1.2005)), ("1.200", (1200, 1.2)),
    ("12,5", (12.5,)), ("1,234,567", (1234567,)), ("1.234.567", (1234567,)), ("-1,5", (-1.5,)), ("0,125", (0.125,)),
    ("1234,567", (1234.567,)), (",5", (0.5,)), ("190.000,00", (190000, 190)), ("1.234.567,89", (1234567.89,)),
    ("1,200,50", ()), ("1234,567.5", ()), ("1.2,345", ()), ("-1.200,5", (-1200.5, -1.2005)),
    ("abc", ()), ("", ()), ("nan", ()), ("inf", ()), ("0x10", ()), ("1_000", ()), ("12 km", ()), ("5 %", ()),
    ("1 2", ()), ("12-", ()), ("(5)", ()), ("\u0663", ()), ("1.2.3.4", ()), (",", ()), (".", ()), ("1 20", ()),
])
def test_readings_of_texts(text, meant):
    """Every number a text can mean is found, under either decimal sign, and none that it cannot."""
    assert values.readings(text) == meant


@pytest.mark.parametrize("text", [" 12 ", "12", "12.0", "\u00a012"])
def test_a_text_with_one_meaning_is_that_number(text):
    """Spaces around and a point as decimal sign leave one meaning."""
    assert values.number(Cell(1, 1, Kind.TEXT, text), COST) == 12


@pytest.mark.parametrize("text", ["1,200", "1.200,50", "12,5", "1,234,567", "1.200"])
def test_a_text_with_separators_is_an_error_that_shows_its_readings(text):
    """What can be read in two ways is shown in both."""
    fault = values.number(Cell(1, 1, Kind.TEXT, text), COST)
    assert isinstance(fault, Fault)
    assert fault.kind == "ambiguous number"
    for meaning in values.readings(text):
        assert f"{meaning:g}" in fault.found or f"{meaning:.15g}" in fault.found


LANE, ROAD = Entry("Unit cost", ""), Entry("Road factor", "", low=1, high=100)


@pytest.mark.parametrize(("text", "entry", "found", "remedy"), [
    ("7,35", LANE, "which means 7.35 with a decimal comma", "Type 7.35 as a number, with the decimal sign"),
    ("1,25", ROAD, "which means 1.25 with a decimal comma", "Type 1.25 as a number, with the decimal sign"),
    ("52,08", LATITUDE, "which means 52.08 with a decimal comma", "Type 52.08 as a number, with"),
    ("1,234,567", LANE, "which means 1234567 with thousands commas", "Type 1234567 as a number."),
    ("190.000,00", LANE, "which is 190000 with a decimal comma and 190 with a decimal point",
     "Type 190000 as a number."),
    ("1,250", ROAD, "which can be read as 1250 or 1.25", "Type 1.25 as a number, with the decimal sign of your own "
     "program. The other reading is outside the limits."),
    ("1,250", LANE, "which can be read as 1250 or 1.25", "Type the one that is meant as a number"),
    ("1.250", LANE, "which can be read as 1250 or 1.25", "Type the one that is meant as a number"),
])
def test_the_advice_names_the_number_to_type_where_it_can_be_told(text, entry, found, remedy):
    """Only what separators and limits leave open is left to the analyst; no impossible reading is shown."""
    fault = values.text_number(text, entry)
    assert fault.found == f"the text \u201c{text}\u201d, {found}"
    assert fault.remedy.startswith(remedy)


def test_limits_may_leave_one_reading():
    """Three decimals of a latitude cannot be thousands."""
    assert values.text_number("53.551", LATITUDE) == 53.551
    assert isinstance(values.text_number("53.551", COST), Fault)


@pytest.mark.parametrize(("cell", "kind", "word"), [
    (Cell(1, 1, Kind.ERROR, "#N/A"), "error value", "#N/A"),
    (Cell(1, 1, Kind.UNCALCULATED, "A1*2"), "formula never calculated", "A1*2"),
    (Cell(1, 1, Kind.TEXT, "31.12.2026"), "date instead of number", "31.12.2026"),
    (Cell(1, 1, Kind.BOOLEAN, True), "number expected", "TRUE"),
    (Cell(1, 1, Kind.TEXT, "12 km"), "number expected", "12 km"),
    (Cell(1, 1, Kind.TEXT, "NaN"), "number expected", "NaN"),
    (Cell(1, 1, Kind.TEXT, "=A1"), "number expected", "=A1"),
])
def test_what_is_no_number_is_told_apart(cell, kind, word):
    """Error values, formulas without a result, dates, Booleans and words each have their own fault."""
    fault = values.number(cell, COST)
    assert (fault.kind, fault.recheck) == (kind, "not negative")
    assert word in fault.found


def test_a_date_for_a_number_waits_for_the_next_drop():
    """No formula tells a date from its number, so none may say that it is mended."""
    fault = values.number(Cell(1, 1, Kind.DATE, 46387.0), COST)
    assert (fault.kind, fault.recheck, fault.test) == ("date instead of number", "static", "")
    assert "2026-12-31" in fault.found
    bare = values.bare_serial(46387, START)
    assert (bare.recheck, bare.test) == ("static", "")


def test_remedies_know_the_column():
    """An optional cell may be left empty; units belong into the title; a dash means the default."""
    assert "unlimited" in values.number(Cell(1, 1, Kind.TEXT, "-"), CAPACITY).remedy
    assert "title" in values.number(Cell(1, 1, Kind.TEXT, "12 km"), COST).remedy
    assert "empty" not in values.number(Cell(1, 1, Kind.TEXT, "much"), COST).remedy
    assert "empty" in values.number(Cell(1, 1, Kind.TEXT, "much"), CAPACITY).remedy


@pytest.mark.parametrize(("word", "meant"), [
    ("yes", True), ("Y", True), ("TRUE", True), ("1", True), ("no", False), ("n", False), ("False", False),
    ("0", False),
])
def test_yes_and_no(word, meant):
    """The words of rule 5, whatever the case."""
    assert values.yes_no(word, Entry("Today", "", Holds.YES_NO)) is meant


@pytest.mark.parametrize("word", ["ja", "x", "2", "si", "on"])
def test_other_words_are_neither_yes_nor_no(word):
    """Nothing else is guessed at."""
    assert values.yes_no(word, Entry("Today", "", Holds.YES_NO)).kind == "yes or no expected"


def test_choices_are_found_whatever_the_case_and_name_near_misses():
    """`OPEN` is open; `opne` is asked about."""
    rule = Entry("Rule", "", Holds.CHOICE, choices=("free", "open", "closed"))
    assert values.choice("OPEN", rule) == "open"
    assert "\u201cclosed\u201d" in values.choice("close", rule).remedy
    assert values.choice("never", rule).kind == "unknown word"


@pytest.mark.parametrize(("cell", "day"), [
    (Cell(1, 1, Kind.DATE, 46387.0), "2026-12-31"), (Cell(1, 1, Kind.DATE, 46387.75), "2026-12-31"),
    (Cell(1, 1, Kind.TEXT, " 2026-12-31 "), "2026-12-31"), (Cell(1, 1, Kind.TEXT, "2026-W53-4"), "2026-12-31"),
])
def test_dates(cell, day):
    """Date cells and ISO 8601 texts are dates."""
    assert values.date(cell, START, False) == day


@pytest.mark.parametrize("cell", [
    Cell(1, 1, Kind.TEXT, "31.12.2026"), Cell(1, 1, Kind.TEXT, "12/31/2026"), Cell(1, 1, Kind.DATE, 60.0),
    Cell(1, 1, Kind.BOOLEAN, True), Cell(1, 1, Kind.TEXT, "soon"),
])
def test_other_dates_are_errors(cell):
    """A date in another order than year-month-day can mean two days; the 29 February 1900 is none."""
    assert values.date(cell, START, False).kind == "date expected"


def test_a_bare_serial_number_may_be_a_date_without_its_format():
    """The remedy names the day the number would be."""
    assert "2026-12-31" in values.bare_serial(46387, START).remedy
    assert values.bare_serial(12, START).remedy == "Type a date."


@pytest.mark.parametrize(("entry", "value", "kind"), [
    (COST, -1, "negative number"), (COST, 2e12, "number too large"), (COST, float("inf"), "number expected"),
    (COST, float("nan"), "number expected"), (LATITUDE, 90.5, "number too large"),
    (LATITUDE, -91, "number too small"),
    (Entry("Most sites", "", Holds.WHOLE), 1.5, "whole number expected"),
    (Entry("Periods a year", "", above=True), 0, "number too small"),
])
def test_limits(entry, value, kind):
    """Numbers outside the limits of their column have a fault."""
    assert values.limit_fault(entry, value).kind == kind


def test_numbers_inside_the_limits_have_no_fault():
    """The limits themselves are inside."""
    assert values.limit_fault(COST, 0) is None
    assert values.limit_fault(COST, 1e12) is None
    assert values.limit_fault(LATITUDE, -90) is None
