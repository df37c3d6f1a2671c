"""The sheet of prices per customer, with lane costs beside them where the workbook's own matrix cannot serve."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.report import names, style
from ledgersolve.report.certificate import Certificate
from ledgersolve.report.coordinate_gains import coordinate_gains
from ledgersolve.report.site_places import SitePlaces, lane_cell
from ledgersolve.report.tables import FIRST_ROW, FOOTER, Figure, heading, quoted
from ledgersolve.site_selection.case import Flags
from ledgersolve.workbook.cells import column_letters
from ledgersolve.workbook.origins import MatrixMap
from ledgersolve.workbook.sheets import ResultSheet

COPIED_LANES = 200_000
"""Sites x customers up to which lane costs are laid out beside the prices."""
LINKED_LANES = 40_000
"""Sites x customers up to which each laid-out cost is a formula into its own cell."""
MOST_CUSTOMERS = 16_000
PRINTED_CUSTOMERS = 10
PRINTED_ROWS = 60
CODE_ROW, DEMAND_ROW, PRICE_ROW, WHOLE_ROW, COST_ROW = range(FIRST_ROW, FIRST_ROW + 5)
FIRST_COLUMN = 2

Spans = tuple[tuple[str, str], ...]
"""By site: where its lane costs stand, and where the parts of the demand that its lanes carry ("" = all)."""


@dataclass(frozen=True)
class PriceSheet:
    """The sheet, the formula for the sum of prices, the formula of each site's gain, and where costs stand.

    A gain is "" where it is a figure of the program.
    """

    sheet: ResultSheet
    total: str
    gains: tuple[str, ...]
    words: str


def price_sheet(at: SitePlaces, certificate: Certificate, price_cells: Sequence[str],
                share_cell: str) -> PriceSheet | None:
    """Lay out the prices; None where there are too many customers.

    ``price_cells`` are, by site, the cells of the sheet Proof that hold the price of a unit of its capacity;
    ``share_cell`` holds the price of a unit delivered near, where the share rule has one.
    """
    case = at.report.case
    if case.n > MOST_CUSTOMERS:
        return None
    sheet = ResultSheet(at.name(names.PROOF_PRICES), tab_colour=style.RUST, landscape=True)
    matrix = own_matrix(at, certificate)
    order = list(range(case.n))
    if matrix is not None:
        order.sort(key=lambda i: matrix.columns[case.customers[i]])
    _write_prices(at, sheet, certificate, order)
    gains, words = _gains(at, sheet, certificate, (price_cells, share_cell), matrix)
    first, last = column_letters(FIRST_COLUMN + 1), column_letters(FIRST_COLUMN + case.n)
    total = f"SUM({quoted(sheet.name)}!${first}${WHOLE_ROW + 1}:${last}${WHOLE_ROW + 1})"
    return PriceSheet(sheet, total, gains, words)


def _gains(at: SitePlaces, sheet: ResultSheet, certificate: Certificate, cells: tuple[Sequence[str], str],
           matrix: MatrixMap | None) -> tuple[tuple[str, ...], str]:
    """Formulas of the gains: over the workbook's own matrix, coordinates, or costs laid out here."""
    case, (price_cells, share_cell) = at.report.case, cells
    local = [cell.rsplit("!", 1)[-1] for cell in price_cells]
    if matrix is not None:
        ranked = sorted(case.customers, key=matrix.columns.__getitem__)
        ends = [ranked[0], ranked[-1]]
        costs: Spans | None = tuple((_matrix_row(matrix, code, ends), "") for code in case.sites)
        words = f"Lane costs are read straight from your sheet {matrix.sheet}."
    else:
        charges = [_charge(at, j, cell) for j, cell in enumerate(price_cells)]
        by_place = coordinate_gains(at, sheet, certificate, charges, share_cell)
        if by_place is not None:
            return by_place, ("Lane costs follow from your coordinates: every gain is one formula over the places of "
                              "all customers, which stand under the prices.")
        costs = _laid_out(at, sheet, certificate, share_cell)
        words = _words(at, certificate, costs is not None)
    if costs is None:
        return ("",) * case.m, words
    own = [_charge(at, j, cell) for j, cell in enumerate(local)]
    return tuple(_gain(at, sheet, *span, charge) for span, charge in zip(costs, own, strict=True)), words


def _gain(at: SitePlaces, sheet: ResultSheet, cost: str, limit: str, charge: str) -> str:
    """Sum over the customers of what the site saves against their prices; blank costs are no lanes."""
    whole = at.report.case.cost_is_whole
    price, demand = _row(at, sheet, WHOLE_ROW if whole else PRICE_ROW), _row(at, sheet, DEMAND_ROW)
    left = f"{price}-{cost}-{charge}*{demand}" if whole else f"{price}-{cost}-{charge}"
    times = "" if whole else f"*{demand}"
    times += f"*{limit}" if limit else ""
    return f'SUMPRODUCT(({cost}<>"")*({left}>0)*({left}){times})'


