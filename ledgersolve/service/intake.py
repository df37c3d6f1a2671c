"""When nothing new is started: PAUSE, quiet hours, no space, no way back. What runs ends as usual."""

import math
import tempfile
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta
from pathlib import Path
from zoneinfo import ZoneInfo

from ledgersolve.service.config import parse_window
from ledgersolve.service.disk import Disk
from ledgersolve.service.layout import SELFTEST, Layout, discard

_PAUSE_NAMES = ("pause", "pause.txt")
_PROBE_SECONDS = 60.0
_PROBE_BYTES = 1 << 16
_MEGABYTE = 1 << 20


@dataclass
class Intake:
    """Whether new work may be started now, and why not, in words for the status page."""

    layout: Layout
    disk: Disk
    free_bytes: int = 500 << 20
    quiet_hours: tuple[str, ...] = ()
    time_zone: str = ""
    private_root: Path | None = None
    """Where jobs of this machine work; not looked at where None."""
    clock: Callable[[], float] = time.monotonic
    _next_probe: float = -math.inf
    _trouble: str = ""

    def state(self, *, doubts: bool = False) -> tuple[str, str]:
        """``at work``, or ``paused``, ``quiet hours`` or ``held`` with the reason.

        ``doubts``: a job met trouble with folders, so they are tried now and not when the minute is over.
        """
        if doubts:
            self._next_probe = -math.inf
        pause = pause_file(self.disk, self.layout.folder)
        if pause:
            return "paused", f"There is a file {pause} in the folder; remove it to go on."
        until = quiet_until(self.quiet_hours, local_now(self.time_zone))
        if until is not None:
            return "quiet hours", f"Nothing new is started before {until:%Y-%m-%d %H:%M}."
        if not self.has_space(0):
            need = self.free_bytes / _MEGABYTE
            return "held", f"The disk has less than {need:,.0f} MB free; nothing new is taken in."
        trouble = self._probe()
        return ("held", trouble) if trouble else ("at work", "")

    def has_space(self, size: int) -> bool:
        """Whether the floor holds and there is room for an input of this size and all that comes of it."""
        return self.disk.free_bytes(self.layout.private) >= max(self.free_bytes, 5 * size)

    def _probe(self) -> str:
        """Whether Returned and the jobs' folder take files: tried once a minute, at each look while they do not."""
        now = self.clock()
        if now >= self._next_probe or self._trouble:
            self._next_probe = now + _PROBE_SECONDS
            probe = self.layout.returned / f"{SELFTEST}{self.layout.new_tmp('probe').name}"
            self._trouble = ""
            try:
                self.disk.write_new(probe, b"")
            except OSError as error:
                self._trouble = f"Returned takes no files ({error.strerror}); nothing new is taken in."
            discard(self.disk, probe)
            if self.private_root is not None and not self._trouble:
                self._trouble = private_trouble(self.private_root)
        return self._trouble


def private_trouble(root: Path) -> str:
    """Why jobs cannot work in a folder of this machine; empty where they can."""
    try:
        with tempfile.TemporaryFile(dir=root) as probe:
            probe.write(bytes(_PROBE_BYTES))
    except OSError as error:
        return (
            f"Jobs cannot work in {root} ({error.strerror or error}). Make that folder one that the service may "
            "write to, or name another one in the setting private_folder."
        )
    return ""


def pause_file(disk: Disk, folder: Path) -> str:
    """Name of the file PAUSE (or PAUSE.txt) that the operator put into the served folder; empty where none is."""
    return next((name for name in disk.names(folder) if name.lower() in _PAUSE_NAMES), "")


def quiet_until(windows: Sequence[str], now: datetime) -> datetime | None:
    """End of the quiet window that holds now, or None.

    ``now`` carries the time zone of the windows; ends are local times of that zone, also over a change of
    the clocks.
    """
    latest: datetime | None = None
    for window in windows:
        days, start, end = parse_window(window)
        for day in (now.date() - timedelta(days=1), now.date()):
            if day.weekday() not in days:
                continue
            over = timedelta(days=1) if end <= start else timedelta(0)
            begins = datetime.combine(day, start, now.tzinfo)
            ends = datetime.combine(day + over, end, now.tzinfo)
            if begins <= now < ends and (latest is None or ends > latest):
                latest = ends
    return latest


def local_now(time_zone: str) -> datetime:
    """Now, in the named zone or the machine's own."""
    return datetime.now(ZoneInfo(time_zone)) if time_zone else datetime.now().astimezone()
