"""Row models made from the descriptions."""

import math

import pydantic
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ledgersolve.contract import values
from ledgersolve.contract.columns import LARGEST, Holds, ListSheet, MatrixSheet
from ledgersolve.contract.models import field_name, outside, row_model, settings_model
from ledgersolve.contract.read import CONTRACTS

LISTS = [(contract, sheet) for contract in CONTRACTS.values() for sheet in contract.sheets
         if isinstance(sheet, ListSheet)]
FIGURES = [entry for _, sheet in LISTS for entry in sheet.entries if entry.numeric] + [
    sheet.figure for contract in CONTRACTS.values() for sheet in contract.sheets if isinstance(sheet, MatrixSheet)
] + [entry for contract in CONTRACTS.values() for entry in contract.settings if entry.numeric]


def typed(entry) -> object:
    """Give an example as its model takes it."""
    return entry.example == "yes" if entry.holds is Holds.YES_NO else entry.example


@pytest.mark.parametrize(("contract", "sheet"), LISTS, ids=lambda value: getattr(value, "name", ""))
def test_every_example_row_is_right_under_its_own_model(contract, sheet):
    """The examples of a list sheet make a row that its model accepts."""
    row = row_model(sheet)(**{entry.title: typed(entry) for entry in sheet.entries})
    assert getattr(row, field_name(sheet.key[0])) == sheet.entries[0].example


@pytest.mark.parametrize("contract", CONTRACTS.values(), ids=lambda contract: contract.job)
def test_the_examples_of_the_settings_are_right(contract):
    """The examples of all settings of a job are accepted together."""
    settings_model(contract)(**{entry.title: typed(entry) for entry in contract.settings})


@pytest.mark.parametrize(("contract", "sheet"), LISTS, ids=lambda value: getattr(value, "name", ""))
def test_a_row_needs_its_required_columns(contract, sheet):
    """A row of a required column's default alone is refused, and so is an unknown title."""
    needed = {entry.title: typed(entry) for entry in sheet.entries if entry.required}
    row_model(sheet)(**needed)
    with pytest.raises(pydantic.ValidationError):
        row_model(sheet)(**{title: value for title, value in needed.items() if title != sheet.key[0]})
    with pytest.raises(pydantic.ValidationError):
        row_model(sheet)(**needed, **{"No such title": 1})


@given(st.sampled_from(FIGURES), st.floats() | st.integers(-5, 200).map(float)
       | st.sampled_from([0.0, LARGEST, -LARGEST, 90.0, -90.0, 180.0, 1.0, 100.0]))
def test_the_model_and_the_words_agree_on_every_number(entry, value):
    """What the model refuses has words for it, and only that."""
    refused = outside(entry, [value]) == [0]
    assert refused == (values.limit_fault(entry, value) is not None)


def test_places_of_refused_numbers_are_found():
    """A column gives the places of all its wrong numbers at once."""
    cost = next(entry for entry in FIGURES if entry.title == "Fixed cost")
    assert outside(cost, [1.0, -1.0, 5.0, math.nan, math.inf, 2e12]) == [1, 3, 4, 5]
    assert outside(cost, []) == []


def test_field_names():
    """Titles become names; a unit in brackets is left out."""
    assert field_name("Accepted gap (%)") == "accepted_gap"
    assert field_name("Fixed cost") == "fixed_cost"
