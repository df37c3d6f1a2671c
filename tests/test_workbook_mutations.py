"""Mutated workbooks: each is read or refused in words, and what is read can be answered."""

import random
import time
from pathlib import Path

import pytest

from ledgersolve.workbook.graft import graft
from ledgersolve.workbook.package import open_package
from ledgersolve.workbook.problems import Problem, UnreadableWorkbookError
from ledgersolve.workbook.sheets import ResultSheet
from tests.mutations import mutated
from tests.packages import contents, parts_of, sheet_xml, strings_xml, styles_xml, zipped
from tests.rich_book import rich_book

MARKS = [Problem("error", "k", "Sites", "B3", "t", "", "", "", ("B4",), 2, "number")]


def plain_parts() -> dict[str, bytes]:
    """A small workbook with every usual kind of part."""
    rows = ('<row r="1"><c r="A1" t="s"><v>0</v></c><c r="B1" s="1"><v>3</v></c><c r="C1" t="inlineStr"><is><t>x'
            '</t></is></c></row><row r="2" hidden="1"><c r="A2"><f>A1</f></c></row>')
    made = parts_of({"Sites": sheet_xml(rows)}, strings=strings_xml("<t>a</t>"), styles=styles_xml("", 14))
    return {part: content if isinstance(content, bytes) else content.encode() for part, content in made.items()}


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


def run(folder: Path, count: int, seed: int, longest: float = float("inf")) -> dict[str, int]:
    """Outcomes of ``count`` mutated workbooks, or of as many as ``longest`` seconds allow."""
    draw = random.Random(seed)
    bases = [contents(rich_book(folder / "rich.xlsx", macros=False)), plain_parts()]
    found = {"refused": 0, "answered": 0}
    until = time.monotonic() + longest
    for _ in range(count):
        path = zipped(folder / "mutated.xlsx", mutated(draw.choice(bases), draw))
        found[outcome(path, folder / "answer.xlsx")] += 1
        if time.monotonic() > until:
            break
    return found


def test_mutated_workbooks_are_read_or_refused(tmp_path: Path) -> None:
    """Of 150 mutated workbooks each is refused in words or answered, twice over; both happen."""
    found = run(tmp_path, 150, seed=20261201)
    assert min(found.values()) > 20


@pytest.mark.long
@pytest.mark.timeout(3600)
def test_many_mutated_workbooks_are_read_or_refused(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Of 20,000 mutated workbooks (or those of 25 minutes) each is refused in words or answered, and counted."""
    seed = random.randrange(10**9)
    found = run(tmp_path, 20_000, seed, longest=1500.0)
    with capsys.disabled():
        print(f"\n{sum(found.values()):,} mutated workbooks of seed {seed}: {found}")
    assert min(found.values()) > 500
