"""The bad inputs of every kind, each with what may come of it."""

import re
import zlib
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from tests.books import Formula, site_sheets, write_book
from tests.packages import (
    HEAD,
    MAIN,
    WORKBOOK_TYPE,
    Entry,
    contents,
    entries_of,
    sheet_xml,
    zip_bytes,
    zipped,
)

FIX, SOLVED, EITHER = ("to fix",), ("solved",), ("solved", "to fix")
OLE = bytes.fromhex("D0CF11E0A1B11AE1") + bytes(504)
LAUGHS = (
    '<!DOCTYPE x [<!ENTITY a "ha"><!ENTITY b "&a;&a;&a;&a;&a;&a;&a;&a;"><!ENTITY c "&b;&b;&b;&b;&b;&b;&b;&b;">]>'
)
FETCHED = '<!DOCTYPE x [<!ENTITY a SYSTEM "file:///etc/hostname">]>'
SITES = "xl/worksheets/sheet2.xml"
LANES = "xl/worksheets/sheet4.xml"


@dataclass(frozen=True)
class Input:
    """A bad input: how it is written, and the outcomes that are right."""

    write: Callable[[Path], object]
    outcomes: tuple[str, ...] = FIX
    suffix: str = ".xlsx"


def good_sheets(site: str = "HAM", customer: str = "BER", cost: object = 100.0, demand: object = 5.0, **more):
    """Sheets of a small workbook that is solved at once."""
    sites = [{"Site": site, "Fixed cost": cost}, {"Site": "MUC", "Fixed cost": 90.0}]
    customers = [{"Customer": customer, "Demand": demand}, {"Customer": "CGN", "Demand": 7.0}]
    lanes = [
        {"Site": left, "Customer": right, "Unit cost": 1.0 + number}
        for number, (left, right) in enumerate((a, b) for a in (site, "MUC") for b in (customer, "CGN"))
    ]
    return site_sheets(sites, customers, lanes=lanes, **more)


def good(path: Path, **more) -> Path:
    """Write the small workbook."""
    return write_book(path, good_sheets(**more))


def raw(make: Callable[[], bytes]) -> Callable[[Path], object]:
    """A file of these bytes."""
    return lambda path: path.write_bytes(make())


def altered(change: Callable[[dict[str, bytes]], object]) -> Callable[[Path], object]:
    """The small workbook with some parts changed."""

    def write(path: Path) -> None:
        parts = contents(good(path))
        change(parts)
        zipped(path, parts)

    return write


def entries(change: Callable[[list[Entry]], object], **how) -> Callable[[Path], object]:
    """The small workbook with some zip entries changed."""

    def write(path: Path) -> None:
        made = entries_of(contents(good(path)))
        change(made)
        path.write_bytes(zip_bytes(made, **how))

    return write


def replaced(part: str, old: bytes, new: bytes) -> Callable[[Path], object]:
    """The small workbook with bytes of a part replaced."""

    def change(parts: dict[str, bytes]) -> None:
        assert old in parts[part]
        parts[part] = parts[part].replace(old, new, 1)

    return altered(change)


def bomb(name: bytes, megabytes: int = 900) -> Entry:
    """A member that unfolds to so many megabytes of rows."""
    block = b'<row r="1"><c r="A1"><v>1</v></c></row>' * 26_886
    deflater = zlib.compressobj(9, zlib.DEFLATED, -15)
    once = deflater.compress(block) + deflater.flush(zlib.Z_FULL_FLUSH)
    return Entry(name, packed=once * megabytes + b"\x03\x00", size=len(block) * megabytes, crc=0)


def cut_off(path: Path) -> None:
    """The small workbook without its last bytes."""
    path.write_bytes(good(path).read_bytes()[:-40])


def holed(path: Path) -> None:
    """The small workbook with a hole in the middle, ends intact."""
    whole = good(path).read_bytes()
    path.write_bytes(whole[:400] + bytes(200) + whole[600:])


def wide(path: Path) -> None:
    """A cost matrix of 16,384 columns."""
    codes = [f"C{number}" for number in range(16_383)]
    write_book(path, good_sheets() | {"Lane costs": [["Site", *codes], ["HAM", *([1.0] * 16_383)]]})


def with_macro(path: Path) -> None:
    """A workbook with macros."""
    parts = contents(good(path))
    types = parts["[Content_Types].xml"].decode()
    macro = "application/vnd.ms-excel.sheet.macroEnabled.main+xml"
    binary = '<Override PartName="/xl/vbaProject.bin" ContentType="application/vnd.ms-office.vbaProject"/></Types>'
    parts["[Content_Types].xml"] = types.replace(WORKBOOK_TYPE, macro).replace("</Types>", binary).encode()
    link = (
        '<Relationship Id="rIdVba" Type="http://schemas.microsoft.com/office/2006/relationships/vbaProject" '
        'Target="vbaProject.bin"/></Relationships>'
    )
    rels = "xl/_rels/workbook.xml.rels"
    parts[rels] = parts[rels].replace(b"</Relationships>", link.encode())
    parts["xl/vbaProject.bin"] = b"\xd0\xcfmacro bytes"
    zipped(path, parts)


