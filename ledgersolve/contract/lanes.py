"""Lanes from all their sources: rows of Lanes, the matrices, coordinates; and what is wrong with them.

A figure of a row in Lanes wins over the same figure in a matrix, a matrix over coordinates. A lane's own
cost (Unit cost, else Lane costs) wins over the cost per unit and distance. An empty cell of Lane costs, and
a row of Lanes with Allowed = no, say that there is no lane; a row of Lanes for the pair takes the first
back.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ledgersolve.contract import mended
from ledgersolve.contract import site_selection as c
from ledgersolve.contract.book import Book
from ledgersolve.contract.codes import Codes, report_pairs, resolve_column
from ledgersolve.contract.faults import Fault
from ledgersolve.contract.geography import EARTH_RADIUS_KM, KM_PER_MILE, great_circle
from ledgersolve.contract.lists import CheckedList

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]
Ints = NDArray[np.int64]


@dataclass
class LaneRows:
    """Rows of Lanes with both codes known: site and customer numbers, and the row's place in the list."""

    table: CheckedList
    site: Ints
    customer: Ints
    row: Ints


@dataclass
class Lanes:
    """Costs (inf = no lane), distances (NaN = not known) and limits of all pairs, shape (m, n).

    ``unclear`` marks pairs with a figure at fault, or whose coordinates are; ``by_distance`` says that some
    lane is costed by its distance, ``by_coordinates`` that some distance comes from coordinates.
    """

    cost: Floats
    distance: Floats | None
    most: Floats | None
    unclear: Flags | None
    by_distance: bool
    by_coordinates: bool


def lane_rows(book: Book, sites: Codes, customers: Codes) -> LaneRows | None:
    """Rows of Lanes with their codes looked up; unknown codes and repeated pairs are reported."""
    table = book.table(c.LANES)
    if table is None:
        return None
    site = resolve_column(table, "Site", sites, book.faults)
    customer = resolve_column(table, "Customer", customers, book.faults)
    report_pairs(table, site, customer, book.faults)
    row = np.flatnonzero((site >= 0) & (customer >= 0))
    return LaneRows(table, site[row], customer[row], row)


def assemble(book: Book, rows: LaneRows | None, demand: Floats, places: tuple[Floats, Floats, Floats, Floats],
             ) -> Lanes:
    """Put the lanes of all sources together.

    Parameters
    ----------
    book
        The checked workbook.
    rows
        Rows of Lanes, or None.
    demand
        Shape (n,).
    places
        Latitudes and longitudes of sites (m,), then of customers (n,); NaN where not known.
    """
    shape = (len(places[0]), len(demand))
    own, closed = _own_costs(book, rows, shape)
    distance, by_coordinates = _distances(book, rows, places, shape)
    rate = book.settings.number(c.RATE)
    cost = own if own is not None else np.full(shape, np.nan)
    by_distance = False
    if rate is not None and distance is not None:
        scale = rate * demand[None, :] if is_whole(book) else rate
        if own is None:
            np.multiply(distance, scale, out=cost)
        else:
            np.copyto(cost, distance * scale, where=np.isnan(own))
        by_distance = True
    cost[np.isnan(cost)] = np.inf
    if closed is not None:
        cost[closed] = np.inf
    return Lanes(cost, distance, _limits(rows, shape), _unclear(book, rows, shape), by_distance,
                 by_coordinates)


def is_whole(book: Book) -> bool:
    """Whether a lane's cost serves all of the customer's demand."""
    return book.settings.text(c.BASIS) == "whole demand"


def _own_costs(
    book: Book, rows: LaneRows | None, shape: tuple[int, int],
) -> tuple[Floats | None, Flags | None]:
    """Costs that lanes have of their own (NaN where none), and pairs said to be no lane."""
    matrix = book.matrix(c.LANE_COSTS)
    own: Floats | None = None
    closed: Flags | None = None
    if matrix is not None and matrix.figures.shape == shape:
        own = matrix.figures.copy()
        closed = matrix.covered() & np.isnan(own)
    if rows is not None:
        own = np.full(shape, np.nan) if own is None else own
        closed = np.zeros(shape, dtype=bool) if closed is None else closed
        given = rows.table.numbers("Unit cost")[rows.row]
        priced = ~np.isnan(given)
        own[rows.site[priced], rows.customer[priced]] = given[priced]
        closed[rows.site, rows.customer] = ~rows.table.flags("Allowed", default=True)[rows.row]
    return own, closed


