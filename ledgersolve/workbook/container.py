"""The zip file under a workbook, read strictly: its directory is the only truth, and it must fit exactly.

The standard library's reader is lenient on purpose (bytes before and behind, doubled names, overlapping
members, names cut at a NUL); a service that hands files back must not be. Members are inflated in
pieces with their declared size and checksum enforced, or handed on as the compressed bytes they are.
"""

import os
import stat
import struct
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import BinaryIO, Self

from ledgersolve.workbook.refusals import refusal

STORED, DEFLATED = 0, 8
END, END64, LOCATOR64 = b"PK\x05\x06", b"PK\x06\x06", b"PK\x06\x07"
CENTRAL, LOCAL = b"PK\x01\x02", b"PK\x03\x04"
PIECE = 1 << 16
UTF8, ENCRYPTED, STREAMED = 0x800, 0x1 | 0x40 | 0x2000, 0x8


@dataclass(frozen=True)
class Limits:
    """What a file may hold before anything of it is parsed.

    Sizes in bytes. ``ratio`` is inflated to compressed size of a member, looked at only above
    ``ratio_floor`` (XML) or ``picture_floor`` (all else: pictures of one colour are dense by nature and are
    never unpacked here). ``cells`` counts filled cells, ``rows`` rows with a filled cell, and ``cell_elements``
    all cells of a sheet, empty formatted ones included; ``names`` the defined names; ``part_size`` bounds the
    small parts that are read as lists (workbook, styles).
    """

    file_size: int = 100_000_000
    total_size: int = 600_000_000
    members: int = 5_000
    ratio: float = 100.0
    ratio_floor: int = 1_000_000
    picture_floor: int = 50_000_000
    strings: int = 5_000_000
    cells: int = 5_000_000
    rows: int = 600_000
    cell_elements: int = 20_000_000
    cell_length: int = 1_000_000
    names: int = 50_000
    part_size: int = 64_000_000


@dataclass(frozen=True)
class Member:
    """One entry of the directory: where its bytes lie and what they must be."""

    name: str
    raw_name: bytes
    flags: int
    method: int
    stamp: tuple[int, int]
    crc: int
    packed: int
    size: int
    offset: int
    attributes: int


class Container:
    """An open zip file with a checked directory. Not for use by several threads at once."""

    def __init__(self, file: BinaryIO, members: tuple[Member, ...], size: int) -> None:
        self.file = file
        self.members = members
        self.size = size
        self.counts: dict[str, tuple[int, int]] = {}
        """Cells with a value and rows that end with one, by member, as far as plain bytes show them."""
        self._by_name = {member.name.casefold(): member for member in members}

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        self.file.close()

    def find(self, name: str) -> Member | None:
        """Member of a name, whatever the case; None where absent."""
        return self._by_name.get(name.casefold())

    def packed(self, member: Member) -> Iterator[bytes]:
        """The member's compressed bytes, in pieces."""
        self.file.seek(_data_start(self.file, member))
        left = member.packed
        while left:
            piece = self.file.read(min(left, PIECE))
            if not piece:
                raise refusal("cut off")
            left -= len(piece)
            yield piece

    def pieces(self, member: Member) -> Iterator[bytes]:
        """The member's content in pieces of at most 64 KB, size and checksum enforced.

        Raises
        ------
        UnreadableWorkbookError
            Where the content does not inflate, is longer or shorter than declared, or has another checksum.
        """
        crc = got = 0
        for piece in self._inflated(member):
            got += len(piece)
            if got > member.size:
                raise refusal("damaged", f"the part {member.name} is longer than the file says")
            crc = zlib.crc32(piece, crc)
            yield piece
        if got != member.size or crc != member.crc:
            raise refusal("damaged", f"the part {member.name} does not have its checksum")

    def read(self, member: Member) -> bytes:
        """The member's content whole."""
        return b"".join(self.pieces(member))

    def _inflated(self, member: Member) -> Iterator[bytes]:
        if member.method == STORED:
            yield from self.packed(member)
            return
        inflater = zlib.decompressobj(-15)
        try:
            for packed in self.packed(member):
                rest = packed
                while rest and not inflater.eof:
                    piece = inflater.decompress(rest, PIECE)
                    rest = inflater.unconsumed_tail
                    if piece:
                        yield piece
        except zlib.error:
            raise refusal("damaged", f"the part {member.name} cannot be unpacked") from None
        if not inflater.eof or inflater.unused_data:
            raise refusal("damaged", f"the part {member.name} does not end where the file says")


