"""Checks across the sheets of a site-selection workbook, and its case."""

import re
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ledgersolve.contract import lanes as lane_sources
from ledgersolve.contract import mended, settings
from ledgersolve.contract import site_selection as c
from ledgersolve.contract.book import Book, is_too_large
from ledgersolve.contract.codes import Codes, report_alike, unknown_code
from ledgersolve.contract.columns import listed, quoted, shown
from ledgersolve.contract.faults import Fault
from ledgersolve.contract.lanes import LaneRows, Lanes
from ledgersolve.contract.lists import CheckedList
from ledgersolve.site_selection.case import CLOSED, FREE, OPEN, Case, Variant
from ledgersolve.workbook.text import code_text, nearest

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

RULES = {"free": FREE, "open": OPEN, "closed": CLOSED}


@dataclass
class SiteData:
    """What the workbook says, after all checks: the case is there exactly when no fault was found."""

    case: Case | None
    lanes: Lanes | None = None
    rows: LaneRows | None = None


def build(book: Book, title: str) -> SiteData:
    """Check across sheets and build the case."""
    sites, customers = book.table(c.SITES), book.table(c.CUSTOMERS)
    site_codes, customer_codes = book.codes.get(c.SITES), book.codes.get(c.CUSTOMERS)
    _check_settings(book)
    if sites is not None:
        _check_sites(book, sites)
        _check_coordinates(book, sites)
    if customers is not None:
        _check_coordinates(book, customers)
    variants = _variants(book, site_codes)
    if sites is None or customers is None or site_codes is None or customer_codes is None:
        return SiteData(None)
    rows = lane_sources.lane_rows(book, site_codes, customer_codes)
    if is_too_large(book, c.SITES, c.CUSTOMERS):
        return SiteData(None)
    places = (*_coordinates(sites, site_codes), *_coordinates(customers, customer_codes))
    located = all(bool(np.isfinite(place).any()) for place in places)
    lane_sources.check_sources(book, rows, located or _has_bad_coordinates(sites, customers))
    lane_sources.check_rows(book, rows)
    demand = _column(customers, customer_codes, "Demand", 0.0)
    lanes = lane_sources.assemble(book, rows, demand, places)
    _check_distance_rules(book, lanes, rows, variants, customers, (site_codes, customer_codes))
    if book.faults.any_errors:
        return SiteData(None, lanes, rows)
    return SiteData(_case(book, title, lanes, variants, places), lanes, rows)


def _column(table: CheckedList, codes: Codes, title: str, default: float = np.nan) -> Floats:
    """A number for each code (its first row, where it stands twice by mistake)."""
    return table.numbers(title, default)[list(codes.rows)]


def _coordinates(table: CheckedList, codes: Codes) -> tuple[Floats, Floats]:
    """Latitude and longitude by code, both NaN unless both are known."""
    latitude, longitude = _column(table, codes, "Latitude"), _column(table, codes, "Longitude")
    half = np.isnan(latitude) | np.isnan(longitude)
    return np.where(half, np.nan, latitude), np.where(half, np.nan, longitude)


def _has_bad_coordinates(*tables: CheckedList) -> bool:
    return any(bool(table.bad(title).any()) for table in tables for title in ("Latitude", "Longitude"))


def _check_coordinates(book: Book, table: CheckedList) -> None:
    """Report places with one coordinate of two."""
    for title, other in (("Latitude", "Longitude"), ("Longitude", "Latitude")):
        half = ~table.good(title) & ~table.bad(title) & table.good(other)
        book.faults.many(
            table.sheet, [table.place(row, title) for row in np.flatnonzero(half).tolist()], title,
            lambda _, other=other: Fault(  # type: ignore[misc]  # the default binds the loop's title
                "half a coordinate", f"an empty cell beside a {other}", "both coordinates or neither",
                f"Fill in the other half, or clear the {other}.",
                test=mended.both_or_neither(mended.beside(table.columns[other].column))))


def _check_settings(book: Book) -> None:
    """Report settings that cannot hold together."""
    values = book.settings
    fewest, most = values.number("Fewest sites"), values.number("Most sites")
    other_place = values.place("Most sites")
    if fewest is not None and most is not None and fewest > most:
        book.faults.add(values.sheet, values.place("Fewest sites"), "Fewest sites", Fault(
            "rules conflict", f"Fewest sites {shown(fewest)} above Most sites {shown(most)}",
            "Fewest sites of at most Most sites", "Change one of the two.",
            test=mended.at_most(mended.at(*other_place)) if other_place else ""))
    for name, other in ((c.SHARE, c.SHARE_DISTANCE), (c.SHARE_DISTANCE, c.SHARE)):
        if values.number(name) is not None and values.number(other) is None and other not in values.bad:
            report_half(book, name, other)


