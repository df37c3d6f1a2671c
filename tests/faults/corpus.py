"""Sixty-odd workbooks as they come in on a Friday: one fault each, with the exact list it must give.

Two small good workbooks (one a job) are changed in one place. ``FAULTS`` names the change and the errors
that must come back: sheet, cell, kind. Files that are no workbooks at all are in ``service_inputs.py``.
"""

import datetime
from collections.abc import Callable
from dataclasses import dataclass

from tests.books import Formula, lot_sheets, site_sheets

Sheets = dict[str, list[list[object]]]
Expected = tuple[tuple[str, str, str], ...]


@dataclass(frozen=True)
class Fault:
    """A change of a good workbook and the errors it must give: (sheet, cell, kind)."""

    name: str
    base: Callable[[], Sheets]
    change: Callable[[Sheets], None]
    errors: Expected


def site() -> Sheets:
    """A good site-selection workbook: Settings, Sites, Customers, Lanes."""
    sites = [
        {"Site": "HAM", "Fixed cost": 900, "Capacity": 80, "Least volume": 0, "Rule": "free", "Today": "yes",
         "Group": "north"},
        {"Site": "LEJ", "Fixed cost": 700, "Capacity": 90, "Least volume": 5, "Rule": "free", "Today": "no",
         "Group": "east"},
        {"Site": "MUC", "Fixed cost": 800, "Capacity": 70, "Least volume": 0, "Rule": "free", "Today": "no",
         "Group": "south"},
    ]
    customers = [{"Customer": f"C{k}", "Demand": 10 + k, "Single source": "no"} for k in range(1, 5)]
    lanes = [
        {"Site": s["Site"], "Customer": f"C{k}", "Unit cost": 3 + k, "Distance": 50 + 10 * k}
        for s in sites for k in range(1, 5)
    ]
    variants = [{"Variant": "more demand", "Demand factor": 1.1, "Open": "HAM", "Closed": "MUC"}]
    settings = {"Title": "Good", "Time limit (seconds)": 30, "Longest distance": 200, "Most sites": 3,
                "Questions": "no"}
    return site_sheets(sites, customers, lanes=lanes, variants=variants, settings=settings)


def lot() -> Sheets:
    """A good lot-sizing workbook with resources, families, receipts and period costs."""
    items = [
        {"Item": "SPADE", "Setup cost": 90, "Unit cost": 2, "Holding cost": 0.5, "Opening stock": 10,
         "Safety stock": 2, "Least lot": 0, "Most lot": 900, "Resource": "Forge",
         "Time per unit": 0.1, "Setup time": 1, "Family": "Blades"},
        {"Item": "RAKE", "Setup cost": 80, "Unit cost": 3, "Holding cost": 0.4, "Opening stock": 0,
         "Safety stock": 0, "Least lot": 5, "Most lot": 900, "Resource": "Forge",
         "Time per unit": 0.1, "Setup time": 1},
    ]
    start = datetime.date(2027, 1, 4)
    periods = [{"Period": f"W{k}", "Start": start + datetime.timedelta(7 * k)} for k in range(1, 5)]
    return lot_sheets(
        items, [[20, 30, 25, 10], [15, 0, 40, 12]], periods=periods,
        resources=[{"Resource": "Forge", "Capacity": 40, "Overtime limit": 5, "Overtime cost": 30}],
        families=[{"Family": "Blades", "Setup cost": 20, "Setup time": 0.5, "Resource": "Forge"}],
        receipts=[{"Item": "RAKE", "Period": "W2", "Quantity": 8}],
        period_costs=[{"Item": "SPADE", "Period": "W3", "Setup cost": 100}],
        settings={"Title": "Good", "Time limit (seconds)": 30, "Questions": "no"},
    )


def place(address: str) -> tuple[int, int]:
    """Row and column of an address such as B2, from 0 (columns A to Z)."""
    return int(address[1:]) - 1, ord(address[0]) - 65


