"""The map-like picture: sites and customers by coordinates, deliveries as lines, on a sheet of its own figures."""

import math
from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.report import names, style
from ledgersolve.report.decision import PICTURE_HEIGHT, PICTURE_WIDTH
from ledgersolve.report.site_places import SitePlaces
from ledgersolve.report.tables import FIRST_ROW, Column, detail_sheet
from ledgersolve.site_selection.case import Floats, Ints
from ledgersolve.workbook.cells import column_number
from ledgersolve.workbook.sheets import Area, Chart, ResultSheet, Scalar, Series

DRAWN_DELIVERIES = 3000
LABELLED_SITES = 16
LONGEST_LABEL = 24
DRAWN_SITES = 30
IN_USE = 9
"""Size from which a mark stands for a site in use, today or in the plan."""
PRINTED_POINTS = 40
SMALLEST_MAP = 0.02
"""Degrees of latitude that the picture shows at least."""
MARGIN = 0.06
"""Room around the points, as a part of the picture."""
MARKS_ACROSS, MARKS_UP = 12, 8
CROWDED = 600
"""Customers beyond which they are drawn as fine dots, without lines to them."""
PLOT = (0.10, 0.10, 0.87, 0.66)
"""Where the plot stands in the picture: left, top, width, height as parts of it."""
PLOT_RATIO = PLOT[2] * PICTURE_WIDTH / (PLOT[3] * PICTURE_HEIGHT)
"""Width over height of the plot, so that a mile is as long sideways as upwards."""


@dataclass(frozen=True)
class _Points:
    """A series: its look, and longitude, latitude and label of each point (None lifts the pen)."""

    name: str
    rows: list[tuple[float | None, float | None, str]]
    colour: str
    marker: str = ""
    size: int = 7
    hollow: bool = False
    line: str = ""
    labelled: bool = False


def site_map(at: SitePlaces) -> tuple[ResultSheet, Chart] | None:
    """Give the sheet of points and the chart over it; None where coordinates are missing."""
    case = at.report.case
    sites = _places(case.site_longitude, case.site_latitude)
    customers = _places(case.customer_longitude, case.customer_latitude)
    if sites is None or customers is None:
        return None
    series = [_deliveries(at, sites, customers), _customers(at, customers), *_site_kinds(at, sites)]
    kept = [points for points in series if points.rows]
    return _sheet(at, kept), _chart(at.name(names.PLAN_MAP), kept, np.vstack([sites, customers]), at)


def _places(longitude: Floats | None, latitude: Floats | None) -> Floats | None:
    if longitude is None or latitude is None or not np.isfinite(longitude + latitude).any():
        return None
    return np.column_stack([longitude, latitude])


def _deliveries(at: SitePlaces, sites: Floats, customers: Floats) -> _Points:
    """For each site, in turn: out to a customer and back; an empty row lifts the pen."""
    rows: list[tuple[float | None, float | None, str]] = []
    before = -1
    for j, i in _drawn(at) if at.report.case.n <= CROWDED else ():
        if not (np.isfinite(sites[j]).all() and np.isfinite(customers[i]).all()):
            continue
        if j != before:
            rows += [(None, None, "")] if rows else []
            rows.append((*sites[j].tolist(), at.report.case.sites[j]))
            before = j
        rows.append((*customers[i].tolist(), at.report.case.customers[i]))
        rows.append((*sites[j].tolist(), at.report.case.sites[j]))
    return _Points("Deliveries", rows, style.LINE, line="solid")


def _drawn(at: SitePlaces) -> list[tuple[int, int]]:
    """Sites and customers of the deliveries that are drawn: the largest ones, in table order."""
    kept: Ints = np.sort(np.argsort(-at.volumes, kind="stable")[:DRAWN_DELIVERIES]).astype(np.int64)
    return list(zip(at.sites[kept].tolist(), at.customers[kept].tolist(), strict=True))


