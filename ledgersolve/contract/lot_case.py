"""Checks across the sheets of a lot-sizing workbook, and its case."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ledgersolve.contract import lot_sizing as c
from ledgersolve.contract import mended, settings
from ledgersolve.contract.book import Book, is_too_large
from ledgersolve.contract.codes import Codes, report_pairs, resolve_column
from ledgersolve.contract.columns import quoted, shown
from ledgersolve.contract.faults import Fault
from ledgersolve.contract.lists import CheckedList
from ledgersolve.lot_sizing.case import Case

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]


@dataclass
class PairRows:
    """Rows of a list of items and periods: numbers of both, and the row's place in the list."""

    table: CheckedList
    item: Ints
    period: Ints
    row: Ints


def build(book: Book, title: str) -> Case | None:
    """Check across sheets and build the case; None where the workbook has a fault."""
    periods, items, resources = book.table(c.PERIODS), book.table(c.ITEMS), book.table(c.RESOURCES)
    if periods is not None:
        _check_order(book, periods)
    is_too_large(book, c.ITEMS, c.PERIODS)
    costs = _pair_rows(book, c.PERIOD_COSTS)
    receipts = _pair_rows(book, c.RECEIPTS)
    families = book.table(c.FAMILIES)
    if families is not None:
        _check_family_time(book, families)
    if resources is not None:
        _check_capacity(book, resources)
    if items is not None:
        _check_lots(book, items)
        _check_stock(book, items)
        _check_times(book, items)
        _check_holding(book, items, costs)
    references = {(name, column): _reference(book, name, column, target) for name, column, target in (
        (c.ITEMS, "Resource", c.RESOURCES), (c.ITEMS, "Family", c.FAMILIES),
        (c.FAMILIES, "Resource", c.RESOURCES))}
    _check_today(book)
    if book.faults.any_errors or items is None or periods is None:
        return None
    return _case(book, title, costs, receipts, references)


def _first(table: CheckedList, *titles: str) -> str:
    """The first of the titles that the list has."""
    return next((title for title in titles if title in table.columns), titles[-1])


def _codes(book: Book, name: str) -> Codes | None:
    return book.codes.get(name)


def _pair_rows(book: Book, name: str) -> PairRows | None:
    """Rows of a list of items and periods; unknown codes and repeated pairs are reported."""
    table = book.table(name)
    if table is None:
        return None
    item = resolve_column(table, "Item", _codes(book, c.ITEMS), book.faults)
    period = resolve_column(table, "Period", _codes(book, c.PERIODS), book.faults)
    report_pairs(table, item, period, book.faults)
    row = np.flatnonzero((item >= 0) & (period >= 0))
    return PairRows(table, item[row], period[row], row)


def _reference(book: Book, name: str, column: str, target: str) -> Ints:
    """Numbers of the codes a column names, -1 where empty; a missing sheet of codes is reported."""
    table = book.table(name)
    if table is None:
        return np.zeros(0, dtype=np.int64)
    if target in book.codes or target in book.broken:
        return resolve_column(table, column, _codes(book, target), book.faults)
    named = np.flatnonzero(table.good(column)).tolist()
    if named:
        code = table.texts(column)[named[0]]
        book.faults.add(table.sheet, table.place(named[0], column), column, Fault(
            "missing sheet", f"{quoted(code)} and no filled sheet {target}", f"a sheet {target} that lists it",
            f"Add the sheet {target}, or clear the column {column}."))
    return np.full(table.count, -1, dtype=np.int64)


def _check_order(book: Book, periods: CheckedList) -> None:
    """Report periods whose Start is not after the one before."""
    last, last_row = "", -1
    for row, start in enumerate(periods.texts("Start")):
        if not start:
            continue
        if start <= last:
            book.faults.add(periods.sheet, periods.place(row, "Start"), "Start", Fault(
                "periods out of order", f"{start}, after {last} in row {periods.rows[last_row]}",
                "periods in order, each starting after the one before",
                "Correct the date, or sort the rows by Start.", test=mended.after_those_above(
                    periods.columns["Start"].column, periods.title_row + 1)))
        else:
            last, last_row = start, row


