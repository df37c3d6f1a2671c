"""The texts of result sheets behind the analyst's own in the list of shared texts.

The analyst's bytes stay the beginning of the list. Before ours stands one text that no cell uses and that
says how many follow, how often they are used, and their checksum: from it a later drop knows exactly what
to cut. A program that writes the list anew drops the texts no cell uses, and this one with them.
"""

import re
import zlib
from collections.abc import Sequence
from dataclasses import dataclass

from ledgersolve.workbook import splice
from ledgersolve.workbook.markup import MAIN, Attributes, walk, whole

_NEW_PART = (f'<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\n'
             f'<sst xmlns="{MAIN}" count="0" uniqueCount="0"></sst>').encode()
_ROOT = re.compile(rb"""<(?:\w+:)?sst(?:[^>"']|"[^"]*"|'[^']*')*>""")
_ITEM = re.compile(rb"<(?:\w+:)?si[\s/>]")
_SENTINEL = re.compile(
    rb"<si(?: xmlns=\"[^\"]*\")?><t>ledgersolve texts (\d{1,9}) uses (\d{1,9}) check (\d{1,10}) (new|added)</t></si>")


@dataclass(frozen=True)
class Cut:
    """A list without our texts. ``made`` says that the whole list was ours."""

    data: bytes
    made: bool


def append_strings(theirs: bytes | None, ours: Sequence[bytes], uses: int) -> tuple[bytes, int]:
    """Append our ``<si>`` entries; gives the list and the index of the first of ours."""
    data = _utf8(theirs) if theirs is not None else _NEW_PART
    head = _root(data)
    tag = head[0].decode()
    prefixed = b":" in re.split(rb"[\s>/]", head[0][1:], maxsplit=1)[0]
    opening = f'<si xmlns="{MAIN}">' if prefixed else "<si>"
    tail = b"".join(item.replace(b"<si>", opening.encode(), 1) for item in ours)
    kind = "added" if theirs is not None else "new"
    words = f"ledgersolve texts {len(ours)} uses {uses} check {zlib.crc32(tail)} {kind}"
    sentinel = f"{opening}<t>{words}</t></si>"
    base = _count(data) + 1
    if tag.endswith("/>"):
        name = splice.root(tag)
        qualified = f"{name.prefix}:{name.name}" if name.prefix else name.name
        data = data[:head.start()] + (tag[:-2].rstrip() + f"></{qualified}>").encode() + data[head.end():]
    place = data.rfind(b"</")
    data = data[:place] + sentinel.encode() + tail + data[place:]
    return _counted(data, len(ours) + 1, uses), base


def cut_strings(data: bytes) -> Cut:
    """Take our texts out again; a list that is not as we wrote it stays as it is."""
    matches = list(_SENTINEL.finditer(data))
    if not matches:
        return Cut(data, made=False)
    found = matches[-1]
    end = data.rfind(b"</")
    tail = data[found.end():end]
    if zlib.crc32(tail) != int(found[3]) or len(_ITEM.findall(tail)) != int(found[1]):
        return Cut(data, made=False)
    left = data[:found.start()] + data[end:]
    return Cut(_counted(left, -int(found[1]) - 1, -int(found[2])), made=found[4] == b"new")


def _counted(data: bytes, texts: int, uses: int) -> bytes:
    head = _root(data)
    tag = head[0].decode()
    known = splice.attributes(tag)
    values: dict[str, str | None] = {
        name: str(int(known[name]) + more) for name, more in (("count", uses), ("uniqueCount", texts))
        if whole(known.get(name), -1) >= 0}
    return data[:head.start()] + splice.with_attributes(tag, values).encode() + data[head.end():]


def _count(data: bytes) -> int:
    """Number of entries; the list's own count is a hint that may be wrong."""
    if b"<![CDATA[" not in data and b"<!--" not in data:
        return len(_ITEM.findall(data))
    total = 0

    def start(name: str, _: Attributes) -> None:
        nonlocal total
        total += name == f"{MAIN} si"

    walk("sharedStrings", (data,), start)
    return total


def _root(data: bytes) -> re.Match[bytes]:
    found = _ROOT.search(data)
    if found is None:
        raise ValueError("the list of shared texts has no root element")
    return found


def _utf8(data: bytes) -> bytes:
    """The list as UTF-8: as it stands, unless it is written in another encoding."""
    declared = data[:200].lower()
    if data[:2] in (b"\xff\xfe", b"\xfe\xff") or b"\0" in data[:4] or (
            b"encoding=" in declared and b"utf-8" not in declared):
        return splice.decoded(data).encode("utf-8")
    return data
