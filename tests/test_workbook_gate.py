"""What a dropped file is: every kind that is no readable workbook is refused in its own words."""

import time
from collections.abc import Callable
from pathlib import Path

import pytest

from ledgersolve.workbook.container import Limits
from ledgersolve.workbook.gate import pass_gate
from ledgersolve.workbook.package import open_package
from ledgersolve.workbook.problems import UnreadableWorkbookError
from ledgersolve.workbook.refusals import EXPECTED, REASONS, refusal
from tests.packages import (
    HEAD,
    LINKS,
    MAIN,
    PACKAGE_TYPES,
    WORKBOOK_TYPE,
    Entry,
    entries_of,
    links_xml,
    parts_of,
    sheet_xml,
    styles_xml,
    types_xml,
    workbook_xml,
    zip_bytes,
    zipped,
)

ROWS = '<row r="1"><c r="A1"><v>1</v></c></row>'
BROKEN = "broken XML"
STRICT = "http://purl.oclc.org/ooxml"
DTD = "entity definitions"
OLE = b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + bytes(504)
LAUGHS = ('<!DOCTYPE x [<!ENTITY a "ha"><!ENTITY b "&a;&a;&a;&a;&a;&a;&a;&a;">'
          '<!ENTITY c "&b;&b;&b;&b;&b;&b;&b;&b;">]>')
FETCHED = '<!DOCTYPE x [<!ENTITY a SYSTEM "file:///etc/hostname">]>'


def parts(**changes: str | bytes) -> dict[str, str | bytes]:
    """Parts of a good workbook with some replaced."""
    short = {"workbook": "xl/workbook.xml", "sheet": "xl/worksheets/sheet1.xml",
             "types": "[Content_Types].xml", "root": "_rels/.rels", "links": "xl/_rels/workbook.xml.rels"}
    return parts_of({"Sites": sheet_xml(ROWS)}) | {short[name]: new for name, new in changes.items()}


def problem_of(path: Path, limits: Limits | None = None):
    """The problem a file is refused with, by opening it and reading every cell."""
    with pytest.raises(UnreadableWorkbookError) as caught, open_package(path, limits) as package:
        for sheet in package.sheets:
            list(package.cells(sheet.name))
    return caught.value.problem


def utf16(text: str) -> bytes:
    """Names in an OLE file are written in two bytes a character."""
    return text.encode("utf-16-le")


PLAIN_FILES: dict[str, tuple[Callable[[], bytes], str]] = {
    "empty": (lambda: b"", "empty file"),
    "zeros": (lambda: bytes(4096), "zeros"),
    "csv": (lambda: b"Site;Fixed cost\r\nHAM;1200,50\r\n", "text file"),
    "csv in UTF-16": (lambda: "Site\tCost\r\nÄ\t1".encode("utf-16"), "text file"),
    "html": (lambda: b"\xef\xbb\xbf <!DOCTYPE html><html><table></table></html>", "web page"),
    "html table": (lambda: b"<table><tr><td>1</td></tr></table>", "web page"),
    "html in UTF-16": (lambda: "<html><table></table></html>".encode("utf-16"), "web page"),
    "xml spreadsheet": (lambda: b'<?xml version="1.0"?><Workbook></Workbook>', "XML file"),
    "pdf": (lambda: b"%PDF-1.7 ...", "PDF"),
    "old workbook": (lambda: OLE + utf16("Root Entry") + bytes(44) + utf16("Workbook\0"), "old workbook"),
    "very old workbook": (lambda: OLE + utf16("Book\0"), "old workbook"),
    "password": (lambda: OLE + utf16("EncryptionInfo") + bytes(40) + utf16("EncryptedPackage"), "password"),
    "old document": (lambda: OLE + utf16("WordDocument\0"), "old office file"),
    "picture": (lambda: b"\x89PNG\r\n\x1a\n\0\0\0\rIHDR" + bytes(range(256)), "not a workbook"),
    "script before": (lambda: zip_bytes(entries_of(parts()), before=b"#!/bin/sh\nexit\n"), "bytes before"),
    "trailing": (lambda: zip_bytes(entries_of(parts()), behind=b"#!/bin/sh\n"), "bytes behind"),
    "truncated": (lambda: zip_bytes(entries_of(parts()))[:-30], "cut off"),
    "hole": (lambda: zip_bytes(entries_of(parts()))[:60] + bytes(30) + zip_bytes(entries_of(parts()))[90:],
             "damaged"),
    "empty archive": (lambda: zip_bytes([]), "archive"),
}


@pytest.mark.parametrize("case", PLAIN_FILES)
def test_each_kind_of_file_in_its_own_words(tmp_path: Path, case: str) -> None:
    """A file that is no workbook is refused as what it is."""
    make, kind = PLAIN_FILES[case]
    path = tmp_path / "a.xlsx"
    path.write_bytes(make())
    problem = problem_of(path)
    assert problem.kind == kind
    assert (problem.expected, problem.remedy) == (EXPECTED, REASONS[kind][1])