def _check_family_time(book: Book, families: CheckedList) -> None:
    lost = (families.numbers("Setup time", 0.0) > 0) & ~families.good("Resource") & ~families.bad("Resource")
    title = "Resource" if "Resource" in families.columns else "Setup time"
    rows = np.flatnonzero(lost).tolist()
    book.faults.many(families.sheet, [families.place(row, title) for row in rows], title, lambda _: Fault(
        "time without resource", "a Setup time, but no Resource", "the Resource that the time loads",
        "Name the Resource, or clear the Setup time.", "filled" if title == "Resource" else "static"))


def _check_times(book: Book, items: CheckedList) -> None:
    timed = (items.numbers("Time per unit", 0.0) > 0) | (items.numbers("Setup time", 0.0) > 0)
    lost = timed & ~items.good("Resource") & ~items.bad("Resource")
    title = _first(items, "Resource", "Time per unit", "Setup time", "Item")
    rows = np.flatnonzero(lost).tolist()
    book.faults.many(items.sheet, [items.place(row, title) for row in rows], title, lambda _: Fault(
        "time without resource", "time per unit or setup time, but no Resource",
        "the Resource that the time loads",
        "Name the Resource, or clear the times.", "filled" if title == "Resource" else "static"))


def _check_capacity(book: Book, resources: CheckedList) -> None:
    """Report resources without a capacity in some period, where the sheet Capacity is used."""
    matrix, codes = book.matrix(c.CAPACITY), _codes(book, c.RESOURCES)
    if matrix is None or codes is None:
        return
    single = resources.good("Capacity") | resources.bad("Capacity")
    holes = np.any(np.isnan(matrix.figures) & ~matrix.bad, axis=1)
    rows = [row for place, row in enumerate(codes.rows) if holes[place] and not single[row]]
    title = "Capacity" if "Capacity" in resources.columns else "Resource"
    book.faults.many(resources.sheet, [resources.place(row, title) for row in rows], title, lambda _: Fault(
        "required cell empty", "no capacity in some period, neither here nor in the sheet Capacity",
        "a capacity for every period", "Fill in the sheet Capacity for all periods, or give the one figure.",
        "not negative" if title == "Capacity" else "static"))


def _check_lots(book: Book, items: CheckedList) -> None:
    """Report items whose lot rules leave no lot."""
    least, most = items.numbers("Least lot", 0.0), items.numbers("Most lot", np.inf)
    multiple = items.numbers("Lot multiple", 0.0)
    for row in range(items.count):
        if least[row] > most[row]:
            book.faults.add(items.sheet, items.place(row, "Least lot"), "Least lot", Fault(
                "rules conflict", f"a Least lot of {shown(least[row])} above the Most lot {shown(most[row])}",
                "a Least lot of at most the Most lot", "Change one of the two.",
                test=mended.at_most(mended.beside(items.columns["Most lot"].column))))
        elif multiple[row] > 0 and not _fits(least[row], most[row], multiple[row]):
            book.faults.add(items.sheet, items.place(row, "Lot multiple"), "Lot multiple", Fault(
                "rules conflict", f"no multiple of {shown(multiple[row])} from Least lot {shown(least[row])} "
                f"to Most lot {shown(most[row])}", "a multiple that fits between them",
                "Change Lot multiple, Least lot or Most lot."))


def _fits(least: float, most: float, multiple: float) -> bool:
    """Whether a whole multiple of at least one lies within the limits (a relative 1e-9 is forgiven)."""
    smallest = max(np.ceil(least / multiple - 1e-9), 1.0) * multiple
    return bool(smallest <= most * (1 + 1e-9))


def _check_stock(book: Book, items: CheckedList) -> None:
    """Report items whose least stock exceeds their most stock."""
    most = items.numbers("Most stock", np.inf)
    for title in ("Safety stock", "Closing stock"):
        least = items.numbers(title, 0.0)
        for row in np.flatnonzero(least > most).tolist():
            book.faults.add(items.sheet, items.place(row, title), title, Fault(
                "rules conflict", f"a {title} of {shown(least[row])} above the Most stock {shown(most[row])}",
                f"a {title} of at most the Most stock", "Change one of the two.",
                test=mended.at_most(mended.beside(items.columns["Most stock"].column))))