def open_container(path: Path, limits: Limits | None = None) -> Container:
    """Open a zip file and check its directory against ``limits``; no member is unpacked.

    Raises
    ------
    UnreadableWorkbookError
        With the reason in words.
    """
    limits = limits or Limits()
    file = open_plain_file(path)
    try:
        size = os.fstat(file.fileno()).st_size
        members = _directory(file, size, limits)
        _check_members(members, limits)
        _check_layout(file, members, size)
        return Container(file, members, size)
    except BaseException:
        file.close()
        raise


def open_plain_file(path: Path) -> BinaryIO:
    """Open a regular file for reading; a pipe, device or folder is refused without blocking."""
    flags = os.O_RDONLY
    for name in ("O_NONBLOCK", "O_BINARY"):  # each exists on some systems only
        flags |= getattr(os, name, 0)
    try:
        descriptor = os.open(path, flags)
    except PermissionError as error:
        raise refusal("cannot be read", error.strerror or "not allowed") from None
    except FileNotFoundError:
        raise refusal("cannot be read", "it is no longer there") from None
    except OSError as error:
        raise refusal("cannot be read", error.strerror or "unknown reason") from None
    if not stat.S_ISREG(os.fstat(descriptor).st_mode):
        os.close(descriptor)
        raise refusal("not a file")
    return os.fdopen(descriptor, "rb")


def _directory(file: BinaryIO, size: int, limits: Limits) -> tuple[Member, ...]:
    count, length, start = _end_record(file, size)
    if count > limits.members:
        raise refusal("too many parts", str(count))
    file.seek(start)
    data = file.read(length)
    members = []
    place = 0
    for _ in range(count):
        member, place = _entry(data, place)
        members.append(member)
    if place != length:
        raise refusal("damaged", "its directory does not have the length it names")
    return tuple(members)


def _end_record(file: BinaryIO, size: int) -> tuple[int, int, int]:
    """Count, length and start of the directory, which must end exactly at the end record."""
    file.seek(max(0, size - 22 - 65_535))
    tail = file.read()
    place = tail.rfind(END)
    while place >= 0 and len(tail) - place >= 22:
        if struct.unpack_from("<H", tail, place + 20)[0] == len(tail) - place - 22:
            break
        place = tail.rfind(END, 0, place)
    else:
        raise _no_end(tail)
    disk, _, _, count, length, start, _ = struct.unpack_from("<4H2LH", tail, place + 4)
    end = size - len(tail) + place
    if 0xFFFF in (count, disk) or 0xFFFFFFFF in (length, start):
        count, length, start, end = _end_record64(file, end, (count, length, start))
    if start + length < end:
        raise refusal("bytes before")
    if start + length != end:
        raise refusal("damaged", "its directory is not where the file says")
    return count, length, start


def _no_end(tail: bytes) -> Exception:
    place = tail.rfind(END)
    if place < 0 or len(tail) - place < 22:
        return refusal("cut off")
    behind = tail[place + 22:]
    return refusal("cut off") if not behind.strip(b"\0") else refusal("bytes behind")


def _end_record64(file: BinaryIO, end: int, small: tuple[int, int, int]) -> tuple[int, int, int, int]:
    file.seek(max(0, end - 20))
    locator = file.read(20)
    if len(locator) < 20 or locator[:4] != LOCATOR64:
        return *small, end
    place = struct.unpack_from("<Q", locator, 8)[0]
    if place + 56 > end - 20:
        raise refusal("damaged", "its directory is not where the file says")
    file.seek(place)
    record = file.read(56)
    if record[:4] != END64 or place + 12 + struct.unpack_from("<Q", record, 4)[0] != end - 20:
        raise refusal("damaged", "its directory is not where the file says")
    _, count, length, start = struct.unpack_from("<4Q", record, 24)
    return count, length, start, place


