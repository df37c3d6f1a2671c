"""Cells with their true addresses, as the streaming reader yields them."""

from enum import Enum
from typing import NamedTuple


class Kind(Enum):
    """What stands in a cell; an empty cell is never yielded."""

    NUMBER = "number"
    TEXT = "text"
    BOOLEAN = "boolean"
    ERROR = "error value"
    DATE = "date"
    UNCALCULATED = "formula never calculated"


class Cell(NamedTuple):
    """One filled cell (a named tuple: a large workbook makes a million of them).

    ``row`` and ``column`` count from 1. ``value`` is a float (NUMBER; DATE as its serial number), a str
    (TEXT; ERROR, e.g. ``#N/A``), a bool (BOOLEAN), or the formula's text (UNCALCULATED). A number keeps
    the text it was stored as in ``raw``, so that a 17-digit code is not rounded.
    """

    row: int
    column: int
    kind: Kind
    value: float | str | bool
    raw: str = ""
    formula: bool = False

    @property
    def address(self) -> str:
        """Address such as ``D8``."""
        return address(self.row, self.column)


def column_letters(column: int) -> str:
    """Letters of a column number (1 = A)."""
    letters = ""
    while column > 0:
        column, rest = divmod(column - 1, 26)
        letters = chr(65 + rest) + letters
    return letters


def column_number(letters: str) -> int:
    """Column number of its letters (A = 1)."""
    number = 0
    for letter in letters:
        number = number * 26 + ord(letter) - 64
    return number


def address(row: int, column: int) -> str:
    """Address such as ``D8`` from row and column, both from 1."""
    return f"{column_letters(column)}{row}"