def _distances(book: Book, rows: LaneRows | None, places: tuple[Floats, Floats, Floats, Floats],
               shape: tuple[int, int]) -> tuple[Floats | None, bool]:
    """Distances of all pairs, None where none is known; and whether coordinates gave any."""
    distance: Floats | None = None
    by_coordinates = all(bool(np.isfinite(place).any()) for place in places)
    if by_coordinates:
        unit = 1.0 if book.settings.text("Distance unit") == "km" else KM_PER_MILE
        factor = book.settings.number(c.ROAD_FACTOR) or 1.0
        distance = great_circle(*places, radius=EARTH_RADIUS_KM / unit * factor)
    matrix = book.matrix(c.DISTANCES)
    if matrix is not None and matrix.figures.shape == shape:
        if distance is None:
            distance = matrix.figures.copy()
        else:
            np.copyto(distance, matrix.figures, where=~np.isnan(matrix.figures))
    if rows is not None and bool(rows.table.good("Distance").any()):
        distance = np.full(shape, np.nan) if distance is None else distance
        given = rows.table.numbers("Distance")[rows.row]
        known = ~np.isnan(given)
        distance[rows.site[known], rows.customer[known]] = given[known]
    return distance, by_coordinates


def _limits(rows: LaneRows | None, shape: tuple[int, int]) -> Floats | None:
    if rows is None or not bool(rows.table.good("Most").any()):
        return None
    most = np.full(shape, np.inf)
    most[rows.site, rows.customer] = rows.table.numbers("Most", np.inf)[rows.row]
    return most


def _unclear(book: Book, rows: LaneRows | None, shape: tuple[int, int]) -> Flags | None:
    """Pairs with a figure or a coordinate at fault; None where none is."""
    unclear: Flags | None = None
    for name in (c.LANE_COSTS, c.DISTANCES):
        matrix = book.matrix(name)
        if matrix is not None and matrix.bad.shape == shape and bool(matrix.bad.any()):
            unclear = matrix.bad.copy() if unclear is None else unclear | matrix.bad
    if rows is not None:
        bad = (rows.table.bad("Unit cost") | rows.table.bad("Distance") | rows.table.bad("Allowed"))[rows.row]
        if bool(bad.any()):
            unclear = np.zeros(shape, dtype=bool) if unclear is None else unclear
            unclear[rows.site[bad], rows.customer[bad]] = True
    for name, axis in ((c.SITES, 0), (c.CUSTOMERS, 1)):
        table = book.tables[name]
        wrong = (table.bad("Latitude") | table.bad("Longitude"))[list(book.codes[name].rows)]
        if bool(wrong.any()):
            unclear = np.zeros(shape, dtype=bool) if unclear is None else unclear
            unclear |= wrong[:, None] if axis == 0 else wrong[None, :]
    return unclear


def check_sources(book: Book, rows: LaneRows | None, coordinates: bool) -> None:
    """Report workbooks that give no lanes, or no cost for them."""
    faults, settings = book.faults, book.settings
    if {c.LANES, c.LANE_COSTS, c.DISTANCES} & (book.broken | set(book.tables) | set(book.matrices)):
        listed = rows is not None or bool({c.LANES, c.LANE_COSTS} & (book.broken | set(book.matrices)))
        if listed or settings.number(c.RATE) is not None:
            return
    elif coordinates and settings.number(c.RATE) is not None:
        return
    elif not coordinates:
        faults.add(c.LANES, None, "", Fault(
            "no lanes", "neither Lanes nor Lane costs nor Distances nor coordinates on both sides",
            "lanes from sites to customers",
            f"Fill in Lanes or Lane costs, or give Latitude and Longitude in both lists and {c.RATE}."))
        return
    if c.RATE in settings.bad or not settings.readable:
        return
    source = "coordinates" if coordinates and book.matrix(c.DISTANCES) is None else "distances"
    place = settings.place(c.RATE)
    faults.add(settings.sheet, place, c.RATE, Fault(
        "no lane costs", f"{source}, but no cost per unit and distance", "a cost for every lane",
        f"Give {c.RATE} in Settings, or costs in Lanes or Lane costs.", "number" if place else "static"))


