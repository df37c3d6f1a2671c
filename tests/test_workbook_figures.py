"""Figures in sentences: the digits of the currency, thousands apart, rounded as the sentence needs it."""

import pytest

from ledgersolve.workbook.currencies import MINOR_UNITS
from ledgersolve.workbook.figures import all_words, figure_words, money_digits, money_words, unit_words


@pytest.mark.parametrize(("codes", "digits"), [("USD EUR", 2), ("JPY XPF", 0), ("BHD KWD", 3), ("CLF UYW", 4)])
def test_digits_are_those_of_the_one_list(codes: str, digits: int) -> None:
    """Digits come from the list of currencies (ISO 4217, list one), whatever the case of the code."""
    for code in codes.split():
        assert money_digits(code) == money_digits(code.lower()) == MINOR_UNITS[code] == digits


def test_an_unknown_code_has_two_digits() -> None:
    """A code that is not listed is shown like most currencies."""
    assert money_digits("ZZZ") == 2


@pytest.mark.parametrize(("amount", "rounding", "words"), [
    (0.05, "nearest", "0.05\u00a0EUR"), (999.999, "down", "999.99\u00a0EUR"),
    (4513.65, "nearest", "4\u00a0514\u00a0EUR"), (4513.65, "down", "4\u00a0513\u00a0EUR"),
    (4513.01, "up", "4\u00a0514\u00a0EUR"),
])
def test_amounts_are_rounded_as_asked(amount: float, rounding: str, words: str) -> None:
    """Whole units from 1,000 on, minor units below, towards the side that the sentence claims."""
    assert money_words(amount, "EUR", rounding) == words


def test_a_negative_figure_has_a_minus_that_is_no_hyphen() -> None:
    """The minus sign is the typographic one, so that no line breaks behind it."""
    assert figure_words(-1234.5, 1) == "\u22121\u00a0234.5"


@pytest.mark.parametrize(("amount", "unit", "words"), [
    (1, "pallet", "pallet"), (6, "pallet", "pallets"), (0.5, "tonne", "tonnes"), (3, "box", "boxes"),
    (2, "Palette", "Palettes"),
    (2, "battery", "batteries"), (2, "tray", "trays"), (5, "kg", "kg"), (5, "m3", "m3"),
    (5, "pallets", "pallets"),
    (5, "Stück", "Stück"), (5, "EUR pallet", "EUR pallets"), (5, "roll cage", "roll cages"),
    (5, "pallet of cement", "pallet of cement"), (1, "roll cage", "roll cage"),
])
def test_units_are_words_in_the_plural_and_symbols_as_they_are(amount: float, unit: str, words: str) -> None:
    """Words take the plural behind every amount but one; symbols and words of other alphabets are left alone."""
    assert unit_words(amount, unit) == words


def test_one_is_not_all() -> None:
    """``all 12 items``, but ``the only item``."""
    assert (all_words(12, "item"), all_words(1, "item")) == ("all 12 items", "the only item")
    assert (all_words(2, "delivery", "deliveries"), all_words(0, "item")) == ("all 2 deliveries", "all 0 items")


@pytest.mark.parametrize(("value", "words"), [(25_310.5, "25\u00a0311"), (1_153.5, "1\u00a0154"), (0.5, "1"),
                                              (-2.5, "\u22123"), (1.49, "1"), (2.4999999, "2")])
def test_halves_are_rounded_as_sheets_round_them(value: float, words: str) -> None:
    """A half goes up in words as it does in the cell beside them, whichever digit stands before it."""
    assert figure_words(value) == words
