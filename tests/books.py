"""Workbooks for tests, written from plain Python data under the contract's sheet names and titles.

``write_book`` writes any sheets; ``site_book`` and ``lot_book`` take the rows of each contract sheet as
mappings from title to value (matrices as arrays), and add Job and Currency; ``book_of_site_case`` and
``book_of_lot_case`` write a case out, so that reading it back must give the same case.
"""

import datetime
import math
import re
import zipfile
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import xlsxwriter

from ledgersolve.contract import Reading, read_workbook
from ledgersolve.lot_sizing.case import Case as LotCase
from ledgersolve.site_selection.case import CLOSED, OPEN
from ledgersolve.site_selection.case import Case as SiteCase
from ledgersolve.workbook.package import open_package

Row = Mapping[str, object]
Matrix = Sequence[Sequence[object]] | np.ndarray
NEVER = "@never calculated@"


@dataclass(frozen=True)
class Formula:
    """A formula with its cached value (``"#N/A"`` makes an error value); None = never calculated."""

    text: str
    value: float | str | bool | None = None


@dataclass(frozen=True)
class Percent:
    """A number shown as a percentage: 0.2 is shown as 20 %."""

    value: float


def write_book(
    path: Path, sheets: Mapping[str, Sequence[Sequence[object]]],
    hidden_rows: Mapping[str, Iterable[int]] | None = None, date1904: bool = False,
) -> Path:
    """Write sheets of rows (the first row of each list is row 1); None leaves a cell empty.

    Text is written as text, also ``"=A1"``; dates as date cells; ``Formula`` as a formula. Rows in
    ``hidden_rows`` count from 1.
    """
    book = xlsxwriter.Workbook(str(path), {"in_memory": True, "date_1904": date1904})
    date_format = book.add_format({"num_format": "yyyy-mm-dd"})
    percent_format = book.add_format({"num_format": "0.00%"})
    for name, rows in sheets.items():
        sheet = book.add_worksheet(name)
        for r, row in enumerate(rows):
            for c, value in enumerate(row):
                _write_cell(sheet, r, c, value, date_format, percent_format)
        for row_number in (hidden_rows or {}).get(name, ()):
            sheet.set_row(row_number - 1, None, None, {"hidden": True})
    book.close()
    cells = (value for rows in sheets.values() for row in rows for value in row)
    if any(isinstance(value, Formula) and value.value is None for value in cells):
        _forget_values(path)
    return path


def _write_cell(sheet, r: int, c: int, value: object, date_format, percent_format) -> None:
    if value is None:
        return
    if isinstance(value, bool | np.bool_):
        sheet.write_boolean(r, c, bool(value))
    elif isinstance(value, Formula):
        sheet.write_formula(r, c, value.text, None, NEVER if value.value is None else value.value)
    elif isinstance(value, Percent):
        sheet.write_number(r, c, value.value, percent_format)
    elif isinstance(value, datetime.date):
        sheet.write_datetime(r, c, datetime.datetime(value.year, value.month, value.day), date_format)
    elif isinstance(value, str):
        sheet.write_string(r, c, value)
    else:
        sheet.write_number(r, c, float(value))


def _forget_values(path: Path) -> None:
    """Take the cached value out of the formulas that were never calculated."""
    with zipfile.ZipFile(path) as package:
        parts = [(info, package.read(info)) for info in package.infolist()]
    pattern = re.compile(rb' t="str"(><f>[^<]*</f>)<v>' + NEVER.encode() + rb"</v>")
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as package:
        for info, data in parts:
            if info.filename.startswith("xl/worksheets/sheet"):
                data = pattern.sub(rb"\1", data)
            package.writestr(info, data)


def read_sheets(folder: Path, sheets: Mapping[str, Sequence[Sequence[object]]], **more) -> Reading:
    """Write sheets to a workbook in ``folder`` and read it."""
    return read_book(write_book(folder / "book.xlsx", sheets, **more))


def read_book(path: Path) -> Reading:
    """Read a workbook."""
    with open_package(path) as package:
        return read_workbook(package, path.name)


def errors(reading: Reading) -> list[tuple[str, str, str]]:
    """Kind, sheet and cell of each error."""
    return [(p.kind, p.sheet, p.cell) for p in reading.problems if p.is_error]


def notices(reading: Reading) -> list[tuple[str, str, str]]:
    """Kind, sheet and cell of each notice."""
    return [(p.kind, p.sheet, p.cell) for p in reading.problems if not p.is_error]


def table(rows: Sequence[Row]) -> list[list[object]]:
    """Rows of a list sheet: the titles, in the order they are first met, then one row a mapping."""
    titles: dict[str, None] = {}
    for row in rows:
        titles.update(dict.fromkeys(row))
    return [list(titles), *[[row.get(title) for title in titles] for row in rows]]


