"""Returned workbooks for tests: an analyst's book read, solved, audited, reported and grafted, without the job."""

from collections.abc import Mapping
from dataclasses import replace
from datetime import datetime
from pathlib import Path

import numpy as np

from ledgersolve.contract import Reading, read_workbook
from ledgersolve.lot_sizing.audit import audit as audit_lots
from ledgersolve.lot_sizing.case import Case as LotCase
from ledgersolve.lot_sizing.plan import Plan as LotPlan
from ledgersolve.lot_sizing.plan import plan_from_made
from ledgersolve.lot_sizing.solve import solve as solve_lots
from ledgersolve.mip import Limits, Solved, Verdict
from ledgersolve.report.inputs import LotReport, RunFacts, SiteReport, Today, VariantResult
from ledgersolve.report.lot_book import lot_sheets
from ledgersolve.report.names import wanted_names
from ledgersolve.report.site_book import site_sheets
from ledgersolve.site_selection.audit import audit as audit_sites
from ledgersolve.site_selection.case import Case as SiteCase
from ledgersolve.site_selection.plan import Plan as SitePlan
from ledgersolve.site_selection.solve import solve as solve_sites
from ledgersolve.workbook.graft import graft, plan_names
from ledgersolve.workbook.package import open_package

FACTS = RunFacts("book.xlsx", "0" * 64, datetime(2026, 12, 1, 12, 0), (("LedgerSolve", "0.1.0"), ("Solver", "1")),
                 (("read", 0.01), ("solve", 0.5)))
LIMITS = Limits(20.0)


def reading_of(source: Path) -> Reading:
    """Read a workbook."""
    with open_package(source) as package:
        return read_workbook(package, source.name)


def site_report(source: Path, prices: np.ndarray | None = None) -> SiteReport:
    """Solve and audit a site-selection workbook; ``prices`` take the place of the solver's own."""
    reading = reading_of(source)
    case = reading.case
    assert isinstance(case, SiteCase), [problem.found for problem in reading.problems]
    solved = solve_sites(case, LIMITS)
    if prices is not None:
        solved = replace(solved, prices=prices)
    return SiteReport(reading, case, solved, audit_sites(case, _plan(solved)), FACTS, _site_today(case),
                      tuple(_variant(case, variant) for variant in case.variants))


def _variant(case: SiteCase, variant) -> VariantResult:
    changed = case.under(variant)
    solved = solve_sites(changed, LIMITS)
    return VariantResult(variant, solved, None if solved.plan is None else audit_sites(changed, solved.plan))


def _site_today(case: SiteCase) -> Today[SitePlan] | None:
    if not case.compare_today:
        return None
    solved = solve_sites(case.as_today(), LIMITS)
    return Today(solved, None if solved.plan is None else audit_sites(case.as_today(), solved.plan))


def lot_report(source: Path) -> LotReport:
    """Solve and audit a lot-sizing workbook."""
    reading = reading_of(source)
    case = reading.case
    assert isinstance(case, LotCase), [problem.found for problem in reading.problems]
    solved = solve_lots(case, LIMITS)
    today = None
    if case.compare_today and case.today is not None:
        plan = plan_from_made(case, case.today)
        checked = audit_lots(case, plan)
        today = Today(Solved(Verdict.BEST_FOUND, plan, checked.total, None), checked)
    return LotReport(reading, case, solved, audit_lots(case, _plan(solved)), FACTS, today)


def _plan(solved: Solved) -> SitePlan | LotPlan:
    assert solved.plan is not None
    return solved.plan


def returned(source: Path, target: Path, given: SiteReport | LotReport) -> Path:
    """Graft the sheets of a report into a copy of its workbook."""
    site = isinstance(given, SiteReport)
    names = plan_names(source, wanted_names("site selection" if site else "lot sizing"))
    graft(source, target, made(given, names))
    return target


def made(given: SiteReport | LotReport, names: Mapping[str, str] | None = None) -> list:
    """Sheets of a report."""
    if isinstance(given, SiteReport):
        return site_sheets(given, names or {})
    return lot_sheets(given, names or {})