def _charge(at: SitePlaces, site: int, price_cell: str) -> str:
    """What a unit costs at the site apart from its lane: price of its capacity, and handling."""
    case = at.report.case
    if not case.handling_cost.any():
        return price_cell
    ref = at.report.workbook.origins.cell("Sites", (case.sites[site],), "Handling cost")
    return price_cell if ref is None else f"({price_cell}+{ref.formula})"


def _row(at: SitePlaces, sheet: ResultSheet, row: int) -> str:
    last = column_letters(FIRST_COLUMN + at.report.case.n)
    return f"{quoted(sheet.name)}!${column_letters(FIRST_COLUMN + 1)}${row + 1}:${last}${row + 1}"


def _words(at: SitePlaces, certificate: Certificate, laid_out: bool) -> str:
    words = _whence(at, laid_out)
    if laid_out and certificate.near is not None:
        words += (" A delivery that counts for the share to be served near costs less by the price of a unit "
                  "delivered near; which ones count is worked out by the program.")
    if laid_out and certificate.limit is not None:
        words += " Under the costs stands the part of the demand that a lane with a limit can carry."
    return words


def _whence(at: SitePlaces, laid_out: bool) -> str:
    if not laid_out:
        return (f"With {at.report.case.m:,} x {at.report.case.n:,} lanes the costs are too many to lay out; the "
                "gains are figures of the program, all else is formulas.")
    if at.report.case.m * at.report.case.n <= LINKED_LANES:
        return ("Lane costs stand under the prices, each a formula into its own cell where it has one (costs from "
                "distances and lanes forbidden by a rule: figures).")
    return "Lane costs stand under the prices as figures (too many to link one by one)."


def own_matrix(at: SitePlaces, certificate: Certificate) -> MatrixMap | None:
    """The analyst's matrix of lane costs, if a formula can use its rows as they stand.

    That is: all lanes come from it, as numbers, its columns are the customers and nothing else, and no rule
    forbids a lane that stands in it.
    """
    case, origins = at.report.case, at.report.workbook.origins
    matrix = origins.matrices.get("Lane costs")
    if matrix is None or "Lanes" in origins.tables or at.report.workbook.road_cost is not None:
        return None
    if certificate.near is not None or certificate.limit is not None:
        return None
    places = sorted(matrix.columns.get(code, -1) for code in case.customers)
    if any(code not in matrix.rows for code in case.sites) or places[0] < 1 or places[-1] - places[0] + 1 != case.n:
        return None
    live = np.asarray(certificate.usable.any(axis=1)).reshape(-1, 1) & certificate_customers(certificate)
    listed = np.isfinite(case.lane_cost)
    if (live & listed & ~certificate.usable).any():
        return None
    rows = [matrix.rows[code] for code in case.sites]
    columns = [matrix.columns[code] for code in case.customers]
    if any((row, column) in matrix.not_numbers for row in rows for column in columns):
        return None
    missing = zip(*np.nonzero(live & ~listed), strict=True)
    return matrix if all((rows[j], columns[i]) in matrix.blanks for j, i in missing) else None


def certificate_customers(certificate: Certificate) -> Flags:
    """Shape (1, n): customers with a usable lane."""
    return np.asarray(certificate.usable.any(axis=0)).reshape(1, -1)


def _matrix_row(matrix: MatrixMap, site: str, ends: list[str]) -> str:
    first, last = (column_letters(matrix.columns[code]) for code in ends)
    row = matrix.rows[site]
    return f"{quoted(matrix.sheet)}!${first}${row}:${last}${row}"


def _laid_out(at: SitePlaces, sheet: ResultSheet, certificate: Certificate, share_cell: str) -> Spans | None:
    """Write usable lane costs under the prices, sites downwards; None where they are too many."""
    case = at.report.case
    if case.m * case.n > COPIED_LANES:
        return None
    first, last = column_letters(FIRST_COLUMN + 1), column_letters(FIRST_COLUMN + case.n)
    limited = [] if certificate.limit is None else np.flatnonzero(
        ((certificate.limit < 1) & certificate.usable).any(axis=1)).tolist()
    look = style.number(style.rate_format(case.currency, case.lane_cost[certificate.usable][:2000].tolist()))
    spans = []
    for j, code in enumerate(case.sites):
        row = COST_ROW + 1 + j
        sheet.put(row, 0, code)
        unit = "for the whole demand" if case.cost_is_whole else f"per {case.demand_unit}"
        label = "Lane cost" if certificate.near is None else "Lane cost less price of near"
        sheet.put(row, 1, f"{label} ({case.currency} {unit})", style.SMALL)
        for i in np.flatnonzero(certificate.usable[j]).tolist():
            figure = _laid_cost(at, certificate, j, i, share_cell)
            sheet.put(row, FIRST_COLUMN + i, figure.value, look, formula=figure.written)
        limits = ""
        if j in limited:
            below = COST_ROW + 2 + case.m + limited.index(j)
            _write_limits(at, sheet, certificate, j, below)
            limits = f"{quoted(sheet.name)}!${first}${below + 1}:${last}${below + 1}"
        spans.append((f"{quoted(sheet.name)}!${first}${row + 1}:${last}${row + 1}", limits))
    return tuple(spans)


