"""When nothing new is started: the PAUSE file and the quiet hours. What runs ends as usual."""

from collections.abc import Sequence
from datetime import datetime, timedelta
from pathlib import Path
from zoneinfo import ZoneInfo

from ledgersolve.service.config import parse_window
from ledgersolve.service.disk import Disk

_PAUSE_NAMES = ("pause", "pause.txt")


def is_paused(disk: Disk, folder: Path) -> bool:
    """Whether the operator put a file PAUSE (or PAUSE.txt) into the served folder."""
    return any(name.lower() in _PAUSE_NAMES for name in disk.names(folder))


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
