"""Workbooks that use every feature of the contract at once, with names that try to break a sheet."""

from pathlib import Path

import numpy as np

from tests import books

HOSTILE = ("=cmd|' /C calc'!A0", "+49 30 123", "@SUM(A1)", "<b>bold</b>", "Łódź & \"Søn\" <x>", "مستودع", "🚚 depot",
           "a" * 300)


def site_rows() -> tuple[list[dict], list[dict]]:
    """Eight sites and twelve customers by coordinates, with every column filled somewhere."""
    rng = np.random.default_rng(7)
    sites = [
        {"Site": f"{j + 1:04d}", "Name": HOSTILE[j], "Fixed cost": float(rng.integers(300, 900)) + 0.25,
         "Capacity": float(rng.integers(150, 320)), "Handling cost": 0.5 * (j % 3),
         "Today": "yes" if j in (0, 1, 5) else "no",
         "Opening cost": 40.0, "Closing cost": 25.0, "Least volume": 20.0 if j == 2 else None,
         "Rule": {3: "closed", 4: "open"}.get(j, "free"), "Group": "big or small" if j in (6, 7) else None,
         "Latitude": 48.0 + float(rng.uniform(0, 5)), "Longitude": 7.0 + float(rng.uniform(0, 6))}
        for j in range(8)
    ]
    customers = [
        {"Customer": f"C{i + 1}", "Name": f"=customer {i}", "Demand": float(rng.integers(10, 60)),
         "Single source": "yes" if i % 4 == 0 else None, "Longest distance": 700 if i == 2 else None,
         "Latitude": 48.0 + float(rng.uniform(0, 5)), "Longitude": 7.0 + float(rng.uniform(0, 6))}
        for i in range(12)
    ]
    return sites, customers


SITE_SETTINGS = {
    "Title": "=Depots & more", "Demand unit": "pallet", "Period covered": "year", "Cost per unit and distance": 0.031,
    "Road factor": 1.25, "Most sites": 5, "Fewest sites": 2, "Longest distance": 650, "Share within distance (%)": 60,
    "Distance for share": 300, "Unmet demand cost": 14, "Compare with today": "yes", "Currency": "EUR",
}


def rich_site_book(path: Path) -> Path:
    """Site selection: coordinates, some lanes with costs, distances and limits of their own, variants."""
    sites, customers = site_rows()
    lanes = [
        {"Site": sites[j]["Site"], "Customer": customers[i]["Customer"], "Unit cost": cost, "Distance": distance,
         "Allowed": allowed, "Most": most}
        for j, i, cost, distance, allowed, most in (
            (4, 0, 3.5, 120.0, None, None), (4, 1, None, 90.0, "yes", 25.0), (0, 3, 2.0, 55.0, None, 30.0),
            (5, 6, 4.0, 410.0, "no", None))
    ]
    variants = [
        {"Variant": "less demand", "Demand factor": 0.9}, {"Variant": "dear freight", "Lane cost factor": 1.3},
        {"Variant": "without 0005", "Closed": "0005", "Most sites": 6, "Longest distance": 900},
        {"Variant": "impossible", "Fewest sites": 7, "Most sites": 8, "Closed": "0001, 0002"},
    ]
    return books.site_book(path, sites, customers, lanes=lanes, variants=variants, settings=SITE_SETTINGS)


def matrix_site_book(path: Path, basis: str = "per unit", **settings: object) -> Path:
    """Site selection with a matrix of lane costs, a few lanes missing; no coordinates, no today."""
    rng = np.random.default_rng(11)
    sites = [{"Site": f"S{j}", "Fixed cost": float(rng.integers(80, 200)), "Handling cost": float(j % 2),
              "Capacity": 90.0 if j < 3 else None} for j in range(5)]
    customers = [{"Customer": f"C{i}", "Demand": float(rng.integers(3, 20))} for i in range(9)]
    costs: list[list[object]] = [[float(c) for c in row] for row in rng.integers(1, 30, (5, 9))]
    costs[0][1] = costs[3][5] = None
    given = {"Lane cost basis": basis, "Currency": "JPY", **settings}
    return books.site_book(path, sites, customers, lane_costs=costs, settings=given)


