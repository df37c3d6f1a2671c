"""The zip file under a workbook is read strictly: what does not fit exactly is refused in its own words."""

import os
import struct
import zlib
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest

from ledgersolve.workbook.container import Limits, open_container
from ledgersolve.workbook.problems import UnreadableWorkbookError
from tests.packages import Entry, entries_of, parts_of, sheet_xml, zip_bytes

PARTS = entries_of(parts_of({"Sites": sheet_xml('<row r="1"><c r="A1"><v>1</v></c></row>')}))


def refused(path: Path, limits: Limits | None = None) -> str:
    """Kind of refusal when the file is opened and every member read."""
    with pytest.raises(UnreadableWorkbookError) as caught, open_container(path, limits) as container:
        for member in container.members:
            container.read(member)
    return caught.value.problem.kind


def written(folder: Path, data: bytes) -> Path:
    """Write bytes to a file."""
    path = folder / "a.xlsx"
    path.write_bytes(data)
    return path


def test_members_come_back_as_they_went_in(tmp_path: Path) -> None:
    """Stored and deflated members give their content, their case is forgiven, an absent one is None."""
    entries = [Entry(b"a.xml", b"one" * 70_000), Entry(b"b/C.bin", bytes(range(256)) * 600, method=0)]
    with open_container(written(tmp_path, zip_bytes(entries))) as container:
        assert [member.name for member in container.members] == ["a.xml", "b/C.bin"]
        assert [container.read(member) for member in container.members] == [e.content for e in entries]
        assert container.find("B/c.BIN") == container.members[1]
        assert container.find("none") is None


@pytest.mark.parametrize("how", [{"zip64": True}, {"comment": b"made by hand"}, {"gap": b"x" * 16}])
def test_lawful_oddities_are_read(tmp_path: Path, how: dict[str, object]) -> None:
    """A small zip64 file, a comment at the end and room between members (data descriptors) do no harm."""
    with open_container(written(tmp_path, zip_bytes(PARTS, **how))) as container:
        assert [container.read(member) for member in container.members] == [entry.content for entry in PARTS]


def test_pieces_are_small(tmp_path: Path) -> None:
    """A member is never unpacked in pieces larger than 64 KB, however well it is packed."""
    path = written(tmp_path, zip_bytes([Entry(b"a.bin", bytes(5_000_000))]))
    with open_container(path) as container:
        assert max(map(len, container.pieces(container.members[0]))) <= 65_536


BROKEN: dict[str, tuple[Callable[[], bytes], str]] = {
    "cut in the middle": (lambda: zip_bytes(PARTS)[:700], "cut off"),
    "last byte missing": (lambda: zip_bytes(PARTS)[:-1], "cut off"),
    "zeros behind": (lambda: zip_bytes(PARTS, behind=bytes(4000)), "cut off"),
    "bytes behind": (lambda: zip_bytes(PARTS, behind=b"<script>"), "bytes behind"),
    "bytes before": (lambda: zip_bytes(PARTS, before=b"#!/bin/sh\n"), "bytes before"),
    "first member not at the start": (
        lambda: zip_bytes([replace(PARTS[0], offset=40), *PARTS[1:]]), "bytes before"),
    "doubled name": (lambda: zip_bytes([*PARTS, PARTS[-1]]), "duplicate part"),
    "doubled name by case": (
        lambda: zip_bytes([*PARTS, replace(PARTS[-1], name=PARTS[-1].name.upper())]), "duplicate part"),
    "parent folder": (lambda: zip_bytes([*PARTS, Entry(b"xl/../../etc/x")]), "part name"),
    "absolute": (lambda: zip_bytes([*PARTS, Entry(b"/etc/x")]), "part name"),
    "drive": (lambda: zip_bytes([*PARTS, Entry(b"C:/x")]), "part name"),
    "backslash": (lambda: zip_bytes([*PARTS, Entry(b"xl\\x.xml")]), "part name"),
    "NUL": (lambda: zip_bytes([*PARTS, Entry(b"xl/x.xml\0.exe")]), "part name"),
    "empty name": (lambda: zip_bytes([*PARTS, Entry(b"")]), "part name"),
    "empty step": (lambda: zip_bytes([*PARTS, Entry(b"xl//x.xml")]), "part name"),
    "broken letters": (lambda: zip_bytes([*PARTS, Entry(b"\xff\xfe.xml", flags=0x800)]), "part name"),
    "method": (lambda: zip_bytes([*PARTS, Entry(b"x.bin", b"x", method=12)]), "compression"),
    "locked": (lambda: zip_bytes([*PARTS, Entry(b"x.bin", b"x", flags=1)]), "encrypted part"),
    "overlap": (lambda: zip_bytes([*PARTS, replace(PARTS[0], name=b"two.xml", offset=0)]), "overlap"),
    "quoted overlap": (lambda: _quoted_overlap(), "overlap"),
    "another local name": (lambda: zip_bytes([*PARTS, Entry(b"x.xml", local_name=b"y.xml")]), "damaged"),
    "longer than declared": (lambda: zip_bytes([*PARTS, Entry(b"x.xml", b"x" * 9000, size=10)]), "damaged"),
    "shorter than declared": (lambda: zip_bytes([*PARTS, Entry(b"x.xml", b"x", size=10)]), "damaged"),
    "checksum": (lambda: zip_bytes([*PARTS, Entry(b"x.xml", b"x", crc=7)]), "damaged"),
    "not deflated": (lambda: zip_bytes([*PARTS, Entry(b"x.xml", b"x", packed=b"\xff\xff\xff")]), "damaged"),
    "deflated end missing": (
        lambda: zip_bytes([*PARTS, Entry(b"x.xml", b"x" * 9, packed=_deflated(b"x" * 9)[:-3])]), "damaged"),
    "more behind the deflated end": (
        lambda: zip_bytes([*PARTS, Entry(b"x.xml", b"x" * 9, packed=_deflated(b"x" * 9) + b"y")]), "damaged"),
    "directory of another length": (lambda: _changed(zip_bytes(PARTS), -10, 1), "damaged"),
    "directory elsewhere": (lambda: _changed(zip_bytes(PARTS), -6, 1), "damaged"),
    "count too small": (lambda: _changed(zip_bytes(PARTS), -12, -1), "damaged"),
    "count too large": (lambda: _changed(zip_bytes(PARTS), -12, 1), "damaged"),
}