PACKAGES: dict[str, tuple[Callable[[], dict[str, str | bytes]], str]] = {
    "ods": (lambda: {"mimetype": "application/vnd.oasis.opendocument.spreadsheet", "content.xml": "<x/>"},
            "OpenDocument"),
    "odt": (lambda: {"mimetype": "application/vnd.oasis.opendocument.text", "content.xml": "<x/>"},
            "other document"),
    "xlsb": (lambda: parts(types=types_xml(
        {"xl/workbook.xml": "application/vnd.ms-excel.sheet.binary.macroEnabled.main"})), "binary workbook"),
    "docx": (lambda: parts(types=types_xml({"xl/workbook.xml": WORKBOOK_TYPE.replace(
        "spreadsheetml.sheet", "wordprocessingml.document")})), "other document"),
    "plain archive": (lambda: {"a.txt": "a", "b.csv": "b"}, "archive"),
    "no content list": (lambda: {name: new for name, new in parts().items() if name[0] != "["},
                        "no content list"),
    "no root links": (lambda: {name: new for name, new in parts().items() if name != "_rels/.rels"},
                      "no workbook part"),
    "link to nothing": (lambda: parts(root=links_xml([("r", "officeDocument", "xl/none.xml")])),
                        "no workbook part"),
    "link to no workbook": (lambda: parts(types=types_xml({})), "no workbook part"),
    "strict links": (lambda: parts(root=links_xml(
        [("r", f"{STRICT}/officeDocument/relationships/officeDocument", "xl/workbook.xml")])), "strict"),
    "strict workbook": (lambda: parts(workbook=workbook_xml(["Sites"]).replace(
        MAIN, f"{STRICT}/spreadsheetml/main")), "strict"),
    "strict by word": (lambda: parts(workbook=workbook_xml(["Sites"]).replace(
        "<workbook ", '<workbook conformance="strict" ')), "strict"),
    "signed": (lambda: parts(root=links_xml([
        ("r", "officeDocument", "xl/workbook.xml"),
        ("s", "http://schemas.openxmlformats.org/package/2006/relationships/digital-signature/origin",
         "_xmlsignatures/origin.sigs")])), "signed"),
    "signed by type": (lambda: parts(types=types_xml({
        "xl/workbook.xml": WORKBOOK_TYPE, "x.xml": f"{PACKAGE_TYPES}.digital-signature-xmlsignature+xml"})),
        "signed"),
    "signed by part": (lambda: parts() | {"_xmlsignatures/sig1.xml": "<x/>"}, "signed"),
    "laughs in a sheet": (lambda: parts(sheet=sheet_xml(ROWS).replace(HEAD, HEAD + LAUGHS)), DTD),
    "laughs in the content list": (lambda: parts(types=LAUGHS + "<Types/>"), DTD),
    "laughs in links": (lambda: parts(links=LAUGHS + "<Relationships/>"), DTD),
    "laughs in UTF-16": (lambda: parts(sheet=(LAUGHS + "<worksheet/>").encode("utf-16")), DTD),
    "laughs behind a long comment": (
        lambda: parts(sheet=f"<!--{'x ' * 100_000}-->{LAUGHS}<worksheet/>"), DTD),
    "laughs in a part nobody reads": (
        lambda: parts() | {"customXml/item1.xml": LAUGHS + "<x>&c;</x>"}, DTD),
    "fetching a file": (lambda: parts(sheet=sheet_xml(ROWS).replace(HEAD, HEAD + FETCHED)), DTD),
    "fetching an address": (
        lambda: parts(sheet='<!DOCTYPE x SYSTEM "http://localhost:9/x.dtd"><worksheet/>'), DTD),
    "undefined entity": (lambda: parts(sheet=sheet_xml('<row r="1"><c r="A1"><v>&no;</v></c></row>')),
                         BROKEN),
    "not well formed": (lambda: parts(sheet=sheet_xml(ROWS)[:-5]), BROKEN),
    "not well formed workbook": (lambda: parts(workbook="<workbook"), BROKEN),
    "not well formed links nobody reads": (lambda: parts() | {"xl/drawings/_rels/drawing1.xml.rels": "<x"}, BROKEN),
    "unknown encoding": (lambda: parts(sheet='<?xml version="1.0" encoding="UTF-7"?><worksheet/>'), BROKEN),
    "encoding of no such name": (
        lambda: parts(sheet='<?xml version="1.0" encoding="UTF-81"?><worksheet/>'), BROKEN),
    "encoding of two bytes": (
        lambda: parts(sheet='<?xml version="1.0" encoding="Shift_JIS"?><worksheet/>'), BROKEN),
    "number of five thousand digits": (
        lambda: parts(sheet=sheet_xml(f'<row r="{"9" * 5000}"/>')), "damaged"),
    "lying encoding": (lambda: parts(sheet=b'<?xml version="1.0" encoding="UTF-8"?><worksheet x="\xe4"/>'),
                       BROKEN),
    "no sheets": (lambda: parts(workbook=workbook_xml([])), "no sheet"),
    "missing sheet part": (lambda: {name: new for name, new in parts().items() if "sheet1" not in name},
                           "damaged"),
    "two sheets of one name": (lambda: parts(workbook=workbook_xml(["Sites", "SITES"])), "damaged"),
}