def matrix(
    corner: str, row_codes: Sequence[object], column_codes: Sequence[object], values: Matrix,
) -> list[list[object]]:
    """Rows of a matrix sheet; None, NaN and infinite values leave the cell empty."""
    def shown(value: object) -> object:
        return None if isinstance(value, float) and not math.isfinite(value) else value

    given = values.tolist() if isinstance(values, np.ndarray) else values
    rows = [[shown(value) for value in row] for row in given]
    return [[corner, *column_codes], *[[code, *row] for code, row in zip(row_codes, rows, strict=True)]]


def settings_sheet(job: str, settings: Row | None = None) -> list[list[object]]:
    """Rows of the Settings sheet; Job and Currency are added unless given (None leaves a row out)."""
    given: dict[str, object] = {"Job": job, "Currency": "EUR", **(settings or {})}
    return [["Setting", "Value"], *[[name, value] for name, value in given.items() if value is not None]]


def site_sheets(
    sites: Sequence[Row], customers: Sequence[Row], *, lanes: Sequence[Row] | None = None,
    lane_costs: Matrix | None = None, distances: Matrix | None = None,
    variants: Sequence[Row] | None = None, settings: Row | None = None,
) -> dict[str, list[list[object]]]:
    """Sheets of a site-selection workbook; matrices have a row a site and a column a customer."""
    sheets = {
        "Settings": settings_sheet("site selection", settings),
        "Sites": table(sites),
        "Customers": table(customers),
    }
    site_codes = [row["Site"] for row in sites]
    customer_codes = [row["Customer"] for row in customers]
    if lanes is not None:
        sheets["Lanes"] = table(lanes)
    if lane_costs is not None:
        sheets["Lane costs"] = matrix("Site", site_codes, customer_codes, lane_costs)
    if distances is not None:
        sheets["Distances"] = matrix("Site", site_codes, customer_codes, distances)
    if variants is not None:
        sheets["Variants"] = table(variants)
    return sheets


def site_book(path: Path, sites: Sequence[Row], customers: Sequence[Row], **more) -> Path:
    """Write a site-selection workbook; ``more`` as in ``site_sheets``."""
    return write_book(path, site_sheets(sites, customers, **more))


def lot_sheets(
    items: Sequence[Row], demand: Matrix, *, periods: Sequence[Row] | None = None,
    resources: Sequence[Row] | None = None, capacity: Matrix | None = None,
    period_costs: Sequence[Row] | None = None, receipts: Sequence[Row] | None = None,
    families: Sequence[Row] | None = None, today_plan: Matrix | None = None, settings: Row | None = None,
) -> dict[str, list[list[object]]]:
    """Sheets of a lot-sizing workbook; demand and today's plan (N, T), capacity (R, T); periods 1 to T."""
    horizon = len(demand[0])
    rows = periods if periods is not None else [{"Period": t + 1} for t in range(horizon)]
    codes = [row["Period"] for row in rows]
    names = [row["Item"] for row in items]
    sheets = {
        "Settings": settings_sheet("lot sizing", settings),
        "Periods": table(rows),
        "Items": table(items),
        "Demand": matrix("Item", names, codes, demand),
    }
    for name, listed in (("Resources", resources), ("Period costs", period_costs), ("Receipts", receipts),
                         ("Families", families)):
        if listed is not None:
            sheets[name] = table(listed)
    if capacity is not None:
        sheets["Capacity"] = matrix("Resource", [row["Resource"] for row in resources or ()], codes, capacity)
    if today_plan is not None:
        sheets["Today plan"] = matrix("Item", names, codes, today_plan)
    return sheets


def lot_book(path: Path, items: Sequence[Row], demand: Matrix, **more) -> Path:
    """Write a lot-sizing workbook; ``more`` as in ``lot_sheets``."""
    return write_book(path, lot_sheets(items, demand, **more))