def _check_holding(book: Book, items: CheckedList, costs: PairRows | None) -> None:
    """Report items without a holding cost, by whichever part of the yearly rate is missing."""
    values, faults = book.settings, book.faults
    missing = ~items.good("Holding cost") & ~items.bad("Holding cost") & ~_costed(book, items, costs)
    if not missing.any() or c.HOLDING_RATE in values.bad or not values.readable:
        return
    if values.number(c.HOLDING_RATE) is None:
        title = _first(items, "Holding cost", "Item")
        rows = np.flatnonzero(missing).tolist()
        faults.many(items.sheet, [items.place(row, title) for row in rows], "Holding cost", lambda _: Fault(
            "holding cost not known", f"neither a Holding cost nor a {c.HOLDING_RATE}",
            "a cost of holding a unit for a period",
            f"Fill in Holding cost (0 if it costs nothing), or {c.HOLDING_RATE}, {c.PERIODS_A_YEAR} "
            "and Unit value.",
            "not negative" if title == "Holding cost" else "static"))
        return
    if values.number(c.PERIODS_A_YEAR) is None and c.PERIODS_A_YEAR not in values.bad:
        empty, given = values.place(c.PERIODS_A_YEAR), values.place(c.HOLDING_RATE)
        entry = next(entry for entry in book.contract.settings if entry.title == c.PERIODS_A_YEAR)
        test = mended.number_or_none(entry, mended.at(*given)) if empty and given else ""
        faults.add(values.sheet, empty or given, c.PERIODS_A_YEAR, Fault(
            "half a rule", f"{c.HOLDING_RATE} without {c.PERIODS_A_YEAR}", "the number of periods in a year",
            f"Give {c.PERIODS_A_YEAR} too (12 for months).", test=test))
    unvalued = missing & ~items.good("Unit value") & ~items.bad("Unit value")
    title = _first(items, "Unit value", "Holding cost", "Item")
    rows = np.flatnonzero(unvalued).tolist()
    named = [column.column for name, column in items.columns.items() if name in ("Unit value", "Holding cost")]
    faults.many(items.sheet, [items.place(row, title) for row in rows], title, lambda _: Fault(
        "holding cost not known", "neither a Holding cost nor a Unit value for the yearly rate",
        "a Unit value, or a Holding cost", "Fill in one of the two.",
        test=mended.any_number(*map(mended.beside, named)) if named else ""))


def _costed(book: Book, items: CheckedList, costs: PairRows | None) -> Flags:
    """Items whose holding cost stands in Period costs for every period."""
    codes, periods = _codes(book, c.ITEMS), _codes(book, c.PERIODS)
    costed = np.zeros(items.count, dtype=bool)
    if costs is not None and codes is not None and periods is not None:
        given = costs.table.good("Holding cost") | costs.table.bad("Holding cost")
        counts = np.bincount(costs.item[given[costs.row]], minlength=len(codes.codes))
        costed[[codes.rows[k] for k in np.flatnonzero(counts >= len(periods.codes))]] = True
    return costed


def _check_today(book: Book) -> None:
    values = book.settings
    absent = c.TODAY_PLAN not in book.matrices and c.TODAY_PLAN not in book.broken
    if values.values.get(settings.COMPARE) is True and absent:
        book.faults.add(values.sheet, values.place(settings.COMPARE), settings.COMPARE, Fault(
            "nothing to compare", "yes, but no filled sheet Today plan", "today's plan in Today plan",
            "Fill in Today plan, or set this to no."))


def _spread(values: Floats, horizon: int) -> Floats:
    return np.repeat(values[:, None], horizon, axis=1)