def coordinate_site_book(path: Path) -> Path:
    """Site selection from coordinates alone, in miles, without capacities: the bound follows from the places."""
    sites, customers = site_rows()
    kept = ("Site", "Fixed cost", "Handling cost", "Latitude", "Longitude")
    plain = [{key: row[key] for key in kept} for row in sites]
    shops = [{key: row[key] for key in ("Customer", "Demand", "Latitude", "Longitude")} for row in customers]
    return books.site_book(path, plain, shops, settings={
        "Cost per unit and distance": 0.4, "Road factor": 1.2, "Distance unit": "mi", "Currency": "USD"})


def rich_lot_book(path: Path) -> Path:
    """Lot sizing: two resources, families, period costs, receipts, backlog, lost sales, lot rules, today's plan."""
    rng = np.random.default_rng(5)
    horizon = 6
    demand = rng.integers(0, 40, (5, horizon)).astype(float)
    items: list[dict] = [
        {"Item": f"{k:03d}", "Name": HOSTILE[k], "Unit": "box", "Setup cost": 50.0 + 10 * k,
         "Unit cost": 1.5 if k else None,
         "Holding cost": None if k == 1 else 0.4, "Unit value": 30.0, "Opening stock": 12.0, "Safety stock": 3.0,
         "Closing stock": 8.0 if k == 2 else None, "Most stock": 150.0 if k == 3 else None,
         "Least lot": 5.0 if k == 0 else None,
         "Most lot": 90.0 if k == 3 else None, "Lot multiple": 4.0 if k == 4 else None,
         "Backlog cost": 3.0 if k == 1 else None, "Lost sale cost": 4.0 if k == 2 else None,
         "Resource": "R1" if k < 3 else "R2", "Time per unit": 0.5, "Setup time": 2.0,
         "Family": "F" if k in (0, 3) else None}
        for k in range(5)
    ]
    return books.lot_book(
        path, items, [[value or None for value in row] for row in demand.tolist()],
        periods=[{"Period": f"W{t + 1}"} for t in range(horizon)],
        resources=[{"Resource": "R1", "Capacity": 70.0, "Overtime limit": 15.0, "Overtime cost": 2.0,
                    "Use cost": 5.0},
                   {"Resource": "R2", "Capacity": 60.0, "Overtime limit": 10.0, "Overtime cost": 3.0}],
        capacity=[[70.0, 65.0, 70.0, 70.0, 60.0, 70.0], [60.0] * horizon],
        period_costs=[{"Item": "000", "Period": "W2", "Setup cost": 80.0, "Unit cost": 2.0},
                      {"Item": "004", "Period": "W3", "Holding cost": 0.9, "Setup allowed": "no"}],
        receipts=[{"Item": "001", "Period": "W2", "Quantity": 10.0},
                  {"Item": "003", "Period": "W1", "Quantity": 6.0}],
        families=[{"Family": "F", "Setup cost": 30.0, "Setup time": 1.0, "Resource": "R1"}],
        today_plan=(demand + 4.0).tolist(),
        settings={"Title": "Lots", "Period unit": "week", "Periods a year": 52, "Yearly holding rate (%)": 26,
                  "Late deliveries": "yes", "Compare with today": "yes", "Currency": "KWD"},
    )


def plain_lot_book(path: Path) -> Path:
    """Lot sizing without resources or anything optional."""
    demand = [[69, 29, 36, 61, 61, 26, 34, 67, 45, 67, 79, 56]]
    return books.lot_book(path, [{"Item": "A", "Setup cost": 85, "Holding cost": 1}], demand)
