"""When a drop may be taken: complete, quiet, and not open elsewhere.

Judged on this process's monotonic clock and by looking again, never by a file's own dates: copies keep
the date of their original. There is no last try: what is not ready now is looked at again.
"""

import errno
import math
import os
import stat
import sys
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace
from functools import lru_cache, partial
from pathlib import Path

from ledgersolve.service.disk import Disk, Entry
from ledgersolve.service.names import is_temporary, owner_marks, show
from ledgersolve.service.whole import Shape, nobody_writes, shape

if sys.platform != "win32":
    import pwd

DEEPEST = 8
"""Levels of sub-folders below Inbox that are served."""
_FIRST_WAIT, _LONGEST_WAIT = 2.0, 300.0
ALERT_AFTER = 3
"""Refusals in a row after which the administrator is told."""
_REMEDY = "its group needs the right to read, write and enter it (chmod g+rwx), see ADMINISTRATION.md"
_UNREADABLE = "the service may not read this file; its group needs the right to (chmod g+r)"
Signature = tuple[int, int, int, int, int]


@dataclass(frozen=True)
class Patience:
    """How long to wait, in seconds; see ``ServiceSettings``."""

    quiet: float = 2.0
    sure_quiet: float = 0.3
    long_quiet: float = 120.0
    open_elsewhere: float = 900.0


@dataclass(frozen=True)
class Drop:
    """A file in Inbox as one look found it. ``why`` says, in the analyst's words, what it waits for."""

    path: Path
    owner: str
    size: int
    since: float
    ready: bool
    why: str = ""
    alert: bool = False
    blocked: bool = False
    look_in: float = math.inf
    """Seconds after which another look may find it ready; inf where only a change can tell."""

    @property
    def name(self) -> str:
        """The name as it stands on the disk."""
        return self.path.name


@dataclass
class _Watched:
    """What this process knows of one file."""

    signature: Signature
    unchanged_since: float
    first_seen: float
    readable: bool = True
    shape: Shape | None = None
    trouble: str = ""
    refusals: int = 0
    next_try: float = 0.0


