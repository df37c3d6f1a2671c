"""Whole returned workbooks: rules for good sheets, recalculation elsewhere, schema, changed and doctored cells."""

import re
import shutil
import subprocess
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import openpyxl
import pytest
from openpyxl.cell.cell import Cell
from openpyxl.utils import coordinate_to_tuple
from openpyxl.worksheet.worksheet import Worksheet
from openxml_audit import FileFormat, OpenXmlValidator

from ledgersolve.lot_sizing.audit import audit as audit_lots
from ledgersolve.report.inputs import LotReport, SiteReport
from ledgersolve.site_selection.audit import audit as audit_sites
from tests import report_cases
from tests.packages import contents, zipped
from tests.recalculation import OFFICE, convert, differences, recalculated_all
from tests.report_books import lot_report, reading_of, returned, site_report
from tests.sheet_rules import check_workbook, values_of

needs_office = pytest.mark.skipif(OFFICE is None, reason="LibreOffice is not installed")


@dataclass(frozen=True)
class Book:
    """A kind of workbook: how it is written and solved."""

    write: Callable[[Path], Path]
    solve: Callable[[Path], SiteReport | LotReport]


BOOKS = {
    "sites": Book(report_cases.rich_site_book, site_report),
    "matrix": Book(report_cases.matrix_site_book, site_report),
    "coordinates": Book(report_cases.coordinate_site_book, site_report),
    "whole demand": Book(lambda path: report_cases.matrix_site_book(path, "whole demand"), site_report),
    "lots": Book(report_cases.rich_lot_book, lot_report),
    "plain lots": Book(report_cases.plain_lot_book, lot_report),
}


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Callable[[str], tuple[Path, Path, SiteReport | LotReport]]:
    """Source, returned workbook and report of a kind, made once."""
    known: dict[str, tuple[Path, Path, SiteReport | LotReport]] = {}

    def of(kind: str) -> tuple[Path, Path, SiteReport | LotReport]:
        if kind not in known:
            folder = tmp_path_factory.mktemp("book")
            source = BOOKS[kind].write(folder / "book.xlsx")
            given = BOOKS[kind].solve(source)
            known[kind] = source, returned(source, folder / "book solved.xlsx", given), given
        return known[kind]

    return of


@pytest.mark.parametrize("kind", BOOKS)
def test_rules_for_good_sheets_hold(kind: str, made) -> None:
    """WB-01 to WB-23 hold on workbooks that use every feature, with names that try to break a sheet."""
    source, target, _ = made(kind)
    assert check_workbook(target, source) == []


@needs_office
def test_cached_values_are_right(made, tmp_path: Path) -> None:
    """LibreOffice, always recalculating, gives the cached value of every formula."""
    books = []
    for kind in BOOKS:
        books.append(tmp_path / f"{kind}.xlsx")
        shutil.copy(made(kind)[1], books[-1])
    values = recalculated_all(books, tmp_path)
    for book in books:
        assert differences(book, values[book]) == []


@pytest.mark.parametrize("kind", BOOKS)
def test_the_schema_finds_nothing(kind: str, made) -> None:
    """A schema check of the whole package reports nothing."""
    _, target, _ = made(kind)
    result = OpenXmlValidator(file_format=FileFormat.OFFICE_2019).validate(str(target))
    assert [f"{error.part_uri}: {error.description}" for error in result.errors] == []


@pytest.mark.parametrize("kind", BOOKS)
def test_equal_runs_give_equal_values(kind: str, made, tmp_path: Path) -> None:
    """WB-22: the same input solved again gives the same values."""
    source, target, _ = made(kind)
    again = returned(source, tmp_path / "again.xlsx", BOOKS[kind].solve(source))
    assert values_of(again, source) == values_of(target, source)


CHANGES = {
    "sites": [("Sites", "0005", "Fixed cost", 1234.5), ("Settings", "Cost per unit and distance", "Value", 0.05),
              ("Settings", "Road factor", "Value", 1.5), ("Settings", "Unmet demand cost", "Value", 33.0),
              ("Customers", "C4", "Demand", 71.0), ("Sites", "0005", "Handling cost", 9.0),
              ("Sites", "0001", "Closing cost", 66.0)],
    "matrix": [("Lane costs", "S1", "C2", 99.0), ("Lane costs", "S2", "C4", 98.0),
               ("Sites", "S1", "Fixed cost", 555.0),
               ("Customers", "C2", "Demand", 44.0)],
    "whole demand": [("Lane costs", "S1", "C2", 99.0), ("Lane costs", "S4", "C2", 99.0),
                     ("Customers", "C2", "Demand", 44.0),
                     ("Sites", "S1", "Handling cost", 2.5)],
    "lots": [("Items", "000", "Setup cost", 222.0), ("Items", "002", "Holding cost", 0.9),
             ("Settings", "Yearly holding rate (%)", "Value", 40), ("Items", "001", "Unit value", 99.0),
             ("Items", "000", "Unit cost", 0.7), ("Items", "002", "Lost sale cost", 31.0),
             ("Period costs", "004", "Holding cost", 3.0), ("Demand", "001", "W3", 7.0),
             ("Families", "F", "Setup cost", 77.0),
             ("Resources", "R1", "Overtime cost", 8.0), ("Resources", "R1", "Use cost", 17.0),
             ("Receipts", "001", "Quantity", 14.0), ("Items", "003", "Opening stock", 30.0)],
}