@pytest.mark.parametrize("case", PACKAGES)
def test_each_kind_of_package_in_its_own_words(tmp_path: Path, case: str) -> None:
    """A zip file that is no workbook, or one that cannot be kept whole or read safely, is refused as such."""
    make, kind = PACKAGES[case]
    assert problem_of(zipped(tmp_path / "a.xlsx", make())).kind == kind


def test_lock_files_and_large_files_are_known_by_name_and_size(tmp_path: Path) -> None:
    """The note beside an open workbook and a file above the limit are refused unread."""
    lock = tmp_path / "~$a.xlsx"
    lock.write_bytes(b"\x05admin")
    assert problem_of(lock).kind == "lock file"
    path = zipped(tmp_path / "a.xlsx", parts())
    assert problem_of(path, Limits(file_size=100)).kind == "file too large"


def test_bombs_are_refused_before_they_unfold(tmp_path: Path) -> None:
    """Sheets, texts and styles that unfold to hundreds of megabytes are refused from the directory alone."""
    row = b'<row r="1"><c r="A1"><v>1</v></c></row>'
    for name in ("xl/worksheets/sheet1.xml", "xl/sharedStrings.xml", "xl/styles.xml"):
        entries = [*entries_of(parts()), Entry(name.encode() + b"x.xml", row * 1_000_000)]
        path = tmp_path / "bomb.xlsx"
        path.write_bytes(zip_bytes(entries))
        before = time.process_time()
        assert problem_of(path).kind == "packed too densely"
        assert time.process_time() - before < 1
    many = [*entries_of(parts()), *(Entry(b"x%d.xml" % number) for number in range(5000))]
    path.write_bytes(zip_bytes(many))
    assert problem_of(path).kind == "too many parts"


def test_a_list_part_of_absurd_size_is_refused(tmp_path: Path) -> None:
    """A workbook part with fifty thousand names is read, one beyond the limit refused."""
    names = "".join(f'<definedName name="n{number}">Sites!$A${number}</definedName>'
                    for number in range(1, 50_001))
    path = zipped(tmp_path / "a.xlsx", parts(
        workbook=workbook_xml(["Sites"], inside=f"<definedNames>{names}</definedNames>")))
    with open_package(path) as package:
        assert [sheet.name for sheet in package.sheets] == ["Sites"]
    assert problem_of(path, Limits(part_size=1_000_000)).kind == "too large inside"


def test_encodings_are_read_right(tmp_path: Path) -> None:
    """UTF-16 with its mark, UTF-8 with a mark and Latin-1 with its declaration give the same text."""
    rows = '<row r="1"><c r="A1" t="inlineStr"><is><t>Größe</t></is></c></row>'
    plain = sheet_xml(rows)
    for content in (plain.replace("UTF-8", "UTF-16").encode("utf-16"), plain.encode("utf-8-sig"),
                    plain.replace("UTF-8", "ISO-8859-1").encode("latin-1")):
        with open_package(zipped(tmp_path / "a.xlsx", parts(sheet=content))) as package:
            assert [cell.value for cell in package.cells("Sites")] == ["Größe"]


def test_words_about_markup_in_a_cell_are_no_definition(tmp_path: Path) -> None:
    """A text that speaks of a document type is a text."""
    rows = '<row r="1"><c r="A1" t="inlineStr"><is><t><![CDATA[<!DOCTYPE html>]]></t></is></c></row>'
    with open_package(zipped(tmp_path / "a.xlsx", parts(sheet=sheet_xml(rows)))) as package:
        assert [cell.value for cell in package.cells("Sites")] == ["<!DOCTYPE html>"]


def test_a_broken_part_that_is_never_read_is_left_alone(tmp_path: Path) -> None:
    """Only what is read must be well formed: old drawings often are not."""
    path = zipped(tmp_path / "a.xlsx", parts() | {"xl/drawings/vmlDrawing1.vml": "<xml><br></xml>"})
    with pass_gate(path) as container:
        assert container.find("xl/drawings/vmldrawing1.vml") is not None


