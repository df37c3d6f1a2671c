"""Housekeeping: left-over names, empty jobs, answers that showed up late, and what is past its keeping.

Nothing here is needed for an answer. Ages are counted on this process's own clock and in hours of
service, never by dates: a wrong clock deletes nothing.
"""

import json
import logging
import time
from collections.abc import Callable, Iterator
from contextlib import suppress
from dataclasses import dataclass, field
from pathlib import Path

from ledgersolve.service.disk import Disk
from ledgersolve.service.layout import SELFTEST, Layout, discard
from ledgersolve.service.protocol import Protocol
from ledgersolve.service.states import ANSWER, State, read_job

logger = logging.getLogger(__name__)
_DAY = 86400.0
_EMPTY_SECONDS = 60.0
_LATE_SECONDS = 90.0
_ROUND_SECONDS = 3600.0
_LOOKED_AT_AGAIN = 200
"""Newest done jobs whose payload is looked for in every round, by any process."""


@dataclass
class Keeper:
    """Keeps the private folder in order, a little at a time."""

    layout: Layout
    disk: Disk
    protocol: Protocol
    keep_days: float = 90.0
    keep_at_least: int = 200
    clock: Callable[[], float] = time.monotonic
    _empty_since: dict[str, float] = field(default_factory=dict)
    _finished: list[tuple[float, str]] = field(default_factory=list)
    _seen: dict[Path, tuple[int, float]] = field(default_factory=dict)
    _next_round: float = 0.0
    _started: float = field(init=False)
    _hours_before: float | None = None

    def __post_init__(self) -> None:
        self._started = self.clock()
        self._next_round = self._started + 60.0

    def empty(self, job: str) -> None:
        """Note a job without an input; after a minute in this state its folders are removed by rmdir."""
        since = self._empty_since.setdefault(job, self.clock())
        if self.clock() - since >= _EMPTY_SECONDS:
            del self._empty_since[job]
            self.protocol.collect(job)

    def finished(self, job: str) -> None:
        """Note a job that went to ``done``: its payload is looked for once more a while later.

        A network folder may not have shown the payload although it was there; then it is published now.
        """
        self._empty_since.pop(job, None)
        self._finished.append((self.clock() + _LATE_SECONDS, job))

    def forget(self) -> None:
        """Start all observations over, as after a share outage."""
        self._empty_since.clear()
        self._seen.clear()

    def step(self) -> None:
        """Do what is due. Raises OSError where the share does not let us."""
        now = self.clock()
        while self._finished and self._finished[0][0] <= now:
            _, job = self._finished.pop(0)
            self._publish_late(job)
        if now >= self._next_round:
            self._next_round = now + _ROUND_SECONDS
            self._sweep_names()
            self._sweep_kept()

    def _publish_late(self, job: str) -> None:
        view = read_job(self.disk, job, self.layout.done / job)
        if view is not None and view.state is State.ANSWERED:
            logger.warning("job %s: the answer had stayed behind and is returned now", job)
            self.protocol.publish(view)

    def _sweep_names(self) -> None:
        """Remove names that mean nothing once they stayed unchanged for a day of our own time."""
        now = self.clock()
        there: set[Path] = set()
        for path, changed in self._meaningless():
            there.add(path)
            known, since = self._seen.get(path, (changed, now))
            self._seen[path] = (changed, since if known == changed else now)
            if known == changed and now - since >= _DAY:
                discard(self.disk, path)
        for gone in self._seen.keys() - there:
            del self._seen[gone]

    def _meaningless(self) -> Iterator[tuple[Path, int]]:
        for folder in (self.layout.tmp, self.layout.hosts):
            for entry in self.disk.entries(folder):
                yield entry.path, entry.status.st_mtime_ns
        for folder in (self.layout.inbox, self.layout.returned):
            for name in self.disk.names(folder):
                if name.startswith(SELFTEST):
                    yield folder / name, 0

    # ---- keeping -----------------------------------------------------------------------------------

    def _sweep_kept(self) -> None:
        """Delete originals and former answers that were kept for long enough, never the newest ones."""
        hours = self._service_hours()
        first_seen = self._read_table("kept.json")
        names = self.disk.names(self.layout.done)
        for job in names[-_LOOKED_AT_AGAIN:]:
            self._publish_late(job)
        answers = [f"answers/{name}" for name in self.disk.names(self.layout.answers)]
        table = {name: first_seen.get(name, hours) for name in (*names, *answers)}
        limit = hours - 24.0 * self.keep_days
        newest = set(names[-self.keep_at_least :]) if self.keep_at_least else set()
        for name in [name for name, seen in table.items() if seen < limit and name not in newest]:
            if name.startswith("answers/"):
                discard(self.disk, self.layout.private / name)
            else:
                self._delete_done(name)
            del table[name]
        self._write_table("kept.json", table)

    def _delete_done(self, job: str) -> None:
        """Delete one done job; the only place where an original is deleted, and only a published one."""
        home = self.layout.done / job
        view = read_job(self.disk, job, home)
        if view is None or view.state not in (State.PUBLISHED, State.EMPTY):
            return
        logger.info("job %s: the original is past its keeping and is deleted", job)
        inputs = self.disk.entries(home / "in")
        others = [entry for entry in self.disk.entries(home) if not entry.is_folder]
        others.sort(key=lambda entry: entry.name == ANSWER)  # last: a half deleted job is known as one
        for entry in (*inputs, *others):
            self.disk.remove(entry.path)
        for folder in (home / "in", home):
            self.disk.remove_folder(folder)

    def _service_hours(self) -> float:
        """Hours for which this folder was served; several services at a time do not count twice."""
        stored = self._read_table("hours.json").get("hours", 0.0)
        if self._hours_before is None:
            self._hours_before = stored
        hours = max(stored, self._hours_before + (self.clock() - self._started) / 3600.0)
        self._write_table("hours.json", {"hours": hours})
        return hours

    def _read_table(self, name: str) -> dict[str, float]:
        with suppress(FileNotFoundError, ValueError, AttributeError, TypeError):
            found = json.loads(self.disk.read(self.layout.private / name, 1 << 28))
            return {str(key): float(value) for key, value in found.items()}
        return {}

    def _write_table(self, name: str, table: dict[str, float]) -> None:
        tmp = self.layout.new_tmp("table")
        self.disk.write_new(tmp, json.dumps(table).encode("ascii"))
        self.disk.replace(tmp, self.layout.private / name)
