"""Every call the protocol makes on the served folder, one method each: tests make each of them fail."""

import errno
import os
import shutil
import stat
from collections.abc import Callable
from dataclasses import dataclass
from io import BytesIO
from pathlib import Path

_NO_FOLLOW = getattr(os, "O_NOFOLLOW", 0)
_NO_BLOCK = getattr(os, "O_NONBLOCK", 0)
_BINARY = getattr(os, "O_BINARY", 0)
_READ = os.O_RDONLY | _NO_FOLLOW | _NO_BLOCK | _BINARY | getattr(os, "O_CLOEXEC", 0)
_CREATE = os.O_WRONLY | os.O_CREAT | os.O_EXCL | _NO_FOLLOW | _BINARY | getattr(os, "O_CLOEXEC", 0)
_NO_SYNC_HERE = {errno.EINVAL, errno.ENOTSUP, errno.EOPNOTSUPP, errno.ENOSYS}
_UMASK = os.umask(0o077)  # can only be read by setting it: done once, before there are threads
os.umask(_UMASK)


@dataclass(frozen=True)
class Entry:
    """One name in a folder with its own (never followed) status."""

    path: Path
    status: os.stat_result

    @property
    def name(self) -> str:
        """The name as it stands on the disk."""
        return self.path.name

    @property
    def is_file(self) -> bool:
        """Whether it is a regular file (links, pipes and devices are not)."""
        return stat.S_ISREG(self.status.st_mode)

    @property
    def is_folder(self) -> bool:
        """Whether it is a folder itself, not a link to one."""
        return stat.S_ISDIR(self.status.st_mode)


class Disk:
    """The served folder's file system. Every method raises OSError as the system gives it.

    The methods of the first group look, those of the second change something. None of them follows a
    symbolic link in the last part of a path.
    """

    def names(self, folder: Path) -> list[str]:
        """Names in a folder by a fresh listing, sorted."""
        return sorted(path.name for path in folder.iterdir())

    def entries(self, folder: Path) -> list[Entry]:
        """Names in a folder with their status, sorted; one that vanishes meanwhile is left out."""
        found = []
        for path in sorted(folder.iterdir()):
            try:
                found.append(Entry(path, path.lstat()))
            except FileNotFoundError:
                continue
        return found

    def status(self, path: Path) -> os.stat_result:
        """Status of the name itself."""
        return path.lstat()

    def open_to_read(self, path: Path) -> int:
        """Descriptor of a regular file; anything else is refused with ELOOP, ENXIO or EINVAL."""
        descriptor = os.open(path, _READ)
        if not stat.S_ISREG(os.fstat(descriptor).st_mode):
            os.close(descriptor)
            raise OSError(errno.EINVAL, "not a regular file", str(path))
        return descriptor

    def read(self, path: Path, most: int = 1 << 20) -> bytes:
        """Content of a small regular file, at most ``most`` bytes of it."""
        descriptor = self.open_to_read(path)
        with os.fdopen(descriptor, "rb") as stream:
            return stream.read(most)

    def may_read(self, path: Path) -> bool:
        """Whether the rights of a file let this account read it."""
        return os.access(path, os.R_OK)

    def may_change(self, folder: Path) -> bool:
        """Whether the rights of a folder let this account take files out of it."""
        return os.access(folder, os.W_OK | os.X_OK)

    def free_bytes(self, folder: Path) -> int:
        """Bytes that this account may still write there."""
        return shutil.disk_usage(folder).free

    def make_folder(self, path: Path, mode: int = 0o700) -> None:
        """Create one folder; its parent must exist."""
        path.mkdir(mode)

    def remove_folder(self, path: Path) -> None:
        """Remove a folder only if it is empty: fails closed when an input is in it after all."""
        path.rmdir()

    def write_new(self, path: Path, content: bytes, mode: int = 0o600) -> None:
        """Write a file that must not exist yet, and bring it to the disk."""
        self.write_stream(path, BytesIO(content).read, mode)

    def write_stream(self, path: Path, read: Callable[[int], bytes], mode: int = 0o600) -> None:
        """The same from a source that gives blocks."""
        descriptor = os.open(path, _CREATE, mode)
        try:
            while block := read(1 << 20):
                view = memoryview(block)
                while view:
                    view = view[os.write(descriptor, view) :]
            os.fsync(descriptor)
        finally:
            os.close(descriptor)

    def refresh(self, path: Path, content: bytes) -> None:
        """Overwrite a small file in place; for signs of life only, nothing rests on it."""
        descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_TRUNC | _NO_FOLLOW | _BINARY, 0o600)
        try:
            os.write(descriptor, content)
        finally:
            os.close(descriptor)

    def rename(self, source: Path, target: Path) -> None:
        """Move a name; atomic within one file system."""
        source.rename(target)

    def replace(self, source: Path, target: Path) -> None:
        """Move a name over another one; for pages that are rewritten, never for answers."""
        source.replace(target)

    def link(self, source: Path, target: Path) -> None:
        """Second name for a file; atomic, and refused where the target exists: the put-if-absent."""
        os.link(source, target, follow_symlinks=os.link not in os.supports_follow_symlinks)

    def remove(self, path: Path) -> None:
        """Remove one name of a file."""
        path.unlink()

    def sync_file(self, path: Path) -> None:
        """Bring a file's content to the disk."""
        descriptor = self.open_to_read(path)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)

    def sync_folder(self, path: Path) -> None:
        """Bring a folder's names to the disk, where the system can (Windows and some shares cannot)."""
        if os.name == "nt":
            return
        descriptor = os.open(path, os.O_RDONLY | os.O_DIRECTORY)
        try:
            os.fsync(descriptor)
        except OSError as error:
            if error.errno not in _NO_SYNC_HERE:
                raise
        finally:
            os.close(descriptor)

    def open_up(self, path: Path, like: Path) -> None:
        """Give a file the group of the folder it goes to and that folder's rights to read and write.

        Owner and group get what the folder gives them; others may read where the folder lets them in and
        the umask does not forbid it. Never executable, never set-id.
        """
        folder = like.stat()
        others = 0o004 if folder.st_mode & 0o005 == 0o005 else 0
        path.chmod(0o600 | folder.st_mode & 0o060 | others & ~_UMASK)
        if hasattr(os, "chown"):
            try:
                os.chown(path, -1, folder.st_gid)
            except PermissionError:
                return  # not a member of that group: the folder's own rights decide
