"""Load of resources: a period is full when nothing more can be had, overtime included, and not before."""

from dataclasses import replace
from pathlib import Path

import openpyxl
import pytest
from openpyxl.worksheet.worksheet import Worksheet

from ledgersolve.report.inputs import LotReport
from tests import books
from tests.recalculation import OFFICE, differences, recalculated_all
from tests.report_books import lot_report, returned

needs_office = pytest.mark.skipif(OFFICE is None, reason="LibreOffice is not installed")


def line_book(path: Path, demand: list[float], limit: float | None = 6.0) -> Path:
    """One line of 28 hours a week and some overtime; an hour a unit, stock too dear to keep."""
    items = [{"Item": "CREAM", "Setup cost": 1.0, "Holding cost": 900.0, "Resource": "LINE", "Time per unit": 1.0}]
    return books.lot_book(path, items, [demand], periods=[{"Period": f"W{t + 1}"} for t in range(len(demand))],
                          resources=[{"Resource": "LINE", "Capacity": 28.0, "Overtime limit": limit,
                                      "Overtime cost": 2.0}], settings={"Period unit": "week"})


@pytest.fixture(scope="module")
def line(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, LotReport]:
    """Five weeks: below capacity, some overtime, all overtime, at capacity, nothing."""
    folder = tmp_path_factory.mktemp("line")
    source = line_book(folder / "source.xlsx", [20.0, 28.2, 34.0, 28.0, 0.0])
    given = lot_report(source)
    return returned(source, folder / "out.xlsx", given), given


def figures(sheet: Worksheet, title: str, periods: int = 5) -> list[float]:
    """Figures by period of the one resource in the block with this title."""
    row = next(row[0].row for row in sheet.iter_rows() if str(row[0].value).startswith(title))
    codes = next(k for k in range(row, row + 4) if sheet.cell(k, 1).value == "LINE")
    return [sheet.cell(codes, 5 + t).value for t in range(periods)]


def points(path: Path) -> str:
    """What limits the plan, as the first page says it."""
    cells = [cell for row in openpyxl.load_workbook(path)["Decision"].iter_rows() for cell in row]
    title = next(cell for cell in cells if cell.value == "What limits the plan")
    return next(cell.value for cell in cells if (cell.row, cell.column) == (title.row + 1, title.column))


def test_available_is_what_can_be_had(line) -> None:
    """Capacity, overtime of the plan and time available stand apart; the part is of all that can be had."""
    sheet = openpyxl.load_workbook(line[0], data_only=True)["Plan load"]
    assert figures(sheet, "Load (time units)") == pytest.approx([20.0, 28.2, 34.0, 28.0, 0.0])
    assert figures(sheet, "Capacity (time units)") == [28.0] * 5
    assert figures(sheet, "Overtime in the plan") == pytest.approx([0.0, 0.2, 6.0, 0.0, 0.0], abs=1e-9)
    assert figures(sheet, "Time available: capacity and all overtime") == [34.0] * 5
    assert figures(sheet, "Load of the time available") == pytest.approx([20 / 34, 28.2 / 34, 1.0, 28 / 34, 0.0])


def test_full_is_full_with_all_overtime(line) -> None:
    """Only the week with all overtime is full; one with a little needs it, one at capacity has none to spare."""
    words = points(line[0])
    assert "LINE is full in week W3, with all the overtime allowed." in words
    assert "LINE needs some overtime in week W2." in words
    assert "LINE has no regular time left in week W4; the overtime allowed is not used." in words


def test_without_overtime_capacity_is_the_limit(tmp_path: Path) -> None:
    """No overtime allowed: one block fewer, and a week at capacity is full."""
    source = line_book(tmp_path / "source.xlsx", [20.0, 28.0], None)
    path = returned(source, tmp_path / "out.xlsx", lot_report(source))
    sheet = openpyxl.load_workbook(path, data_only=True)["Plan load"]
    assert figures(sheet, "Load of the time available", 2) == pytest.approx([20 / 28, 1.0])
    assert not [row for row in sheet.iter_rows() if str(row[0].value).startswith("Time available")]
    assert "LINE is full in week W2." in points(path)


@needs_office
@pytest.mark.slow
def test_formulas_give_the_figures_and_checks_watch_overtime(line, tmp_path: Path) -> None:
    """LibreOffice gives the cached values; an hour of overtime taken out of the plan breaks the capacity rule."""
    book = openpyxl.load_workbook(line[0])
    sheet = book["Plan load"]
    row = next(row[0].row for row in sheet.iter_rows() if str(row[0].value).startswith("Overtime in the plan"))
    sheet.cell(row + 2, 7).value = 5.0
    assert sheet.cell(row + 2, 1).value == "LINE"
    doctored = tmp_path / "doctored.xlsx"
    book.save(doctored)
    values = recalculated_all([line[0], doctored], tmp_path)
    assert differences(line[0], values[line[0]]) == []
    rows = reversed(list(values[doctored]["Proof"].iter_rows()))  # live checks stand above the audit's list
    states = {row[0].value: row[5].value for row in rows if row[0].value}
    assert (states["Capacity"], states["Overtime limit"]) == ("BROKEN", "ok")


def test_rounding_of_the_machine_is_no_loss(tmp_path: Path) -> None:
    """A plan that loses 7e-14 units loses none: sheets and ledger show 0, and recalculate to it."""
    source = books.lot_book(tmp_path / "source.xlsx", [
        {"Item": "A", "Setup cost": 5.0, "Holding cost": 1.0, "Lost sale cost": 90.0}], [[10.0, 20.0]])
    given = lot_report(source)
    plan = given.plan
    lost = plan.lost.copy()
    lost[0, 1] = 7.3e-14
    solved = replace(given.solved, plan=replace(plan, lost=lost))
    path = returned(source, tmp_path / "out.xlsx", replace(given, solved=solved))
    book = openpyxl.load_workbook(path, data_only=True)
    for name in ("Plan lost", "Ledger"):
        tiny = [cell.coordinate for row in book[name].iter_rows() for cell in row
                if isinstance(cell.value, float) and 0 < abs(cell.value) < 1e-9]
        assert tiny == []
    assert "will never be delivered" not in str(book["Decision"]["A3"].value)
