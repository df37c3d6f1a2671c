"""The Proof sheet of a site-selection plan: a lower bound by prices, the checks, the audit."""

from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.mip import Verdict
from ledgersolve.report import names, style
from ledgersolve.report.certificate import SHARE_BACK, SUPPLY_BACK, Certificate, certify
from ledgersolve.report.checks import ChecksAt, checks_at, write_audit, write_checks
from ledgersolve.report.ledger import Ledger
from ledgersolve.report.price_sheet import PriceSheet, price_sheet
from ledgersolve.report.site_checks import site_checks
from ledgersolve.report.site_places import SitePlaces
from ledgersolve.report.tables import Column, Figure, heading, paragraph, quoted, write_table
from ledgersolve.site_selection.case import CLOSED, OPEN
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.workbook.sheets import ResultSheet

TOLERANCE_ROW = 3
CHECKS_ROW = 6
SUMMARY = 4
"""Rows from the title of the bound to its summary, which begins with the share price where there is one."""
WEAK = 0.1
"""Part of the plan's cost from which the checkable bound is told to be weak where it falls short by more."""


@dataclass(frozen=True)
class SiteProof:
    """The Proof sheet with the sheet of prices (if any), and where checks stand."""

    sheets: tuple[ResultSheet, ...]
    checks: ChecksAt
    bound: float | None


def site_proof(at: SitePlaces, ledger: Ledger) -> SiteProof:
    """Write the proof: live checks first, then the bound, then the audit's words."""
    sheet = ResultSheet(at.name(names.PROOF), tab_colour=style.RUST, landscape=True)
    proof_widths(sheet)
    tolerance_row(sheet)
    tolerance = f"$C${TOLERANCE_ROW + 1}"
    checks = site_checks(at, ledger, tolerance)
    name = quoted(sheet.name)
    sheet.put(CHECKS_ROW - 1, 0, "Checks that watch the sheets", style.SECTION)
    row = write_checks(sheet, CHECKS_ROW, checks, tolerance) + 1
    certificate = _certificate(at)
    prices = None
    if certificate is not None:
        first = _sites_row(at, certificate, row)
        cells = [f"{name}!$E${first + 2 + j}" for j in range(at.report.case.m)]
        prices = price_sheet(at, certificate, cells, f"{name}!$C${row + SUMMARY + 1}")
    sheets = [sheet]
    if certificate is not None and prices is not None:
        row = _write_bound(at, ledger, sheet, row, certificate, prices)
        sheets.append(prices.sheet)
    else:
        row = _no_prices(at, sheet, row, certificate)
    write_audit(sheet, row + 1, at.report.audit)
    heading(sheet, "Proof", "What you can check yourself: that the plan keeps every rule, and that no plan can cost "
            "much less. Change a plan cell in a Plan sheet and a check turns BROKEN.", 6)
    return SiteProof(tuple(sheets), checks_at(name, CHECKS_ROW, len(checks)),
                     None if certificate is None or prices is None else checkable(at, certificate))


def checkable(at: SitePlaces, certificate: Certificate) -> float:
    """The bound of the certificate; 0 where it is lower and nothing in the workbook costs less than nothing."""
    return max(0.0, certificate.bound) if _never_negative(at) else certificate.bound


def _never_negative(at: SitePlaces) -> bool:
    case = at.report.case
    costs = (case.fixed_cost, case.handling_cost, case.opening_cost, case.closing_cost,
             case.lane_cost[np.isfinite(case.lane_cost)], np.array([case.unmet_cost or 0.0]))
    return all(bool((cost >= 0).all()) for cost in costs)


def tolerance_row(sheet: ResultSheet) -> None:
    """Write the tolerance of all checks in a cell of its own."""
    sheet.put(TOLERANCE_ROW, 0, "Tolerance of the checks", style.BOLD)
    sheet.put(TOLERANCE_ROW, 1, "share of the figure that is required", style.NOTE)
    sheet.put(TOLERANCE_ROW, 2, 1e-6, style.number("0.000000"))


def proof_widths(sheet: ResultSheet) -> None:
    """Set the widths that text of a proof is fitted to."""
    for column, width in enumerate((28.0, 34.0, 30.0, 18.0, 13.0, 13.0)):
        sheet.widths[column] = width