def _laid_cost(at: SitePlaces, certificate: Certificate, site: int, customer: int, share_cell: str) -> Figure:
    """Lane cost, from its own cell where it has one, less the price of a near delivery where that counts."""
    case = at.report.case
    cost = float(case.lane_cost[site, customer])
    ref = lane_cell(at, site, customer) if case.m * case.n <= LINKED_LANES else None
    if certificate.near is None or not certificate.near[site, customer]:
        return Figure(cost, "" if ref is None else ref.formula)
    less, units = share_cell, 1.0
    if case.cost_is_whole:
        less += f"*{column_letters(FIRST_COLUMN + customer + 1)}${DEMAND_ROW + 1}"
        units = float(case.demand[customer])
    given = repr(cost) if ref is None else ref.formula
    return Figure(cost - certificate.share_price * units, f"{given}-{less}")


def _write_limits(at: SitePlaces, sheet: ResultSheet, certificate: Certificate, site: int, row: int) -> None:
    """Write the part of each customer's demand that the site's lane carries: 1, or its limit over the demand."""
    case, origins = at.report.case, at.report.workbook.origins
    assert certificate.limit is not None
    sheet.put(row, 0, case.sites[site])
    sheet.put(row, 1, "Part of the demand the lane carries, at most", style.SMALL)
    look = style.number("0.000000")
    for i in range(case.n):
        share = float(certificate.limit[site, i]) if certificate.usable[site, i] else 1.0
        ref = origins.number("Lanes", (case.sites[site], case.customers[i]), "Most") if share < 1 else None
        demand = f"{column_letters(FIRST_COLUMN + i + 1)}${DEMAND_ROW + 1}"
        sheet.put(row, FIRST_COLUMN + i, share, look,
                  formula="" if ref is None else f"=MIN(1,{ref.formula}/{demand})")


def _write_prices(at: SitePlaces, sheet: ResultSheet, certificate: Certificate, order: list[int]) -> None:
    case = at.report.case
    unit, money = case.demand_unit, case.currency
    rows = ((CODE_ROW, "Customer", "Unit"), (DEMAND_ROW, "Demand", f"{unit}{at.per}"),
            (PRICE_ROW, f"Price per {unit}", f"{money} per {unit}"),
            (WHOLE_ROW, "Price of the whole demand", at.money_unit))
    for row, label, words in rows:
        sheet.put(row, 0, label, style.HEADER if row == CODE_ROW else style.BOLD)
        sheet.put(row, 1, words, style.HEADER if row == CODE_ROW else style.NOTE)
    amounts, rates = style.number(style.money_format(money)), style.number(style.rate_format(money, [0.001]))
    header = replace(style.HEADER_RIGHT, wrap=False)
    for place, i in enumerate(order):
        column = FIRST_COLUMN + place
        letter = column_letters(column + 1)
        demand, price = float(case.demand[i]), float(certificate.price[i])
        sheet.put(CODE_ROW, column, case.customers[i], header)
        cell = at.customers_at.cell("demand", i)
        sheet.put(DEMAND_ROW, column, demand, style.number(at.demand_format), formula=f"={cell}")
        if demand > 0 and not case.cost_is_whole:
            formula = f"={letter}{DEMAND_ROW + 1}*{letter}{PRICE_ROW + 1}"
            sheet.put(PRICE_ROW, column, price / demand, rates)
            sheet.put(WHOLE_ROW, column, price, amounts, formula=formula)
        else:
            sheet.put(WHOLE_ROW, column, price, amounts)
        sheet.widths[column] = 14.0
    sheet.widths |= {0: 34.0, 1: 26.0 if certificate.near is None else 40.0}
    words = ("One price a customer, and what serving it costs from each site. The sheet Proof adds them up to a "
             "bound that no plan can undercut.")
    if case.n > PRINTED_CUSTOMERS:
        sheet.print_area = (0, 0, PRINTED_ROWS - 1, FIRST_COLUMN + PRINTED_CUSTOMERS - 1)
        words += f" In print, only the first {PRINTED_CUSTOMERS} customers are shown: the sheet is for the screen."
    heading(sheet, "Prices behind the proof", words, 8)
    sheet.frozen = (CODE_ROW + 1, 2)
    sheet.footer = FOOTER
