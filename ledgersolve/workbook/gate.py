"""The gate: what a dropped file is, and whether it is safe to read, before anything in it is believed."""

from pathlib import Path

from ledgersolve.workbook.container import Container, Limits, is_xml, open_container, open_plain_file
from ledgersolve.workbook.markup import PrologCheck
from ledgersolve.workbook.refusals import refusal

OLE = b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1"
HEAD = 4096
LARGE = 8_000_000
"""Parts above this size are counted on the way through: a sheet that is far too large is then refused at once."""


def pass_gate(path: Path, limits: Limits | None = None) -> Container:
    """Open a dropped file after every check that needs no parsing of cells.

    Size and kind of file, directory (see ``open_container``), size and checksum of every part, and no
    document type definition in any XML part.

    Raises
    ------
    UnreadableWorkbookError
        With the reason in words.
    """
    limits = limits or Limits()
    check_kind(path, limits)
    container = open_container(path, limits)
    try:
        for member in container.members:
            _check_content(container, member.name)
        return container
    except BaseException:
        container.file.close()
        raise


def _check_content(container: Container, name: str) -> None:
    member = container.find(name)
    if member is None:
        return
    prolog = PrologCheck(name) if is_xml(name) else None
    counted = prolog is not None and member.size > LARGE
    cells = rows = 0
    for piece in container.pieces(member):
        if prolog is not None and not prolog.done:
            prolog.feed(piece)
        if counted:
            cells += piece.count(b"</v>") - piece.count(b"<v></v>")
            rows += piece.count(b"</v></c></row>")
    if counted:
        container.counts[member.name] = cells, rows


def check_kind(path: Path, limits: Limits) -> None:
    """Refuse by name, size and first bytes, each kind of file in its own words."""
    if path.name.startswith("~$"):
        raise refusal("lock file")
    with open_plain_file(path) as file:
        size = file.seek(0, 2)
        if size == 0:
            raise refusal("empty file")
        if size > limits.file_size:
            raise refusal("file too large",
                          f"{size / 1e6:,.0f} MB, more than the {limits.file_size / 1e6:,.0f} MB allowed")
        file.seek(0)
        head = file.read(HEAD)
        if head.startswith(b"PK\x03\x04"):
            return
        file.seek(0)
        raise _other_kind(head, file.read())


def _other_kind(head: bytes, whole: bytes) -> Exception:
    if head.startswith(OLE):
        return refusal(_ole_kind(whole))
    if not whole.strip(b"\0"):
        return refusal("zeros")
    if whole.rfind(b"PK\x05\x06", max(0, len(whole) - 66_000)) >= 0:
        return refusal("bytes before" if b"PK\x03\x04" in whole else "archive")
    if head.startswith(b"%PDF"):
        return refusal("PDF")
    start = head.removeprefix(b"\xef\xbb\xbf").lstrip().lower()
    if head[:2] in (b"\xff\xfe", b"\xfe\xff"):
        start = head.decode("utf-16", "replace").lstrip("\ufeff \r\n\t").lower().encode("utf-8", "replace")
    if start.startswith((b"<!doctype html", b"<html", b"<table", b"<head", b"<body", b"<meta")):
        return refusal("web page")
    if start.startswith(b"<"):
        return refusal("web page" if b"<html" in start else "XML file")
    return refusal("text file" if _is_text(head) else "not a workbook")


def _ole_kind(whole: bytes) -> str:
    """Kind of an OLE compound file, told from the names of its streams."""
    if "EncryptedPackage".encode("utf-16-le") in whole:
        return "password"
    if any(f"{name}\0".encode("utf-16-le") in whole for name in ("Workbook", "Book")):
        return "old workbook"
    return "old office file"


def _is_text(head: bytes) -> bool:
    if head[:2] in (b"\xff\xfe", b"\xfe\xff"):
        return True
    strange = sum(byte < 32 and byte not in b"\t\n\r\f" for byte in head)
    return strange == 0
