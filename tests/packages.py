"""Packages for tests, put together part by part, so that any part can be wrong.

``parts_of`` gives the parts of a small workbook, ``zipped`` writes parts, ``zip_bytes`` writes a zip file
from entries whose headers may lie.
"""

import struct
import warnings
import zipfile
import zlib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from hashlib import sha256
from io import BytesIO
from pathlib import Path

import openpyxl

MAIN = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
LINKS = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
TYPES = "application/vnd.openxmlformats-officedocument.spreadsheetml"
WORKBOOK_TYPE = f"{TYPES}.sheet.main+xml"
PACKAGE_TYPES = "application/vnd.openxmlformats-package"
HEAD = '<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\n'


def sheet_xml(rows: str, *, before: str = "", after: str = "") -> str:
    """A worksheet part with the given rows."""
    return (f'{HEAD}<worksheet xmlns="{MAIN}" xmlns:r="{LINKS}">{before}<sheetData>{rows}</sheetData>{after}'
            "</worksheet>")


def strings_xml(*items: str) -> str:
    """A shared-strings part from the insides of its ``si`` elements."""
    inside = "".join(f"<si>{item}</si>" for item in items)
    return f'{HEAD}<sst xmlns="{MAIN}" count="{len(items)}" uniqueCount="{len(items)}">{inside}</sst>'


def styles_xml(formats: str = "", *codes: int) -> str:
    """A style part: number formats, and one cell format per code (the first one is General)."""
    cells = "".join(f'<xf numFmtId="{code}" fontId="0" fillId="0" borderId="0"/>' for code in (0, *codes))
    listed = f"<numFmts>{formats}</numFmts>" if formats else ""
    return (f'{HEAD}<styleSheet xmlns="{MAIN}">{listed}<fonts count="1"><font><sz val="11"/></font></fonts>'
            '<fills count="1"><fill><patternFill patternType="none"/></fill></fills>'
            '<borders count="1"><border/></borders><cellStyleXfs count="1"><xf numFmtId="0"/></cellStyleXfs>'
            f"<cellXfs>{cells}</cellXfs></styleSheet>")


def types_xml(overrides: Mapping[str, str]) -> str:
    """The list of contents."""
    listed = "".join(f'<Override PartName="/{part}" ContentType="{kind}"/>'
                     for part, kind in overrides.items())
    return (f'{HEAD}<Types xmlns="http://schemas.openxmlformats.org/package/2006/content-types">'
            f'<Default Extension="rels" ContentType="{PACKAGE_TYPES}.relationships+xml"/>'
            f'<Default Extension="xml" ContentType="application/xml"/>{listed}</Types>')


def links_xml(links: Sequence[tuple[str, str, str]]) -> str:
    """A relationships part from (id, kind or full type, target)."""
    listed = "".join(
        f'<Relationship Id="{key}" Type="{kind if ":" in kind else f"{LINKS}/{kind}"}" Target="{target}"/>'
        for key, kind, target in links)
    return (f'{HEAD}<Relationships xmlns="http://schemas.openxmlformats.org/package/2006/relationships">'
            f"{listed}</Relationships>")


def workbook_xml(names: Sequence[str], *, inside: str = "", front: str = "") -> str:
    """A workbook part with sheets rId1, rId2, ..."""
    listed = "".join(f'<sheet name="{name}" sheetId="{number}" r:id="rId{number}"/>'
                     for number, name in enumerate(names, 1))
    return (f'{HEAD}<workbook xmlns="{MAIN}" xmlns:r="{LINKS}">{front}<sheets>{listed}</sheets>{inside}'
            "</workbook>")


def parts_of(sheets: Mapping[str, str], *, strings: str = "", styles: str = "", inside: str = "",
             front: str = "") -> dict[str, str | bytes]:
    """Parts of a workbook with the given sheet parts by sheet name."""
    files = {name: f"xl/worksheets/sheet{number}.xml" for number, name in enumerate(sheets, 1)}
    types = dict.fromkeys(files.values(), f"{TYPES}.worksheet+xml") | {"xl/workbook.xml": WORKBOOK_TYPE}
    links = [(f"rId{number}", "worksheet", f"worksheets/sheet{number}.xml")
             for number in range(1, len(sheets) + 1)]
    parts: dict[str, str | bytes] = {"[Content_Types].xml": ""}
    for kind, content in (("sharedStrings", strings), ("styles", styles)):
        if content:
            types[f"xl/{kind}.xml"] = f"{TYPES}.{kind}+xml"
            links.append((f"rId{kind}", kind, f"{kind}.xml"))
            parts[f"xl/{kind}.xml"] = content
    parts["[Content_Types].xml"] = types_xml(types)
    parts["_rels/.rels"] = links_xml([("rId1", "officeDocument", "xl/workbook.xml")])
    parts["xl/workbook.xml"] = workbook_xml(list(sheets), inside=inside, front=front)
    parts["xl/_rels/workbook.xml.rels"] = links_xml(links)
    return parts | {files[name]: content for name, content in sheets.items()}