@pytest.fixture(scope="module")
def changed(made, tmp_path_factory: pytest.TempPathFactory) -> dict[str, tuple[openpyxl.Workbook, float]]:
    """By kind: the returned workbook recalculated with changed inputs, and the audit's cost with them."""
    folder = tmp_path_factory.mktemp("changed")
    targets, costs = {}, {}
    for kind, changes in CHANGES.items():
        source, target, given = made(kind)
        for book, name in ((source, f"{kind} source"), (target, kind)):
            opened = openpyxl.load_workbook(book)
            for sheet, code, title, value in changes:
                _cell(opened[sheet], code, title).value = value
            opened.save(folder / f"{name}.xlsx")
        costs[kind] = _cost_of(given, folder / f"{kind} source.xlsx")
        targets[kind] = folder / f"{kind}.xlsx"
    values = recalculated_all(list(targets.values()), folder)
    return {kind: (values[target], costs[kind]) for kind, target in targets.items()}


@needs_office
@pytest.mark.parametrize("kind", CHANGES)
def test_the_ledger_follows_changed_inputs(kind: str, made, changed) -> None:
    """After changed inputs, the recalculated ledger gives the audit's cost of the same plan with these inputs."""
    _, _, given = made(kind)
    values, cost = changed[kind]
    assert values["Ledger"]["I5"].value == pytest.approx(cost, rel=1e-9)
    assert abs(cost - given.audit.total) > 1.0
    assert any("changed after the run" in str(cell.value) for row in values["Decision"].iter_rows() for cell in row)


def _cell(sheet: Worksheet, code: str, title: str) -> Cell:
    """Cell by the code in the first column and the title in the first row; it holds something else than before."""
    column = next(cell.column for cell in sheet[1] if cell.value == title)
    return next(sheet.cell(row[0].row, column) for row in sheet.iter_rows(min_row=2) if str(row[0].value) == code)


def _cost_of(given: SiteReport | LotReport, source: Path) -> float:
    """The audit's cost of the same plan (the same sites and shares, or lots) with the changed inputs."""
    reading = reading_of(source)
    case = reading.case
    assert case is not None, [problem.found for problem in reading.problems]
    if isinstance(given, SiteReport):
        return audit_sites(case, given.plan).total
    plan, before = given.plan, given.case
    flows = np.cumsum((case.receipts - case.demand) - (before.receipts - before.demand), axis=1)
    opening = (case.opening_stock - before.opening_stock)[:, None]
    return audit_lots(case, replace(plan, stock=plan.stock + flows + opening)).total


def _first(sheet: Worksheet, title: str, value: object) -> Cell:
    """First cell with this value under the title in row 4."""
    column = next(cell.column for cell in sheet[4] if str(cell.value).startswith(title))
    below = (sheet.cell(row, column) for row in range(5, sheet.max_row + 1))
    return next(cell for cell in below if cell.value == value)


def _first_lot(sheet: Worksheet) -> Cell:
    """First cell of the plan of lots in which something is made."""
    return next(cell for row in sheet.iter_rows(min_row=5, min_col=5, max_col=10) for cell in row
                if isinstance(cell.value, int | float) and cell.value > 0)


DOCTORED = {
    "a site that delivers is marked closed": (
        "sites", "Plan sites", lambda s: _first(s, "Open in", "yes"), "no", "Open site"),
    "a delivery is cut": ("matrix", "Plan deliveries", lambda s: _first(s, "Share", 1), 0.5, "Demand"),
    "a delivery is doubled": ("matrix", "Plan deliveries", lambda s: _first(s, "Share", 1), 2, "Demand"),
    "a lot is dropped": ("lots", "Plan lots", _first_lot, 0, "Safety stock"),
    "a lot is too large": ("lots", "Plan lots", _first_lot, 5000, "Capacity"),
    "the only item has no first lot": ("plain lots", "Plan lots", _first_lot, 0, "Safety stock"),
}