def _entry(data: bytes, place: int) -> tuple[Member, int]:
    if data[place:place + 4] != CENTRAL or place + 46 > len(data):
        raise refusal("damaged", "its directory cannot be read")
    (_, _, flags, method, time, date, crc, packed, size, name_length, extra_length, comment_length,
     _, _, attributes, offset) = struct.unpack_from("<6H3L5H2L", data, place + 4)
    name_end = place + 46 + name_length
    raw_name = data[place + 46:name_end]
    extra = data[name_end:name_end + extra_length]
    if 0xFFFFFFFF in (packed, size, offset):
        size, packed, offset = _wide(extra, (size, packed, offset))
    try:
        name = raw_name.decode("utf-8" if flags & UTF8 else "cp437")
    except UnicodeDecodeError:
        raise refusal("part name", repr(raw_name)) from None
    member = Member(name, raw_name, flags, method, (time, date), crc, packed, size, offset, attributes)
    return member, name_end + extra_length + comment_length


def _wide(extra: bytes, small: tuple[int, int, int]) -> tuple[int, int, int]:
    """Size, packed size and offset with those of 64 bits taken from the extra field."""
    place = 0
    while place + 4 <= len(extra):
        kind, length = struct.unpack_from("<2H", extra, place)
        if kind == 1:
            values = extra[place + 4:place + 4 + length]
            wide = [value for (value,) in struct.iter_unpack("<Q", values[:len(values) // 8 * 8])]
            found = [wide.pop(0) if value == 0xFFFFFFFF and wide else value for value in small]
            return found[0], found[1], found[2]
        place += 4 + length
    return small


def _check_members(members: tuple[Member, ...], limits: Limits) -> None:
    seen: set[str] = set()
    total = 0
    for member in members:
        _check_name(member.name)
        if member.name.casefold() in seen:
            raise refusal("duplicate part", member.name)
        seen.add(member.name.casefold())
        if member.flags & ENCRYPTED:
            raise refusal("encrypted part", member.name)
        if member.method not in (STORED, DEFLATED):
            raise refusal("compression", member.name)
        total += member.size
        if total > limits.total_size:
            raise refusal("too large inside", f"more than {limits.total_size // 1_000_000} MB")
        floor = limits.ratio_floor if is_xml(member.name) else limits.picture_floor
        if member.size > floor and member.size > limits.ratio * member.packed:
            times = member.size // max(1, member.packed)
            raise refusal("packed too densely", f"{member.name} unpacks to {times} times its size")


def is_xml(name: str) -> bool:
    """Whether a member's name says that it holds XML."""
    return name.lower().endswith((".xml", ".rels", ".vml"))


def _check_name(name: str) -> None:
    steps = name.rstrip("/").split("/")
    bad = (not name.strip("/") or "\\" in name or "\0" in name or ":" in steps[0] or name.startswith("/")
           or any(step in ("", ".", "..") for step in steps) or len(name) > 1000)
    if bad:
        raise refusal("part name", name)


def _check_layout(file: BinaryIO, members: tuple[Member, ...], size: int) -> None:
    """Members lie one behind another, from the first byte on, none inside another."""
    end, before = 0, ""
    for number, member in enumerate(sorted(members, key=lambda member: member.offset)):
        if number == 0 and member.offset != 0:
            raise refusal("bytes before")
        if member.offset < end:
            raise refusal("overlap", f"{before} and {member.name}")
        end, before = _data_start(file, member) + member.packed, member.name
        if end > size:
            raise refusal("damaged", f"the part {member.name} ends behind the end of the file")


def _data_start(file: BinaryIO, member: Member) -> int:
    file.seek(member.offset)
    head = file.read(30 + len(member.raw_name))
    if len(head) < 30 or head[:4] != LOCAL or head[30:] != member.raw_name:
        raise refusal("damaged", f"the part {member.name} is not where the file says")
    name_length, extra_length = struct.unpack_from("<2H", head, 26)
    return member.offset + 30 + int(name_length) + int(extra_length)