def _customers(at: SitePlaces, customers: Floats) -> _Points:
    kept = np.argsort(-at.report.case.demand, kind="stable")[:DRAWN_DELIVERIES]
    size = 4 if at.report.case.n <= 300 else 3 if at.report.case.n <= CROWDED else 2
    points = _listed(customers, np.sort(kept), at.report.case.customers)
    return _Points("Customer", points, style.QUIET if at.report.case.n <= CROWDED else style.LINE, "circle", size)


def _site_kinds(at: SitePlaces, sites: Floats) -> list[_Points]:
    case, running = at.report.case, at.report.plan.open
    was = case.today if at.has_today else running
    kinds = (
        ("Site not used", ~running & ~case.today, style.QUIET, "square", 6, True),
        ("Site that closes", case.today & ~running, style.RUST, "x", 9, True),
        ("Open site" if not at.has_today else "Site that stays", running & was, style.PETROL, "diamond", 11, False),
        ("Site that opens", running & ~was, style.RUST, "triangle", 11, False),
    )
    labelled = int(running.sum()) <= LABELLED_SITES
    labels = tuple(style.short(code, name, LONGEST_LABEL)
                   for code, name in zip(case.sites, case.site_names, strict=True))
    return [
        _Points(name, _listed(sites, np.flatnonzero(which), labels), colour, marker, size, hollow,
                labelled=labelled and not hollow)
        for name, which, colour, marker, size, hollow in kinds
    ]


def _listed(places: Floats, which: Ints, labels: tuple[str, ...]) -> list[tuple[float | None, float | None, str]]:
    known = [k for k in which.tolist() if np.isfinite(places[k]).all()]
    return [(float(places[k, 0]), float(places[k, 1]), labels[k]) for k in known]


def _sheet(at: SitePlaces, series: list[_Points]) -> ResultSheet:
    flat = [(points.name, *row) for points in series for row in points.rows]
    degrees = style.number("0.0000")
    columns: list[list[Scalar]] = [list(column) for column in zip(*flat, strict=True)]
    words = "Where sites, customers and delivery lines of the picture on the first page stand."
    if len(flat) > PRINTED_POINTS:
        words += f" In print, only the first {PRINTED_POINTS} rows are shown: the sheet is for the screen."
    sheet = detail_sheet(
        at.name(names.PLAN_MAP), "Figures behind the map", words,
        [
            Column("series", "Part of the picture", columns[0], width=20),
            Column("place", "Site or customer", columns[3], width=24),
            Column("longitude", "Longitude (degrees)", columns[1], degrees, 14),
            Column("latitude", "Latitude (degrees)", columns[2], degrees, 14),
        ], style.MOSS,
    )
    if len(flat) > PRINTED_POINTS:
        sheet.print_area = (0, 0, FIRST_ROW + PRINTED_POINTS - 1, 3)
        sheet.landscape = False
    return sheet


def _chart(sheet: str, series: list[_Points], places: Floats, at: SitePlaces) -> Chart:
    made, row = [], FIRST_ROW
    for points in series:
        last = row + len(points.rows) - 1
        made.append(Series(
            points.name, Area(sheet, row, 2, last, 2), Area(sheet, row, 3, last, 3), points.colour,
            pattern="open" if points.hollow else "", marker=points.marker, marker_size=points.size,
            line_width=0.75, dash=points.line,
            point_labels=tuple(label for _, _, label in points.rows) if points.labelled else (),
        ))
        row = last + 1
    scale = map_scale(places)
    crowded = at.report.case.n > CROWDED
    title = "Sites and customers" if crowded else "Sites, customers and deliveries"
    if not crowded and at.sites.size > DRAWN_DELIVERIES:
        title += f" (largest {DRAWN_DELIVERIES:,})"
    lines = "" if crowded else "; lines show who serves whom"
    return Chart("scatter", title, _in_sight(made), 0, 0, x_title="longitude (degrees)", y_title="latitude (degrees)",
                 number_format=scale.formats[1], x_number_format=scale.formats[0], x_limits=scale.across,
                 y_limits=scale.up, x_step=scale.step_across, step=scale.step_up, plot=PLOT,
                 description=f"Sites and customers by longitude and latitude{lines}")


