"""Result sheets as values: what a solved, faulty or impossible workbook comes back with."""

from collections.abc import Mapping

from ledgersolve.report import names
from ledgersolve.report.answers import answers_sheet
from ledgersolve.report.inputs import LotReport, SiteReport
from ledgersolve.report.lot_decision import lot_decision
from ledgersolve.report.lot_details import optional_sheets, plan_lots, plan_stock
from ledgersolve.report.lot_ledger import lot_ledger
from ledgersolve.report.lot_places import LotPlaces
from ledgersolve.report.lot_proof import lot_proof
from ledgersolve.report.names import wanted_names
from ledgersolve.report.outcomes import failed_sheets, fix_sheets, no_plan_sheets, unreadable_sheets
from ledgersolve.report.run_record import outcome_of, run_record
from ledgersolve.report.site_decision import site_decision
from ledgersolve.report.site_details import plan_customers, plan_deliveries, plan_sites
from ledgersolve.report.site_ledger import site_ledger
from ledgersolve.report.site_map import load_picture, site_map
from ledgersolve.report.site_places import SitePlaces
from ledgersolve.report.site_proof import site_proof
from ledgersolve.report.variants import plan_variants
from ledgersolve.workbook.sheets import ResultSheet

__all__ = [
    "failed_sheets", "fix_sheets", "lot_sheets", "no_plan_sheets", "site_sheets", "unreadable_sheets", "wanted_names",
]


def site_sheets(report: SiteReport, settled: Mapping[str, str]) -> list[ResultSheet]:
    """Sheets of a solved site-selection workbook, first to last.

    ``settled`` gives the final name of each name in ``wanted_names("site selection")``.
    """
    at = SitePlaces(report, settled)
    ledger = site_ledger(at)
    proof = site_proof(at, ledger)
    drawn = site_map(at)
    decision = site_decision(at, ledger, proof.checks, load_picture(at) if drawn is None else drawn[1])
    record = run_record(at.name(names.RUN_RECORD), report.workbook, report.run,
                        outcome_of(report.solved, report.case.currency, at.per))
    sheets = [
        decision, ledger.sheet,
        plan_sites(at, ledger), plan_customers(at), plan_deliveries(at, ledger), plan_variants(at),
        answers_sheet(at.name(names.ANSWERS), report.answers, report.case.currency, at.per), *proof.sheets,
        None if drawn is None else drawn[0], record,
    ]
    return [sheet for sheet in sheets if sheet is not None]


def lot_sheets(report: LotReport, settled: Mapping[str, str]) -> list[ResultSheet]:
    """Sheets of a solved lot-sizing workbook, first to last; ``settled`` as for ``site_sheets``."""
    at = LotPlaces(report, settled)
    ledger = lot_ledger(at)
    proof, checks = lot_proof(at, ledger)
    record = run_record(at.name(names.RUN_RECORD), report.workbook, report.run,
                        outcome_of(report.solved, report.case.currency, ""))
    sheets = [
        lot_decision(at, ledger, checks), ledger.sheet, plan_lots(at), plan_stock(at), *optional_sheets(at),
        answers_sheet(at.name(names.ANSWERS), report.answers, report.case.currency, ""), *proof, record,
    ]
    return [sheet for sheet in sheets if sheet is not None]
