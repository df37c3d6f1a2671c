"""All sheets of a solved site-selection workbook, in their order."""

from collections.abc import Mapping

from ledgersolve.report import names
from ledgersolve.report.answers import answers_sheet
from ledgersolve.report.inputs import SiteReport
from ledgersolve.report.run_record import outcome_of, run_record
from ledgersolve.report.site_decision import site_decision
from ledgersolve.report.site_details import plan_customers, plan_deliveries, plan_sites
from ledgersolve.report.site_ledger import site_ledger
from ledgersolve.report.site_map import load_picture, site_map
from ledgersolve.report.site_places import SitePlaces
from ledgersolve.report.site_proof import site_proof
from ledgersolve.report.variants import plan_variants
from ledgersolve.workbook.sheets import ResultSheet


def site_sheets(report: SiteReport, settled: Mapping[str, str]) -> list[ResultSheet]:
    """Sheets of a solved site-selection workbook, first to last.

    ``settled`` gives the final name of each name in ``wanted_names("site selection")``.
    """
    at = SitePlaces(report, settled)
    ledger = site_ledger(at)
    proof = site_proof(at, ledger)
    drawn = site_map(at)
    decision = site_decision(at, ledger, proof, load_picture(at) if drawn is None else drawn[1])
    record = run_record(at.name(names.RUN_RECORD), report.workbook, report.run,
                        outcome_of(report.solved, report.case.currency, at.per))
    sheets = [
        decision, ledger.sheet,
        plan_sites(at, ledger), plan_customers(at), plan_deliveries(at, ledger), plan_variants(at),
        answers_sheet(at.name(names.ANSWERS), report.answers, report.case.currency, at.per), *proof.sheets,
        None if drawn is None else drawn[0], record,
    ]
    return [sheet for sheet in sheets if sheet is not None]