def put(sheet: str, address: str, value: object) -> Callable[[Sheets], None]:
    """Change one cell."""
    def change(sheets: Sheets) -> None:
        row, column = place(address)
        rows = sheets[sheet]
        while len(rows) <= row:
            rows.append([])
        while len(rows[row]) <= column:
            rows[row].append(None)
        rows[row][column] = value
    return change


def drop(sheet: str) -> Callable[[Sheets], None]:
    """Take a sheet out."""
    return lambda sheets: sheets.pop(sheet) and None


def append(sheet: str, *row: object) -> Callable[[Sheets], None]:
    """Add a row at the foot."""
    return lambda sheets: sheets[sheet].append(list(row))


def setting(name: str, value: object) -> Callable[[Sheets], None]:
    """Give a setting, or change it."""
    def change(sheets: Sheets) -> None:
        for row in sheets["Settings"]:
            if row[0] == name:
                row[1] = value
                return
        sheets["Settings"].append([name, value])
    return change


def column_out(sheet: str, title: str) -> Callable[[Sheets], None]:
    """Take a column out."""
    def change(sheets: Sheets) -> None:
        number = sheets[sheet][0].index(title)
        for row in sheets[sheet]:
            del row[number]
    return change


def both(*changes: Callable[[Sheets], None]) -> Callable[[Sheets], None]:
    """Several changes that make one fault."""
    def change(sheets: Sheets) -> None:
        for one in changes:
            one(sheets)
    return change


def replaced(sheet: str, rows: list[list[object]]) -> Callable[[Sheets], None]:
    """Other rows in a sheet."""
    def change(sheets: Sheets) -> None:
        sheets[sheet] = rows
    return change


