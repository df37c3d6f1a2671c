"""Whose turn it is: round robin over owners, small work first, nobody forgotten, a place kept for small ones.

Within an owner the order is by expected work, and first come first served between equals; what waited
long goes first. There is no promise on the order across owners.
"""

import math
import time
from collections import Counter, deque
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from functools import lru_cache
from statistics import median
from typing import Any, Literal

_BYTES_PER_SECOND = 400.0
"""Expected work before anything is known: a workbook of 24 kB is taken for one minute's work."""
_REMEMBERED = 9
_SURPRISE = 10.0
"""Seconds after which a running job no longer counts as a small one."""


@dataclass(frozen=True)
class Waiting:
    """A workbook in the queue. ``item`` is whatever the caller needs to start it."""

    owner: str
    size: int
    since: float
    item: Any


@dataclass(frozen=True)
class Running:
    """A workbook being solved."""

    size: int
    expected: float
    started: float


class Estimates:
    """Expected seconds by file size, learned from the jobs that ended (classes a fifth apart)."""

    def __init__(self) -> None:
        self._ended: dict[int, deque[float]] = {}
        self._known: dict[int, float] = {}

    def learn(self, size: int, seconds: float) -> None:
        """Take in a job that ended."""
        self._ended.setdefault(size_class(size), deque(maxlen=_REMEMBERED)).append(seconds)
        self._known.clear()

    def expected(self, size: int) -> float:
        """Median of the jobs of this size, of the nearest size known, or a guess from the size alone."""
        middle = size_class(size)
        if middle not in self._known:
            near = (self._ended.get(middle + step) for step in (0, -1, 1, -2, 2))
            ended = next(filter(None, near), None)
            self._known[middle] = median(ended) if ended else math.inf
        known = self._known[middle]
        return known if known < math.inf else max(1.0, size / _BYTES_PER_SECOND)


@lru_cache(maxsize=4096)
def size_class(size: int) -> int:
    """Quarter powers of two."""
    return round(4.0 * math.log2(max(1, size)))


@dataclass
class Turns:
    """The order between owners, kept from scan to scan."""

    estimates: Estimates = field(default_factory=Estimates)
    small_seconds: float = 60.0
    age_seconds: float = 900.0
    clock: Callable[[], float] = time.monotonic
    _served: Counter[str] = field(default_factory=Counter)
    _count: int = 0

    def line_up(self, waiting: Iterable[Waiting]) -> "Line":
        """Queue up what waits now; taking n from the line costs O(n log n) in all."""
        return Line(self, list(waiting))

    def note_served(self, owner: str) -> None:
        """It was this owner's turn."""
        self._count += 1
        self._served[owner] = self._count

    def last_turn(self, owner: str) -> int:
        """Number of the owner's last turn, 0 for one who had none."""
        return self._served[owner]

    def places(self, running: list[Running], workers: int) -> Literal["any", "small", "none"]:
        """What may be started now beside what runs.

        Every place takes any work. Where all are taken by work that is long, or turned out to be, one more
        is open to a small one: at most workers + 1 run, and no small one waits for fifty long ones.
        """
        if len(running) < workers:
            return "any"
        now = self.clock()
        slow = sum(1 for job in running if job.expected > self.small_seconds or now - job.started > _SURPRISE)
        return "small" if len(running) == workers and slow >= workers else "none"

    def is_small(self, size: int, running: list[Running]) -> bool:
        """Whether work is expected to be small; what runs long now speaks against its own size."""
        if self.estimates.expected(size) > self.small_seconds:
            return False
        now = self.clock()
        return not any(
            size_class(job.size) == size_class(size) and now - job.started > _SURPRISE for job in running
        )


class Line:
    """What waits, in order, until the next scan."""

    def __init__(self, turns: Turns, waiting: list[Waiting]) -> None:
        self._turns = turns
        oldest = turns.clock() - turns.age_seconds
        self._aged: dict[str, deque[Waiting]] = {}
        self._fresh: dict[str, deque[Waiting]] = {}
        for one in sorted(waiting, key=lambda one: one.since):
            if one.since < oldest:
                self._aged.setdefault(one.owner, deque()).append(one)
        for one in sorted(waiting, key=lambda one: (turns.estimates.expected(one.size), one.since)):
            if one.since >= oldest:
                self._fresh.setdefault(one.owner, deque()).append(one)

    def __len__(self) -> int:
        return sum(map(len, self._aged.values())) + sum(map(len, self._fresh.values()))

    def take(self, running: list[Running], *, small_only: bool = False) -> Waiting | None:
        """The next one, or None where nothing (small) waits."""
        owners = sorted({*self._aged, *self._fresh}, key=lambda owner: (self._turns.last_turn(owner), owner))
        for owner in owners:
            for lines in (self._aged, self._fresh):
                line = lines.get(owner)
                if not line:
                    continue
                chosen = self._first_small(line, running) if small_only else line[0]
                if chosen is None:
                    continue
                line.remove(chosen)
                if not line:
                    del lines[owner]
                self._turns.note_served(owner)
                return chosen
        return None

    def _first_small(self, line: deque[Waiting], running: list[Running]) -> Waiting | None:
        verdicts: dict[int, bool] = {}
        for one in line:
            size = size_class(one.size)
            if size not in verdicts:
                verdicts[size] = self._turns.is_small(one.size, running)
            if verdicts[size]:
                return one
        return None

    def in_order(self) -> list[Waiting]:
        """Everything that waits in the order it would go, for the status page."""
        rest = {
            owner: deque([*self._aged.get(owner, ()), *self._fresh.get(owner, ())])
            for owner in {*self._aged, *self._fresh}
        }
        order = []
        owners = deque(sorted(rest, key=lambda owner: (self._turns.last_turn(owner), owner)))
        while owners:
            owner = owners.popleft()
            if rest[owner]:
                order.append(rest[owner].popleft())
                owners.append(owner)
        return order