def _certificate(at: SitePlaces) -> Certificate | None:
    prices = at.report.solved.prices
    if prices is None or not np.isfinite(prices).all():
        return None
    return certify(at.report.case, Lanes.of(at.report.case), np.asarray(prices, dtype=np.float64))


def _sites_row(at: SitePlaces, certificate: Certificate, row: int) -> int:
    """Row (from 0) of the titles of the table of sites, where the bound begins at ``row``."""
    return row + SUMMARY + 7 + len(_charge_rows(at, certificate)) + len(certificate.rules)


def _no_prices(at: SitePlaces, sheet: ResultSheet, row: int, certificate: Certificate | None) -> int:
    sheet.put(row, 0, "No plan can cost less than", style.SECTION)
    bound = at.report.solved.bound
    words = ("For this workbook the search left no prices per customer, so that the lower bound cannot be checked "
             "in a sheet; it rests on the search alone.")
    if certificate is not None:
        words = (f"The prices of {at.report.case.n:,} customers are too many to lay out side by side in a sheet, so "
                 "that the lower bound rests on the program.")
    if bound is not None:
        words += f" The bound: {style.money_words(bound, at.report.case.currency, 'down')}."
    paragraph(sheet, row + 1, 0, 5, words, style.TEXT)
    return row + 2


EXPLANATION = (
    "Give every customer a price: what a plan may at most be counted to spend on serving that customer. In any "
    "plan, serving a customer costs its price or more, except from an open site that does it for less; what a site "
    "saves against the prices, on all customers together, is its gain. A site whose gain exceeds its cost lowers "
    "the sum by the difference. So the sum of all prices + the terms of all sites + the constants below is at most "
    "the cost of EVERY plan that keeps the rules. Rules that tie sites together (counts, groups, room for all "
    "demand, a share to be served near) have a price or charge as well: each site or delivery that a rule concerns "
    "is charged for it, and the constants hand it back once, so that large amounts on both sides cancel out. How "
    "prices and charges were found does not matter: with any other prices, or charges of the same sign, the sum is "
    "still a bound. (A price above a cost of unmet demand aside; a price of capacity above 0 needs a capacity.)"
)


def _write_bound(at: SitePlaces, ledger: Ledger, sheet: ResultSheet, row: int, certificate: Certificate,
                 prices: PriceSheet) -> int:
    """Write the summary of the bound and, under it, the table of sites."""
    case = at.report.case
    sheet.put(row, 0, "No plan can cost less than", style.SECTION)
    paragraph(sheet, row + 1, 0, 5, EXPLANATION, style.TEXT)
    paragraph(sheet, row + 2, 0, 5, prices.words, style.NOTE)
    first = row + SUMMARY
    charges = _charge_rows(at, certificate)
    sites_row = _sites_row(at, certificate, row)
    money = style.number(style.money_format(case.currency))
    cells = _Cells(at, first, sites_row, tuple(charges))
    summary = [*charges.values(),
               ("Sum of all customers' prices", Figure(float(certificate.price.sum()), prices.total)),
               ("Sum of the sites' terms", Figure(float(certificate.term.sum()), cells.terms()))]
    summary += [(words, Figure(amount, cells.rule(words))) for words, amount in certificate.rules]
    start = first + len(charges) + 1
    end = start + 1 + len(certificate.rules)
    bound, cost = checkable(at, certificate), at.report.audit.total
    total = f"MAX(0,SUM(C{start}:C{end}))" if _never_negative(at) else f"SUM(C{start}:C{end})"
    summary.append(("No plan can cost less than (checked here)", Figure(bound, total)))
    summary.append(("Cost of this plan", Figure(cost, ledger.total)))
    summary.append(("So a better plan could save at most", Figure(cost - bound, f"C{end + 2}-C{end + 1}")))
    for place, (words, figure) in enumerate(summary):
        strong = words.startswith(("No plan", "So a better"))
        look = replace(money, bold=strong)
        sheet.put(first + place, 0, words, style.BOLD if strong else style.TEXT)
        unit = f"{case.currency}{at.per}" if place >= len(charges) else f"{case.currency} each"
        sheet.put(first + place, 3, unit, replace(style.NOTE, align="left", indent=1))
        sheet.put(first + place, 2, figure.value, look, formula=figure.written)
    paragraph(sheet, first + len(summary), 0, 5, _rest_on_search(at, bound), style.TEXT)
    _write_sites(at, sheet, sites_row, certificate, prices, cells)
    return sites_row + case.m + 1


