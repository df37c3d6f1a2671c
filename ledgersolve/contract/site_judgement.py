"""Suspicious inputs of a site-selection workbook, as notices."""

import numpy as np
from numpy.typing import NDArray

from ledgersolve.contract import judgement
from ledgersolve.contract import site_selection as c
from ledgersolve.contract.book import Book
from ledgersolve.contract.columns import listed, quoted, shown
from ledgersolve.contract.faults import Fault
from ledgersolve.contract.geography import great_circle
from ledgersolve.contract.lanes import LaneRows, Lanes
from ledgersolve.contract.lists import CheckedList
from ledgersolve.site_selection.case import CLOSED, Case
from ledgersolve.workbook.text import unit_in

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

USUAL_ROAD_FACTORS = (1.1, 2.1)
"""Country means of road over straight-line distance lie within (R. Ballou, H. Rahardja, N. Sakai, 2002, Selected
country circuity factors for road travel distance estimation, Transportation Research Part A 36(9), 843-848)."""

MOST_PAIRS = 3_000_000
"""Larger tables of lanes are not searched for odd costs: the search would take longer than reading them."""

_MILES = frozenset({"mi", "mile", "miles"})
_KILOMETRES = frozenset({"km", "kms", "kilometre", "kilometres", "kilometer", "kilometers"})


def judge_inputs(book: Book) -> None:
    """Add notices for inputs that look like slips whatever else is wrong, so that they need no second drop."""
    tables = list(book.tables.values())
    if c.SITES in book.tables:
        judgement.odd_figures(book.faults, book.tables[c.SITES], ("Fixed cost", "Handling cost"))
    judgement.other_currencies(book.faults, book.settings, tables)
    judgement.looks_like_fraction(book.faults, book.settings, c.SHARE, 1.0,
                                  "a share in percent, such as 90")
    _other_distance_units(book, tables)


def judge(book: Book, case: Case, lanes: Lanes, rows: LaneRows | None) -> None:
    """Add notices for inputs that look like slips beside each other."""
    sites, customers = book.tables[c.SITES], book.tables[c.CUSTOMERS]
    _odd_lanes(book, rows, case)
    if case.site_latitude is not None:
        _odd_places(book, [sites, customers])
    if lanes.by_coordinates and lanes.by_distance:
        _road_factor(book)
    _unserved(book, case, customers)
    _idle_capacity(book, case, sites)


def _odd_lanes(book: Book, rows: LaneRows | None, case: Case) -> None:
    """Notices for lanes that cost far more or far less than their neighbours."""
    matrix = book.matrix(c.LANE_COSTS)
    if (matrix is None and rows is None) or case.m * case.n > MOST_PAIRS:
        return
    own = np.full((case.m, case.n), np.nan) if matrix is None else matrix.figures.copy()
    listed_lanes = np.zeros(own.shape, dtype=bool)
    if rows is not None:
        given = rows.table.numbers("Unit cost")[rows.row]
        known = ~np.isnan(given)
        own[rows.site[known], rows.customer[known]] = given[known]
        listed_lanes[rows.site[known], rows.customer[known]] = True
    odd = judgement.odd_costs(own)
    if not bool(odd.any()):
        return
    if rows is not None:
        there = np.flatnonzero((odd & listed_lanes)[rows.site, rows.customer]).tolist()
        places = [rows.table.place(int(rows.row[k]), "Unit cost") for k in there]
        book.faults.many(rows.table.sheet, places, "Unit cost", lambda i: _odd_cost(
            float(own[rows.site[there[i]], rows.customer[there[i]]])), severity="notice")
    if matrix is not None:
        down, across = np.nonzero(odd & ~listed_lanes)
        places = [matrix.place(j, i) for j, i in zip(down.tolist(), across.tolist(), strict=True)]
        book.faults.many(matrix.sheet, places, matrix.contract.figure.title,
                         lambda i: _odd_cost(float(own[down[i], across[i]])), severity="notice")


def _odd_cost(cost: float) -> Fault:
    return Fault("figure far off",
                 f"{shown(cost)}, a hundred times off the site's and the customer's other lanes",
                 "costs of one size", "Check the decimal sign and the unit.")


def _other_distance_units(book: Book, tables: list[CheckedList]) -> None:
    unit = book.settings.text("Distance unit")
    foreign = _MILES if unit == "km" else _KILOMETRES
    for table in tables:
        for column, heading in table.headings.items():
            if set(unit_in(heading).casefold().replace("/", " ").split()) & foreign:
                book.faults.notice(
                    table.sheet, (table.title_row, column), "", "another distance unit",
                    f"the title {quoted(heading)}", f"distances in {unit}, as Settings says",
                    "The figures were taken as they are; set Distance unit, or correct the title.")


