"""Texts of cells: codes, titles, dates, near misses."""

import datetime

import pytest
from openpyxl.utils.datetime import from_excel

from ledgersolve.workbook.cells import Cell, Kind
from ledgersolve.workbook.text import (
    alike,
    cell_text,
    clean,
    code_text,
    nearest,
    number_text,
    plain,
    serial_date,
    unit_in,
)


@pytest.mark.parametrize(("text", "code"), [
    (" HAM ", "HAM"), ("7.0", "7"), ("7.00", "7"), ("-7.0", "-7"), ("7.10", "7.10"), ("007", "007"),
    ("1.0.0", "1.0.0"), ("Ko\u0308ln", "K\u00f6ln"), ("\u00a0A\u200b", "A"), ("10", "10"), ("v1.0", "v1.0"), ("", ""),
])
def test_codes_are_trimmed_and_normalised(text, code):
    """Codes lose outer spaces, unseen characters and a zero decimal part, and are put into normal form C."""
    assert code_text(text) == code


@pytest.mark.parametrize(("value", "raw", "text"), [
    (7.0, "7", "7"), (7.5, "7.5", "7.5"), (1e14, "100000000000000", "100000000000000"),
    (1.2345678901234568e16, "12345678901234567", "12345678901234567"), (0.1, "0.10000000000000001", "0.1"),
    (-3.0, "-3", "-3"), (1e300, "1E300", "1e+300"), (float("inf"), "", "inf"),
])
def test_numbers_become_codes_without_rounding(value, raw, text):
    """A number is the code that a person would read; 17 digits stay as they were stored."""
    assert number_text(value, raw) == text


@pytest.mark.parametrize("written", [
    "Fixed cost", "fixed COST", " fixed  cost ", "Fixedcost", "Fixed\ncost", "Fixed cost (EUR/year)",
    "Fixed cost [EUR]",
    "Fixed cost (EUR (2026))", "Fixed cost *", "Fixed cost:", "Fixed\u00a0cost", "Fixed cost (EUR) *",
])
def test_titles_are_one_whatever_case_spacing_and_unit(written):
    """Case, spacing and a unit in brackets behind a title do not matter."""
    assert plain(written) == "fixedcost"


@pytest.mark.parametrize("written", ["Fixd cost", "(Fixed cost)", "Fixed (yearly) cost", "Fixed cost)",
                                     "Cost, fixed"])
def test_other_titles_stay_other_titles(written):
    """What is more than case, spacing and unit is another title."""
    assert plain(written) != "fixedcost"


def test_the_unit_of_a_title_is_found():
    """The unit is what stands in the last brackets."""
    assert unit_in("Fixed cost (EUR/year)") == "EUR/year"
    assert unit_in("Fixed cost") == ""
    assert unit_in("Time limit (seconds)") == "seconds"
    assert plain("Time limit (seconds)") == plain("Time limit")


@pytest.mark.parametrize(("serial", "day"), [
    (61, "1900-03-01"), (25569, "1970-01-01"), (36526, "2000-01-01"), (46387, "2026-12-31"), (59, "1900-02-28"),
    (1, "1900-01-01"),
])
def test_serial_numbers_of_dates(serial, day):
    """Serial dates of the 1900 system (check case GEO-07: 1900-03-01 = 61, 1970-01-01 = 25569, ...)."""
    assert serial_date(serial) == day


def test_the_day_that_never_was_is_no_date():
    """Serial 60 is the 29 February 1900, which does not exist; numbers out of range are no dates either."""
    assert serial_date(60) is None
    assert serial_date(-1) is None
    assert serial_date(2958466) is None
    assert serial_date(float("nan")) is None


@pytest.mark.parametrize("date1904", [False, True])
@pytest.mark.parametrize("serial", [61.0, 100.5, 36526.25, 46387.999, 45000.0])
def test_serial_dates_agree_with_another_library(serial, date1904):
    """Serial numbers with times agree with openpyxl to the second, in both date systems."""
    epoch = datetime.datetime(1904, 1, 1) if date1904 else datetime.datetime(1899, 12, 30)
    theirs = from_excel(serial, epoch)
    ours = datetime.datetime.fromisoformat(serial_date(serial, date1904))
    assert abs((ours - theirs).total_seconds()) <= 1


@pytest.mark.parametrize(("day", "label"), [
    ("2005-01-01", (2004, 53, 6)), ("2005-01-02", (2004, 53, 7)), ("2006-01-01", (2005, 52, 7)),
    ("2007-12-31", (2008, 1, 1)), ("2008-12-29", (2009, 1, 1)), ("2010-01-03", (2009, 53, 7)),
    ("2010-01-04", (2010, 1, 1)),
])
def test_iso_weeks_over_new_year(day, label):
    """The calendar that dates rest on gives the ISO 8601 weeks of check case GEO-07."""
    assert tuple(datetime.date.fromisoformat(day).isocalendar()) == label


def test_text_of_cells():
    """Every kind of cell gives its text; errors and uncalculated formulas give none."""
    assert cell_text(Cell(1, 1, Kind.TEXT, " a ")) == "a"
    assert cell_text(Cell(1, 1, Kind.NUMBER, 7.0, "7")) == "7"
    assert cell_text(Cell(1, 1, Kind.DATE, 46387.0)) == "2026-12-31"
    assert cell_text(Cell(1, 1, Kind.DATE, 46387.5)) == "2026-12-31 12:00:00"
    assert cell_text(Cell(1, 1, Kind.BOOLEAN, True)) == "TRUE"
    assert cell_text(Cell(1, 1, Kind.ERROR, "#N/A")) is None
    assert cell_text(Cell(1, 1, Kind.UNCALCULATED, "A1")) is None


@pytest.mark.parametrize(("word", "meant"), [
    ("Hamurg", "Hamburg"), ("hamburg", "Hamburg"), ("Ham burg", "Hamburg"), ("12", "0012"), ("Bremn", "Bremen"),
    ("Paris", None), ("", None),
])
def test_near_misses(word, meant):
    """A slip names the word that was meant; a different word names none."""
    assert nearest(word, ["Hamburg", "Bremen", "0012"]) == meant


@pytest.mark.parametrize(("word", "known", "meant"), [
    ("EIM", ("EIN", "AMS"), "EIN"), ("HMA", ("HAM", "LEJ"), "HAM"), ("EI", ("EIN", "AMS"), "EIN"),
    ("EIX", ("EIN", "EIM"), None), ("S99", ("S09", "S01"), None), ("P300", ("P200", "X1"), None),
    ("XY", ("XZ", "AB"), None), ("C9", ("C1", "C2"), None),
])
def test_a_single_wrong_letter_of_a_short_code_is_a_slip(word, known, meant):
    """One letter off names the code that was meant, unless two are that near or the code differs in a digit."""
    assert nearest(word, known) == meant


def test_alike_ignores_case_and_spacing_only():
    """Codes that differ in case or inner spacing are alike; others are not."""
    assert alike("Ham 1") == alike("HAM1") == alike("h\u200bam 1")
    assert alike("HAM-1") != alike("HAM1")
    assert clean("a  b") == "a  b"
