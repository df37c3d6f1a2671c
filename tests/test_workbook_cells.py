"""Addresses and back."""

import pytest

from ledgersolve.workbook.cells import Cell, Kind, address, column_letters, column_number


@pytest.mark.parametrize(("number", "letters"), [
    (1, "A"), (26, "Z"), (27, "AA"), (52, "AZ"), (53, "BA"), (702, "ZZ"), (703, "AAA"), (16_384, "XFD")])
def test_letters_at_every_carry(number: int, letters: str) -> None:
    """Columns are counted in letters without a zero, to the last column of a sheet."""
    assert column_letters(number) == letters
    assert column_number(letters) == number


def test_a_cell_knows_its_address() -> None:
    """A cell gives the address a person reads."""
    assert Cell(8, 4, Kind.NUMBER, 1.0).address == address(8, 4) == "D8"
