"""The descriptions hold what the contract fixes."""

import math

import pytest

from ledgersolve.contract.columns import Entry, Holds, ListSheet, listed, shown
from ledgersolve.contract.read import CONTRACTS
from ledgersolve.contract.reading import Job
from ledgersolve.workbook.text import plain

INF = math.inf

SITE = {
    "Sites": (["Site", "Fixed cost"], {
        "Name": None, "Capacity": INF, "Least volume": 0, "Handling cost": 0, "Rule": "free", "Today": False,
        "Opening cost": 0, "Closing cost": 0, "Group": None, "Latitude": None, "Longitude": None}),
    "Customers": (["Customer", "Demand"], {
        "Name": None, "Longest distance": None, "Single source": None, "Latitude": None, "Longitude": None}),
    "Lanes": (["Site", "Customer"], {"Unit cost": None, "Distance": None, "Allowed": True, "Most": INF}),
    "Variants": (["Variant"], {
        "Demand factor": 1, "Lane cost factor": 1, "Fixed cost factor": 1, "Fewest sites": None, "Most sites": None,
        "Longest distance": None, "Open": None, "Closed": None}),
}
LOTS = {
    "Periods": (["Period"], {"Start": None}),
    "Items": (["Item", "Setup cost"], {
        "Name": None, "Unit": "unit", "Unit cost": 0, "Holding cost": None, "Unit value": None, "Opening stock": 0,
        "Safety stock": 0, "Closing stock": None, "Most stock": INF, "Least lot": 0, "Most lot": INF,
        "Lot multiple": None, "Backlog cost": None, "Lost sale cost": None, "Resource": None, "Time per unit": 0,
        "Setup time": 0, "Family": None}),
    "Resources": (["Resource", "Capacity"], {"Overtime limit": 0, "Overtime cost": 0, "Use cost": 0}),
    "Period costs": (["Item", "Period"], {
        "Setup cost": None, "Unit cost": None, "Holding cost": None, "Setup allowed": True}),
    "Receipts": (["Item", "Period", "Quantity"], {}),
    "Families": (["Family", "Setup cost"], {"Setup time": 0, "Resource": None}),
}
SETTINGS = {
    Job.SITE_SELECTION: {
        "Job": None, "Title": None, "Currency": None, "Time limit (seconds)": 300, "Accepted gap (%)": 0.01,
        "Questions": True, "Share of time for questions (%)": 20, "Demand unit": "unit", "Period covered": "year",
        "Lane cost basis": "per unit", "Distance unit": "km", "Cost per unit and distance": None, "Road factor": 1,
        "Fewest sites": None, "Most sites": None, "Longest distance": None, "Share within distance (%)": None,
        "Distance for share": None, "Single sourcing": False, "Unmet demand cost": None, "Compare with today": None},
    Job.LOT_SIZING: {
        "Job": None, "Title": None, "Currency": None, "Time limit (seconds)": 300, "Accepted gap (%)": 0.01,
        "Questions": True, "Share of time for questions (%)": 20, "Period unit": "period", "Periods a year": None,
        "Yearly holding rate (%)": None, "Late deliveries": False, "Compare with today": None},
}
MATRICES = {
    Job.SITE_SELECTION: {"Lane costs": ("Sites", "Customers"), "Distances": ("Sites", "Customers")},
    Job.LOT_SIZING: {"Demand": ("Items", "Periods"), "Capacity": ("Resources", "Periods"),
                     "Today plan": ("Items", "Periods")},
}


@pytest.mark.parametrize(("job", "fixed"), [(Job.SITE_SELECTION, SITE), (Job.LOT_SIZING, LOTS)])
def test_columns_and_their_defaults_are_the_contracts(job, fixed):
    """Every list sheet has the titles, required columns and defaults that the contract fixes."""
    lists = {sheet.name: sheet for sheet in CONTRACTS[job].sheets if isinstance(sheet, ListSheet)}
    assert set(lists) == set(fixed)
    for name, (required, optional) in fixed.items():
        assert [entry.title for entry in lists[name].entries if entry.required] == required
        assert {entry.title: entry.default for entry in lists[name].entries if not entry.required} == optional


@pytest.mark.parametrize("job", list(Job))
def test_settings_and_their_defaults_are_the_contracts(job):
    """Every setting and its default, in the contract's order."""
    assert [(e.title, e.default) for e in CONTRACTS[job].settings] == list(SETTINGS[job].items())


@pytest.mark.parametrize("job", list(Job))
def test_matrices_have_the_contracts_sides(job):
    """Every matrix sheet with the lists its codes come from."""
    matrices = [sheet for sheet in CONTRACTS[job].sheets if not isinstance(sheet, ListSheet)]
    assert {sheet.name: (sheet.rows_of, sheet.columns_of) for sheet in matrices} == MATRICES[job]


@pytest.mark.parametrize("job", list(Job))
def test_no_two_titles_of_a_sheet_are_read_as_one(job):
    """Titles stay apart without case, spacing and units; so do sheet names and settings."""
    contract = CONTRACTS[job]
    groups = [[sheet.name for sheet in contract.sheets], [entry.title for entry in contract.settings]]
    groups += [[entry.title for entry in sheet.entries] for sheet in contract.sheets if isinstance(sheet, ListSheet)]
    for titles in groups:
        assert len({plain(title) for title in titles}) == len(titles)


@pytest.mark.parametrize("job", list(Job))
def test_every_entry_has_a_meaning_an_example_and_words(job):
    """Notes, templates and the reference page lack nothing."""
    contract = CONTRACTS[job]
    entries = [*contract.settings, *[e for s in contract.sheets if isinstance(s, ListSheet) for e in s.entries]]
    for entry in entries:
        assert entry.meaning.endswith(".")
        assert entry.example is not None
        assert entry.expected()
        assert entry.required or entry.default_text()


def test_words_for_what_is_expected():
    """Limits and units are said."""
    assert Entry("x", "").expected() == "a number of 0 or more"
    assert Entry("x", "", unit="km", low=1, high=5).expected() == "a number from 1 to 5 (km)"
    assert Entry("x", "", Holds.WHOLE, above=True).expected() == "a whole number above 0"
    assert Entry("x", "", Holds.CHOICE, choices=("a", "b")).expected() == "\u201ca\u201d or \u201cb\u201d"


def test_values_in_words():
    """Unlimited, none, yes and whole numbers read as people write them."""
    assert [shown(v) for v in (INF, None, math.nan, True, False, 5.0, 0.1, "km")] == [
        "unlimited", "none", "none", "yes", "no", "5", "0.1", "km"]
    assert listed(["a"]) == "a"
    assert listed(["a", "b", "c"]) == "a, b and c"
    assert listed([str(k) for k in range(9)], 2) == "0, 1 and 7 more"