def report_half(book: Book, given: str, missing: str) -> None:
    """Report a setting without the one that it needs, at the empty cell where the sheet has a row for it."""
    values = book.settings
    empty, place = values.place(missing), values.place(given)
    entry = next(entry for entry in book.contract.settings if entry.title == missing)
    test = mended.number_or_none(entry, mended.at(*place)) if empty and place else ""
    way = f"Give {missing} {'here' if empty else 'too'}"
    if not _measured(book):
        way += ", and distances (in Lanes or Distances, or coordinates of both ends)"
    book.faults.add(values.sheet, empty or place, missing if empty else given, Fault(
        "half a rule", f"{given} without {missing}", f"both {given} and {missing}, or neither",
        f"{way}, or clear {given}.", test=test))


def _measured(book: Book) -> bool:
    """Whether the workbook says any distance."""
    lanes, ends = book.table(c.LANES), [book.table(name) for name in (c.SITES, c.CUSTOMERS)]
    return (c.DISTANCES in book.matrices or (lanes is not None and bool(lanes.good("Distance").any()))
            or all(end is not None and bool(end.good("Latitude").any()) for end in ends))


def _check_sites(book: Book, sites: CheckedList) -> None:
    """Report sites whose own figures, or whose group's rules, cannot hold together."""
    capacity, least = sites.numbers("Capacity", np.inf), sites.numbers("Least volume", 0.0)
    over = np.flatnonzero(least > capacity).tolist()
    places = [sites.place(row, "Least volume") for row in over]
    book.faults.many(sites.sheet, places, "Least volume", lambda i: Fault(
        "rules conflict",
        f"a Least volume of {shown(least[over[i]])} above the Capacity {shown(capacity[over[i]])}",
        "a Least volume of at most the Capacity", "Change one of the two.",
        test=mended.at_most(mended.beside(sites.columns["Capacity"].column))))
    report_alike(sites, "Group", book.faults)
    first_open: dict[str, int] = {}
    for row, (group, rule) in enumerate(zip(sites.texts("Group"), sites.texts("Rule"), strict=True)):
        if not group or rule != "open":
            continue
        if group in first_open:
            book.faults.add(sites.sheet, sites.place(row, "Rule"), "Rule", Fault(
                "rules conflict", f"a second site of the group {quoted(group)} with the rule open",
                "at most one open site in a group", "Set one of the two to free or closed."))
        first_open.setdefault(group, row)
    wanted = book.settings.values.get(settings.COMPARE)
    unsure = "Today" in sites.columns and bool(sites.bad("Today").any())
    if wanted is True and not unsure and not bool(sites.flags("Today").any()):
        book.faults.add(book.settings.sheet, book.settings.place(settings.COMPARE), settings.COMPARE, Fault(
            "nothing to compare", "yes, but no site is in use today", "yes under Today for the sites in use",
            "Mark the sites in use today, or set this to no."))


def _variants(book: Book, known: Codes | None) -> tuple[Variant, ...]:
    """The variants; those whose rules cannot hold together are reported."""
    table = book.table(c.VARIANTS)
    if table is None:
        return ()
    found: list[Variant] = []
    for row in range(table.count):
        opened, closed = (_codes(book, table, row, title, known) for title in ("Open", "Closed"))
        fewest, most = (_whole(table, row, title) for title in ("Fewest sites", "Most sites"))
        demand, lane, fixed = (float(table.numbers(f"{title} factor", 1.0)[row])
                               for title in ("Demand", "Lane cost", "Fixed cost"))
        longest = float(table.numbers(c.LONGEST)[row])
        variant = Variant(table.texts("Variant")[row], demand, lane, fixed, fewest, most,
                          None if np.isnan(longest) else longest, opened, closed)
        _check_variant(book, table, row, variant)
        found.append(variant)
    return tuple(found)


def _whole(table: CheckedList, row: int, title: str) -> int | None:
    value = table.numbers(title)[row]
    return None if np.isnan(value) else int(value)


def _codes(book: Book, table: CheckedList, row: int, title: str, known: Codes | None) -> tuple[str, ...]:
    """Site codes with commas between them; unknown ones are reported."""
    codes = [code_text(part) for part in re.split(r"[,;\n]", table.texts(title)[row]) if part.strip()]
    if known is None:
        return ()
    for code in codes:
        if code not in known.number:
            near = nearest(code, known.codes)
            if near is not None or known.whole:
                book.faults.add(table.sheet, table.place(row, title), title,
                                replace(unknown_code(code, near, known), test="", tally=""), group=code)
    return tuple(dict.fromkeys(code for code in codes if code in known.number))


