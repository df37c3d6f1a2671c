"""Gains straight from coordinates: one formula a site over the places of all customers, no table of costs.

A place on the sphere is written as half of its unit vector (x, y, z), so that the distance of two places is the
earth's diameter x ASIN(length of the difference): the arc over a chord (the haversine formula in Cartesian form).
"""

from collections.abc import Sequence

import numpy as np

from ledgersolve.report import style
from ledgersolve.report.certificate import Certificate
from ledgersolve.report.site_places import SitePlaces
from ledgersolve.report.tables import FIRST_ROW, Column, quoted, write_table
from ledgersolve.site_selection.case import Floats
from ledgersolve.site_selection.lanes import DISTANCE_SLACK
from ledgersolve.workbook.cells import column_letters
from ledgersolve.workbook.origins import CellRef
from ledgersolve.workbook.sheets import ResultSheet

DEMAND_ROW, PRICE_ROW = FIRST_ROW + 1, FIRST_ROW + 2
X_ROW, Y_ROW, Z_ROW = range(FIRST_ROW + 4, FIRST_ROW + 7)
HALF_ROW, DIAMETER_ROW, COST_ROW, NEAR_ROW = range(FIRST_ROW + 8, FIRST_ROW + 12)
SITES_ROW = FIRST_ROW + 13
FIRST_COLUMN = 2
DIAMETER_KM = 2 * 6371.0088
KM_PER_MILE = 1.609344
NEAR_FACTOR = 1 + DISTANCE_SLACK


def coordinate_gains(
    at: SitePlaces, sheet: ResultSheet, certificate: Certificate, charges: Sequence[str], share_cell: str
) -> tuple[str, ...] | None:
    """Write places and gains on the sheet of prices; gives the cells of the gains, as formulas for another sheet.

    ``charges`` are formulas of what a unit costs at each site apart from its lane; ``share_cell`` holds the price
    of a unit delivered near. None where some lane does not follow from coordinates alone, is forbidden by a
    rule, or has a limit.
    """
    diameter = DIAMETER_KM / (1.0 if at.report.case.distance_unit == "km" else KM_PER_MILE)
    refs = _coordinates(at)
    if refs is None or not _all_by_coordinates(at, certificate, diameter):
        return None
    _write_figures(at, sheet, diameter)
    if certificate.near is not None:
        _write_reach(at, sheet, diameter)
    _write_places(at, sheet, refs["Customers"])
    near = "" if certificate.near is None else share_cell
    return _write_sites(at, sheet, certificate, refs["Sites"], charges, near)


def _coordinates(at: SitePlaces) -> dict[str, list[tuple[CellRef, CellRef]]] | None:
    """Cells of latitude and longitude of all sites and customers; None unless all are number cells."""
    case, origins = at.report.case, at.report.workbook.origins
    found: dict[str, list[tuple[CellRef, CellRef]]] = {}
    for sheet, codes in (("Sites", case.sites), ("Customers", case.customers)):
        pairs = []
        for code in codes:
            latitude, longitude = (origins.number(sheet, (code,), title) for title in ("Latitude", "Longitude"))
            if latitude is None or longitude is None:
                return None
            pairs.append((latitude, longitude))
        found[sheet] = pairs
    return found


def _all_by_coordinates(at: SitePlaces, certificate: Certificate, diameter: float) -> bool:
    """Whether every usable lane costs distance x rate, and every lane of a usable site is usable."""
    case, book = at.report.case, at.report.workbook
    given = (case.site_latitude, case.site_longitude, case.customer_latitude, case.customer_longitude)
    if book.road_cost is None or book.origins.setting("Cost per unit and distance") is None or case.cost_is_whole:
        return False
    if any(figures is None for figures in given) or certificate.limit is not None:
        return False
    live = np.asarray(certificate.usable.any(axis=1)).reshape(-1, 1) & (case.demand > 0)
    if bool((live & ~certificate.usable).any()):
        return False
    sites, customers = (half_vectors(given[k], given[k + 1]) for k in (0, 2))
    chord = np.sqrt(((sites[:, None, :] - customers[None, :, :]) ** 2).sum(axis=2))
    arc = np.arcsin(np.minimum(chord, 1.0))
    if certificate.near is not None and bool((certificate.near != (arc <= _reach(at, diameter)))[live].any()):
        return False
    cost = diameter * arc * book.road_cost * book.road_factor
    return bool(np.allclose(cost[live], case.lane_cost[live], rtol=1e-9, atol=1e-9))


def _reach(at: SitePlaces, diameter: float) -> float:
    """Distance of the share rule, as the part of the earth's diameter that an arc is."""
    return (at.report.case.share_distance or 0.0) * NEAR_FACTOR / (diameter * at.report.workbook.road_factor)


def half_vectors(latitude: Floats | None, longitude: Floats | None) -> Floats:
    """Shape (k, 3): half of the unit vector of each place, from decimal degrees."""
    if latitude is None or longitude is None:
        raise ValueError("no coordinates")
    phi, theta = np.radians(latitude), np.radians(longitude)
    return 0.5 * np.column_stack([np.cos(phi) * np.cos(theta), np.cos(phi) * np.sin(theta), np.sin(phi)])


def _formulas(pair: tuple[CellRef, CellRef], half: str) -> tuple[str, str, str]:
    latitude, longitude = (f"RADIANS({ref.formula})" for ref in pair)
    return (f"{half}*COS({latitude})*COS({longitude})", f"{half}*COS({latitude})*SIN({longitude})",
            f"{half}*SIN({latitude})")


