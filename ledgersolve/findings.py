"""What audits and explanations give: plain values that every floor above may hold.

The audits share these values with the rest of the house, and no code.
"""

from dataclasses import dataclass
from typing import Generic, TypeVar

PlanT = TypeVar("PlanT")

NOT_ANSWERED = "not answered in the time given"
"""Words in a row of an answer that has no figure because the time ran out."""


@dataclass(frozen=True)
class Check:
    """One rule of the workbook, recomputed: what was required, what the plan does.

    ``rule`` is a short name in the analyst's words (``"Capacity"``), ``subject`` what it was checked on
    (``"site HAM"`` or ``"all 214 customers"``), ``required`` and ``got`` figures or words, ``worst`` by how
    much the rule is broken at most (0 where it holds).
    """

    rule: str
    subject: str
    required: str
    got: str
    worst: float
    ok: bool


@dataclass(frozen=True)
class CostPart:
    """A part of the plan's cost under its own name (``"Fixed cost of open sites"``)."""

    name: str
    amount: float


@dataclass(frozen=True)
class Audit:
    """A plan recomputed from the case alone: cost by parts, and every rule checked."""

    parts: tuple[CostPart, ...]
    checks: tuple[Check, ...]

    @property
    def total(self) -> float:
        """Cost of the plan."""
        return sum(part.amount for part in self.parts)

    @property
    def ok(self) -> bool:
        """Whether every rule holds."""
        return all(check.ok for check in self.checks)

    def broken(self) -> tuple[Check, ...]:
        """The rules that do not hold."""
        return tuple(check for check in self.checks if not check.ok)


@dataclass(frozen=True)
class Subject:
    """A cell in the contract's own words: sheet, the codes that name the row, and the column title."""

    sheet: str
    key: tuple[str, ...]
    title: str


@dataclass(frozen=True)
class Conflict:
    """Rows and rules that cannot hold together, in one sentence, with what would mend it.

    ``words`` says what cannot hold (``"Capacity 400 short in week 7: needs 132 h, has 120 h"``),
    ``remedy`` the smallest change that helps, ``amount`` its size in the unit of the rule, ``subjects``
    the cells at stake, the first one the cell to mark.
    """

    words: str
    remedy: str
    amount: float
    subjects: tuple[Subject, ...]


@dataclass(frozen=True)
class Explanation(Generic[PlanT]):
    """Why no plan exists: what cannot hold together, smallest change first, and the closest plan.

    ``closest`` breaks as few rules as can be, or is None where nothing sensible comes close;
    ``closest_words`` says what it leaves open (``"leaves 400 pallets unmet at 3 customers"``); ``shown`` are
    tables of the closest plan, of four columns at most.
    """

    conflicts: tuple[Conflict, ...]
    closest: PlanT | None = None
    closest_words: str = ""
    shown: "tuple[Answered, ...]" = ()


@dataclass(frozen=True)
class Column:
    """A column of an answer's table. ``kind``: ``text``, ``money``, ``number``, ``percent`` (a fraction)."""

    title: str
    kind: str = "text"


@dataclass(frozen=True)
class Picture:
    """A chart over an answer's table, by column numbers: ``kind`` is ``line`` or ``stacked column``."""

    kind: str
    title: str
    category: int
    values: tuple[int, ...]


@dataclass(frozen=True)
class Answered:
    """A question a manager asks, answered ahead by solving.

    ``words`` is the answer in one to three sentences and says whether it is exact or an interval; ``rows``
    are the figures behind it (None = no figure exists, with the reason in a text column; a row that the time
    did not suffice for has ``NOT_ANSWERED`` in a text column). The words speak of answered rows only.
    ``headline`` answers belong on the Decision page too: never one of whose rows none is answered. ``seconds``
    is the time the answer took.
    """

    question: str
    words: str
    columns: tuple[Column, ...] = ()
    rows: tuple[tuple[str | float | None, ...], ...] = ()
    picture: Picture | None = None
    headline: bool = False
    seconds: float = 0.0

    @property
    def unanswered(self) -> int:
        """Rows that were not answered, or not in whole, in the time given."""
        return sum(any(isinstance(cell, str) and NOT_ANSWERED in cell for cell in row) for row in self.rows)
