"""Large plans stay usable: one ledger line a site, laid-out costs up to a limit, bounded memory."""

import resource
import subprocess
import sys
from pathlib import Path

import numpy as np
import openpyxl
import pytest

from ledgersolve.report import price_sheet, site_places
from tests import report_cases
from tests.recalculation import OFFICE, differences, recalculated_all
from tests.report_books import returned, site_report
from tests.sheet_rules import check_workbook

needs_office = pytest.mark.skipif(OFFICE is None, reason="LibreOffice is not installed")


@needs_office
def test_beyond_the_limit_the_ledger_has_one_line_a_site(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    """Rates then stand beside the deliveries; total, rules and cached values are the same as with single lines."""
    monkeypatch.setattr(site_places, "LEDGER_DELIVERIES", 3)
    books = {}
    for name, write in (("sites", report_cases.rich_site_book), ("matrix", report_cases.matrix_site_book)):
        source = write(tmp_path / f"{name}.xlsx")
        given = site_report(source)
        target = returned(source, tmp_path / f"{name} solved.xlsx", given)
        assert check_workbook(target, source) == []
        ledger = openpyxl.load_workbook(target, data_only=True)["Ledger"]
        assert ledger["I5"].value == pytest.approx(given.audit.total)
        lanes = [row[2].value for row in ledger.iter_rows() if row[0].value == "line" and row[1].value == "Lane cost"]
        assert len(lanes) == len(set(lanes)) == int(given.plan.open.sum())
        books[name] = target
    values = recalculated_all(list(books.values()), tmp_path)
    assert [difference for book in books.values() for difference in differences(book, values[book])] == []


PRICES = np.array([60.0, 90.0, 70.0, 80.0, 50.0, 75.0, 65.0, 85.0, 55.0])


@needs_office
def test_costs_are_laid_out_up_to_a_limit(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    """The bound is the same whether costs come from the matrix, are linked, are figures, or are not laid out."""
    bounds, books = {}, {}
    for how, limits in {"matrix": {}, "linked": {}, "figures": {"LINKED_LANES": 0},
                        "not laid out": {"LINKED_LANES": 0, "COPIED_LANES": 0}}.items():
        source = report_cases.matrix_site_book(tmp_path / f"{how} source.xlsx")
        for name, value in limits.items():
            monkeypatch.setattr(price_sheet, name, value)
        if how != "matrix":
            monkeypatch.setattr(price_sheet, "own_matrix", lambda at, certificate: None)
        books[how] = returned(source, tmp_path / f"{how}.xlsx", site_report(source, PRICES))
        proof = openpyxl.load_workbook(books[how], data_only=True)["Proof"]
        bounds[how] = next(row[2].value for row in proof.iter_rows()
                           if str(row[0].value).startswith("No plan can cost less than ("))
    assert len({round(bound, 6) for bound in bounds.values()}) == 1, bounds
    values = recalculated_all(list(books.values()), tmp_path)
    assert [difference for book in books.values() for difference in differences(book, values[book])] == []


LARGE = """
import sys
import numpy as np
from datetime import datetime
from pathlib import Path
from types import SimpleNamespace
from ledgersolve.mip import Solved, Verdict
from ledgersolve.report.site_book import site_sheets
from ledgersolve.report.inputs import RunFacts, SiteReport
from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.case import plain_case
from ledgersolve.site_selection.plan import Plan
from ledgersolve.workbook.origins import Origins, TableMap
from ledgersolve.workbook.render import render
n, m = 50_000, 20
rng = np.random.default_rng(0)
case = plain_case(rng.uniform(1e4, 2e4, m), rng.uniform(1, 9, (m, n)), rng.integers(1, 100, n).astype(float))
site = case.lane_cost.argmin(axis=0)
plan = Plan(np.ones(m, dtype=bool), site, np.arange(n), np.ones(n), np.zeros(n))
found = audit(case, plan)
origins = Origins({
    "Customers": TableMap("Customers", {"Demand": 2}, {(c,): k + 2 for k, c in enumerate(case.customers)}),
    "Lanes": TableMap("Lanes", {"Unit cost": 3}, {(case.sites[j], c): k + 2 for k, (j, c) in
                                                   enumerate(zip(site, case.customers))})})
book = SimpleNamespace(title="large", currency="EUR", problems=(), run=SimpleNamespace(accepted_gap=0.01),
                       origins=origins, settings=(), defaults=(), road_cost=None, road_factor=1.0)
solved = Solved(Verdict.BEST_FOUND, plan, found.total, 0.9 * found.total)
report = SiteReport(book, case, solved, found, RunFacts("large.xlsx", "0" * 64, datetime(2026, 12, 1)))
render(site_sheets(report, {}), Path(sys.argv[1]))
"""


@pytest.mark.slow
def test_a_hundred_thousand_rows_fit_into_a_gigabyte(tmp_path: Path) -> None:
    """50,000 customers and as many deliveries, 100,000 rows of results, are written within 1 GB of memory."""
    target = tmp_path / "large.xlsx"

    def limited() -> None:
        resource.setrlimit(resource.RLIMIT_DATA, (1_000_000_000, 1_000_000_000))

    done = subprocess.run([sys.executable, "-c", LARGE, str(target)], check=False, capture_output=True, text=True,
                          preexec_fn=limited, timeout=250)
    assert done.returncode == 0, done.stderr
    sheets = openpyxl.load_workbook(target, read_only=True)
    assert sheets["Plan deliveries"].max_row == 50_004
    assert sheets["Plan customers"].max_row == 50_004