def zipped(path: Path, parts: Mapping[str, str | bytes]) -> Path:
    """Write parts as a package."""
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as package:
        for name, content in parts.items():
            package.writestr(zipfile.ZipInfo(name, (1980, 1, 1, 0, 0, 0)), content, zipfile.ZIP_DEFLATED)
    return path


def book_of(path: Path, rows: str, **more: str) -> Path:
    """Write a workbook of one sheet, Sites, with the given rows."""
    return zipped(path, parts_of({"Sites": sheet_xml(rows)}, **more))


def contents(path: Path) -> dict[str, bytes]:
    """Content of every part."""
    with zipfile.ZipFile(path) as package:
        return {name: package.read(name) for name in package.namelist()}


def hashes(path: Path) -> dict[str, str]:
    """SHA-256 of every part."""
    return {name: sha256(content).hexdigest() for name, content in contents(path).items()}


def second_reader(path: Path, *, values: bool = False) -> openpyxl.Workbook:
    """The workbook as an independent reader sees it: formulas, or their cached values."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", UserWarning)  # about what it cannot keep; it only reads here
        return openpyxl.load_workbook(BytesIO(path.read_bytes()), data_only=values)


@dataclass
class Entry:
    """A member of a zip file; what is None is written truthfully."""

    name: bytes
    content: bytes = b""
    method: int = 8
    flags: int = 0
    size: int | None = None
    crc: int | None = None
    offset: int | None = None
    local_name: bytes | None = None
    packed: bytes | None = None


def zip_bytes(entries: Sequence[Entry], *, before: bytes = b"", behind: bytes = b"", comment: bytes = b"",
              zip64: bool = False, gap: bytes = b"") -> bytes:
    """A zip file, entry by entry. With ``zip64`` sizes and offsets stand in the extra fields."""
    data, directory = bytearray(before), bytearray()
    for entry in entries:
        deflater = zlib.compressobj(9, zlib.DEFLATED, -15)
        packed = entry.packed
        if packed is None:
            deflated = deflater.compress(entry.content) + deflater.flush()
            packed = deflated if entry.method == 8 else entry.content
        size = len(entry.content) if entry.size is None else entry.size
        crc = zlib.crc32(entry.content) if entry.crc is None else entry.crc
        offset = len(data) - len(before) if entry.offset is None else entry.offset
        local = entry.name if entry.local_name is None else entry.local_name
        data += b"PK\x03\x04" + struct.pack("<5H3L2H", 20, entry.flags, entry.method, 0, 33, crc, len(packed),
                                            size, len(local), 0) + local + packed + gap
        wide = struct.pack("<2H3Q", 1, 24, size, len(packed), offset) if zip64 else b""
        shown = (0xFFFFFFFF,) * 3 if zip64 else (len(packed), size, offset)
        directory += b"PK\x01\x02" + struct.pack(
            "<6H3L5H2L", 20, 20, entry.flags, entry.method, 0, 33, crc, shown[0], shown[1], len(entry.name),
            len(wide), 0, 0, 0, 0, shown[2]) + entry.name + wide
    start = len(data) - len(before)
    data += directory
    count = len(entries)
    if zip64:
        place = len(data)
        data += b"PK\x06\x06" + struct.pack("<Q2H2L4Q", 44, 45, 45, 0, 0, count, count, len(directory), start)
        data += b"PK\x06\x07" + struct.pack("<LQL", 0, place, 1)
        end = (0xFFFF, 0xFFFF, 0xFFFFFFFF, 0xFFFFFFFF)
    else:
        end = (count, count, len(directory), start)
    data += b"PK\x05\x06" + struct.pack("<4H2LH", 0, 0, *end, len(comment))
    return bytes(data + comment + behind)


def entries_of(parts: Mapping[str, str | bytes]) -> list[Entry]:
    """Truthful entries of a package."""
    return [Entry(name.encode(), content.encode() if isinstance(content, str) else content)
            for name, content in parts.items()]
