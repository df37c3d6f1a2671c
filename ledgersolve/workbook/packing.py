"""Zip files written member by member: from compressed bytes as they are, or from new content."""

import struct
import zlib
from collections.abc import Iterable
from dataclasses import replace
from typing import BinaryIO

from ledgersolve.workbook.container import CENTRAL, DEFLATED, END, LOCAL, STREAMED, UTF8, Container, Member

STAMP = (0, 33)  # 1 January 1980: equal content gives equal files
QUICK_ABOVE = 4_000_000


class Packer:
    """Writes one zip file. Parts together must stay below 4 GB, as the gate sees to."""

    def __init__(self, file: BinaryIO) -> None:
        self._file = file
        self._written: list[Member] = []
        self._place = 0

    def copy(self, container: Container, member: Member) -> None:
        """Copy a member's compressed bytes."""
        self._append(member, container.packed(member))

    def add(self, name: str, content: bytes) -> None:
        """Compress and write a new member; large ones quickly rather than tightly."""
        deflater = zlib.compressobj(6 if len(content) < QUICK_ABOVE else 2, zlib.DEFLATED, -15)
        packed = deflater.compress(content) + deflater.flush()
        raw_name = name.encode("utf-8")
        flags = 0 if name.isascii() else UTF8
        self._append(Member(name, raw_name, flags, DEFLATED, STAMP, zlib.crc32(content), len(packed),
                            len(content), 0, 0), (packed,))

    def close(self) -> None:
        """Write the directory."""
        start = self._place
        for member in self._written:
            self._put(CENTRAL, struct.pack("<H", 20), _fields(member),
                      struct.pack("<3H2L", 0, 0, 0, member.attributes, member.offset), member.raw_name)
        count = len(self._written)
        self._put(END, struct.pack("<4H2LH", 0, 0, count, count, self._place - start, start, 0))

    def _append(self, member: Member, packed: Iterable[bytes]) -> None:
        placed = replace(member, offset=self._place, flags=member.flags & ~STREAMED)
        self._written.append(placed)
        self._put(LOCAL, _fields(placed), placed.raw_name)
        for piece in packed:
            self._put(piece)

    def _put(self, *pieces: bytes) -> None:
        for piece in pieces:
            self._file.write(piece)
            self._place += len(piece)


def _fields(member: Member) -> bytes:
    """What the local header and the directory entry have in common, from the version needed on."""
    return struct.pack("<5H3L2H", 20, member.flags, member.method, *member.stamp, member.crc, member.packed,
                       member.size, len(member.raw_name), 0)