@dataclass
class Settler:
    """Looks at Inbox again and again and says which drops may be claimed."""

    disk: Disk
    inbox: Path
    patience: Patience = field(default_factory=Patience)
    clock: Callable[[], float] = time.monotonic
    sure: bool = True
    """Whether the system's word that nobody writes to a file may be taken (never on network folders)."""
    _unlisted: list[Drop] = field(default_factory=list)
    _watched: dict[Path, _Watched] = field(default_factory=dict)
    _marks: dict[Path, tuple[Signature, float]] = field(default_factory=dict)

    def look(self) -> list[Drop]:
        """One look at the whole Inbox. Temporary names are passed over in silence."""
        drops = []
        seen: set[Path] = set()
        for folder, owner, entries in self._folders(self.inbox, "", 0):
            marks = self._marks_in(folder, entries)
            shut = "" if self.disk.may_change(folder) else self._shut_words(folder)
            for entry in entries:
                if is_temporary(entry.name) or (entry.is_folder and not self._is_strange(entry)):
                    continue
                seen.add(entry.path)
                drops.append(self._judge(entry, owner or account(entry.status), marks, shut))
        drops += self._unlisted
        for gone in self._watched.keys() - seen:
            del self._watched[gone]
        return drops

    def _folders(self, folder: Path, owner: str, depth: int) -> Iterator[tuple[Path, str, list[Entry]]]:
        """Inbox and its sub-folders with what is in them; those that cannot be listed are noted."""
        if depth == 0:
            self._unlisted = []
        entries = self.disk.entries(folder)
        yield folder, owner, entries
        for entry in entries:
            if entry.is_folder and not is_temporary(entry.name) and depth < DEEPEST:
                try:
                    yield from self._folders(entry.path, owner or entry.name, depth + 1)
                except (FileNotFoundError, NotADirectoryError):
                    continue  # gone again
                except PermissionError:
                    why = f"the service may not look into this sub-folder; {_REMEDY}"
                    shown = owner or entry.name
                    self._unlisted.append(
                        Drop(entry.path, shown, 0, self.clock(), False, why, alert=True, blocked=True)
                    )

    def _shut_words(self, folder: Path) -> str:
        place = "Inbox" if folder == self.inbox else f"the sub-folder {show(str(folder.relative_to(self.inbox)))}"
        return f"the service may not take files out of {place}; {_REMEDY}"

    def refused(self, path: Path, error: OSError) -> int:
        """Note that a drop could not be moved; it is tried again after 2 s, 4 s, ... up to 5 minutes.

        Returns how many times that happened.
        """
        watched = self._watched.get(path)
        if watched is None:
            return 0
        wait = min(_LONGEST_WAIT, _FIRST_WAIT * 2.0 ** min(watched.refusals, 20))
        watched.refusals += 1
        watched.next_try = self.clock() + wait
        watched.trouble = _refusal_words(error)
        return watched.refusals

    def forget(self) -> None:
        """Start all observations over, as after a share outage."""
        self._watched.clear()
        self._marks.clear()

    def _is_strange(self, folder: Entry) -> bool:
        """Whether a folder is worth a word: too deep to be walked, or called like a workbook."""
        too_deep = len(folder.path.relative_to(self.inbox).parts) > DEEPEST
        return too_deep or folder.name.lower().endswith((".xlsx", ".xlsm"))

    def _marks_in(self, folder: Path, entries: list[Entry]) -> dict[str, float]:
        """Names that a spreadsheet program marks as open, with the time since the mark last changed."""
        marks = {}
        now = self.clock()
        for entry in entries:
            if not entry.name.startswith(("~$", ".~lock.")):
                continue
            signature = _signature(entry)
            known, since = self._marks.get(entry.path, (None, now))
            if known != signature:
                since = now
                self._marks[entry.path] = (signature, now)
            marks[entry.name] = now - since
        for path in [path for path in self._marks if path.parent == folder and path.name not in marks]:
            del self._marks[path]
        return marks

    def _known(self, entry: Entry, now: float) -> _Watched:
        """What is known of a file; all anew where it changed."""
        signature = _signature(entry)
        watched = self._watched.get(entry.path)
        if watched is None or watched.signature != signature:
            first = now if watched is None else watched.first_seen
            readable = not entry.is_file or self.disk.may_read(entry.path)
            watched = _Watched(signature, now, first, readable)
            self._watched[entry.path] = watched
        return watched

    def _judge(self, entry: Entry, owner: str, marks: dict[str, float], shut: str) -> Drop:
        """One drop. What rights say is only told: the rename is the test, and it is tried all the same."""
        watched = self._known(entry, self.clock())
        drop = self._judge_file(entry, owner, marks, watched)
        warning = shut or ("" if watched.readable else _UNREADABLE)
        if not warning or not entry.is_file:
            return drop
        # a copy program may give a file its rights last, so that is told once it stays so
        stays = self.clock() - watched.unchanged_since >= self.patience.quiet
        tried = watched.refusals > 0 and not drop.ready
        return replace(drop, why=warning, alert=bool(shut) or stays, blocked=tried)

    def _judge_file(self, entry: Entry, owner: str, marks: dict[str, float], watched: _Watched) -> Drop:
        now = self.clock()
        found = partial(Drop, entry.path, owner, entry.status.st_size, watched.first_seen)
        if not entry.is_file:
            return found(False, f"{_kind_words(entry)}; it is never read", alert=True, blocked=True)
        if now < watched.next_try:
            return _held_back(found, watched, now)
        for mark in owner_marks(entry.name):
            if marks.get(mark, self.patience.open_elsewhere) < self.patience.open_elsewhere:
                return found(False, "open in a spreadsheet program", blocked=True)
        quiet = now - watched.unchanged_since
        shortest = min(self.patience.quiet, self.patience.sure_quiet)
        if quiet < shortest:
            return found(False, "still being copied", look_in=shortest - quiet)
        try:
            return self._judge_content(entry, watched, quiet, found)
        except FileNotFoundError:
            return found(False, "gone again")
        except OSError as error:
            self.refused(entry.path, error)
            return _held_back(found, watched, now)

    def _judge_content(
        self, entry: Entry, watched: _Watched, quiet: float, found: Callable[..., Drop]
    ) -> Drop:
        if watched.shape is None:
            watched.shape = shape(self.disk, entry.path, entry.status.st_size)
        if watched.shape is Shape.PARTIAL:
            left = self.patience.long_quiet - quiet
            if left <= 0:
                return found(True, watched.trouble, alert=watched.refusals >= ALERT_AFTER)
            what = "empty so far" if entry.status.st_size == 0 else "not complete yet"
            return found(False, f"{what}; returned as damaged if nothing comes in {left:.0f} s", look_in=left)
        left = self.patience.quiet - quiet
        if left <= 0 or (self.sure and nobody_writes(self.disk, entry.path)):
            return found(True, watched.trouble, alert=watched.refusals >= ALERT_AFTER)
        return found(False, "still being copied", look_in=left)


def _held_back(found: Callable[..., Drop], watched: _Watched, now: float) -> Drop:
    """A drop that could not be read or moved, until its next try."""
    alert = watched.refusals >= ALERT_AFTER
    return found(False, watched.trouble, alert=alert, blocked=alert, look_in=watched.next_try - now)


def account(status: os.stat_result) -> str:
    """Who put a file into Inbox itself, as a name for the queue and the page."""
    return "Inbox" if sys.platform == "win32" else _account(status.st_uid)


@lru_cache(maxsize=4096)
def _account(number: int) -> str:
    """The account's name where this machine knows it; asked once, because a directory service may be slow."""
    try:
        return f"account {pwd.getpwuid(number).pw_name}"
    except KeyError:
        return f"account {number}"


def _signature(entry: Entry) -> Signature:
    status = entry.status
    return (status.st_size, status.st_mtime_ns, status.st_ctime_ns, status.st_ino, status.st_dev)


def _kind_words(entry: Entry) -> str:
    mode = entry.status.st_mode
    if stat.S_ISLNK(mode):
        return "a link, not a file"
    if stat.S_ISDIR(mode):
        return "a folder named like a workbook, or too deep inside other folders"
    return "a device or pipe, not a file"


def _refusal_words(error: OSError) -> str:
    if error.errno in (errno.EACCES, errno.EPERM, errno.EROFS):
        return (
            "cannot be read or moved by the service: it is open elsewhere, or the rights of the file or of its "
            "folder do not allow it"
        )
    if error.errno in (errno.EBUSY, errno.ETXTBSY):
        return "open in another program"
    if error.errno in (errno.ENOSPC, errno.EDQUOT):
        return "the disk is full"
    return f"cannot be taken now ({error.strerror or error})"
