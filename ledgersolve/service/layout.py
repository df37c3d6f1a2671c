"""The served folder: where everything stands, its mark, and what must hold before it may be served.

::

    FOLDER/
      Inbox/          analysts drop here; sub-folders are queues of teams
      Returned/       exactly one file a drop comes back here
      Status.html     status.json      PAUSE (made by the operator)
      .ledgersolve/   share-id  jobs/  done/  tmp/  hosts/  answers/
"""

import errno
import os
import secrets
import uuid
from dataclasses import dataclass
from pathlib import Path

from ledgersolve.service.disk import Disk

PRIVATE_NAME = ".ledgersolve"
SELFTEST = ".ledgersolve-selftest-"


class ShareError(OSError):
    """The folder is not (or no longer) the one that was served: nothing may be inferred or changed."""


class UnfitFolderError(Exception):
    """The folder cannot be served at all; the text says why and what to do."""


@dataclass(frozen=True)
class Layout:
    """Paths under a served folder."""

    folder: Path

    @property
    def inbox(self) -> Path:
        """Where analysts drop."""
        return self.folder / "Inbox"

    @property
    def returned(self) -> Path:
        """Where the one returned file of each drop appears."""
        return self.folder / "Returned"

    @property
    def private(self) -> Path:
        """The service's own folder; on the same file system as the other two."""
        return self.folder / PRIVATE_NAME

    @property
    def share_id(self) -> Path:
        """The mark of this share."""
        return self.private / "share-id"

    @property
    def jobs(self) -> Path:
        """One folder for each claimed drop that is not done."""
        return self.private / "jobs"

    @property
    def done(self) -> Path:
        """One folder for each answered and published drop, with the original input."""
        return self.private / "done"

    @property
    def tmp(self) -> Path:
        """Files that are being written; nothing here means anything."""
        return self.private / "tmp"

    @property
    def hosts(self) -> Path:
        """One sign of life for each watch process."""
        return self.private / "hosts"

    @property
    def answers(self) -> Path:
        """Former answers by input, so that the same workbook gets the same answer."""
        return self.private / "answers"

    def new_tmp(self, purpose: str) -> Path:
        """A name in ``tmp`` that nobody else uses."""
        return self.tmp / f"{purpose}-{os.getpid()}-{secrets.token_hex(8)}"


def put_if_absent(disk: Disk, layout: Layout, target: Path, content: bytes) -> bool:
    """Create ``target`` with its whole content at once, unless it exists; True if ours is the one there.

    The link may have worked although an error came back (a lost reply), so the error is not believed:
    what stands at the target decides.
    """
    tmp = layout.new_tmp("put")
    try:
        disk.write_new(tmp, content)
        try:
            disk.link(tmp, target)
        except OSError:
            if target.name not in disk.names(target.parent):
                raise
        return disk.read(target) == content
    finally:
        discard(disk, tmp)


def discard(disk: Disk, tmp: Path) -> None:
    """Remove a file that means nothing; one that stays is collected a day later."""
    try:
        disk.remove(tmp)
    except OSError:
        return


def prepare(folder: Path, disk: Disk, expected: str = "") -> str:
    """Lay out a folder on first use and return its mark.

    The folder itself is never created, and nothing is created where ``expected`` names a mark that is
    not there: an unmounted share is an empty local folder.

    Raises
    ------
    UnfitFolderError
        The folder does not exist or is no folder.
    ShareError
        The mark is not the expected one.
    """
    layout = Layout(folder)
    if not folder.is_dir():
        raise UnfitFolderError(f"{folder} is not a folder. Create it, or mount the share, and start again.")
    if expected:
        guard(layout, disk, expected)
    for path, mode in ((layout.private, 0o700), (layout.inbox, 0o775), (layout.returned, 0o775)):
        _make(disk, path, mode)
    for path in (layout.jobs, layout.done, layout.tmp, layout.hosts, layout.answers):
        _make(disk, path, 0o700)
    if layout.share_id.name not in disk.names(layout.private):
        put_if_absent(disk, layout, layout.share_id, f"{uuid.uuid4()}\n".encode())
        disk.sync_folder(layout.private)
    return read_mark(layout, disk)


def _make(disk: Disk, path: Path, mode: int) -> None:
    try:
        disk.make_folder(path, mode)
    except OSError:
        if not path.is_dir():
            raise
        return
    disk.sync_folder(path.parent)


def read_mark(layout: Layout, disk: Disk) -> str:
    """The mark that stands on the share now."""
    try:
        return disk.read(layout.share_id, 200).decode("ascii", "replace").strip()
    except OSError as error:
        reason = f"the share's mark cannot be read ({error.strerror})"
        raise ShareError(error.errno or errno.EIO, reason) from error


def guard(layout: Layout, disk: Disk, mark: str) -> None:
    """Make sure that this is still the share that was seen at the start.

    Raises
    ------
    ShareError
        Otherwise; then nobody may claim, collect, create or take anything for absent.
    """
    found = read_mark(layout, disk)
    if found != mark:
        reason = f"another share stands at this path (mark {found!r} instead of {mark!r})"
        raise ShareError(errno.ESTALE, reason)


def self_test(layout: Layout, disk: Disk) -> None:
    """Try on the real folders what the protocol rests on.

    Raises
    ------
    UnfitFolderError
        Inbox, Returned and the private folder are not on one file system, or it has no hard links.
    """
    devices = {path.stat().st_dev for path in (layout.inbox, layout.returned, layout.jobs, layout.done)}
    apart = (
        "Inbox, Returned and .ledgersolve must be on the same file system, because a workbook is handed on "
        "by renaming it. Move them into one share (no link, no mount below the served folder)."
    )
    if len(devices) > 1:
        raise UnfitFolderError(apart)
    first, second = layout.new_tmp("test"), layout.new_tmp("test")
    disk.write_new(first, b"")
    label = f"{SELFTEST}{first.name}"
    places = [first, second, layout.inbox / label, layout.returned / label]
    try:
        _try_links(disk, first, second)
        for source, target in ((first, places[2]), (places[2], places[3]), (places[3], first)):
            disk.rename(source, target)
    except OSError as error:
        if error.errno == errno.EXDEV:
            raise UnfitFolderError(apart) from error
        raise
    finally:
        for place in places:
            discard(disk, place)


def _try_links(disk: Disk, first: Path, second: Path) -> None:
    try:
        disk.link(first, second)
    except OSError as error:
        if error.errno in (errno.EPERM, errno.ENOTSUP, errno.EOPNOTSUPP, errno.ENOSYS, errno.EMLINK):
            raise UnfitFolderError(
                "The file system of this folder has no hard links (FAT and some network shares have none). "
                "Use a folder on NTFS, ext4, XFS, NFS or an SMB share of such a disk."
            ) from error
        raise
    try:
        disk.link(first, second)
    except FileExistsError:
        return
    raise UnfitFolderError(
        "The file system of this folder lets a link replace an existing file, so two answers to one workbook "
        "could not be told apart. Use a folder on another file system."
    )
