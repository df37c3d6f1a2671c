"""A private copy of a claimed workbook: every check and every reader works on it, never on the share."""

import hashlib
import os
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from ledgersolve.service.disk import Disk
from ledgersolve.service.whole import nobody_writes


@dataclass(frozen=True)
class Snapshot:
    """The private copy; ``whole`` is False where the input is larger than was read."""

    path: Path
    sha256: str
    size: int
    whole: bool


def take_snapshot(disk: Disk, source: Path, target: Path, most_bytes: int) -> Snapshot:
    """Copy a regular file (a link, pipe or device is refused with OSError) and hash it on the way."""
    digest = hashlib.sha256()
    size = 0
    with os.fdopen(disk.open_to_read(source), "rb") as incoming, target.open("xb") as outgoing:
        while block := incoming.read(1 << 20):
            size += len(block)
            if size > most_bytes:
                return Snapshot(target, digest.hexdigest(), os.fstat(incoming.fileno()).st_size, whole=False)
            digest.update(block)
            outgoing.write(block)
    return Snapshot(target, digest.hexdigest(), size, whole=True)


def is_still(
    disk: Disk, source: Path, quiet_seconds: float, sleep: Callable[[float], None] = time.sleep
) -> Callable[[], bool]:
    """Look at a claimed input before it is copied; the result tells afterwards whether it stayed the same.

    A program may keep the file open across the claim and write on. Where the system confirms that nobody
    has it open no waiting is needed; else it must stay unchanged for the quiet time.
    """
    before = disk.status(source)
    sure = nobody_writes(disk, source)

    def stayed() -> bool:
        if not sure:
            sleep(quiet_seconds)
        now = disk.status(source)
        same = before.st_size == now.st_size and before.st_mtime_ns == now.st_mtime_ns
        return same and before.st_ino == now.st_ino and (not sure or nobody_writes(disk, source))

    return stayed