FAULTS: tuple[Fault, ...] = (
    Fault("text for a number", site, put("Sites", "B2", "dear"),
          (("Sites", "B2", "number expected"),)),
    Fault("thousands separator", site, put("Sites", "B2", "1,200"),
          (("Sites", "B2", "ambiguous number"),)),
    Fault("two readings", site, put("Sites", "B2", "1.200,50"),
          (("Sites", "B2", "ambiguous number"),)),
    Fault("negative cost", site, put("Sites", "B2", -5),
          (("Sites", "B2", "negative number"),)),
    Fault("error value", site, put("Sites", "B2", Formula("=1/0", "#DIV/0!")),
          (("Sites", "B2", "error value"),)),
    Fault("never calculated", site, put("Sites", "B2", Formula("=1+1")),
          (("Sites", "B2", "formula never calculated"),)),
    Fault("date for a number", site, put("Sites", "B2", datetime.date(2026, 1, 1)),
          (("Sites", "B2", "date instead of number"),)),
    Fault("yes for a number", site, put("Sites", "B2", True),
          (("Sites", "B2", "number expected"),)),
    Fault("too large", site, put("Sites", "B2", 1e300),
          (("Sites", "B2", "number too large"),)),
    Fault("empty required", site, put("Customers", "B3", None),
          (("Customers", "B3", "required cell empty"),)),
    Fault("empty code", site, put("Sites", "A3", None),
          (("Sites", "A3", "required cell empty"),)),
    Fault("duplicate code", site, put("Sites", "A3", "HAM"),
          (("Sites", "A3", "duplicate code"),)),
    Fault("codes differ in case", site, put("Sites", "A3", "ham"),
          (("Sites", "A3", "codes alike"),)),
    Fault("codes differ in spacing", site, append("Customers", "C 1", 5, "no"),
          (("Customers", "A6", "codes alike"),)),
    Fault("unknown rule", site, put("Sites", "E2", "maybe"),
          (("Sites", "E2", "unknown word"),)),
    Fault("no yes or no", site, put("Sites", "F2", "perhaps"),
          (("Sites", "F2", "yes or no expected"),)),
    Fault("least above capacity", site, put("Sites", "D3", 500),
          (("Sites", "D3", "rules conflict"),)),
    Fault("rule open twice in group", site, both(
        put("Sites", "G3", "north"),
        put("Sites", "E2", "open"),
        put("Sites", "E3", "open")),
          (("Sites", "E3", "rules conflict"),)),
    Fault("unknown site in lanes", site, put("Lanes", "A2", "HAMM"),
          (("Lanes", "A2", "unknown code"),)),
    Fault("unknown customer in lanes", site, put("Lanes", "B2", "C9"),
          (("Lanes", "B2", "unknown code"),)),
    Fault("pair twice", site, append("Lanes", "HAM", "C1", 3, 60),
          (("Lanes", "A14", "duplicate pair"),)),
    Fault("lane without cost and distance", site, both(put("Lanes", "C2", None), put("Lanes", "D2", None)),
          (("Lanes", "C2", "required cell empty"),)),
    Fault("lane without distance under promise", site, put("Lanes", "D2", None),
          (("Lanes", "D2", "distance not known"),)),
    Fault("unknown site in variant", site, put("Variants", "C2", "HAM, XXX"),
          (("Variants", "C2", "unknown code"),)),
    Fault("open and closed in variant", site, put("Variants", "D2", "HAM"),
          (("Variants", "D2", "rules conflict"),)),
    Fault("negative factor", site, put("Variants", "B2", -1),
          (("Variants", "B2", "negative number"),)),
    Fault("total row", site, append("Customers", "Total", 50, None),
          (("Customers", "A6", "totals row"),)),
    Fault("job missing", site, setting("Job", None),
          (("Settings", "B2", "required cell empty"),)),
    Fault("job unknown", site, setting("Job", "cooking"),
          (("Settings", "B2", "unknown word"),)),
    Fault("currency unknown", site, setting("Currency", "EURO"),
          (("Settings", "B3", "currency expected"),)),
    Fault("currency missing", site, setting("Currency", None),
          (("Settings", "B3", "required cell empty"),)),
    Fault("time limit 0", site, setting("Time limit (seconds)", 0),
          (("Settings", "B5", "number too small"),)),
    Fault("gap 200", site, setting("Accepted gap (%)", 200),
          (("Settings", "B9", "number too large"),)),
    Fault("fewest above most", site, setting("Fewest sites", 9),
          (("Settings", "B9", "rules conflict"),)),
    Fault("half sites", site, setting("Most sites", 2.5),
          (("Settings", "B7", "whole number expected"),)),
    Fault("share alone", site, setting("Share within distance (%)", 50),
          (("Settings", "B9", "half a rule"),)),
    Fault("share above 100", site, both(setting("Share within distance (%)", 150), setting("Distance for share", 80)),
          (("Settings", "B9", "number too large"),)),
    Fault("road factor below 1", site, setting("Road factor", 0.8),
          (("Settings", "B9", "number too small"),)),
    Fault("basis unknown", site, setting("Lane cost basis", "per pallet"),
          (("Settings", "B9", "unknown word"),)),
    Fault("distance unit unknown", site, setting("Distance unit", "leagues"),
          (("Settings", "B9", "unknown word"),)),
    Fault("setting twice", site, append("Settings", "Currency", "USD"),
          (("Settings", "A9", "setting twice"),)),
    Fault("no sites sheet", site, drop("Sites"),
          (("Sites", "", "missing sheet"),)),
    Fault("no customers sheet", site, drop("Customers"),
          (("Customers", "", "missing sheet"),)),
    Fault("no settings sheet", site, drop("Settings"),
          (("Settings", "", "missing sheet"),)),
    Fault("no lanes", site, drop("Lanes"),
          (("Lanes", "", "no lanes"),)),
    Fault("no title row", site, replaced("Sites", [["HAM", 900], ["LEJ", 700]]),
          (("Sites", "", "no title row"),)),
    Fault("required column missing", site, column_out("Sites", "Fixed cost"),
          (("Sites", "A1", "missing column"),)),
    Fault("near miss of a required column", site, put("Sites", "B1", "Fixd cost"),
          (("Sites", "B1", "missing column"),)),
    Fault("title twice", site, put("Sites", "H1", "Fixed cost"),
          (("Sites", "H1", "title twice"),)),
    Fault("latitude out of range", site, both(
        put("Sites", "H1", "Latitude"),
        put("Sites", "I1", "Longitude"),
        put("Sites", "H2", 95),
        put("Sites", "I2", 9)),
          (("Sites", "H2", "number too large"),)),
    Fault("degrees, minutes and seconds", site, both(
        put("Sites", "H1", "Latitude"),
        put("Sites", "I1", "Longitude"),
        put("Sites", "H2", "53°33'N"),
        put("Sites", "I2", 9.99)),
          (("Sites", "H2", "decimal degrees expected"),)),
    Fault("latitude alone", site, both(
        put("Sites", "H1", "Latitude"),
        put("Sites", "I1", "Longitude"),
        put("Sites", "H2", 53)),
          (("Sites", "I2", "half a coordinate"),)),
    Fault("lot: text for demand", lot, put("Demand", "B2", "some"),
          (("Demand", "B2", "number expected"),)),
    Fault("lot: unknown item in demand", lot, put("Demand", "A2", "SPADES"),
          (("Demand", "A2", "unknown code"),)),
    Fault("lot: unknown period in demand", lot, put("Demand", "B1", "W9"),
          (("Demand", "B1", "unknown code"),)),
    Fault("lot: period twice", lot, put("Periods", "A3", "W1"),
          (("Periods", "A3", "duplicate code"),
           ("Demand", "C1", "unknown code"), ("Receipts", "B2", "unknown code"))),
    Fault("lot: periods out of order", lot, put("Periods", "B3", datetime.date(2026, 1, 1)),
          (("Periods", "B3", "periods out of order"),)),
    Fault("lot: unknown resource", lot, put("Items", "I2", "Forges"),
          (("Items", "I2", "unknown code"),)),
    Fault("lot: unknown family", lot, put("Items", "L2", "Blade"),
          (("Items", "L2", "unknown code"),)),
    Fault("lot: least above most lot", lot, put("Items", "G3", 2000),
          (("Items", "G3", "rules conflict"),)),
    Fault("lot: no holding cost", lot, put("Items", "D2", None),
          (("Items", "D2", "holding cost not known"),)),
    Fault("lot: negative stock", lot, put("Items", "E2", -1),
          (("Items", "E2", "negative number"),)),
    Fault("lot: receipt for unknown item", lot, put("Receipts", "A2", "HOE"),
          (("Receipts", "A2", "unknown code"),)),
    Fault("lot: receipt in unknown period", lot, put("Receipts", "B2", "W7"),
          (("Receipts", "B2", "unknown code"),)),
    Fault("lot: period cost twice", lot, append("Period costs", "SPADE", "W3", 50),
          (("Period costs", "A3", "duplicate pair"),)),
    Fault("lot: family time without resource", lot, put("Families", "D2", None),
          (("Families", "D2", "time without resource"),)),
    Fault("lot: setup time without resource", lot, put("Items", "I3", None),
          (("Items", "I3", "time without resource"),)),
    Fault("lot: capacity missing", lot, put("Resources", "B2", None),
          (("Resources", "B2", "required cell empty"),)),
    Fault("lot: rate without periods a year", lot, both(
        put("Items", "D2", None),
        setting("Yearly holding rate (%)", 20)),
          (("Settings", "B7", "half a rule"), ("Items", "D2", "holding cost not known"))),
    Fault("lot: late deliveries unknown word", lot, setting("Late deliveries", "sometimes"),
          (("Settings", "B7", "yes or no expected"),)),
    Fault("lot: duplicate item", lot, put("Items", "A3", "SPADE"),
          (("Items", "A3", "duplicate code"), ("Demand", "A3", "unknown code"), ("Receipts", "A2", "unknown code"))),
    Fault("lot: total row in demand", lot, append("Demand", "Total", 35, 30, 65, 22),
          (("Demand", "A4", "totals row"),)),
    Fault("lot: no demand sheet", lot, drop("Demand"),
          (("Demand", "", "missing sheet"),)),
    Fault("lot: no periods sheet", lot, drop("Periods"),
          (("Periods", "", "missing sheet"),)),
)
