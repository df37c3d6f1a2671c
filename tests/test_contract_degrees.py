"""Coordinates as texts: what they are in decimal degrees, and what cannot be told."""

import pytest

from ledgersolve.contract.columns import Entry
from ledgersolve.contract.degrees import LATITUDE, LONGITUDE, coordinates
from ledgersolve.contract.faults import Fault
from ledgersolve.contract.values import number
from ledgersolve.workbook.cells import Cell, Kind

NORTH = Entry("Latitude", "", unit="degrees", low=-90, high=90, example=53.55)
EAST = Entry("Longitude", "", unit="degrees", low=-180, high=180, example=9.99)


@pytest.mark.parametrize(("text", "title", "degrees"), [
    ("52.5N", LATITUDE, 52.5), ("N 52.5", LATITUDE, 52.5), ("52,5 N", LATITUDE, 52.5), ("52.5°", LATITUDE, 52.5),
    ("52.5° s", LATITUDE, -52.5), ("-52.5°", LATITUDE, -52.5), ("0°0'0\"S", LATITUDE, 0.0),
    ("52°31'12\"N", LATITUDE, 52.52), ("52° 31′ 12″ N", LATITUDE, 52.52), ("52º31’12”N", LATITUDE, 52.52),
    ("52°31'12''N", LATITUDE, 52.52), ("52 31 12 N", LATITUDE, 52.52), ("52:31:12", LATITUDE, 52.52),
    ("S 33° 52.2'", LATITUDE, -33.87), ("13°24'18\"E", LONGITUDE, 13.405), ("W 0 30", LONGITUDE, -0.5),
    ("179°59'59.9\"W", LONGITUDE, -179.999972), ("\u221252°30'", LATITUDE, -52.5),
])
def test_one_coordinate_is_turned_into_decimal_degrees(text, title, degrees):
    """Letters, marks, colons, primes of every make and decimal minutes; south and west are negative."""
    (found,) = coordinates(text, title)
    assert found.degrees == degrees
    assert found.axis in ("", title)


@pytest.mark.parametrize(("text", "title", "degrees"), [
    ("+5231.2", LATITUDE, 52.52), ("+523112", LATITUDE, 52.52), ("-335212", LATITUDE, -33.87),
    ("+01324.3", LONGITUDE, 13.405), ("-0132418", LONGITUDE, -13.405), ("5231.2N", LATITUDE, 52.52),
    ("01324.3E", LONGITUDE, 13.405),
])
def test_the_compact_forms_of_the_standard_are_known(text, title, degrees):
    """ISO 6709 writes degrees and minutes, or degrees, minutes and seconds, without marks between them."""
    assert [found.degrees for found in coordinates(text, title)] == pytest.approx([degrees], abs=4e-6)


@pytest.mark.parametrize("text", [
    "+52.52+013.405/", "+5231.2+01324.3/", "+52.52+013.405+034.0CRSWGS_84/", "52.52, 13.405", "(52.52 13.405)",
    "52.52;13.405", "52.52N 13.405E", "52°31'12\"N, 13°24'18\"E", "N 52°31'12\" E 13°24'18\"",
])
@pytest.mark.parametrize("title", [LATITUDE, LONGITUDE])
def test_both_in_one_cell_are_told_apart(text, title):
    """A pair as maps and the standard write it, latitude first, whichever column it stands in."""
    assert [found.degrees for found in coordinates(text, title)] == pytest.approx([52.52, 13.405], abs=4e-6)


@pytest.mark.parametrize("text", [
    "52 31", "north", "52°61'N", "52°31'60\"N", "52.5°31'N", "-52.5N", "N52.5S", "91N", "52°31'12\"13", "5231.2",
    "+52312", "", "N", "12/05", "181°E", "95.5, 13.4", "1e2N",
])
def test_what_cannot_be_told_is_not_guessed(text):
    """Minutes of sixty, two hemispheres, too many degrees, two bare numbers: no figure is offered."""
    assert coordinates(text, LATITUDE) == ()


def fault_of(text: str, entry: Entry) -> Fault:
    """The fault of a text in a column."""
    found = number(Cell(2, 1, Kind.TEXT, text), entry)
    assert isinstance(found, Fault)
    return found


@pytest.mark.parametrize(("text", "entry", "found", "remedy"), [
    ("52.5N", NORTH, "which is 52.5 in decimal degrees", "Type 52.5 as a number"),
    ("52°31'12\"N", NORTH, "which is 52.52 in decimal degrees", "Type 52.52 as a number"),
    ("+5231.2", NORTH, "which is 52.52 in decimal degrees", "Type 52.52 as a number"),
    ("13°24'18\"W", EAST, "which is -13.405 in decimal degrees", "Type -13.405 as a number"),
    ("13.4E", NORTH, "which is a longitude: 13.4", "this one belongs into the column Longitude."),
    ("52.52, 13.405", EAST, "which holds latitude and longitude",
     "Type 13.405 as a number, with the decimal sign of your own program. The other one, 52.52, belongs into the "
     "column Latitude."),
    ("near Berlin", NORTH, "the text “near Berlin”", "Type decimal degrees as a number, such as 53.55"),
])
def test_the_analyst_is_told_what_to_type(text, entry, found, remedy):
    """The fault says that decimal degrees are expected and shows the converted figure as what to write."""
    fault = fault_of(text, entry)
    assert fault.kind == "decimal degrees expected"
    assert found in fault.found and remedy in fault.remedy
    assert (fault.recheck, fault.low, fault.high) == ("number", entry.low, entry.high)


def test_plain_numbers_and_commas_are_no_matter_of_degrees():
    """A number as text is a number, and a decimal comma is told as such."""
    assert number(Cell(2, 1, Kind.TEXT, "+52.5"), NORTH) == 52.5
    assert fault_of("52,5", NORTH).kind == "ambiguous number"
    assert number(Cell(2, 1, Kind.TEXT, "95"), NORTH) == 95, "the limits tell what is wrong with it"
    assert fault_of("95,5", NORTH).kind == "ambiguous number"
