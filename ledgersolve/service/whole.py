"""Whether a file is all there: what its first and last bytes say, and whether anybody still writes to it."""

import os
import signal
import struct
import sys
from enum import StrEnum
from pathlib import Path

from ledgersolve.service.disk import Disk

if sys.platform != "win32":
    import fcntl

_END = b"PK\x05\x06"
_END_64, _LOCATOR_64 = b"PK\x06\x06", b"PK\x06\x07"
_END_SIZE = 22
_TAIL = _END_SIZE + 65535


class Shape(StrEnum):
    """What the bytes of a file look like."""

    COMPLETE = "complete"  # a package from its first to its last byte
    PARTIAL = "partial"  # may be a package that is still being copied
    FOREIGN = "foreign"  # something else: no waiting makes it a workbook


def shape(disk: Disk, path: Path, size: int) -> Shape:
    """Judge a file by its ends, strictly.

    A package starts with a member, its central directory ends exactly where the end record starts, and
    the end record ends exactly at the end of the file. No proper prefix of a package and no preallocated
    copy passes, also where a whole workbook is stored inside it.
    """
    if size == 0:
        return Shape.PARTIAL
    descriptor = disk.open_to_read(path)
    with os.fdopen(descriptor, "rb") as stream:
        start = stream.read(4)
        stream.seek(max(0, size - _TAIL))
        tail = stream.read(_TAIL)
    if start != b"PK\x03\x04":
        blank = start.strip(b"\0") == b"" or b"PK\x03\x04".startswith(start)
        return Shape.PARTIAL if blank else Shape.FOREIGN
    return Shape.COMPLETE if _ends_whole(tail, size) else Shape.PARTIAL


def _ends_whole(tail: bytes, size: int) -> bool:
    position = tail.rfind(_END)
    while position >= 0:
        record = tail[position : position + _END_SIZE]
        if len(record) == _END_SIZE:
            length, offset, comment = struct.unpack("<IIH", record[12:22])
            if position + _END_SIZE + comment == len(tail):
                before = tail[:position]
                end = size - len(tail) + position
                return offset + length == end or _ends_whole_64(before, end)
        position = tail.rfind(_END, 0, position)
    return False


def _ends_whole_64(before: bytes, end: int) -> bool:
    """The same for the 64-bit form: directory, 64-bit end record, its locator, end record."""
    locator, record = before[-20:], before[-76:-20]
    if not (locator.startswith(_LOCATOR_64) and record.startswith(_END_64) and len(record) == 56):
        return False
    length, offset = struct.unpack("<QQ", record[40:56])
    return bool(offset + length == end - 76)


def nobody_writes(disk: Disk, path: Path) -> bool:
    """Whether the system confirms that no process has the file open for writing.

    Asks for a read lease, which Linux grants on local files of the own account (or with the right to
    lease) only while there is no writer. False means that it could not be confirmed.
    """
    if not sys.platform.startswith("linux"):
        return False
    try:
        descriptor = disk.open_to_read(path)
    except OSError:
        return False
    try:
        # a writer that comes while the lease is held makes the system send this signal: one that is ignored
        fcntl.fcntl(descriptor, _SET_SIGNAL, signal.SIGURG)
        fcntl.fcntl(descriptor, fcntl.F_SETLEASE, fcntl.F_RDLCK)
        fcntl.fcntl(descriptor, fcntl.F_SETLEASE, fcntl.F_UNLCK)
    except OSError:
        return False
    finally:
        os.close(descriptor)
    return True


_SET_SIGNAL = 10  # F_SETSIG of Linux, which the module does not name
