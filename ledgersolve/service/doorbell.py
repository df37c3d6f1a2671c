"""The doorbell: file events wake the scan early. What one says is never acted on; scans are the truth."""

import logging
import math
import threading
import time
from pathlib import Path

from watchdog.events import FileSystemEvent, FileSystemEventHandler
from watchdog.observers import Observer
from watchdog.observers.api import BaseObserver
from watchdog.observers.polling import PollingObserver

logger = logging.getLogger(__name__)
_REBUILD_SECONDS, _TRY_SECONDS = 3600.0, 10.0
_REMOTE = frozenset(
    (
        "nfs", "nfs4", "cifs", "smb2", "smb3", "smbfs", "9p", "drvfs", "virtiofs", "vboxsf", "vmhgfs",
        "prl_fs", "afs", "ceph", "glusterfs", "lustre", "beegfs", "gpfs", "davfs",
    )
)
_MOUNTS = Path("/proc/self/mountinfo")


def file_system(folder: Path, mounts: Path = _MOUNTS) -> str:
    """Type of the file system that a folder is on; empty where the system does not tell."""
    try:
        lines = mounts.read_text("utf-8", "surrogateescape").splitlines()
    except OSError:
        return ""
    target = folder.resolve()
    best, kind = -1, ""
    for line in lines:
        fields = line.split(" ")
        if "-" not in fields or len(fields) < 7:
            continue
        point = Path(_unescaped(fields[4]))
        if target.is_relative_to(point) and len(point.parts) >= best:
            best, kind = len(point.parts), fields[fields.index("-") + 1]
    return kind


def _unescaped(text: str) -> str:
    """Blanks and the like stand in the table as three octal digits."""
    for code, sign in (("\\040", " "), ("\\011", "\t"), ("\\012", "\n"), ("\\134", "\\")):
        text = text.replace(code, sign)
    return text


def is_remote(folder: Path, mounts: Path = _MOUNTS) -> bool:
    """Whether other machines may write there without this one's system noticing."""
    if str(folder.absolute()).startswith(("\\\\", "//")):
        return True
    kind = file_system(folder, mounts)
    return kind in _REMOTE or kind.startswith("fuse")


class _NoErrorAtTheEnd(logging.Filter):
    """An observer that is stopped in mid-look calls that an error; it is none."""

    def filter(self, record: logging.LogRecord) -> bool:
        """Whether a record is worth a line."""
        return "thread is inactive" not in record.getMessage()


logging.getLogger("watchdog.observers.inotify").addFilter(_NoErrorAtTheEnd())


class Doorbell(FileSystemEventHandler):
    """Rings on any event below Inbox; rebuilt when it died, after an outage, and every hour.

    Parameters
    ----------
    inbox
        The folder that is watched.
    polling
        Look for changes on a timer (for network folders, whose events do not reach this machine).
    seconds
        Time between two looks of the timer.
    """

    def __init__(self, inbox: Path, *, polling: bool, seconds: float) -> None:
        super().__init__()
        self.rung = threading.Event()
        self.news = False
        self._inbox = inbox
        self._polling = polling
        self._seconds = seconds
        self._observer: BaseObserver | None = None
        self._built = -math.inf

    def on_any_event(self, event: FileSystemEvent) -> None:  # noqa: ARG002 - what it says is never acted on
        """Ring, whatever happened."""
        self.news = True
        self.rung.set()

    def keep_alive(self) -> None:
        """Build the observer anew where it is missing, dead or old; its failure costs only promptness."""
        age = time.monotonic() - self._built
        if self._observer is not None and age < _REBUILD_SECONDS and self._is_well(self._observer):
            return
        if age < _TRY_SECONDS:
            return
        self.silence()
        self._built = time.monotonic()
        observer = PollingObserver(timeout=self._seconds) if self._polling else Observer()
        try:
            observer.schedule(self, str(self._inbox), recursive=True)
            observer.start()
        except (OSError, RuntimeError) as error:
            logger.info("no file events for %s (%s); scans go on", self._inbox, error)
            return
        self._observer = observer

    def _is_well(self, observer: BaseObserver) -> bool:
        """An observer stays alive when its emitters died, so these are asked, too."""
        emitters = observer.emitters
        return observer.is_alive() and bool(emitters) and all(emitter.is_alive() for emitter in emitters)

    def wait(self, seconds: float) -> bool:
        """Sleep until somebody rings or the time is over; whether files changed meanwhile."""
        if not self.rung.wait(seconds):
            return False
        self.rung.clear()
        news, self.news = self.news, False
        return news

    def silence(self) -> None:
        """Stop observing, until somebody asks to keep it alive."""
        observer, self._observer = self._observer, None
        self._built = -math.inf
        if observer is not None:
            observer.stop()
            observer.join(5.0)
