"""Suspicious inputs of a lot-sizing workbook, as notices."""

import re

import numpy as np
from numpy.typing import NDArray

from ledgersolve.contract import judgement
from ledgersolve.contract import lot_sizing as c
from ledgersolve.contract.book import Book
from ledgersolve.contract.columns import quoted, shown
from ledgersolve.contract.faults import Fault
from ledgersolve.contract.lists import CheckedList
from ledgersolve.lot_sizing.case import Case

Floats = NDArray[np.float64]

USUAL_YEARLY_RATES = (5.0, 60.0)
"""Percent of stock value a year; 20 to 35 % is what textbooks quote, so the band is wide."""

_SORTABLE = re.compile(r"\d{4}-(?:W\d{2}|\d{2}(?:-\d{2})?)|\d{1,9}")


def judge_inputs(book: Book) -> None:
    """Add notices for inputs that look like slips whatever else is wrong, so that they need no second drop."""
    if c.ITEMS in book.tables:
        judgement.odd_figures(book.faults, book.tables[c.ITEMS], ("Setup cost", "Holding cost", "Backlog cost",
                                                                  "Lost sale cost"))
    judgement.other_currencies(book.faults, book.settings, list(book.tables.values()))
    _yearly_rate(book)


def judge(book: Book, case: Case) -> None:
    """Add notices for inputs that look like slips beside each other."""
    items = book.tables[c.ITEMS]
    _holding_against_value(book, case, items)
    _late(book, case, items)
    _order(book, case)
    _no_demand(book, case, items)
    _odd_demand(book, case)
    _idle_capacity(book, case)


def _yearly_rate(book: Book) -> None:
    values = book.settings
    rate = values.number(c.HOLDING_RATE)
    low, high = USUAL_YEARLY_RATES
    if rate is None or rate == 0 or low <= rate <= high:
        return
    if rate <= 1:
        judgement.looks_like_fraction(book.faults, values, c.HOLDING_RATE, 1.0,
                                      "a rate in percent a year, such as 20")
        return
    words = "looks monthly" if rate < low else "is very high"
    book.faults.notice(
        values.sheet, values.place(c.HOLDING_RATE), c.HOLDING_RATE, "unusual yearly rate",
        f"{shown(rate)} % a year, which {words}", f"a yearly rate, commonly {shown(low)} to {shown(high)} %",
        "Check that the rate is for a year.")


def _holding_against_value(book: Book, case: Case, items: CheckedList) -> None:
    """Notices for items whose holding cost for one period is above the unit's value."""
    value = items.numbers("Unit value")
    over = np.flatnonzero(items.good("Holding cost") & (value > 0) & (items.numbers("Holding cost") > value)).tolist()
    book.faults.many(items.sheet, [items.place(row, "Holding cost") for row in over], "Holding cost",
                     lambda i: Fault(
        "figure far off",
        f"a holding cost above the Unit value {shown(value[over[i]])} for {quoted(case.items[over[i]])}",
        "a cost of holding a unit for one period", "Check that it is for one unit and one period."),
        severity="notice")


def _late(book: Book, case: Case, items: CheckedList) -> None:
    """Notices for backlog costs that have no effect, and for late deliveries that no item allows."""
    given = np.flatnonzero(items.good("Backlog cost")).tolist()
    values = book.settings
    if given and not values.flag(c.LATE):
        book.faults.notice(
            items.sheet, items.place(given[0], "Backlog cost"), "Backlog cost", "not used",
            f"a backlog cost for {len(given)} of {case.n} items",
            f"{c.LATE} = yes in Settings, if they may be late",
            f"It was not used, as {c.LATE} is no.")
    elif values.flag(c.LATE) and not given:
        book.faults.notice(
            values.sheet, values.place(c.LATE), c.LATE, "not used", "yes, but no item has a Backlog cost",
            "a Backlog cost for each item that may be late",
            "Nothing may be late so far; fill in Backlog cost.")


def _order(book: Book, case: Case) -> None:
    """A notice where period codes that have an order are not in it."""
    periods = book.tables[c.PERIODS]
    if any(periods.texts("Start")) or not all(_SORTABLE.fullmatch(code) for code in case.periods):
        return
    numeric = all(code.isdigit() for code in case.periods)
    keys = [(int(code), "") if numeric else (0, code) for code in case.periods]
    late = next((row for row in range(1, len(keys)) if keys[row] < keys[row - 1]), None)
    if late is not None:
        book.faults.notice(
            periods.sheet, periods.place(late, "Period"), "Period", "periods out of order",
            f"{quoted(case.periods[late])} after {quoted(case.periods[late - 1])}", "periods from first to last",
            "The rows were taken in the order they stand; sort them if that is wrong.")


def _no_demand(book: Book, case: Case, items: CheckedList) -> None:
    idle = np.flatnonzero(~(case.demand > 0).any(axis=1)).tolist()
    book.faults.many(items.sheet, [items.place(row, "Item") for row in idle], "Item", lambda i: Fault(
        "item without demand", f"{quoted(case.items[idle[i]])}, without demand in any period",
        "demand for each item",
        "Fill in its row in Demand, or take the item out."), severity="notice")


def _odd_demand(book: Book, case: Case) -> None:
    """Notices for demands a hundred times the middle demand of their item."""
    matrix = book.matrices[c.DEMAND]
    positive = np.where(case.demand > 0, case.demand, np.nan)
    counts = (case.demand > 0).sum(axis=1)
    middle = np.full(case.n, np.inf)
    for row in np.flatnonzero(counts >= judgement.ENOUGH).tolist():
        middle[row] = np.nanmedian(positive[row])
    rows, columns = np.nonzero(case.demand >= judgement.FAR_OFF * middle[:, None])
    pairs = list(zip(rows.tolist(), columns.tolist(), strict=True))
    book.faults.many(matrix.sheet, [matrix.place(k, t) for k, t in pairs], matrix.contract.figure.title,
                     lambda i: Fault(
        "figure far off", f"{shown(case.demand[pairs[i]])}, where the item's middle demand is "
        f"{shown(middle[pairs[i][0]])}", "demands of one size", "Check the decimal sign and the unit."),
        severity="notice")


def _idle_capacity(book: Book, case: Case) -> None:
    """A notice for resources that could make the whole horizon's demand in any one period."""
    resources = book.table(c.RESOURCES)
    if resources is None:
        return
    total = np.where(case.demand.any(axis=1), case.demand.sum(axis=1) * case.time_per_unit + case.setup_time,
                     0.0)
    work = np.zeros(len(case.resources))
    np.add.at(work, case.item_resource[case.item_resource >= 0], total[case.item_resource >= 0])
    timed = case.family_resource >= 0
    np.add.at(work, case.family_resource[timed], case.family_time[timed])
    idle = np.flatnonzero((work > 0) & (case.capacity.min(axis=1) >= work)).tolist()
    title = "Capacity" if "Capacity" in resources.columns else "Resource"
    book.faults.many(resources.sheet, [resources.place(row, title) for row in idle], "Capacity",
                     lambda i: Fault(
        "capacity never binds", f"{quoted(case.resources[idle[i]])} could do all work of the horizon "
        f"({shown(round(float(work[idle[i]]), 6))}) in any one period",
        "capacity and times in one unit, a period each",
        "Check the units; the plan is right if so meant."), severity="notice")