def names_of_sheets(path: Path) -> None:
    """Two hundred further sheets, one of them named like a result sheet, all with odd names."""
    more = {f"x{number} & <y>": [["a"]] for number in range(200)}
    write_book(path, good_sheets() | {"Decision": [["mine"]], "=1+1": [["a"]], "Z" * 31: [["b"]]} | more)


def million_rows(path: Path) -> None:
    """A sheet Lanes filled to its last row, each row a lane of a site and a customer that exist."""
    rows = "".join(
        f'<row r="{number}"><c r="A{number}" t="str"><v>HAM</v></c><c r="B{number}" t="str"><v>BER</v></c>'
        f'<c r="C{number}"><v>{number % 97}</v></c></row>'
        for number in range(2, 1_048_577)
    )
    parts = contents(good(path))
    head, _, tail = parts[LANES].partition(b'<row r="2"')
    parts[LANES] = head + rows.encode() + tail[tail.index(b"</sheetData>"):]
    zipped(path, parts)


def formatted_rows(path: Path) -> None:
    """A sheet Sites whose rows are formatted, and otherwise empty, to the last one."""
    rows = "".join(f'<row r="{number}" s="0" customFormat="1"/>' for number in range(4, 1_048_577))
    replaced(SITES, b"</sheetData>", rows.encode() + b"</sheetData>")(path)


def many_lanes(path: Path) -> None:
    """Half a million lanes, one of them to a customer that is not there."""
    sites = [f"S{number:03d}" for number in range(250)]
    customers = [f"C{number:04d}" for number in range(2000)]
    lanes = [
        {"Site": site, "Customer": customer, "Unit cost": 1.0 + (left * 7 + right) % 50}
        for left, site in enumerate(sites) for right, customer in enumerate(customers)
    ]
    lanes[300_000]["Customer"] = "C9999"
    write_book(path, site_sheets(
        [{"Site": site, "Fixed cost": 100.0} for site in sites],
        [{"Customer": customer, "Demand": 5.0} for customer in customers], lanes=lanes,
    ))


