"""All sheets of a solved lot-sizing workbook, in their order."""

from collections.abc import Mapping

from ledgersolve.report import names
from ledgersolve.report.answers import answers_sheet
from ledgersolve.report.inputs import LotReport
from ledgersolve.report.lot_decision import lot_decision
from ledgersolve.report.lot_details import optional_sheets, plan_lots, plan_stock
from ledgersolve.report.lot_ledger import lot_ledger
from ledgersolve.report.lot_places import LotPlaces
from ledgersolve.report.lot_proof import lot_proof
from ledgersolve.report.run_record import outcome_of, run_record
from ledgersolve.workbook.sheets import ResultSheet


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