def _in_sight(series: list[Series]) -> tuple[Series, ...]:
    """Sites in use drawn first and last: some programs put the first series on top, others the last."""
    again = [replace(one, in_legend=False, point_labels=()) for one in series if one.marker_size >= IN_USE]
    return (*again, *series)


@dataclass(frozen=True)
class MapScale:
    """Where the two axes begin and end, how far their marks stand apart, and how their degrees are written."""

    across: tuple[float, float]
    up: tuple[float, float]
    step_across: float
    step_up: float

    @property
    def formats(self) -> tuple[str, str]:
        """Formats across and up: as many decimals as the marks need to stand where their figures say."""
        across, up = (_decimals(step) for step in (self.step_across, self.step_up))
        return "0" + "." * bool(across) + "0" * across, "0" + "." * bool(up) + "0" * up


def map_scale(places: Floats) -> MapScale:
    """Axes that show every point (longitude, latitude), a mile as long sideways as upwards, marks on round degrees.

    Each axis begins at a mark; it ends where the picture ends.
    """
    known = places[np.isfinite(places).all(axis=1)]
    low, high = known.min(axis=0), known.max(axis=0)
    squeeze = max(0.05, float(np.cos(np.radians((low[1] + high[1]) / 2))))
    sideways = PLOT_RATIO / squeeze  # degrees of longitude across for a degree of latitude up
    tall = max(float(high[1] - low[1]), float(high[0] - low[0]) / sideways, SMALLEST_MAP) * (1 + 2 * MARGIN)
    middle, size = (low + high) / 2, np.array([tall * sideways, tall])
    step_up = _step(tall / MARKS_UP)
    up = _mark_below(float(middle[1]) - tall / 2, step_up)
    tall = float(middle[1] + size[1] / 2) - up
    step_across = _step(tall * sideways / MARKS_ACROSS)
    across = _mark_below(float(middle[0]) - tall * sideways / 2, step_across)
    tall = max(tall, (float(middle[0] + size[0] / 2) - across) / sideways)
    return MapScale((across, across + tall * sideways), (up, up + tall), step_across, step_up)


def _step(least: float) -> float:
    """Smallest of the figures 1, 2, 5 and their tenfolds and tenths that is not below ``least``."""
    size = 10.0 ** math.floor(math.log10(least))
    return next(size * part for part in (1.0, 2.0, 5.0, 10.0) if size * part >= least * (1 - 1e-12))


def _mark_below(start: float, step: float) -> float:
    """Last mark at or below a figure."""
    return round(math.floor(round(start / step, 9)) * step, _decimals(step))


def _decimals(step: float) -> int:
    """Decimals that a round step needs."""
    return next(digits for digits in range(9) if abs(step * 10**digits - round(step * 10**digits)) < 1e-6)


def load_picture(at: SitePlaces) -> Chart | None:
    """Load of each site against its capacity, where there is no map; None where there are too many sites."""
    case, where = at.report.case, at.sites_at
    if case.m > DRAWN_SITES:
        return None
    sheet, last = at.name(names.PLAN_SITES), FIRST_ROW + case.m - 1
    columns = {key: column_number(letter) - 1 for key, letter in where.letters.items()}

    def area(key: str) -> Area:
        return Area(sheet, FIRST_ROW, columns[key], last, columns[key])

    series = [Series("Load", area("site"), area("load"), style.PETROL)]
    if np.isfinite(case.capacity).any():
        series.append(Series("Capacity", area("site"), area("capacity"), style.RUST, pattern="wide_upward_diagonal"))
    return Chart("column", "Load of each site", tuple(series), 0, 0, y_title=f"{case.demand_unit}{at.per}",
                 number_format="#,##0", from_zero=True, legend="bottom" if len(series) > 1 else "",
                 description="Columns of the load of each site, beside its capacity")
