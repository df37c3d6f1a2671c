"""Twenty faults mended in a copy that went back, saved by LibreOffice, dropped again: list and marks are gone."""

import re
import zipfile
from pathlib import Path

import openpyxl
import pytest

from ledgersolve import Outcome, check_workbook, solve_workbook
from tests.books import write_book
from tests.faults.corpus import FAULTS, lot, place, site
from tests.office import needs_office
from tests.recalculation import convert

MENDABLE = [
    "text for a number", "thousands separator", "two readings", "negative cost", "error value", "never calculated",
    "date for a number", "yes for a number", "too large", "empty required", "duplicate code", "unknown rule",
    "no yes or no", "least above capacity", "unknown site in lanes", "unknown customer in lanes",
    "lane without distance under promise", "lot: text for demand", "lot: unknown item in demand",
    "lot: unknown resource", "lot: least above most lot", "lot: negative stock", "lot: capacity missing",
]
FLAG = b"ledgersolve-flag"


def mended(returned: Path, fault, folder: Path) -> Path:
    """The returned copy with the good figure back in the cell at fault, as the analyst would type it."""
    good = (lot if fault.base is lot else site)()
    book = openpyxl.load_workbook(returned)
    for sheet, cell, _ in fault.errors:
        row, column = place(cell)
        book[sheet][cell].value = good[sheet][row][column]
        book[sheet][cell].number_format = "General"
    path = folder / f"{MENDABLE.index(fault.name):02d}.xlsx"
    book.save(path)
    return path


def sheets_of(path: Path) -> dict[str, bytes]:
    """Bytes of each sheet by its name."""
    with zipfile.ZipFile(path) as package:
        book = package.read("xl/workbook.xml").decode()
        links = package.read("xl/_rels/workbook.xml.rels").decode()
        targets = {}
        for link in re.findall(r"<Relationship [^>]*>", links):
            target = attribute(link, "Target").lstrip("/")
            targets[attribute(link, "Id")] = target if target.startswith("xl/") else f"xl/{target}"
        tabs = re.findall(r"<sheet [^>]*>", book)
        return {attribute(tab, "name"): package.read(targets[attribute(tab, "r:id")]) for tab in tabs}


def attribute(element: str, name: str) -> str:
    """Value of an attribute in a piece of XML."""
    return re.search(rf'\b{name}="([^"]+)"', element).group(1)


def without_marks(sheet: bytes) -> bytes:
    """The sheet as LibreOffice saved it, less our conditional formats (found here in a way of their own)."""
    kept = re.sub(rb"<conditionalFormatting (?:(?!</conditionalFormatting>).)*ledgersolve-flag.*?"
                  rb"</conditionalFormatting>", b"", sheet, flags=re.DOTALL)
    return re.sub(rb' priority="\d+"| tabSelected="\w+"', b"", kept)


@needs_office
@pytest.mark.slow
def test_mended_copies_come_back_clean(tmp_path) -> None:
    """For each fault: solved, no list, no mark, and every sheet of the analyst as LibreOffice left it."""
    faults = [fault for fault in FAULTS if fault.name in MENDABLE]
    assert len(faults) >= 20
    paths = []
    for fault in faults:
        sheets = fault.base()
        fault.change(sheets)
        bad = write_book(tmp_path / "bad.xlsx", sheets)
        returned = check_workbook(bad, tmp_path / "returned").returned
        assert any(FLAG in sheet for sheet in sheets_of(returned).values()), f"{fault.name}: nothing is marked"
        paths.append(mended(returned, fault, tmp_path))
    saved = convert(paths, tmp_path / "office")
    for fault, path in zip(faults, saved, strict=True):
        answer = solve_workbook(path, tmp_path / "answers")
        assert answer.outcome is Outcome.SOLVED, f"{fault.name}: {[p.found for p in answer.problems]}"
        after = sheets_of(answer.returned)
        assert "To fix" not in after
        assert not any(FLAG in sheet for sheet in after.values()), fault.name
        for name, sheet in sheets_of(path).items():
            if name in sheets_named(fault):
                assert without_marks(after[name]) == without_marks(sheet), f"{fault.name}: {name}"


def sheets_named(fault) -> set[str]:
    """The analyst's own sheets."""
    return set((lot if fault.base is lot else site)())
