"""Make the demo workbooks again: ``python inbox_demo/make_demo.py``.

Everything in them is invented: a maker of garden tools by the name of Hollowell, its depots, customers, rates
and machines. Coordinates are those of real towns, rounded, from memory.
"""

import random
from datetime import datetime
from pathlib import Path

import xlsxwriter

HERE = Path(__file__).resolve().parent
MADE_ON = datetime(2026, 11, 2)
LABEL = "Invented data: Hollowell Garden Tools, a company that does not exist"
Rows = list[list[object]]

TOWNS = [
    ("HAM", "Hamburg", 53.55, 9.99), ("BER", "Berlin", 52.52, 13.40), ("MUC", "Munich", 48.14, 11.58),
    ("CGN", "Cologne", 50.94, 6.96), ("FRA", "Frankfurt", 50.11, 8.68), ("STR", "Stuttgart", 48.78, 9.18),
    ("LEJ", "Leipzig", 51.34, 12.37), ("NUE", "Nuremberg", 49.45, 11.08), ("HAJ", "Hanover", 52.37, 9.73),
    ("BRE", "Bremen", 53.08, 8.80), ("DRS", "Dresden", 51.05, 13.74), ("KSF", "Kassel", 51.31, 9.49),
    ("DTM", "Dortmund", 51.51, 7.47), ("ERF", "Erfurt", 50.98, 11.03), ("MGD", "Magdeburg", 52.13, 11.62),
    ("RLG", "Rostock", 54.09, 12.10), ("KEL", "Kiel", 54.32, 10.14), ("FRB", "Freiburg", 48.00, 7.85),
    ("SCN", "Saarbrücken", 49.23, 7.00), ("RGB", "Regensburg", 49.02, 12.10), ("AGB", "Augsburg", 48.37, 10.90),
    ("ULM", "Ulm", 48.40, 9.99), ("WUE", "Würzburg", 49.79, 9.95), ("KOB", "Koblenz", 50.36, 7.59),
    ("AAH", "Aachen", 50.78, 6.08), ("MSR", "Münster", 51.96, 7.63), ("OSN", "Osnabrück", 52.28, 8.05),
    ("BIE", "Bielefeld", 52.02, 8.53), ("PAD", "Paderborn", 51.72, 8.75), ("GOT", "Göttingen", 51.53, 9.93),
    ("BRW", "Brunswick", 52.26, 10.52), ("WOB", "Wolfsburg", 52.42, 10.79), ("LUB", "Lübeck", 53.87, 10.69),
    ("SWN", "Schwerin", 53.63, 11.41), ("CHM", "Chemnitz", 50.83, 12.92), ("ZWI", "Zwickau", 50.72, 12.49),
    ("COT", "Cottbus", 51.76, 14.33), ("POT", "Potsdam", 52.40, 13.07), ("HAL", "Halle", 51.48, 11.97),
    ("JEN", "Jena", 50.93, 11.59), ("FUL", "Fulda", 50.55, 9.68), ("GIE", "Giessen", 50.58, 8.68),
    ("MNZ", "Mainz", 50.00, 8.27), ("MHG", "Mannheim", 49.49, 8.47), ("KAR", "Karlsruhe", 49.01, 8.40),
    ("HEI", "Heilbronn", 49.14, 9.22), ("KON", "Constance", 47.66, 9.18), ("ROS", "Rosenheim", 47.86, 12.12),
    ("PAS", "Passau", 48.57, 13.43), ("BAY", "Bayreuth", 49.95, 11.58), ("TRI", "Trier", 49.75, 6.64),
    ("ESN", "Essen", 51.46, 7.01), ("DUS", "Düsseldorf", 51.23, 6.78), ("SIE", "Siegen", 50.87, 8.02),
]


