"""Mutated workbooks: each is read or refused in words, and what is read can be answered."""

import random
import re
from pathlib import Path

import pytest

from ledgersolve.workbook.graft import graft
from ledgersolve.workbook.package import open_package
from ledgersolve.workbook.problems import Problem, UnreadableWorkbookError
from ledgersolve.workbook.sheets import ResultSheet
from tests.packages import contents, parts_of, sheet_xml, strings_xml, styles_xml, zipped
from tests.rich_book import rich_book

PIECES = [b"<", b">", b'"', b"/", b"&amp;", b"<!--", b"-->", b"<![CDATA[", b"]]>", b"x:", b"sheet", b"1", b"-1",
          b"99999999999", b'r:id=""', b' t="s"', b"<c/>", b"<v/>", b"<si/>", b"rId1", b"\0", b"\xff", b"<sheetData/>",
          b"</sheetData>", b'count="x"', b'localSheetId="-5"', b'sheetId="abc"', b'priority="x"', b"<!DOCTYPE x>"]
VALUES = [b"", b"0", b"-1", b"99999999", b"x", b"../../x", b"A1:XFD1048576", b"#REF!", b"_ledgersolve_sheet"]
OFTEN = ["[Content_Types].xml", "_rels/.rels", "xl/workbook.xml", "xl/_rels/workbook.xml.rels", "xl/styles.xml",
         "xl/sharedStrings.xml", "xl/worksheets/sheet1.xml", "xl/worksheets/_rels/sheet1.xml.rels"]
MARKS = [Problem("error", "k", "Sites", "B3", "t", "", "", "", ("B4",), 2, "number")]


def plain_parts() -> dict[str, bytes]:
    """A small workbook with every usual kind of part."""
    rows = ('<row r="1"><c r="A1" t="s"><v>0</v></c><c r="B1" s="1"><v>3</v></c><c r="C1" t="inlineStr"><is><t>x'
            '</t></is></c></row><row r="2" hidden="1"><c r="A2"><f>A1</f></c></row>')
    made = parts_of({"Sites": sheet_xml(rows)}, strings=strings_xml("<t>a</t>"), styles=styles_xml("", 14))
    return {part: content if isinstance(content, bytes) else content.encode() for part, content in made.items()}


def mutated(parts: dict[str, bytes], draw: random.Random) -> dict[str, bytes]:
    """The parts with one to four changes."""
    changed = dict(parts)
    for _ in range(draw.choice((1, 1, 1, 2, 4))):
        names = [name for name in changed if name.endswith((".xml", ".rels"))]
        often = [name for name in names if name in OFTEN]
        name = draw.choice(names if draw.random() < 0.3 or not often else often)
        content = bytearray(changed[name])
        if draw.random() < 0.03 or not content:
            del changed[name]
        else:
            _mutate(content, draw)
            changed[name] = bytes(content)
    return changed


def _mutate(content: bytearray, draw: random.Random) -> None:
    start = draw.randrange(len(content))
    end = start + draw.choice((1, 1, 3, 10, 50))
    way = draw.random()
    if way < 0.2:
        del content[start:end]
    elif way < 0.55:
        content[start:start] = draw.choice(PIECES)
    elif way < 0.65:
        content[start] = draw.randrange(256)
    elif way < 0.75:
        content[start:end] *= 2
    else:
        pattern, new = (rb'"[^"]*"', b'"' + draw.choice(VALUES) + b'"') if way < 0.9 else (rb"<[^<>]*>", b"")
        found = list(re.finditer(pattern, bytes(content)))
        if found:
            match = draw.choice(found)
            content[match.start():match.end()] = new


def outcome(path: Path, answer: Path) -> str:
    """What becomes of a file; anything but an answer or a refusal in words is an error."""
    try:
        with open_package(path) as package:
            for sheet in package.sheets:
                for _ in package.cells(sheet.name):
                    pass
                package.details(sheet.name)
    except UnreadableWorkbookError as refused:
        assert refused.problem.found
        assert refused.problem.remedy
        return "refused"
    sheet = ResultSheet("An answer of ours")
    sheet.put(0, 0, "text")
    graft(path, answer, [sheet], MARKS)
    graft(answer, answer, [sheet])
    with open_package(answer) as package:
        assert sheet.name in {own.name for own in package.own_sheets}
    return "answered"


def run(folder: Path, count: int, seed: int) -> dict[str, int]:
    """Outcomes of ``count`` mutated workbooks."""
    draw = random.Random(seed)
    bases = [contents(rich_book(folder / "rich.xlsx", macros=False)), plain_parts()]
    found = {"refused": 0, "answered": 0}
    for _ in range(count):
        path = zipped(folder / "mutated.xlsx", mutated(draw.choice(bases), draw))
        found[outcome(path, folder / "answer.xlsx")] += 1
    return found


def test_mutated_workbooks_are_read_or_refused(tmp_path: Path) -> None:
    """Of 150 mutated workbooks each is refused in words or answered, twice over; both happen."""
    found = run(tmp_path, 150, seed=20261201)
    assert min(found.values()) > 20


@pytest.mark.long
@pytest.mark.timeout(3600)
def test_many_mutated_workbooks_are_read_or_refused(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Of 20,000 mutated workbooks each is refused in words or answered; the counts are reported."""
    found = run(tmp_path, 20_000, seed=random.randrange(10**9))
    with capsys.disabled():
        print(f"\n20,000 mutated workbooks: {found}")
    assert min(found.values()) > 2000
