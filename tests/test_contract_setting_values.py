"""The Settings sheet."""

import pytest

from ledgersolve.contract import Job
from tests.books import Formula, Percent, errors, notices, read_sheets, site_sheets

SITES = [{"Site": "A", "Fixed cost": 1, "Today": "yes"}]
CUSTOMERS = [{"Customer": "X", "Demand": 10}]


def read(tmp_path, rows: list[list[object]], titles: tuple[str, ...] = ("Setting", "Value")):
    """Read a small workbook with these rows of Settings."""
    sheets = site_sheets(SITES, CUSTOMERS, lane_costs=[[2]])
    sheets["Settings"] = [list(titles), *rows]
    return read_sheets(tmp_path, sheets)


RIGHT = [["Job", "site selection"], ["Currency", "EUR"]]


def test_settings_are_found_by_name_whatever_case_spacing_and_unit(tmp_path):
    """A real unit in brackets may be left out, another written behind a name does no harm."""
    reading = read(tmp_path, [["JOB", " Site  Selection "], ["currency", "eur"], ["TIME LIMIT", 5],
                              ["Accepted  gap(%)", "0.5"], ["Longest distance (km)", None]])
    assert errors(reading) == []
    assert reading.job is Job.SITE_SELECTION
    assert (reading.run.time_limit, reading.run.accepted_gap) == (5, 0.005)


def test_a_heading_and_notes_do_no_harm(tmp_path):
    """Titles may stand in any order below a heading, with notes beside and empty rows between."""
    sheets = site_sheets(SITES, CUSTOMERS, lane_costs=[[2]])
    sheets["Settings"] = [["My settings"], ["Notes", "Value", "Setting"], ["a note", "site selection", "Job"], [None],
                          ["Currency?", "EUR", "Currency"]]
    assert errors(read_sheets(tmp_path, sheets)) == []


@pytest.mark.parametrize(("name", "value", "kind"), [
    ("Time limit (seconds)", 0, "number too small"), ("Time limit (seconds)", 86401, "number too large"),
    ("Accepted gap (%)", -1, "negative number"), ("Accepted gap (%)", 101, "number too large"),
    ("Questions", "perhaps", "yes or no expected"), ("Road factor", 0.5, "number too small"),
    ("Fewest sites", 1.5, "whole number expected"), ("Distance unit", "miles", "unknown word"),
    ("Unmet demand cost", -3, "negative number"), ("Cost per unit and distance", "#N/A", "number expected"),
    ("Longest distance", Formula("=NA()", "#N/A"), "error value"),
    ("Title", Formula("=A1"), "formula never calculated"),
    ("Most sites", True, "number expected"), ("Time limit (minutes)", 5, "unit differs"),
    ("Share within distance (%)", 101, "number too large"), ("Share of time for questions (%)", 101,
                                                             "number too large"),
])
def test_wrong_values_are_reported(tmp_path, name, value, kind):
    """Each setting's limits and words are checked, with the fault at its cell."""
    reading = read(tmp_path, [*RIGHT, [name, value]])
    assert errors(reading) == [(kind, "Settings", "A4" if kind == "unit differs" else "B4")]


@pytest.mark.parametrize(("written", "meant"), [
    ("€", "EUR"), ("Euro", "EUR"), ("$", "USD"), ("US$", "USD"), ("EUR €", "EUR"), ("EURO", "EUR"), ("£", "GBP")])
def test_currencies_in_other_words_are_asked_about(tmp_path, written, meant):
    """A sign or a name is an error that names the code it may mean."""
    problem = read(tmp_path, [RIGHT[0], ["Currency", written]]).problems[0]
    assert (problem.kind, problem.cell, problem.remedy) == ("currency expected", "B3", f"Did you mean {meant}?")


