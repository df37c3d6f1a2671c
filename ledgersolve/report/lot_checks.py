"""Live checks of a lot-sizing plan: the rules of the workbook as formulas over the plan's sheets."""

from collections.abc import Iterator

import numpy as np

from ledgersolve.report import style
from ledgersolve.report.checks import LiveCheck, count_check
from ledgersolve.report.ledger import Ledger
from ledgersolve.report.lot_details import CLOSING, LEAST, MOST, MOST_STOCK, MULTIPLE, SAFETY
from ledgersolve.report.lot_places import LotPlaces
from ledgersolve.report.tables import Figure


def lot_checks(at: LotPlaces, ledger: Ledger, tolerance: str) -> list[LiveCheck]:
    """Give the checks; ``tolerance`` is the cell of the tolerance in every formula."""
    return [
        _sum_check(at, ledger), *_stock_checks(at, tolerance), *_lot_checks(at, tolerance),
        *_service_checks(at, tolerance), *_load_checks(at, tolerance),
    ]


def _sum_check(at: LotPlaces, ledger: Ledger) -> LiveCheck:
    lines = f'SUMIF({ledger.column("A")},"line",{ledger.column("I")})'
    off = f"ABS({lines}-{ledger.total})/(1+ABS({ledger.total}))"
    total = at.report.audit.total
    return LiveCheck("Cost adds up", "all lines of the ledger against its total", Figure(total, ledger.total),
                     Figure(total, lines), Figure(0.0, off), style.money_format(at.report.case.currency))


def _stock_checks(at: LotPlaces, tolerance: str) -> Iterator[LiveCheck]:
    case, stock = at.report.case, at.stock
    slack = f"{tolerance}*(1+{at.made.sums()})"
    everyone = f"{style.counted(case.n, 'item')} in {style.counted(case.t, case.period_unit)}"
    if case.t > 1:
        below = f"{stock.before_last()}<{stock.side(SAFETY)}-{slack}"
        yield count_check("Safety stock", everyone, "stock at or above it, before the last period: never below",
                          f"SUMPRODUCT(({below})*1)")
    below = f"{stock.column(case.t - 1)}<{stock.side(CLOSING)}-{slack}"
    yield count_check("Closing stock", style.counted(case.n, "item"), "at the end of the last period: none below",
                      f"SUMPRODUCT(({below})*1)")
    if np.isfinite(case.most_stock).any():
        above = f"ISNUMBER({stock.side(MOST_STOCK)})*({stock.whole()}>{stock.side(MOST_STOCK)}+{slack})"
        yield count_check("Most stock", everyone, "stock within it: never above", f"SUMPRODUCT({above})")
    yield count_check("No negative quantity", everyone, "nothing made below 0", f'COUNTIF({at.made.whole()},"<0")')


def _lot_checks(at: LotPlaces, tolerance: str) -> Iterator[LiveCheck]:
    case, made = at.report.case, at.made
    everyone = style.counted(at.report.plan.setups, "lot")
    whole = made.whole()
    if (case.least_lot > 0).any():
        below = f"({whole}>0)*({whole}<{made.side(LEAST)}*(1-{tolerance}))"
        yield count_check("Least lot", everyone, "each at least that large: none below", f"SUMPRODUCT({below})")
    if np.isfinite(case.most_lot).any():
        above = f"ISNUMBER({made.side(MOST)})*({whole}>{made.side(MOST)}*(1+{tolerance}))"
        yield count_check("Most lot", everyone, "each at most that large: none above", f"SUMPRODUCT({above})")
    if (case.lot_multiple > 0).any():
        multiple = made.side(MULTIPLE)
        parts = f"{whole}/({multiple}+({multiple}=0))"
        off = f"({multiple}>0)*(ABS({parts}-ROUND({parts},0))>{tolerance}*(1+{parts}))"
        yield count_check("Lot multiple", everyone, "whole multiples: none otherwise", f"SUMPRODUCT({off})")


def _service_checks(at: LotPlaces, tolerance: str) -> Iterator[LiveCheck]:
    case, slack = at.report.case, f"{tolerance}*(1+{at.made.sums()})"
    if at.may_wait:
        yield count_check("All met by the end", style.counted(case.n, "item"), "nothing late after the last period",
                          f"SUMPRODUCT(({at.late.column(case.t - 1)}>{slack})*1)")
    for allowed, block, rule in ((at.may_wait, at.late, "No negative late quantity"),
                                 (at.may_lose, at.lost, "No negative lost quantity")):
        if allowed:
            yield count_check(rule, style.counted(case.n, "item"), "none below 0", f'COUNTIF({block.whole()},"<0")')


def _load_checks(at: LotPlaces, tolerance: str) -> Iterator[LiveCheck]:
    case = at.report.case
    if not case.resources:
        return
    load, capacity, overtime = (at.load_block(key) for key in ("load", "capacity", "overtime"))
    places = f"{style.counted(len(case.resources), 'resource')} in {style.counted(case.t, case.period_unit)}"
    worked = f"{capacity.whole()}+{overtime.whole()}"
    beyond = f"{load.whole()}>{worked}+{tolerance}*(1+{worked})"
    yield count_check("Capacity", places, "load within capacity and the plan's overtime: never above",
                      f"SUMPRODUCT(({beyond})*1)")
    for r, code in enumerate(case.resources):
        limit = at.figure("Resources", (code,), "Overtime limit", float(case.overtime_limit[r]))
        most = float(at.report.plan.overtime[r].max(initial=0.0))
        got = f"MAX({overtime.line(r)})"
        off = f"MAX(0,{got}-{limit.formula})" if limit.formula else f"MAX(0,{got})" if limit.value == 0 else ""
        yield LiveCheck("Overtime limit", f"resource {code}", limit, Figure(most, got),
                        Figure(max(0.0, most - limit.value), off))