def write(name: str, sheets: dict[str, Rows]) -> None:
    """Write a workbook as an analyst would: a heading, titles, plain formats."""
    book = xlsxwriter.Workbook(str(HERE / f"{name}.xlsx"))
    book.set_properties({"title": name, "comments": LABEL, "created": MADE_ON})
    heading = book.add_format({"italic": True, "font_color": "#555555"})
    title = book.add_format({"bold": True, "bottom": 1, "text_wrap": True, "valign": "top"})
    number = book.add_format({"num_format": "#,##0.##"})
    for sheet_name, rows in sheets.items():
        sheet = book.add_worksheet(sheet_name)
        sheet.write_string(0, 0, LABEL, heading)
        for column, text in enumerate(rows[0]):
            sheet.write(2, column, text, title)
        for r, row in enumerate(rows[1:], start=3):
            for column, value in enumerate(row):
                if value is not None:
                    plain = isinstance(value, str) or abs(float(str(value))) < 1000
                    sheet.write(r, column, value, None if plain else number)
        for column in range(len(rows[0])):
            texts = [len(str(row[column])) for row in rows[1:] if column < len(row) and row[column] is not None]
            longest_word = max(len(word) for word in str(rows[0][column]).split())
            sheet.set_column(column, column, 1.1 * max([*texts, longest_word, 6]) + 2)
        sheet.set_row(2, 30)
        sheet.set_landscape()
        sheet.fit_to_pages(1, 0)
        sheet.freeze_panes(3, 1)
    book.close()


def settings(job: str, title: str, **values: object) -> Rows:
    """Rows of the sheet Settings."""
    rows: Rows = [["Setting", "Value"], ["Job", job], ["Title", title], ["Currency", "EUR"]]
    return rows + [[key.replace("_", " "), value] for key, value in values.items()]


def depots_from_coordinates() -> None:
    """Twelve depots, fifty-four towns, costs from distance; four depots run today."""
    draw = random.Random(11)
    fixed = [420, 390, 460, 430, 445, 410, 340, 360, 375, 365, 330, 320]
    sites: Rows = [["Site", "Name", "Fixed cost (EUR/year)", "Capacity (pallets)", "Handling cost", "Today",
                    "Opening cost", "Closing cost", "Latitude", "Longitude"]]
    for (code, name, latitude, longitude), cost in zip(TOWNS[:12], fixed, strict=True):
        today = code in ("HAM", "BER", "MUC", "CGN")
        sites.append([code, f"Depot {name}", cost * 1000, 56000, 3.2, "yes" if today else "no",
                      0 if today else 60000, 90000 if today else 0, latitude, longitude])
    customers: Rows = [["Customer", "Name", "Demand (pallets/year)", "Latitude", "Longitude"]]
    for number, (_, name, latitude, longitude) in enumerate(TOWNS, start=1):
        customers.append([f"C{number:02d}", f"Dealers {name}", draw.randrange(400, 4600, 50), latitude, longitude])
    variants: Rows = [
        ["Variant", "Demand factor", "Lane cost factor", "Most sites", "Closed"],
        ["Demand a tenth lower", 0.9, None, None, None],
        ["Demand a tenth higher", 1.1, None, None, None],
        ["Freight a fifth dearer", None, 1.2, None, None],
        ["At most three depots", None, None, 3, None],
        ["Without Leipzig", None, None, None, "LEJ"],
    ]
    plan = settings("site selection", "Depots for the coming year", Demand_unit="pallet", Period_covered="year",
                    Cost_per_unit_and_distance=0.11, Road_factor=1.3, Compare_with_today="yes")
    plan += [["Time limit (seconds)", 60], ["Share of time for questions (%)", 30]]
    write("1 depots from coordinates",
          {"Settings": plan, "Sites": sites, "Customers": customers, "Variants": variants})