def _write_figures(at: SitePlaces, sheet: ResultSheet, diameter: float) -> None:
    """Half, diameter of the earth, and the cost of carrying a unit over that distance."""
    case, book = at.report.case, at.report.workbook
    rate, factor = book.origins.setting("Cost per unit and distance"), book.origins.setting("Road factor")
    formula = f"$C${DIAMETER_ROW + 1}*{rate.formula if rate else ''}" + (f"*{factor.formula}" if factor else "")
    cost = diameter * (book.road_cost or 0.0) * book.road_factor
    for row, label, unit, value, shown, how in (
        (HALF_ROW, "Half, for places as half vectors", "number", 0.5, "0.0", ""),
        (DIAMETER_ROW, "Diameter of the earth", case.distance_unit, diameter, "#,##0.0000", ""),
        (COST_ROW, "Cost of a unit over that distance", f"{case.currency} per {case.demand_unit}", cost, "#,##0.0000",
         f"={formula}"),
    ):
        sheet.put(row, 0, label, style.BOLD)
        sheet.put(row, 1, unit, style.NOTE)
        sheet.put(row, 2, value, style.number(shown), formula=how)


def _write_reach(at: SitePlaces, sheet: ResultSheet, diameter: float) -> None:
    """How far a delivery counts as near."""
    origins = at.report.workbook.origins
    reach, factor = origins.setting("Distance for share"), origins.setting("Road factor")
    formula = "" if reach is None else (
        f"={reach.formula}*{NEAR_FACTOR!r}/$C${DIAMETER_ROW + 1}" + (f"/{factor.formula}" if factor else ""))
    sheet.put(NEAR_ROW, 0, "Distance that counts as near over that distance", style.BOLD)
    sheet.put(NEAR_ROW, 1, "number", style.NOTE)
    sheet.put(NEAR_ROW, 2, _reach(at, diameter), style.number("0.000000000000"), formula=formula)


def _write_places(at: SitePlaces, sheet: ResultSheet, refs: Sequence[tuple[CellRef, CellRef]]) -> None:
    case, look = at.report.case, style.number("0.00000000")
    places = half_vectors(case.customer_latitude, case.customer_longitude)
    for row, name in ((X_ROW, "x"), (Y_ROW, "y"), (Z_ROW, "z")):
        sheet.put(row, 0, f"Place {name}, from the coordinates", style.BOLD)
        sheet.put(row, 1, "half vector", style.NOTE)
    half = f"$C${HALF_ROW + 1}"
    for i, pair in enumerate(refs):
        for row, value, formula in zip((X_ROW, Y_ROW, Z_ROW), places[i].tolist(), _formulas(pair, half), strict=True):
            sheet.put(row, FIRST_COLUMN + i, value, look, formula=f"={formula}")


def _write_sites(
    at: SitePlaces, sheet: ResultSheet, certificate: Certificate, refs: Sequence[tuple[CellRef, CellRef]],
    charges: Sequence[str], share_cell: str,
) -> tuple[str, ...]:
    case = at.report.case
    places = half_vectors(case.site_latitude, case.site_longitude)
    formulas = [_formulas(pair, f"$C${HALF_ROW + 1}") for pair in refs]
    charge = certificate.volume_price + case.handling_cost
    live = np.asarray(certificate.usable.any(axis=1)).tolist()
    look, money = style.number("0.00000000"), style.number(style.money_format(case.currency))
    rows = [SITES_ROW + 2 + j for j in range(case.m)]
    write_table(sheet, SITES_ROW, [
        Column("site", "Site", case.sites, width=sheet.widths[0]),
        Column("name", "Name", case.site_names, width=sheet.widths[1]),
        *[Column(name, f"Place {name} (half vector)", places[:, k].tolist(), look, 14, [f[k] for f in formulas])
          for k, name in enumerate(("x", "y", "z"))],
        Column("charge", f"Capacity price and handling ({case.currency} per {case.demand_unit})", charge.tolist(),
               style.number(style.rate_format(case.currency, charge.tolist())), 16, list(charges)),
        Column("gain", f"Gain ({at.money_unit})", certificate.gain.tolist(), money, 16,
               [_gain(at, row, share_cell) if on else "" for row, on in zip(rows, live, strict=True)]),
    ])
    name = quoted(sheet.name)
    return tuple(f"{name}!$G${row}" if on else "" for row, on in zip(rows, live, strict=True))


def _gain(at: SitePlaces, row: int, share_cell: str) -> str:
    """Sum over the customers of max(0, price - lane cost - charge) x demand, all by formulas on this sheet.

    With ``share_cell``, a near delivery counts for more by the price in it.
    """
    last = column_letters(FIRST_COLUMN + at.report.case.n)

    def across(place: int) -> str:
        return f"$C${place + 1}:${last}${place + 1}"

    apart = "+".join(f"({across(place)}-${letter}{row})*({across(place)}-${letter}{row})"
                     for place, letter in ((X_ROW, "C"), (Y_ROW, "D"), (Z_ROW, "E")))
    near = f"+{share_cell}*(ASIN(SQRT({apart}))<=$C${NEAR_ROW + 1})" if share_cell else ""
    left = f"{across(PRICE_ROW)}-$C${COST_ROW + 1}*ASIN(SQRT({apart}))-$F{row}{near}"
    return f"SUMPRODUCT(({left}>0)*({left})*{across(DEMAND_ROW)})"
