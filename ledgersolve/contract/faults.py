"""Gathers all problems of a workbook, and puts many of one kind into one entry."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

from ledgersolve.workbook.cells import address
from ledgersolve.workbook.problems import Problem, Recheck, Severity

FEW = 5
"""So many faults of one kind in one column are listed one by one; more are one entry with a count."""

MOST_CELLS = 3000
"""So many further cells of an entry are named (and marked); the count is always the true one."""

Place = tuple[int, int]


@dataclass(frozen=True)
class Fault:
    """A fault of a cell before it has an address: kind and words."""

    kind: str
    found: str
    expected: str
    remedy: str
    recheck: Recheck = "static"
    low: float | None = None
    high: float | None = None
    above: bool = False
    may_be_empty: bool = False
    test: str = ""
    tally: str = ""
    typed: str = ""


class Faults:
    """The list of problems as it grows.

    Places are (row, column) of a sheet, or None for a whole sheet or file.
    """

    def __init__(self) -> None:
        self._groups: dict[tuple[str, str, str, str, str], list[tuple[Place | None, Problem]]] = {}
        self._bulk: dict[tuple[str, str, str, str, str], list[Place]] = {}

    def add(self, sheet: str, place: Place | None, title: str, fault: Fault, *, severity: Severity = "error",
            group: str = "") -> None:
        """Add one fault; faults of one kind, sheet, title and ``group`` belong together."""
        key = (severity, fault.kind, sheet, title, group)
        entries = self._groups.setdefault(key, [])
        if len(entries) <= FEW or place is None:
            entries.append((place, Problem(
                severity, fault.kind, sheet, address(*place) if place else "", title, fault.found, fault.expected,
                fault.remedy, recheck=fault.recheck, low=fault.low, high=fault.high, above=fault.above,
                may_be_empty=fault.may_be_empty, test=fault.test, tally=fault.tally, typed=fault.typed)))
        if place is not None:
            self._bulk.setdefault(key, []).append(place)

    def many(self, sheet: str, places: Sequence[Place], title: str, describe: Callable[[int], Fault], *,
             severity: Severity = "error", group: str = "") -> None:
        """Add faults of one kind at many places; ``describe`` gives the fault at the i-th place."""
        if not places:
            return
        for number in range(min(len(places), FEW + 1)):
            self.add(sheet, places[number], title, describe(number), severity=severity, group=group)
        key = (severity, describe(0).kind, sheet, title, group)
        self._bulk[key].extend(places[FEW + 1:])

    def notice(self, sheet: str, place: Place | None, title: str, kind: str, found: str, expected: str,
               remedy: str) -> None:
        """Add a notice."""
        self.add(sheet, place, title, Fault(kind, found, expected, remedy), severity="notice")

    @property
    def any_errors(self) -> bool:
        """Whether an error was added."""
        return any(key[0] == "error" for key in self._groups)

    def problems(self, sheet_order: Sequence[str]) -> tuple[Problem, ...]:
        """All problems: errors before notices, then by sheet as in the workbook, then by place."""
        rank = {name: number for number, name in enumerate(sheet_order)}
        ranked: list[tuple[tuple[bool, int, Place], Problem]] = []
        for key, entries in self._groups.items():
            severity, _, sheet, _, _ = key
            places = self._bulk.get(key, [])
            if len(places) > FEW:
                entries = [_gathered(entries, places)]
            late, where = severity == "notice", rank.get(sheet, -1)
            ranked.extend(((late, where, place or (0, 0)), problem) for place, problem in entries)
        ranked.sort(key=lambda pair: pair[0])
        return tuple(problem for _, problem in ranked)


def _gathered(entries: Sequence[tuple[Place | None, Problem]], places: Sequence[Place],
              ) -> tuple[Place | None, Problem]:
    """One entry for faults at many places, under the words of the first."""
    first, problem = entries[0]
    rest = [place for place in places if place != first]
    more = tuple(address(*place) for place in rest[:MOST_CELLS])
    return first, replace(problem, more=more, count=len(places))