def _charge_rows(at: SitePlaces, certificate: Certificate) -> dict[str, tuple[str, Figure]]:
    """Prices and charges of rules, by what they are for; the share price first."""
    rows, unit = {}, at.report.case.demand_unit
    if certificate.near is not None:
        rows["share"] = (f"Price per {unit} delivered near (share within distance)", Figure(certificate.share_price))
    if certificate.supply_price:
        rows["supply"] = (f"Price per {unit} of capacity, all sites", Figure(certificate.supply_price))
    if certificate.count_charge:
        rows["count"] = ("Charge per open site (count of sites)", Figure(certificate.count_charge))
    return rows


@dataclass(frozen=True)
class _Cells:
    """Cells of the bound's summary and of its table of sites (rows from 0)."""

    at: SitePlaces
    first: int
    sites_row: int
    charges: tuple[str, ...]

    def terms(self) -> str:
        """Sum over the column of terms."""
        return f"SUM(I{self.sites_row + 2}:I{self.sites_row + 1 + self.at.report.case.m})"

    def charge(self, label: str) -> str:
        """Cell of a charge that stands in the summary."""
        return f"$C${self.first + 1 + self.charges.index(label)}"

    def rule(self, words: str) -> str:
        """Formula of a constant, where it follows from a charge and a cell."""
        at, origins = self.at, self.at.report.workbook.origins
        if words == SUPPLY_BACK:
            return f"{self.charge('supply')}*SUM({at.customers_at.span('demand')})"
        if words == SHARE_BACK:
            part = origins.setting("Share within distance (%)")
            return "" if part is None else (
                f"{self.charge('share')}*{part.formula}/100*SUM({at.customers_at.span('demand')})")
        name = "Most sites" if "most sites" in words else "Fewest sites" if "fewest sites" in words else ""
        ref = origins.setting(name) if name else None
        return "" if ref is None else f"-{self.charge('count')}*{ref.formula}"


def _rest_on_search(at: SitePlaces, checked: float) -> str:
    """Say which part of the certainty is checkable and which rests on the search."""
    report, currency = at.report, at.report.case.currency
    cost, proven = report.audit.total, report.solved.bound
    possible = style.money_words(max(0.0, cost - checked), currency, "up")
    words = "For the workbook as it was solved, you can check in this sheet: no plan costs less."
    if cost - checked > WEAK * abs(cost):
        least = style.money_words(checked, currency, "down")
        part = style.percent_words(checked / cost, "down") if cost > 0 else "a part"
        words = ("For this workbook prices alone prove little: what you can check in this sheet is that no plan "
                 f"costs less than {least}, {part} of the cost of this plan.")
    elif cost - checked > 1e-9 * abs(cost):
        words = ("For the workbook as it was solved, you can check in this sheet: no plan is cheaper by more than "
                 f"{possible}.")
    if proven is None or proven <= checked + 1e-9 * abs(cost):
        return f"{words} Nothing more is claimed than this sheet shows."
    rest = style.money_words(max(0.0, cost - proven), currency, "up")
    branching = ("The search closed the rest by trying out sites open and closed one after the other (branching): it "
                 f"claims that no plan is cheaper by more than {rest}. That part rests on the program.")
    if report.solved.verdict == Verdict.BEST_FOUND:
        branching += " The time limit ended this work before it was done."
    return f"{words} {branching}"