CELL = b'<c r="B2"'
INPUTS: dict[str, Input] = {
    "01 empty": Input(raw(lambda: b"")),
    "02 truncated": Input(cut_off),
    "03 preallocated": Input(raw(lambda: bytes(9000))),
    "04 hole": Input(holed),
    "05 html": Input(raw(lambda: b"<html><table><tr><td>1</td></tr></table></html>")),
    "06 csv": Input(raw(lambda: b"Site;Fixed cost\r\nHAM;12,5\r\n"), suffix=".csv"),
    "07 ole": Input(raw(lambda: OLE), suffix=".xls"),
    "07 encrypted": Input(raw(lambda: OLE + "EncryptedPackage".encode("utf-16-le"))),
    "08 ods": Input(lambda path: zipped(path, {
        "mimetype": "application/vnd.oasis.opendocument.spreadsheet", "content.xml": "<x/>"})),
    "09 trailing": Input(entries(lambda made: None, behind=b"#!/bin/sh\n")),
    "09 leading": Input(entries(lambda made: None, before=b"#!/bin/sh\nexit\n")),
    "10 zip64": Input(entries(lambda made: None, zip64=True), EITHER),
    "11 sheet bomb": Input(entries(lambda made: made.append(bomb(b"xl/worksheets/sheet9.xml")))),
    "12 strings bomb": Input(entries(lambda made: made.append(bomb(b"xl/sharedStrings9.xml")))),
    "13 names bomb": Input(replaced("xl/workbook.xml", b"</sheets>", b"</sheets><definedNames>" + b"".join(
        b'<definedName name="n%d">Sites!$A$%d</definedName>' % (number, number) for number in range(1, 100_001)
    ) + b"</definedNames>")),
    "14 members": Input(entries(lambda made: made.extend(Entry(b"x%d" % number) for number in range(60_000)))),
    "15 overlap": Input(entries(lambda made: made.append(
        Entry(b"xl/again.xml", made[0].content, offset=0, local_name=made[0].name)))),
    "16 double name": Input(entries(lambda made: made.append(Entry(b"XL/workbook.xml", b"<x/>")))),
    **{
        f"17 name {number}": Input(entries(lambda made, name=name: made.append(Entry(name, b"x"))))
        for number, name in enumerate((b"../../evil.txt", b"/evil.txt", b"C:\\evil.txt", b"a\0b.txt"))
    },
    "18 nested": Input(lambda path: zipped(path, contents(good(path)) | {
        "xl/embeddings/inner.xlsx": good(path).read_bytes()}), EITHER),
    "19 laughs in a sheet": Input(altered(lambda parts: parts.update(
        {SITES: (HEAD + LAUGHS + '<worksheet><sheetData>&c;</sheetData></worksheet>').encode()}))),
    "20 laughs in types": Input(altered(lambda parts: parts.update(
        {"[Content_Types].xml": (LAUGHS + "<Types/>").encode()}))),
    "21 laughs in links": Input(altered(lambda parts: parts.update(
        {"xl/_rels/workbook.xml.rels": (LAUGHS + "<Relationships/>").encode()}))),
    "22 quadratic": Input(altered(lambda parts: parts.update(
        {SITES: f'<!DOCTYPE x [<!ENTITY a "{"x" * 50_000}">]><worksheet>{"&a;" * 5000}</worksheet>'.encode()}))),
    "23 fetch a file": Input(altered(lambda parts: parts.update(
        {SITES: (HEAD + FETCHED + "<worksheet>&a;</worksheet>").encode()}))),
    "23 fetch an address": Input(altered(lambda parts: parts.update(
        {SITES: b'<!DOCTYPE x SYSTEM "http://localhost:9/x.dtd"><worksheet/>'}))),
    "24 utf-16": Input(altered(lambda parts: parts.update(
        {SITES: parts[SITES].decode().replace("UTF-8", "UTF-16").encode("utf-16")})), EITHER),
    "24 utf-7": Input(altered(lambda parts: parts.update(
        {SITES: parts[SITES].replace(b'encoding="UTF-8"', b'encoding="UTF-7"')}))),
    "25 macro": Input(with_macro, SOLVED, ".xlsm"),
    "26 outside formulas": Input(lambda path: good(
        path, demand=Formula('=WEBSERVICE("http://localhost:9/x")', 5.0)), SOLVED),
    "27 never calculated": Input(lambda path: good(path, demand=Formula("=1+1"))),
    "28 error value": Input(lambda path: good(path, demand=Formula("=1/0", "#DIV/0!"))),
    "29 dimension lie": Input(altered(lambda parts: parts.update(
        {SITES: re.sub(rb"<dimension[^>]*>", b'<dimension ref="A1:B2"/>', parts[SITES])})), SOLVED),
    "30 far cell": Input(replaced(SITES, b"</sheetData>",
        b'<row r="1048576"><c r="XFD1048576"><v>1</v></c></row></sheetData>'), EITHER),
    "31 merged": Input(replaced(SITES, b"</sheetData>",
        b'</sheetData><mergeCells count="1"><mergeCell ref="A1:XFD1048576"/></mergeCells>'), EITHER),
    "33 wide": Input(wide),
    "34 long text": Input(replaced(SITES, CELL, b'<c r="B2" t="str"><v>' + b"x" * 5_000_000 + b'</v></c><c r="ZZ2"')),
    **{
        f"35 number {number}": Input(replaced(SITES, b"<v>100</v>", b"<v>" + text + b"</v>"))
        for number, text in enumerate((b"NaN", b"INF", b"1e999", b"0x1F"))
    },
    "35 comma": Input(lambda path: good(path, cost="1,200")),
    "36 negative": Input(lambda path: good(path, cost=-5.0)),
    "36 huge": Input(lambda path: good(path, cost=1e300)),
    **{
        f"37 formula text {number}": Input(lambda path, text=text: good(path, site=text), EITHER)
        for number, text in enumerate(("=cmd|'/c calc'!A1", "+1", "@SUM(1)"))
    },
    "38 odd text": Input(lambda path: good(path, site="H\u202eA\u200bM 😀"), EITHER),
    "39 <script>alert(1)</script>": Input(
        lambda path: good(path, site="<script>alert(1)</script>", settings={"Title": "{{7*7}} <b>%s%n"}), EITHER),
    "40 sheets": Input(names_of_sheets, SOLVED),
    "40 missing sheet": Input(lambda path: write_book(path, {
        name: rows for name, rows in good_sheets().items() if name != "Customers"})),
    "53 no such job": Input(lambda path: write_book(path, {"Settings": [["Setting", "Value"], ["Job", "routing"]]})),
    "57 impossible": Input(lambda path: good(path, settings={"Most sites": 1, "Fewest sites": 2})),
    "worksheet alone": Input(raw(lambda: sheet_xml("").encode())),
    "strict": Input(replaced("xl/workbook.xml", MAIN.encode(), b"http://purl.oclc.org/ooxml/spreadsheetml/main")),
}  # fmt: skip

HEAVY: dict[str, Input] = {
    "32 million rows": Input(million_rows),
    "32 formatted rows": Input(formatted_rows, SOLVED),
    "32 half a million lanes": Input(many_lanes),
}