@pytest.mark.parametrize(("rows", "expected"), [
    ([["Currency", "EUR"]], [("missing setting", "Settings", "A1")]),
    ([["Jobb", "site selection"], ["Currency", "EUR"]], [("missing setting", "Settings", "A2")]),
    ([["Job", "site selection"], ["Currency", None]], [("required cell empty", "Settings", "B3")]),
    ([["Job", "site selection"], ["Currency", "EUR"], ["currency", "USD"]], [("setting twice", "Settings", "A4")]),
    ([["Job", "depots"], ["Currency", "EUR"]], [("unknown word", "Settings", "B2")]),
])
def test_required_settings(tmp_path, rows, expected):
    """A required setting that is missing, misspelt, empty or there twice is one error."""
    assert errors(read(tmp_path, rows)) == expected


def test_near_misses_of_settings_give_notices(tmp_path):
    """A name like a known one is left alone and said; a remark is left alone."""
    reading = read(tmp_path, [*RIGHT, ["Time limt", 5], ["Remark", "by Anna"], ["Late deliveries", "yes"]])
    assert notices(reading) == [("setting like a known one", "Settings", "A4"),
                                ("setting of the other job", "Settings", "A6")]
    assert reading.run.time_limit == 300


def test_titles_of_settings_are_needed(tmp_path):
    """Without the titles Setting and Value nothing is guessed, and nothing else is reported for it."""
    assert errors(read(tmp_path, RIGHT, titles=("Name", "Value"))) == [("no title row", "Settings", "")]


@pytest.mark.parametrize(("given", "used"), [(None, True), ("yes", True), ("no", False)])
def test_today_is_compared_by_default_where_there_is_one(tmp_path, given, used):
    """Compare with today is yes if any Today is yes; the settings list says what was used."""
    reading = read(tmp_path, [*RIGHT, ["Compare with today", given]])
    assert reading.case.compare_today is used
    assert dict(reading.settings)["Compare with today"] == ("yes" if used else "no")


def test_cells_of_settings_travel_beside_the_case(tmp_path):
    """The ledger finds a setting's number; texts and defaults are no cells for formulas."""
    origins = read(tmp_path, [*RIGHT, ["Unmet demand cost", 5], ["Road factor", "1.2"], ["Most sites", None]]).origins
    assert origins.setting("Unmet demand cost").formula == "'Settings'!$B$4"
    assert origins.setting("Road factor") is None
    assert origins.setting("Most sites") is None
    assert origins.setting("Longest distance") is None


def test_percent_cells_are_read_as_they_are_shown(tmp_path):
    """A cell that shows 2 % is stored as 0.02: it means 2, a notice says so, and formulas leave it alone."""
    reading = read(tmp_path, [*RIGHT, ["Accepted gap (%)", Percent(0.02)], ["Road factor", Percent(1.3)]])
    assert notices(reading) == [("percent format", "Settings", "B4")]
    assert reading.run.accepted_gap == 0.02
    assert reading.origins.setting("Accepted gap (%)") is None
    assert dict(reading.settings)["Road factor"] == "1.3"
    assert errors(read(tmp_path, [*RIGHT, ["Accepted gap (%)", Percent(2)]])) == [("number too large", "Settings",
                                                                                   "B4")]


def test_a_value_that_could_not_be_read_is_shown_as_typed(tmp_path):
    """The record of a faulty workbook shows what stands in the cell, never a default that was not asked for."""
    sheets = {"Settings": [["Setting", "Value"], ["Job", "site selection"], ["Currency", "\u20ac"],
                           ["Single sourcing", "ja"], ["Most sites", 2]]}
    reading = read_sheets(tmp_path, sheets)
    shown = dict(reading.settings)
    assert "Single sourcing" not in [default.title for default in reading.defaults]
    assert "Demand unit" in [default.title for default in reading.defaults]
    assert shown["Currency"] == "the text \u201c\u20ac\u201d, which could not be read"
    assert shown["Single sourcing"] == "the text \u201cja\u201d, which could not be read"
    assert shown["Most sites"] == "2"
    sheets["Settings"][2] = ["Currency", None]
    assert dict(read_sheets(tmp_path, sheets).settings)["Currency"] == "not given"