def _deflated(content: bytes) -> bytes:
    deflater = zlib.compressobj(9, zlib.DEFLATED, -15)
    return deflater.compress(content) + deflater.flush()


def _changed(data: bytes, place: int, by: int) -> bytes:
    """The file with one byte of its end record changed."""
    changed = bytearray(data)
    changed[place] = (changed[place] + by) % 256
    return bytes(changed)


def _quoted_overlap() -> bytes:
    """A member that holds the header of the next as its own (stored) content."""
    inner = Entry(b"inner.bin", b"x" * 50, method=0)
    crc = zlib.crc32(inner.content)
    header = b"PK\x03\x04" + struct.pack("<5H3L2H", 20, 0, 0, 0, 33, crc, 50, 50, 9, 0)
    content = header + inner.name + inner.content
    outer = Entry(b"outer.bin", content, method=0)
    place = len(zip_bytes(PARTS)) - len(_directory(zip_bytes(PARTS))) + 30 + len(outer.name)
    body = zip_bytes([*PARTS, outer])
    directory = _directory(body)[:-22] + b"PK\x01\x02" + struct.pack(
        "<6H3L5H2L", 20, 20, 0, 0, 0, 33, crc, 50, 50, 9, 0, 0, 0, 0, 0, place) + inner.name
    start = len(body) - len(_directory(body))
    count = len(PARTS) + 2
    return body[:start] + directory + b"PK\x05\x06" + struct.pack(
        "<4H2LH", 0, 0, count, count, len(directory), start, 0)


def _directory(data: bytes) -> bytes:
    """The directory and the end record."""
    return data[struct.unpack_from("<L", data, len(data) - 6)[0]:]


@pytest.mark.parametrize("case", BROKEN)
def test_what_does_not_fit_is_refused(tmp_path: Path, case: str) -> None:
    """Each way in which a zip file can lie or be damaged is refused under its own name."""
    make, kind = BROKEN[case]
    assert refused(written(tmp_path, make())) == kind


def test_no_prefix_passes(tmp_path: Path) -> None:
    """No proper prefix of a workbook passes, also not one that holds a whole stored workbook inside."""
    inner = zip_bytes(PARTS)
    data = zip_bytes([*PARTS, Entry(b"xl/embeddings/book.xlsx", inner, method=0)])
    for length in range(1, len(data), 7):
        with pytest.raises(UnreadableWorkbookError):
            open_container(written(tmp_path, data[:length]))


def test_every_flipped_byte_of_content_is_found(tmp_path: Path) -> None:
    """A byte changed anywhere in a member's compressed bytes is found by its checksum or sooner."""
    data = zip_bytes([Entry(b"a.xml", bytes(range(256)) * 3)])
    first, length = 30 + len(b"a.xml"), len(_deflated(bytes(range(256)) * 3))
    for place in range(first, first + length, 5):
        assert refused(written(tmp_path, _changed(data, place, 85))) == "damaged"


@pytest.mark.parametrize(("limits", "kind"), [
    (Limits(members=3), "too many parts"),
    (Limits(total_size=1000), "too large inside"),
    (Limits(ratio=2.0, ratio_floor=100), "packed too densely"),
])
def test_limits_come_from_the_directory(tmp_path: Path, limits: Limits, kind: str) -> None:
    """Number of parts, total and density are judged before anything is unpacked."""
    path = written(tmp_path, zip_bytes([*PARTS, Entry(b"x.xml", b"x" * 2000)]))
    with pytest.raises(UnreadableWorkbookError) as caught:
        open_container(path, limits)
    assert caught.value.problem.kind == kind


def test_a_picture_of_one_colour_is_no_bomb(tmp_path: Path) -> None:
    """A dense part that is not XML passes below its own floor: it is never unpacked into memory."""
    path = written(tmp_path, zip_bytes([*PARTS, Entry(b"xl/media/image1.emf", bytes(9_000_000))]))
    with open_container(path) as container:
        assert container.members[-1].size == 9_000_000


def test_what_is_no_file_is_refused_without_waiting(tmp_path: Path) -> None:
    """A folder, a pipe and an absent file are refused; a pipe is not waited for."""
    os.mkfifo(tmp_path / "pipe.xlsx")
    assert refused(tmp_path) == "not a file"
    assert refused(tmp_path / "pipe.xlsx") == "not a file"
    assert refused(tmp_path / "none.xlsx") == "cannot be read"
