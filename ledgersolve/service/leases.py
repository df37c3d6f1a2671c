"""Whether the holder of a lease still lives. Leases save work; nothing rests on them."""

import json
import time
from collections.abc import Callable

from ledgersolve.service.disk import Disk
from ledgersolve.service.holder import is_gone
from ledgersolve.service.states import JobView


class LeaseWatch:
    """Whether a holder of a lease still lives, judged on this process's monotonic clock alone.

    A lease counts as left behind once its beat has not changed for ``patience`` seconds since *we* first
    looked, or its holder is a process of this machine that runs no more. ``forget`` starts all over, as
    after a share outage.
    """

    def __init__(
        self, disk: Disk, patience: float, clock: Callable[[], float] = time.monotonic
    ) -> None:
        self._disk = disk
        self._patience = patience
        self._clock = clock
        self._seen: dict[str, tuple[int, bytes, float]] = {}

    def left_behind(self, view: JobView) -> bool:
        """Whether the job's newest lease may be taken over."""
        if view.generation == 0 or view.lease_ended:
            return True
        try:
            beat = self._disk.read(view.home / f"beat.{view.generation}")
        except FileNotFoundError:
            beat = b""
        generation, known, since = self._seen.get(view.job, (0, b"", 0.0))
        if (generation, known) != (view.generation, beat):
            self._seen[view.job] = (view.generation, beat, self._clock())
            return self._patience <= 0 or (generation != view.generation and self._holder_is_gone(view))
        return self._clock() - since >= self._patience

    def _holder_is_gone(self, view: JobView) -> bool:
        try:
            words = json.loads(self._disk.read(view.home / f"lease.{view.generation}"))
        except (OSError, ValueError):
            return False
        return isinstance(words, dict) and is_gone(words)

    def forget(self) -> None:
        """Start all observations over."""
        self._seen.clear()

    def forget_others(self, jobs: set[str]) -> None:
        """Keep in mind only the jobs that are still there."""
        self._seen = {job: seen for job, seen in self._seen.items() if job in jobs}