def depots_from_a_lane_list() -> None:
    """Regional stores with two sizes each, quoted lanes, one store a customer, a service promise."""
    draw = random.Random(23)
    places = [TOWNS[k] for k in (8, 12, 14, 22, 41, 42)]
    sites: Rows = [["Site", "Name", "Fixed cost", "Capacity", "Least volume", "Group"]]
    for code, name, _, _ in places:
        sites.append([f"{code}-S", f"{name}, small hall", draw.randrange(70, 90) * 1000, 6000, 1000, name])
        sites.append([f"{code}-L", f"{name}, large hall", draw.randrange(120, 150) * 1000, 14000, 3000, name])
    customers: Rows = [["Customer", "Name", "Demand", "Longest distance"]]
    lanes: Rows = [["Site", "Customer", "Unit cost (EUR/pallet)", "Distance (km)"]]
    for number, (_, name, latitude, longitude) in enumerate(TOWNS[20:], start=1):
        code = f"K{number:02d}"
        customers.append([code, name, draw.randrange(200, 1400, 20), 330 if number % 9 == 0 else None])
        for site, _, site_latitude, site_longitude in places:
            distance = round(1.3 * 111 * ((latitude - site_latitude) ** 2
                             + (0.63 * (longitude - site_longitude)) ** 2) ** 0.5)
            if distance <= 560:
                rate = round(4 + 0.085 * distance * draw.uniform(0.9, 1.1), 2)
                lanes += [[f"{site}-S", code, rate, distance], [f"{site}-L", code, rate, distance]]
    plan = settings("site selection", "Regional halls, one supplier each", Demand_unit="pallet",
                    Period_covered="year", Single_sourcing="yes", Longest_distance=560)
    plan += [["Share within distance (%)", 60], ["Distance for share", 200], ["Time limit (seconds)", 60],
             ["Share of time for questions (%)", 30]]
    write("2 halls from a lane list",
          {"Settings": plan, "Sites": sites, "Customers": customers, "Lanes": lanes})


ITEMS = [
    ("SPADE-L", "Spade, long handle", "Forge"), ("SPADE-S", "Spade, short handle", "Forge"),
    ("FORK", "Digging fork", "Forge"), ("HOE", "Draw hoe", "Forge"), ("RAKE", "Garden rake", "Forge"),
    ("TROWEL", "Hand trowel", "Press"), ("SECAT", "Secateurs", "Press"), ("SHEARS", "Hedge shears", "Press"),
    ("LOPPER", "Lopper", "Press"), ("WEEDER", "Weeder", "Press"),
]
WEEKS = [f"W{week:02d}" for week in range(2, 28)]


def lots_on_two_machines() -> None:
    """Ten tools over 26 weeks on a forge and a press, setup times, overtime, families, today's plan."""
    draw = random.Random(37)
    items: Rows = [["Item", "Name", "Unit", "Setup cost", "Unit cost", "Unit value", "Opening stock",
                    "Safety stock", "Resource", "Time per unit", "Setup time", "Family"]]
    demand: Rows = [["Item", *WEEKS]]
    today: Rows = [["Item", *WEEKS]]
    for code, name, machine in ITEMS:
        level = draw.randrange(180, 420, 10)
        weekly = [round(level * (1 + 0.5 * (8 < week < 20)) * draw.uniform(0.6, 1.4)) for week in range(26)]
        safety, opening = round(level * 0.25), round(level * 1.1)
        items.append([code, name, "piece", draw.randrange(240, 420, 10), round(draw.uniform(3, 9), 2),
                      round(draw.uniform(14, 34), 2), opening, safety, machine, 0.02, draw.choice([1.5, 2, 3]),
                      "Blades" if machine == "Forge" and code != "RAKE" else None])
        demand.append([code, *weekly])
        today.append([code, *two_week_lots(weekly, opening - safety)])
    resources: Rows = [["Resource", "Capacity (h)", "Overtime limit", "Overtime cost", "Use cost"],
                       ["Forge", 60, 10, 65, 0], ["Press", 58, 10, 65, 120]]
    families: Rows = [["Family", "Setup cost", "Setup time", "Resource"], ["Blades", 180, 1.5, "Forge"]]
    plan = settings("lot sizing", "Garden tools, first half-year", Period_unit="week", Periods_a_year=52)
    plan += [["Yearly holding rate (%)", 22], ["Compare with today", "yes"], ["Time limit (seconds)", 20]]
    write("3 lots on two machines", {
        "Settings": plan, "Periods": [["Period"], *([week] for week in WEEKS)], "Items": items, "Demand": demand,
        "Resources": resources, "Families": families, "Today plan": today,
    })