def _write_sites(at: SitePlaces, sheet: ResultSheet, row: int, certificate: Certificate, prices: PriceSheet,
                 cells: _Cells) -> None:
    case = at.report.case
    money = style.number(style.money_format(case.currency))
    per_unit = style.number(style.rate_format(case.currency, certificate.volume_price.tolist()))
    rule = Lanes.of(case).rule
    words = ["open" if r == OPEN else "closed" if r == CLOSED else "free" for r in rule.tolist()]
    rows = [row + 2 + j for j in range(case.m)]
    live = [r != CLOSED for r in rule.tolist()]
    capacity = np.where(np.isfinite(case.capacity), case.capacity, 0.0)
    volume = np.where(live, np.where(certificate.volume_price < 0, case.least_volume, capacity), 0.0)
    balance = certificate.fixed + certificate.charge - volume * certificate.volume_price - certificate.gain
    balance = np.where(np.array(live), balance, 0.0)
    charge = [_charge_formula(at, certificate, cells, j) if live[j] else "" for j in range(case.m)]
    columns = [
        Column("site", "Site", case.sites, style.CELL, 30),
        Column("rule", "Rule in the bound (free, open, closed)", words, style.CELL, 36),
        Column("fixed", f"Fixed and opening cost, less closing cost saved ({at.money_unit})",
               certificate.fixed.tolist(), money, 22, [_fixed_formula(at, j) for j in range(case.m)]),
        Column("charge", f"Charges of rules ({at.money_unit})", certificate.charge.tolist(), money, 16, charge),
        Column("price", f"Price per {case.demand_unit} of its capacity; below 0: of its least volume "
                        f"({case.currency})", certificate.volume_price.tolist(), per_unit, 18),
        Column("volume", f"Capacity, or least volume ({case.demand_unit}{at.per})", volume.tolist(),
               style.number(at.demand_format), 12,
               [_volume_formula(at, j, r) if on else "" for j, (r, on) in enumerate(zip(rows, live, strict=True))]),
        Column("gain", f"Gain: what it can save on all customers ({at.money_unit})", certificate.gain.tolist(),
               money, 18, [prices.gains[j] if live[j] else "" for j in range(case.m)]),
        Column("balance", f"Cost less gain ({at.money_unit})", balance.tolist(), money, 16,
               [f"C{r}+D{r}-E{r}*F{r}-G{r}" if on else "" for r, on in zip(rows, live, strict=True)]),
        Column("term", f"Term in the bound ({at.money_unit})", certificate.term.tolist(),
               replace(money, bold=True), 16,
               [f'IF(B{r}="open",H{r},MIN(0,H{r}))' if on else "" for r, on in zip(rows, live, strict=True)]),
    ]
    write_table(sheet, row, columns)


def _volume_formula(at: SitePlaces, j: int, row: int) -> str:
    """Capacity of a site, or its least volume where the price of its volume is below 0; "" where it has neither."""
    case, where = at.report.case, at.sites_at
    capacity = where.cell("capacity", j) if np.isfinite(case.capacity[j]) else ""
    least = where.cell("least", j) if case.least_volume[j] > 0 else ""
    return f"IF(E{row}<0,{least or 0},{capacity or 0})" if capacity or least else ""


def _fixed_formula(at: SitePlaces, j: int) -> str:
    """Fixed cost + opening cost, or - closing cost, from their cells; "" where a figure has no number cell."""
    case, origins = at.report.case, at.report.workbook.origins
    fixed = origins.number("Sites", (case.sites[j],), "Fixed cost")
    title, sign = ("Closing cost", "-") if case.today[j] else ("Opening cost", "+")
    once = float((case.closing_cost if case.today[j] else case.opening_cost)[j])
    ref = origins.number("Sites", (case.sites[j],), title)
    if fixed is None or (once and ref is None):
        return ""
    return fixed.formula + (f"{sign}{ref.formula}" if ref is not None else "")


def _charge_formula(at: SitePlaces, certificate: Certificate, cells: _Cells, j: int) -> str:
    """Charge of a site from the charges in the summary; "" where a group's own charge is part of it."""
    if certificate.group_charge[j]:
        return ""
    parts = [cells.charge("count")] if certificate.count_charge else []
    if certificate.supply_price and np.isfinite(at.report.case.capacity[j]):
        parts.append(f"-{cells.charge('supply')}*{at.sites_at.cell('capacity', j)}")
    return "".join(parts).removeprefix("+")
