"""The Proof sheet of a lot-sizing plan: checks, what the bound rests on, the audit."""

from dataclasses import replace

from ledgersolve.report import names, style
from ledgersolve.report.checks import ChecksAt, checks_at, write_audit, write_checks
from ledgersolve.report.ledger import Ledger
from ledgersolve.report.lot_checks import lot_checks
from ledgersolve.report.lot_places import LotPlaces
from ledgersolve.report.lot_prices import TimePrices, time_prices
from ledgersolve.report.site_proof import CHECKS_ROW, TOLERANCE_ROW, proof_widths, tolerance_row
from ledgersolve.report.tables import Figure, heading, paragraph, quoted
from ledgersolve.workbook.sheets import ResultSheet


def lot_proof(at: LotPlaces, ledger: Ledger) -> tuple[list[ResultSheet], ChecksAt]:
    """Write the proof, and the sheet of prices of time where there are any."""
    sheet = ResultSheet(at.name(names.PROOF), tab_colour=style.RUST, landscape=True)
    proof_widths(sheet)
    tolerance_row(sheet)
    checks = lot_checks(at, ledger, f"$C${TOLERANCE_ROW + 1}")
    sheet.put(CHECKS_ROW - 1, 0, "Checks that watch the sheets", style.SECTION)
    row = write_checks(sheet, CHECKS_ROW, checks, f"$C${TOLERANCE_ROW + 1}") + 1
    prices = time_prices(at)
    row = _bound(at, ledger, sheet, row, prices)
    write_audit(sheet, row + 1, at.report.audit)
    heading(sheet, "Proof", "What you can check yourself: that the plan keeps every rule. Change a lot in "
            f"{at.name(names.PLAN_LOTS)} and stock, load and cost follow; a broken rule turns BROKEN.", 6)
    sheets = [sheet] if prices is None else [sheet, prices.sheet]
    return sheets, checks_at(quoted(sheet.name), CHECKS_ROW, len(checks))


def _bound(at: LotPlaces, ledger: Ledger, sheet: ResultSheet, row: int, prices: TimePrices | None) -> int:
    """Say what the bound rests on, and add it up where it follows from prices of time."""
    sheet.put(row, 0, "No plan can cost less than", style.SECTION)
    bound, currency = at.report.solved.bound, at.report.case.currency
    if bound is None:
        paragraph(sheet, row + 1, 0, 5, "No bound is known for this plan.", style.TEXT)
        return row + 2
    claim = f"The search claims that no plan costs less than {style.money_words(bound, currency, 'down')}."
    if prices is None:
        paragraph(sheet, row + 1, 0, 5, f"{claim} {CANNOT}", style.TEXT)
        return row + 2
    paragraph(sheet, row + 1, 0, 5, f"{claim} {HOW}", style.TEXT)
    money = style.number(style.money_format(currency))
    total = prices.items + prices.given_back
    lines = (
        ("All items, each at its best by itself at these prices", Figure(prices.items, prices.items_cell)),
        ("Worth of the time that resources have at these prices", Figure(prices.given_back, prices.given_back_cell)),
        ("No plan can cost less than (by these prices)", Figure(total, f"C{row + 4}+C{row + 5}")),
        ("Cost of this plan", Figure(at.report.audit.total, ledger.total)),
    )
    for place, (label, figure) in enumerate(lines, start=row + 3):
        strong = label.startswith("No plan")
        sheet.put(place, 0, label, style.BOLD if strong else style.TEXT)
        sheet.put(place, 2, figure.value, replace(money, bold=strong), formula=figure.written)
        sheet.put(place, 3, currency, replace(style.NOTE, align="left", indent=1))
    rest = "" if bound <= total + 1e-9 * abs(total) else (
        f" The rest up to {style.money_words(bound, currency, 'down')} was closed by trying out setups one after "
        "the other; it rests on the program.")
    paragraph(sheet, row + 7, 0, 5, f"{CHECKABLE}{rest}", style.TEXT)
    return row + 8


CANNOT = (
    "A sheet cannot check this figure: it follows from a search over all setups, which needs the program. "
    "What a sheet can check is above: that the plan keeps every rule and costs what is said."
)
HOW = (
    "Give every hour of a scarce resource a price. If each item is then planned by itself, paying for the time it "
    "takes, as cheaply as can be, no plan for all of them together can cost less than the sum of these costs, less "
    "what the time of the resources is worth at the prices."
)
CHECKABLE = (
    "What you can check here: the prices, the worth of the time at them (formulas into your capacities), and the "
    "sum. What you cannot: the least cost of each item by itself, which the program finds step by step over the "
    "periods."
)