def _odd_places(book: Book, tables: list[CheckedList]) -> None:
    """Notices for places at (0, 0), and for places far from all others that are near with swapped coordinates."""
    latitudes = [table.numbers("Latitude") for table in tables]
    longitudes = [table.numbers("Longitude") for table in tables]
    every_latitude, every_longitude = np.concatenate(latitudes), np.concatenate(longitudes)
    middle = (np.array([np.nanmedian(every_latitude)]), np.array([np.nanmedian(every_longitude)]))
    for table, latitude, longitude in zip(tables, latitudes, longitudes, strict=True):
        zero = (latitude == 0) & (longitude == 0)
        places = [table.place(row, "Latitude") for row in np.flatnonzero(zero).tolist()]
        book.faults.many(table.sheet, places, "Latitude", lambda _: Fault(
            "place at zero", "latitude 0 and longitude 0, a place in the sea off Africa",
            "the place's coordinates",
            "Give the coordinates, or clear both cells."), severity="notice")
        away = great_circle(latitude, longitude, *middle)[:, 0]
        turned = great_circle(np.where(np.abs(longitude) <= 90, longitude, np.nan), latitude, *middle)[:, 0]
        swapped = ~zero & (away > 1000) & (turned < away / 4)
        rows = np.flatnonzero(swapped).tolist()

        def describe(i: int, rows: list[int] = rows, away: Floats = away, turned: Floats = turned) -> Fault:
            return Fault(
                "coordinates swapped", f"a place {away[rows[i]]:.0f} km from the middle of all places; with "
                f"latitude and longitude swapped it would be {turned[rows[i]]:.0f} km",
                "latitude first, longitude second", "Swap the two cells if they are the wrong way round.")

        places = [table.place(row, "Latitude") for row in rows]
        book.faults.many(table.sheet, places, "Latitude", describe, severity="notice")


def _road_factor(book: Book) -> None:
    values = book.settings
    factor = values.number(c.ROAD_FACTOR) or 1.0
    low, high = USUAL_ROAD_FACTORS
    if not low <= factor <= high:
        words = "distances as the crow flies" if factor == 1.0 else f"a road factor of {shown(factor)}"
        book.faults.notice(
            values.sheet, values.place(c.ROAD_FACTOR), c.ROAD_FACTOR, "unusual road factor", words,
            f"a factor from {low} to {high}, as measured for whole countries (Ballou et al. 2002)",
            "Roads are longer than straight lines; check the factor.")


def _unserved(book: Book, case: Case, customers: CheckedList) -> None:
    """A notice for customers whose demand no site could serve."""
    if case.unmet_cost is not None:
        return
    reach = np.isfinite(case.lane_cost) & (case.rule != CLOSED)[:, None]
    promised = case.promised()
    if case.distance is not None and bool(np.isfinite(promised).any()):
        reach &= np.isnan(case.distance) | (case.distance <= promised[None, :])
    short = ~reach.any(axis=0)
    if bool(np.isfinite(case.capacity).any()):
        most = np.where(np.isfinite(case.capacity), case.capacity, np.inf)
        whole = np.max(np.where(reach, most[:, None], 0.0), axis=0)
        short |= case.single_source & (whole < case.demand)
    rows = np.flatnonzero(short & case.needs_service()).tolist()
    book.faults.many(customers.sheet, [customers.place(row, "Customer") for row in rows], "Customer",
                     lambda i: _lost(case, rows[i], reach[:, rows[i]]), severity="notice")


def _lost(case: Case, customer: int, reach: Flags) -> Fault:
    lanes = np.isfinite(case.lane_cost[:, customer])
    if reach.any():
        found = f"a demand of {shown(case.demand[customer])} from one site, more than any site it can use holds"
    elif lanes.any():
        found = "a customer whose lanes are all too long or start at closed sites"
    else:
        found = "a customer without any lane"
    return Fault("demand no site can serve", f"{found} ({quoted(case.customers[customer])})",
                 "a site that can serve each customer", "Add a lane or a site, or give Unmet demand cost.")


def _idle_capacity(book: Book, case: Case, sites: CheckedList) -> None:
    """A notice where even the smallest capacity holds all demand: it may be in another unit."""
    limited = np.isfinite(case.capacity)
    factor = max([1.0, *(variant.demand_factor for variant in case.variants)])
    total = float(case.demand.sum()) * factor
    if limited.sum() > 1 and total > 0 and float(case.capacity[limited].min()) >= total:
        names = listed(case.sites[j] for j in np.flatnonzero(limited).tolist()[:3])
        row = int(np.flatnonzero(limited)[0])
        book.faults.notice(
            sites.sheet, sites.place(row, "Capacity"), "Capacity", "capacity never binds",
            f"capacities ({names} …) that each hold all demand ({shown(round(total, 6))})",
            "capacity and demand in one unit and for one period",
            "Check the units; the plan is right if so meant.")