def check_rows(book: Book, rows: LaneRows | None) -> None:
    """Report rows of Lanes with neither cost nor distance, and rows whose cost cannot be told."""
    if rows is None:
        return
    table, faults = rows.table, book.faults
    allowed = table.flags("Allowed", default=True)[rows.row]
    unclear = (table.bad("Unit cost") | table.bad("Distance") | table.bad("Allowed"))[rows.row]
    priced = table.good("Unit cost")[rows.row] | _in_matrix(book, c.LANE_COSTS, rows)
    measured = table.good("Distance")[rows.row] | _in_matrix(book, c.DISTANCES, rows)
    asked = allowed & ~unclear & ~priced
    title = "Unit cost" if "Unit cost" in table.columns or "Distance" not in table.columns else "Distance"
    empty = rows.row[asked & ~measured]
    named = [column.column for name, column in table.columns.items() if name in ("Unit cost", "Distance")]
    test = mended.any_number(*map(mended.beside, named))
    if "Allowed" in table.columns:
        test = mended.any_of(test, mended.is_no(mended.beside(table.columns["Allowed"].column)))
    faults.many(table.sheet, [table.place(row, title) for row in empty.tolist()], title, lambda _: Fault(
        "required cell empty", "neither Unit cost nor Distance",
        "one of Unit cost and Distance in each row of Lanes, also where coordinates could give the distance",
        "Fill in one of the two, or write no under Allowed.", "filled", test=test))
    if book.settings.number(c.RATE) is None and c.RATE not in book.settings.bad and book.settings.readable:
        unpriced = rows.row[asked & measured]
        places = [table.place(row, title) for row in unpriced.tolist()]
        faults.many(table.sheet, places, title, lambda _: Fault(
            "cost not known", "a lane with a distance, but without a cost", "a cost for the lane",
            f"Give Unit cost, or {c.RATE} in Settings."))


def _in_matrix(book: Book, name: str, rows: LaneRows) -> Flags:
    """Rows of Lanes whose pair has a figure (or one at fault) in a matrix."""
    matrix = book.matrix(name)
    if matrix is None:
        return np.zeros(len(rows.row), dtype=bool)
    pairs = (rows.site, rows.customer)
    return np.asarray(~np.isnan(matrix.figures[pairs]) | matrix.bad[pairs])


def check_distances(book: Book, rows: LaneRows | None, lanes: Lanes, promised: Flags,
                    names: tuple[Codes, Codes], rule: str) -> None:
    """Report lanes without a distance where a distance rule applies.

    ``promised`` has shape (n,): customers for whom a rule applies; ``rule`` names it.
    """
    unknown = np.isfinite(lanes.cost) & promised[None, :]
    if lanes.distance is not None:
        unknown &= np.isnan(lanes.distance)
    if lanes.unclear is not None:
        unknown &= ~lanes.unclear
    if not bool(unknown.any()):
        return
    sites, customers = names
    if rows is not None:
        own = unknown[rows.site, rows.customer]
        listed = np.flatnonzero(own).tolist()
        title = "Distance" if "Distance" in rows.table.columns else "Site"
        book.faults.many(
            rows.table.sheet, [rows.table.place(int(rows.row[k]), title) for k in listed], "Distance",
            lambda i: _no_distance(sites.codes[rows.site[listed[i]]],
                                   customers.codes[rows.customer[listed[i]]], rule))
        unknown[rows.site, rows.customer] = False
    matrix = book.matrix(c.LANE_COSTS)
    if matrix is not None:
        down, across = np.nonzero(unknown)
        book.faults.many(
            matrix.sheet, [matrix.place(j, i) for j, i in zip(down.tolist(), across.tolist(), strict=True)],
            "Distance", lambda k: _no_distance(sites.codes[down[k]], customers.codes[across[k]], rule))


def _no_distance(site: str, customer: str, rule: str) -> Fault:
    return Fault(
        "distance not known", f"no distance for the lane {site} – {customer}",
        f"a distance for every lane, as {rule} is set",
        "Give the distance in Lanes or Distances, or coordinates of both ends.")