def _case(book: Book, title: str, costs: PairRows | None, receipts: PairRows | None,
          references: dict[tuple[str, str], Ints]) -> Case:
    values, items = book.settings, book.tables[c.ITEMS]
    codes, periods = book.codes[c.ITEMS].codes, book.codes[c.PERIODS].codes
    horizon = len(periods)
    safety = items.numbers("Safety stock", 0.0)
    closing = items.numbers("Closing stock")
    late = values.flag(c.LATE)
    setup, unit, holding, allowed = _costs(book, items, costs, horizon)
    arrived = np.zeros((len(codes), horizon))
    if receipts is not None:
        arrived[receipts.item, receipts.period] = receipts.table.numbers("Quantity", 0.0)[receipts.row]
    today = book.matrix(c.TODAY_PLAN)
    compare = values.values.get(settings.COMPARE)
    shared = _shared(book, horizon)
    return Case(
        title=title, currency=values.text("Currency"), period_unit=values.text("Period unit"), items=codes,
        item_names=tuple(name or code for name, code in zip(items.texts("Name"), codes, strict=True)),
        units=tuple(word or "unit" for word in items.texts("Unit")), periods=periods,
        demand=np.nan_to_num(book.matrices[c.DEMAND].figures), receipts=arrived,
        setup_cost=setup, unit_cost=unit,
        holding_cost=holding, setup_allowed=allowed, opening_stock=items.numbers("Opening stock", 0.0),
        safety_stock=safety, closing_stock=np.where(np.isnan(closing), safety, closing),
        most_stock=items.numbers("Most stock", np.inf), least_lot=items.numbers("Least lot", 0.0),
        most_lot=items.numbers("Most lot", np.inf), lot_multiple=items.numbers("Lot multiple", 0.0),
        backlog_cost=items.numbers("Backlog cost") if late else np.full(len(codes), np.nan),
        lost_cost=items.numbers("Lost sale cost"), item_resource=references[c.ITEMS, "Resource"],
        time_per_unit=items.numbers("Time per unit", 0.0), setup_time=items.numbers("Setup time", 0.0),
        item_family=references[c.ITEMS, "Family"],
        resources=shared.resources, capacity=shared.capacity, overtime_limit=shared.overtime_limit,
        overtime_cost=shared.overtime_cost, use_cost=shared.use_cost, families=shared.families,
        family_cost=shared.family_cost, family_time=shared.family_time,
        family_resource=references[c.FAMILIES, "Resource"],
        today=None if today is None else np.nan_to_num(today.figures),
        compare_today=today is not None if compare is None else bool(compare),
        period_starts=tuple(book.tables[c.PERIODS].texts("Start")),
    )


def _costs(book: Book, items: CheckedList, costs: PairRows | None, horizon: int,
           ) -> tuple[Floats, Floats, Floats, Flags]:
    """Setup, unit and holding cost (N, T), and where a setup is allowed."""
    values = book.settings
    rate, year = values.number(c.HOLDING_RATE), values.number(c.PERIODS_A_YEAR)
    derived = items.numbers("Unit value", 0.0) * ((rate or 0.0) / 100.0 / (year or 1.0))
    held = items.numbers("Holding cost")
    figures = {
        "Setup cost": _spread(items.numbers("Setup cost"), horizon),
        "Unit cost": _spread(items.numbers("Unit cost", 0.0), horizon),
        "Holding cost": _spread(np.where(np.isnan(held), derived, held), horizon),
    }
    allowed = np.ones((items.count, horizon), dtype=bool)
    if costs is not None:
        for title, figure in figures.items():
            given = costs.table.numbers(title)[costs.row]
            known = ~np.isnan(given)
            figure[costs.item[known], costs.period[known]] = given[known]
        allowed[costs.item, costs.period] = costs.table.flags("Setup allowed", default=True)[costs.row]
    return figures["Setup cost"], figures["Unit cost"], figures["Holding cost"], allowed


@dataclass(frozen=True)
class Shared:
    """Resources (R) and families (F) of a workbook, under the names of the case."""

    resources: tuple[str, ...]
    capacity: Floats
    overtime_limit: Floats
    overtime_cost: Floats
    use_cost: Floats
    families: tuple[str, ...]
    family_cost: Floats
    family_time: Floats


def _shared(book: Book, horizon: int) -> Shared:
    """Take what items share, nothing where the sheets are not there."""
    resources, families, matrix = book.table(c.RESOURCES), book.table(c.FAMILIES), book.matrix(c.CAPACITY)

    def column(table: CheckedList | None, title: str, default: float = 0.0) -> Floats:
        return np.zeros(0) if table is None else table.numbers(title, default)

    capacity = _spread(column(resources, "Capacity", np.nan), horizon)
    if resources is not None and matrix is not None:
        capacity = np.where(np.isnan(matrix.figures), capacity, matrix.figures)
    return Shared(
        () if resources is None else book.codes[c.RESOURCES].codes, capacity,
        column(resources, "Overtime limit"), column(resources, "Overtime cost"),
        column(resources, "Use cost"),
        () if families is None else book.codes[c.FAMILIES].codes, column(families, "Setup cost"),
        column(families, "Setup time"))
