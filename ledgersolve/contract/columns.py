"""How the contract describes itself: entries, list sheets and matrix sheets.

Every sheet, column and setting of a workbook is described once, with these values, in ``settings``,
``site_selection`` and ``lot_sizing``. Row models, validation, error texts, templates and the reference page
are made from the descriptions.
"""

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from enum import StrEnum

from ledgersolve.contract.reading import Job

LARGEST = 1e12
"""No figure of a workbook may be larger in size: sums of such figures still keep cents."""


class Holds(StrEnum):
    """What a cell of a column may hold."""

    CODE = "code"
    TEXT = "text"
    NUMBER = "number"
    WHOLE = "whole number"
    YES_NO = "yes or no"
    CHOICE = "one of a few words"
    DATE = "date"
    CODES = "codes with commas"
    CURRENCY = "currency code"


NUMERIC = frozenset({Holds.NUMBER, Holds.WHOLE})

Value = float | str | bool | None


@dataclass(frozen=True)
class Entry:
    """One thing an analyst enters: a column of a list sheet, the figures of a matrix, or a setting.

    Parameters
    ----------
    title
        Title as the contract fixes it; a real unit in brackets belongs to it (``Accepted gap (%)``).
    meaning
        One sentence for notes and the reference page.
    holds
        What a cell may hold.
    example
        A value that is right.
    unit
        Unit in words (``currency``, ``time units``, ``degrees``); "" where none.
    required
        Whether a cell must be filled.
    default
        Value taken where the cell is empty; ``math.inf`` is unlimited, None is none.
    default_words
        Words for the default where the value does not say it (``the code``).
    low, high
        Limits of a number.
    above
        Whether ``low`` itself is too small (a factor must be above 0).
    choices
        The words of a CHOICE.
    refers
        Sheet in whose code column the code has to stand.
    hint
        A likely slip where a number is outside the limits, as a question.
    instead
        Matrix sheet that can give the figure in place of a required column.
    """

    title: str
    meaning: str
    holds: Holds = Holds.NUMBER
    example: Value = None
    unit: str = ""
    required: bool = False
    default: Value = None
    default_words: str = ""
    low: float = 0.0
    high: float = LARGEST
    above: bool = False
    choices: tuple[str, ...] = ()
    refers: str = ""
    hint: str = ""
    instead: str = ""

    @property
    def numeric(self) -> bool:
        """Whether the column holds numbers."""
        return self.holds in NUMERIC

    @property
    def is_text(self) -> bool:
        """Whether cells are read as texts, so that a number in them is a code."""
        return self.holds not in (Holds.NUMBER, Holds.WHOLE, Holds.DATE)

    def default_text(self) -> str:
        """The default in words."""
        return self.default_words or shown(self.default)

    def expected(self) -> str:
        """What the cell should hold, in words."""
        words = {
            Holds.CODE: f"a code of the sheet {self.refers}" if self.refers else "a code",
            Holds.TEXT: "text",
            Holds.YES_NO: "yes or no",
            Holds.CHOICE: alternatives(self.choices),
            Holds.DATE: "a date",
            Holds.CODES: f"codes of the sheet {self.refers}, with commas between them",
            Holds.CURRENCY: "a currency code of three letters (ISO 4217), such as EUR",
        }
        return words.get(self.holds) or self._expected_number()

    def _expected_number(self) -> str:
        kind = "a whole number" if self.holds is Holds.WHOLE else "a number"
        unit = f" ({self.unit})" if self.unit else ""
        if self.above:
            return f"{kind} above {shown(self.low)}{unit}"
        if self.high < LARGEST:
            return f"{kind} from {shown(self.low)} to {shown(self.high)}{unit}"
        if self.low > -LARGEST:
            return f"{kind} of {shown(self.low)} or more{unit}"
        return f"{kind}{unit}"


@dataclass(frozen=True)
class ListSheet:
    """A sheet with a row a thing: its columns and the codes that name a row.

    ``one_of`` are titles of which each row needs at least one; ``required`` whether the job needs the sheet.
    """

    name: str
    meaning: str
    entries: tuple[Entry, ...]
    key: tuple[str, ...]
    required: bool = False
    one_of: tuple[str, ...] = ()

    def entry(self, title: str) -> Entry:
        """The column of that title."""
        return next(entry for entry in self.entries if entry.title == title)

    def required_titles(self) -> tuple[tuple[str, ...], ...]:
        """Titles that have to be there, alternatives together."""
        single = tuple((entry.title,) for entry in self.entries if entry.required)
        return (*single, self.one_of) if self.one_of else single


@dataclass(frozen=True)
class MatrixSheet:
    """A sheet with codes of one list down its first column and of another along its title row.

    ``corner`` and ``across`` are the titles of these codes in their own lists.
    """

    name: str
    meaning: str
    rows_of: str
    columns_of: str
    corner: str
    across: str
    figure: Entry
    required: bool = False


Sheet = ListSheet | MatrixSheet


@dataclass(frozen=True)
class JobContract:
    """All a workbook of one job may hold; sheets in the order in which they depend on each other.

    ``most_pairs`` is how many pairs of sites and customers, or of items and periods, fit into memory, where
    a case holds several figures a pair.
    """

    job: Job
    settings: tuple[Entry, ...]
    sheets: tuple[Sheet, ...]
    most_pairs: int

    def sheet(self, name: str) -> Sheet:
        """The sheet of that name."""
        return next(sheet for sheet in self.sheets if sheet.name == name)

    def list_sheet(self, name: str) -> ListSheet:
        """The list sheet of that name."""
        return next(sheet for sheet in self.sheets if isinstance(sheet, ListSheet) and sheet.name == name)


def quoted(text: object, most: int = 60) -> str:
    """An analyst's text in quotes: on one line, without control characters, cut where it is long."""
    line = "".join(c if c.isprintable() else " " for c in str(text))
    line = " ".join(line.split())
    return f"“{line if len(line) <= most else line[: most - 1] + '…'}”"


def shown(value: object) -> str:
    """A value in words: ``unlimited``, ``none``, ``yes``, whole numbers without a point."""
    if value is None or (isinstance(value, float) and math.isnan(value)):
        return "none"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int | float):
        if math.isinf(value):
            return "unlimited"
        return f"{value:.15g}"
    return str(value)


def alternatives(words: Sequence[str]) -> str:
    """Words of which one is to be typed, in quotes: ``“free”, “open” or “closed”``."""
    given = [quoted(word) for word in words]
    return " or ".join([", ".join(given[:-1]), given[-1]] if len(given) > 1 else given)


def listed(words: Iterable[str], most: int = 6) -> str:
    """Words as ``a, b and c``; cut after ``most``."""
    given = list(words)
    if len(given) > most:
        return ", ".join(given[:most]) + f" and {len(given) - most} more"
    return " and ".join([", ".join(given[:-1]), given[-1]] if len(given) > 1 else given)
