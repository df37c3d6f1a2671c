"""A fault or a notice as a value: where, what was found, what is expected, what to do."""

import re
from dataclasses import dataclass
from typing import Literal

Severity = Literal["error", "notice"]

Recheck = Literal[
    "number",        # right once the cell holds a number
    "not negative",  # right once the cell holds a number of zero or more
    "filled",        # right once the cell is not empty
    "empty",         # right once the cell is empty
    "no error",      # right once the cell holds no error value
    "date",          # right once the cell holds a date
    "static",        # needs other data: only a new drop can tell
]
"""How the cell itself can show, without us, that the fault is mended."""

CELL, ROW, ABOVE, OWN = "{cell}", "{row}", "{above}", "{own}"
"""In ``Problem.test``: the cell, its row, the row above it, and what stands before references to its own sheet."""

_BLANKS = re.compile("|".join(map(re.escape, (CELL, ROW, ABOVE, OWN))))


@dataclass(frozen=True)
class Problem:
    """One entry of the list that goes back to the analyst.

    Parameters
    ----------
    severity
        ``error``: the workbook cannot be solved before it is mended; ``notice``: solved, but look.
    kind
        A stable short name of the fault, for tests and marks, e.g. ``"number expected"``.
    sheet, cell, title
        Where: sheet name as the analyst wrote it, address such as ``D8`` ("" for a whole sheet or
        file), column title or setting as the contract names it ("" where none).
    found, expected, remedy
        What stands there, what should, and what to do, in the analyst's words.
    more
        Further cells of the same sheet with the same fault (all that are marked).
    count
        Number of places with the fault, this one included (may exceed 1 + len(more)).
    recheck
        See ``Recheck``.
    low, high
        Limits for ``recheck == "number"``: the cell is right once it holds a number within them.
    above
        Whether ``low`` itself is too small.
    may_be_empty
        Whether an empty cell is right as well.
    test
        A formula that is true once a cell is right and never an error; "" where ``recheck`` says it all. It is
        asked in place of ``recheck`` where the entry has few cells.
    tally
        A formula that counts the right cells of a run of cells, which stands in it as ``CELL``; "" where ``recheck``
        says how.
    typed
        Where the test looks at other sheets, which marks cannot do: the text that is wrong. The mark stays as
        long as it stands there.
    """

    severity: Severity
    kind: str
    sheet: str
    cell: str
    title: str
    found: str
    expected: str
    remedy: str
    more: tuple[str, ...] = ()
    count: int = 1
    recheck: Recheck = "static"
    low: float | None = None
    high: float | None = None
    above: bool = False
    may_be_empty: bool = False
    test: str = ""
    tally: str = ""
    typed: str = ""

    @property
    def is_error(self) -> bool:
        """Whether the workbook goes back because of it."""
        return self.severity == "error"

    def as_json(self) -> dict[str, str]:
        """The seven fixed keys of the machine-readable answer."""
        return {
            "severity": self.severity,
            "sheet": self.sheet,
            "cell": self.cell,
            "title": self.title,
            "found": self.found if self.count == 1 else f"{self.found} (and {self.count - 1} more like it)",
            "expected": self.expected,
            "remedy": self.remedy,
        }


def asked(test: str, own: str, column: str, row: int, mark: str = "") -> str:
    """The test of one cell. ``own`` stands before references to its sheet, ``mark`` before row and column."""
    meant = {CELL: f"{own}{mark}{column}{mark}{row}", ROW: f"{mark}{row}", ABOVE: f"{mark}{row - 1}", OWN: own}
    return _BLANKS.sub(lambda match: meant[match[0]], test)


class UnreadableWorkbookError(Exception):
    """A file that cannot be read as a workbook at all; carries the words for the analyst."""

    def __init__(self, problem: Problem) -> None:
        super().__init__(f"{problem.found}; {problem.remedy}")
        self.problem = problem


def any_errors(problems: list[Problem]) -> bool:
    """Whether at least one problem is an error."""
    return any(problem.is_error for problem in problems)