def test_every_refusal_reads_well() -> None:
    """Every reason has words for what was found and what to do, and shows its detail where it has one."""
    for kind, (found, remedy) in REASONS.items():
        problem = refusal(kind, "DETAIL").problem
        assert problem.is_error
        assert problem.found == found.replace("{detail}", "DETAIL")
        assert problem.remedy == remedy
        assert "{" not in problem.found + problem.remedy


def test_names_from_a_file_cannot_forge_lines() -> None:
    """Control and direction signs in a name are shown by their code; a long name is cut."""
    found = refusal("part name", "a\nb\u202ec" + "x" * 300).problem.found
    assert "a<U+000A>b<U+202E>c" in found
    assert len(found) < 220


def test_macros_and_links_are_told(tmp_path: Path) -> None:
    """A workbook with macros and external links is read, and says that it has them."""
    links = [("rId1", "worksheet", "worksheets/sheet1.xml"), ("rId8", "externalLink", "externalLinks/x1.xml"),
             ("rId9", "http://schemas.microsoft.com/office/2006/relationships/vbaProject", "vbaProject.bin")]
    made = parts(links=links_xml(links))
    made |= {"xl/vbaProject.bin": b"\xd0\xcf", "xl/externalLinks/x1.xml": "<x/>"}
    made["[Content_Types].xml"] = str(made["[Content_Types].xml"]).replace(
        WORKBOOK_TYPE, "application/vnd.ms-excel.sheet.macroEnabled.main+xml")
    with open_package(zipped(tmp_path / "a.xlsm", made)) as package:
        assert package.macros
        assert package.external_links
    with open_package(zipped(tmp_path / "b.xlsx", parts())) as package:
        assert not package.macros
        assert not package.external_links


def test_targets_are_found_however_they_are_written(tmp_path: Path) -> None:
    """Absolute, dotted, percent-coded and differently cased targets lead to the sheet."""
    for target in ("/xl/worksheets/sheet1.xml", "../xl/worksheets/sheet1.xml", "worksheets/sheet%31.xml",
                   "Worksheets/SHEET1.xml"):
        made = parts(links=links_xml([("rId1", "worksheet", target)]))
        with open_package(zipped(tmp_path / "a.xlsx", made)) as package:
            assert [cell.value for cell in package.cells("Sites")] == [1.0]


def test_prefixed_markup_is_read(tmp_path: Path) -> None:
    """A workbook whose every element carries a prefix is read like any other."""
    book = (f'<x:workbook xmlns:x="{MAIN}" xmlns:q="{LINKS}"><x:sheets>'
            '<x:sheet name="Sites" sheetId="1" q:id="rId1"/></x:sheets></x:workbook>')
    sheet = (f'<x:worksheet xmlns:x="{MAIN}"><x:sheetData><x:row r="2"><x:c r="B2" t="s"><x:v>0</x:v></x:c>'
             "</x:row></x:sheetData></x:worksheet>")
    made = parts_of({"Sites": sheet}, strings=f'<x:sst xmlns:x="{MAIN}"><x:si><x:t>HAM</x:t></x:si></x:sst>',
                    styles=styles_xml())
    made["xl/workbook.xml"] = book
    with open_package(zipped(tmp_path / "a.xlsx", made)) as package:
        assert [(cell.address, cell.value) for cell in package.cells("Sites")] == [("B2", "HAM")]


def test_a_sheet_far_too_large_is_refused_before_its_first_cell(tmp_path: Path) -> None:
    """Rows and cells of a large part are counted on the way through the gate; a sheet nobody reads harms nobody."""
    rows = "".join(f'<row r="{row}"><c r="A{row}"><v>1</v></c></row>' for row in range(1, 200_001))
    path = zipped(tmp_path / "long.xlsx", parts_of({"Sites": sheet_xml(ROWS), "Raw data": sheet_xml(rows)}))
    for limits, kind in ((Limits(rows=150_000), "too many rows"), (Limits(cells=150_000), "too many cells")):
        with open_package(path, limits) as package:
            assert len(list(package.cells("Sites"))) == 1
            with pytest.raises(UnreadableWorkbookError) as caught:
                next(package.cells("Raw data"))
        assert caught.value.problem.kind == kind
        assert "150,000" in caught.value.problem.found


def test_names_without_end_are_refused(tmp_path: Path) -> None:
    """More defined names than any workbook needs are refused; as many as allowed are read."""
    names = "".join(f'<definedName name="n{number}">Sites!$A$1</definedName>' for number in range(11))
    path = zipped(tmp_path / "names.xlsx", parts(workbook=workbook_xml(["Sites"], inside=f"<definedNames>{names}"
                                                                       "</definedNames>")))
    assert problem_of(path, Limits(names=10)).kind == "too many names"
    with open_package(path, Limits(names=11)) as package:
        assert len(package.sheets) == 1