def _given(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None


def _place(latitude: float, longitude: float) -> dict[str, object]:
    return {"Latitude": _given(latitude), "Longitude": _given(longitude)}


def _ints(value: int | None) -> object:
    return None if value is None else int(value)


def book_of_site_case(path: Path, case: SiteCase, settings: Row | None = None) -> Path:
    """Write a case as a workbook: lanes as a matrix (as rows where lanes have limits)."""
    rules = {OPEN: "open", CLOSED: "closed"}
    coordinates = case.site_latitude is not None and case.site_longitude is not None
    sites = [
        {
            "Site": code, "Name": case.site_names[j], "Fixed cost": case.fixed_cost[j],
            "Capacity": _given(case.capacity[j]), "Least volume": case.least_volume[j],
            "Handling cost": case.handling_cost[j], "Rule": rules.get(int(case.rule[j]), "free"),
            "Today": "yes" if case.today[j] else "no", "Opening cost": case.opening_cost[j],
            "Closing cost": case.closing_cost[j],
            "Group": case.group_names[case.group[j]] if case.group[j] >= 0 else None,
            **(_place(case.site_latitude[j], case.site_longitude[j]) if coordinates else {}),
        }
        for j, code in enumerate(case.sites)
    ]
    customers = [
        {
            "Customer": code, "Name": case.customer_names[i], "Demand": case.demand[i],
            "Longest distance": _given(case.customer_longest[i]),
            "Single source": "yes" if case.single_source[i] else "no",
            **(_place(case.customer_latitude[i], case.customer_longitude[i]) if coordinates else {}),
        }
        for i, code in enumerate(case.customers)
    ]
    lanes = None
    if case.lane_most is not None:
        lanes = [
            {"Site": case.sites[j], "Customer": case.customers[i], "Unit cost": case.lane_cost[j, i],
             "Most": _given(case.lane_most[j, i])}
            for j in range(case.m) for i in range(case.n) if np.isfinite(case.lane_cost[j, i])
        ]
    variants = [
        {
            "Variant": v.name, "Demand factor": v.demand_factor, "Lane cost factor": v.lane_cost_factor,
            "Fixed cost factor": v.fixed_cost_factor, "Fewest sites": v.fewest_sites,
            "Most sites": v.most_sites, "Longest distance": v.longest_distance,
            "Open": ", ".join(v.open) or None, "Closed": ", ".join(v.closed) or None,
        }
        for v in case.variants
    ]
    given = {
        "Title": case.title, "Currency": case.currency, "Demand unit": case.demand_unit,
        "Period covered": case.period_covered, "Distance unit": case.distance_unit,
        "Lane cost basis": "whole demand" if case.cost_is_whole else "per unit",
        "Fewest sites": _ints(case.fewest_sites), "Most sites": _ints(case.most_sites),
        "Longest distance": case.longest_distance,
        "Share within distance (%)": None if case.share_within is None else 100 * case.share_within,
        "Distance for share": case.share_distance, "Unmet demand cost": case.unmet_cost,
        "Compare with today": "yes" if case.compare_today else "no", **(settings or {}),
    }
    return site_book(
        path, sites, customers, lanes=lanes, lane_costs=None if lanes is not None else case.lane_cost,
        distances=case.distance, variants=variants or None, settings=given,
    )


def book_of_lot_case(path: Path, case: LotCase, settings: Row | None = None) -> Path:
    """Write a case as a workbook; period costs as rows where an item's figures change over time."""
    def code(codes: Sequence[str], number: int) -> str | None:
        return codes[number] if number >= 0 else None

    items = [
        {
            "Item": name, "Name": case.item_names[k], "Unit": case.units[k],
            "Setup cost": case.setup_cost[k, 0],
            "Unit cost": case.unit_cost[k, 0], "Holding cost": case.holding_cost[k, 0],
            "Opening stock": case.opening_stock[k], "Safety stock": case.safety_stock[k],
            "Closing stock": case.closing_stock[k], "Most stock": _given(case.most_stock[k]),
            "Least lot": case.least_lot[k], "Most lot": _given(case.most_lot[k]),
            "Lot multiple": case.lot_multiple[k] or None, "Backlog cost": _given(case.backlog_cost[k]),
            "Lost sale cost": _given(case.lost_cost[k]),
            "Resource": code(case.resources, case.item_resource[k]),
            "Time per unit": case.time_per_unit[k], "Setup time": case.setup_time[k],
            "Family": code(case.families, case.item_family[k]),
        }
        for k, name in enumerate(case.items)
    ]
    period_costs = [
        {
            "Item": name, "Period": period, "Setup cost": case.setup_cost[k, t],
            "Unit cost": case.unit_cost[k, t], "Holding cost": case.holding_cost[k, t],
            "Setup allowed": "yes" if case.setup_allowed[k, t] else "no",
        }
        for k, name in enumerate(case.items) for t, period in enumerate(case.periods)
        if not case.setup_allowed[k, t] or any(
            figures[k, t] != figures[k, 0]
            for figures in (case.setup_cost, case.unit_cost, case.holding_cost))
    ]
    receipts = [
        {"Item": name, "Period": period, "Quantity": case.receipts[k, t]}
        for k, name in enumerate(case.items) for t, period in enumerate(case.periods) if case.receipts[k, t]
    ]
    resources = [
        {"Resource": name, "Capacity": case.capacity[r, 0], "Overtime limit": case.overtime_limit[r],
         "Overtime cost": case.overtime_cost[r], "Use cost": case.use_cost[r]}
        for r, name in enumerate(case.resources)
    ]
    families = [
        {"Family": name, "Setup cost": case.family_cost[f], "Setup time": case.family_time[f],
         "Resource": code(case.resources, case.family_resource[f])}
        for f, name in enumerate(case.families)
    ]
    starts = case.period_starts or ("",) * case.t
    periods = [
        {"Period": period, **({"Start": datetime.date.fromisoformat(start)} if start else {})}
        for period, start in zip(case.periods, starts, strict=True)
    ]
    given = {
        "Title": case.title, "Currency": case.currency, "Period unit": case.period_unit,
        "Late deliveries": "yes" if np.isfinite(case.backlog_cost).any() else "no",
        "Compare with today": "yes" if case.compare_today else "no", **(settings or {}),
    }
    return lot_book(
        path, items, case.demand, periods=periods, resources=resources or None,
        capacity=case.capacity if case.resources else None, period_costs=period_costs or None,
        receipts=receipts or None, families=families or None, today_plan=case.today, settings=given,
    )
