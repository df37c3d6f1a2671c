"""The Proof sheet of a lot-sizing plan: checks, what the bound rests on, the audit."""

from ledgersolve.report import names, style
from ledgersolve.report.checks import ChecksAt, checks_at, write_audit, write_checks
from ledgersolve.report.ledger import Ledger
from ledgersolve.report.lot_checks import lot_checks
from ledgersolve.report.lot_places import LotPlaces
from ledgersolve.report.site_proof import CHECKS_ROW, TOLERANCE_ROW, proof_widths, tolerance_row
from ledgersolve.report.tables import heading, paragraph, quoted
from ledgersolve.workbook.sheets import ResultSheet


def lot_proof(at: LotPlaces, ledger: Ledger) -> tuple[ResultSheet, ChecksAt]:
    """Write the proof."""
    sheet = ResultSheet(at.name(names.PROOF), tab_colour=style.RUST, landscape=True)
    proof_widths(sheet)
    tolerance_row(sheet)
    checks = lot_checks(at, ledger, f"$C${TOLERANCE_ROW + 1}")
    sheet.put(CHECKS_ROW - 1, 0, "Checks that watch the sheets", style.SECTION)
    row = write_checks(sheet, CHECKS_ROW, checks, f"$C${TOLERANCE_ROW + 1}") + 1
    row = _bound(at, sheet, row)
    write_audit(sheet, row + 1, at.report.audit)
    heading(sheet, "Proof", "What you can check yourself: that the plan keeps every rule. Change a lot in "
            f"{at.name(names.PLAN_LOTS)} and stock, load and cost follow; a broken rule turns BROKEN.", 6)
    return sheet, checks_at(quoted(sheet.name), CHECKS_ROW, len(checks))


def _bound(at: LotPlaces, sheet: ResultSheet, row: int) -> int:
    sheet.put(row, 0, "No plan can cost less than", style.SECTION)
    bound, currency = at.report.solved.bound, at.report.case.currency
    if bound is None:
        paragraph(sheet, row + 1, 0, 5, "No bound is known for this plan.", style.TEXT)
        return row + 2
    words = (f"The search claims that no plan costs less than {style.money_words(bound, currency, 'down')}. A sheet cannot check "
             "this figure by itself: it follows from solving every item for itself at prices of scarce capacity, which needs "
             "the program. What a sheet can check is above: that the plan keeps every rule and costs what is said.")
    paragraph(sheet, row + 1, 0, 5, words, style.TEXT)
    return row + 2