def _check_variant(book: Book, table: CheckedList, row: int, variant: Variant) -> None:
    both = [code for code in variant.open if code in variant.closed]
    if both:
        book.faults.add(table.sheet, table.place(row, "Closed"), "Closed", Fault(
            "rules conflict", f"{listed(both)}, under Open too", "each site under Open or under Closed",
            "Take it out of one of the two cells."))
    values = book.settings
    fewest = values.whole("Fewest sites") if variant.fewest_sites is None else variant.fewest_sites
    most = values.whole("Most sites") if variant.most_sites is None else variant.most_sites
    own = variant.fewest_sites is not None or variant.most_sites is not None
    if own and fewest is not None and most is not None and fewest > most:
        title = "Fewest sites" if variant.fewest_sites is not None else "Most sites"
        book.faults.add(table.sheet, table.place(row, title), title, Fault(
            "rules conflict", f"Fewest sites {fewest} above Most sites {most} in this variant",
            "Fewest sites of at most Most sites", "Change one of the two."))
    _check_variant_groups(book, table, row, variant)


def _check_variant_groups(book: Book, table: CheckedList, row: int, variant: Variant) -> None:
    """Report a variant that opens two sites of one group."""
    sites, codes = book.table(c.SITES), book.codes.get(c.SITES)
    if sites is None or codes is None:
        return
    groups = [sites.texts("Group")[codes.rows[codes.number[code]]] for code in variant.open]
    twice = sorted({group for group in groups if group and groups.count(group) > 1})
    if twice:
        book.faults.add(table.sheet, table.place(row, "Open"), "Open", Fault(
            "rules conflict", f"two sites of the group {quoted(twice[0])}", "at most one open site in a group",
            "Name one of them only."))


def _check_distance_rules(book: Book, lanes: Lanes, rows: LaneRows | None, variants: tuple[Variant, ...],
                          customers: CheckedList, codes: tuple[Codes, Codes]) -> None:
    values = book.settings
    general = [name for name in (c.LONGEST, c.SHARE_DISTANCE) if values.number(name) is not None]
    general += [f"{c.LONGEST} in Variants" for variant in variants
                if variant.longest_distance is not None][:1]
    own = np.isfinite(_column(customers, codes[1], c.LONGEST))
    if general:
        lane_sources.check_distances(book, rows, lanes, np.ones(len(own), dtype=bool), codes, general[0])
    elif bool(own.any()):
        lane_sources.check_distances(book, rows, lanes, own, codes, f"{c.LONGEST} in Customers")


def _case(book: Book, title: str, lanes: Lanes, variants: tuple[Variant, ...],
          places: tuple[Floats, Floats, Floats, Floats]) -> Case:
    values = book.settings
    sites, customers = book.tables[c.SITES], book.tables[c.CUSTOMERS]
    site_codes, customer_codes = book.codes[c.SITES].codes, book.codes[c.CUSTOMERS].codes
    today = sites.flags("Today")
    groups = tuple(dict.fromkeys(group for group in sites.texts("Group") if group))
    group_number = {group: number for number, group in enumerate(groups)}
    share = values.number(c.SHARE)
    compare = values.values.get(settings.COMPARE)
    has_places = all(bool(np.isfinite(place).any()) for place in places)
    return Case(
        title=title, currency=values.text("Currency"), demand_unit=values.text("Demand unit"),
        period_covered=values.text("Period covered"), distance_unit=values.text("Distance unit"),
        sites=site_codes, site_names=_names(sites, site_codes),
        customers=customer_codes, customer_names=_names(customers, customer_codes),
        fixed_cost=sites.numbers("Fixed cost"), capacity=sites.numbers("Capacity", np.inf),
        least_volume=sites.numbers("Least volume", 0.0), handling_cost=sites.numbers("Handling cost", 0.0),
        rule=np.array([RULES[rule or "free"] for rule in sites.texts("Rule")], dtype=np.int64), today=today,
        opening_cost=sites.numbers("Opening cost", 0.0), closing_cost=sites.numbers("Closing cost", 0.0),
        group=np.array([group_number.get(group, -1) for group in sites.texts("Group")], dtype=np.int64),
        group_names=groups, demand=customers.numbers("Demand"),
        single_source=customers.flags("Single source", default=values.flag("Single sourcing")),
        customer_longest=customers.numbers(c.LONGEST), lane_cost=lanes.cost,
        cost_is_whole=lane_sources.is_whole(book), distance=lanes.distance, lane_most=lanes.most,
        longest_distance=values.number(c.LONGEST), share_within=None if share is None else share / 100,
        share_distance=values.number(c.SHARE_DISTANCE), unmet_cost=values.number("Unmet demand cost"),
        fewest_sites=values.whole("Fewest sites"), most_sites=values.whole("Most sites"),
        compare_today=bool(today.any()) if compare is None else bool(compare),
        site_latitude=places[0] if has_places else None, site_longitude=places[1] if has_places else None,
        customer_latitude=places[2] if has_places else None,
        customer_longitude=places[3] if has_places else None, variants=variants,
    )


def _names(table: CheckedList, codes: tuple[str, ...]) -> tuple[str, ...]:
    return tuple(name or code for name, code in zip(table.texts("Name"), codes, strict=True))