def two_week_lots(weekly: list[int], stock: int) -> list[int]:
    """Today's habit: every second week, make what the next two weeks lack."""
    lots = []
    for week in range(len(weekly)):
        lot = max(0, sum(weekly[week : week + 2]) - stock) if week % 2 == 0 else max(0, weekly[week] - stock)
        lots.append(lot)
        stock += lot - weekly[week]
    return lots


def eight_faults() -> None:
    """A workbook as it comes in on a Friday: eight different faults."""
    sites: Rows = [["Site", "Fixed cost", "Capacity"],
                   ["HAM", 120000, 9000], ["LEJ", "1,200", 8000], ["MUC", 110000, -500], ["HAM", 99000, 7000]]
    customers: Rows = [["Customer", "Demand"],
                       ["C1", 2400], ["C2", None], ["C3", 1800], ["C4", "many"], ["C5", 900]]
    lanes: Rows = [["Site", "Customer", "Unit cost"]]
    lanes += [[site, f"C{k}", 4 + k] for site in ("HAM", "LEJ", "MUC") for k in range(1, 6)]
    lanes += [["LEY", "C1", 7], ["MUC", "C5", 6]]
    plan = settings("site selection", "Next year's depots (draft)", Demand_unit="pallet")
    plan[3][1] = "Euro"
    write("4 eight faults", {"Settings": plan, "Sites": sites, "Customers": customers, "Lanes": lanes})


def impossible() -> None:
    """A season no machine can carry: the press lacks hours in May."""
    weeks = [f"May {k}" for k in range(1, 6)]
    items: Rows = [["Item", "Setup cost", "Holding cost", "Resource", "Time per unit", "Setup time"],
                   ["SECAT", 300, 0.4, "Press", 0.05, 2], ["SHEARS", 280, 0.6, "Press", 0.06, 3]]
    demand: Rows = [["Item", *weeks], ["SECAT", 300, 420, 500, 640, 700], ["SHEARS", 150, 260, 330, 420, 380]]
    plan = settings("lot sizing", "May on one press", Period_unit="week")
    write("5 impossible", {
        "Settings": plan, "Periods": [["Period"], *([week] for week in weeks)], "Items": items,
        "Demand": demand, "Resources": [["Resource", "Capacity"], ["Press", 42]],
    })


def large() -> None:
    """A hundred possible sites for two thousand shops, costed from coordinates."""
    draw = random.Random(53)
    sites: Rows = [["Site", "Fixed cost", "Latitude", "Longitude"]]
    customers: Rows = [["Customer", "Demand", "Latitude", "Longitude"]]
    for number in range(1, 101):
        sites.append([f"P{number:03d}", draw.randrange(60, 140) * 1000, *somewhere(draw)])
    for number in range(1, 2001):
        customers.append([f"Shop {number:04d}", draw.randrange(5, 120), *somewhere(draw)])
    plan = settings("site selection", "Pick-up points for two thousand shops", Demand_unit="pallet",
                    Cost_per_unit_and_distance=0.14, Road_factor=1.25)
    plan += [["Time limit (seconds)", 30], ["Questions", "no"]]
    write("6 large", {"Settings": plan, "Sites": sites, "Customers": customers})


def somewhere(draw: random.Random) -> list[object]:
    """Draw a place near one of the towns."""
    _, _, latitude, longitude = draw.choice(TOWNS)
    return [round(latitude + draw.gauss(0, 0.35), 4), round(longitude + draw.gauss(0, 0.5), 4)]


if __name__ == "__main__":
    depots_from_coordinates()
    depots_from_a_lane_list()
    lots_on_two_machines()
    eight_faults()
    impossible()
    large()