@pytest.fixture(scope="module")
def doctored(made, tmp_path_factory: pytest.TempPathFactory) -> dict[str, openpyxl.Workbook]:
    """By kind of doctoring: the workbook recalculated after one plan cell was changed by hand."""
    folder = tmp_path_factory.mktemp("doctored")
    targets = {}
    for number, (how, (kind, sheet, find, value, _)) in enumerate(DOCTORED.items()):
        _, target, _ = made(kind)
        book = openpyxl.load_workbook(target)
        find(book[sheet]).value = value
        targets[how] = folder / f"{number}.xlsx"
        book.save(targets[how])
    values = recalculated_all(list(targets.values()), folder)
    return {how: values[target] for how, target in targets.items()}


@needs_office
@pytest.mark.parametrize("how", DOCTORED)
def test_a_doctored_plan_is_caught(how: str, doctored) -> None:
    """WB-09: a plan changed by hand turns its check, and the master check on the first page."""
    values, rule = doctored[how], DOCTORED[how][-1]
    broken = {row[0].value for row in values["Proof"].iter_rows() if len(row) > 5 and row[5].value == "BROKEN"}
    assert rule in broken
    assert any(cell.value == "A check is BROKEN" for row in values["Decision"].iter_rows() for cell in row)


@needs_office
def test_other_prices_still_give_a_bound(made, tmp_path: Path) -> None:
    """The proof needs no trust in its prices: with each price of the sheet changed, the sum still bounds the cost."""
    books = []
    for kind in ("matrix", "coordinates"):
        _, target, _ = made(kind)
        for factor in (0.5, 1.7):
            book = openpyxl.load_workbook(target)
            for cell in book["Proof prices"][7][2:]:
                if isinstance(cell.value, int | float):
                    cell.value *= factor
            books.append(tmp_path / f"{kind} {factor}.xlsx")
            book.save(books[-1])
    for kind in ("matrix", "coordinates"):
        shutil.copy(made(kind)[1], tmp_path / f"{kind} own.xlsx")
        books.append(tmp_path / f"{kind} own.xlsx")
    values = recalculated_all(books, tmp_path)
    saved = {book.stem: _most_saved(values[book]["Proof"]) for book in books}
    for kind in ("matrix", "coordinates"):
        assert -1e-6 <= saved[f"{kind} own"] < min(saved[f"{kind} 0.5"], saved[f"{kind} 1.7"])


def _most_saved(proof: Worksheet) -> float:
    """The most that a better plan could save, as the sheet adds it up."""
    return next(row[2].value for row in proof.iter_rows() if str(row[0].value).startswith("So a better plan"))


def test_the_decision_is_one_page(made) -> None:
    """The first sheet is set to print on one upright page of any paper."""
    for kind in ("sites", "lots"):
        sheet = openpyxl.load_workbook(made(kind)[1])["Decision"]
        assert sheet.sheet_properties.pageSetUpPr.fitToPage
        assert (sheet.page_setup.fitToWidth, sheet.page_setup.fitToHeight) in ((None, None), (1, 1))
        assert sheet.page_setup.orientation != "landscape"
        assert sheet.page_setup.paperSize in (None, 0)


PAPERS = {"A4": "9", "Letter": "1"}


@needs_office
@pytest.mark.skipif(shutil.which("pdftotext") is None, reason="poppler is not installed")
@pytest.mark.parametrize("paper", PAPERS)
def test_the_decision_prints_on_one_page(paper: str, made, tmp_path: Path) -> None:
    """On either paper exactly one page is the Decision's, and it holds all of it, from the title to the last line."""
    books = []
    for kind in ("sites", "lots"):
        parts = contents(made(kind)[1])
        part = "xl/worksheets/ledgersolve1.xml"
        parts[part] = parts[part].replace(b"<pageSetup ", f'<pageSetup paperSize="{PAPERS[paper]}" '.encode())
        books.append(zipped(tmp_path / f"{kind}.xlsx", parts))
    for pdf in convert(books, tmp_path, "pdf"):
        words = subprocess.run(["pdftotext", "-layout", str(pdf), "-"], check=True, capture_output=True, text=True)
        pages = [page for page in words.stdout.split("\f") if re.search(r"Decision\s+Page \d+ of", page)]
        assert len(pages) == 1
        for text in ("All together that costs", "Check before you act", "Words used here", "The run record lists"):
            assert text in " ".join(pages[0].split()), (pdf.name, text)


def test_links_lead_to_filled_cells(made) -> None:
    """Every link of the ledger leads to a cell of the analyst's that is there."""
    source, target, _ = made("sites")
    book, theirs = openpyxl.load_workbook(target), openpyxl.load_workbook(source)
    links = [cell.hyperlink for row in book["Ledger"].iter_rows() for cell in row if cell.hyperlink is not None]
    assert links
    for link in links:
        name, address = link.location.rsplit("!", 1)
        row, column = coordinate_to_tuple(address)
        assert theirs[name.strip("'")].max_row >= row
        assert theirs[name.strip("'")].max_column >= column
