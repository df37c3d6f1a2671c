"""Published site-selection cases, written as workbooks, solved from file to file.

Each case names its source. Not expressible in the workbook's contract, and why:

- FL-08 (Williams, *Model Building in Mathematical Programming*, "Distribution"): two echelons.
- FL-12 (Chopra & Meindl, centre of gravity): a free point in the plane, not a choice among sites.
- ML-03 (Gueret, Prins & Sevaux 2002): a bill of material.
"""

import csv
from pathlib import Path

import numpy as np
import pytest

from ledgersolve import Verdict, solve_workbook
from tests.books import site_book

HERE = Path(__file__).parent


def solved(tmp_path, sites, customers, **more):
    """Write the workbook, solve it and give the answer."""
    more["settings"] = {"Questions": "no", "Time limit (seconds)": 60, **more.get("settings", {})}
    return solve_workbook(site_book(tmp_path / "case.xlsx", sites, customers, **more))


def codes(prefix: str, count: int, column: str) -> list[dict[str, object]]:
    """Rows that hold a code only."""
    return [{column: f"{prefix}{k + 1}"} for k in range(count)]


def with_columns(rows, **columns):
    """Rows with further columns, one figure a row."""
    return [{**row, **{title.replace("_", " "): values[k] for title, values in columns.items()}}
            for k, row in enumerate(rows)]


def test_lockboxes(tmp_path) -> None:
    """FL-01, Winston, *Operations Research*, lockbox example: 242, Los Angeles and New York."""
    payments = [70, 50, 60, 40]
    days = [[2, 6, 8, 8], [6, 2, 5, 5], [8, 5, 2, 5], [8, 5, 5, 2]]
    costs = [[0.2 * payments[c] * days[c][s] for c in range(4)] for s in range(4)]
    sites = with_columns([{"Site": s} for s in ("LA", "Chicago", "NY", "Atlanta")], Fixed_cost=[50] * 4)
    regions = [{"Customer": c} for c in ("West", "Midwest", "East", "South")]
    customers = with_columns(regions, Demand=payments)
    basis = {"Lane cost basis": "whole demand"}
    answer = solved(tmp_path, sites, customers, lane_costs=costs, settings=basis)
    assert answer.verdict is Verdict.PROVEN_BEST
    assert answer.total_cost == pytest.approx(242, rel=1e-6)
    assert answer.plan == {"open": ["LA", "NY"]}


def test_profit_turned_into_cost(tmp_path) -> None:
    """FL-02, Wolsey, *Integer Programming*: best profit 28; as costs 10 - profit, 6 x 10 - 28 = 32."""
    profit = [[6, 2, 1, 3, 5], [4, 10, 2, 6, 1], [3, 2, 4, 1, 3],
              [2, 0, 4, 1, 4], [1, 8, 6, 2, 5], [3, 2, 4, 8, 1]]
    sites = with_columns(codes("D", 5, "Site"), Fixed_cost=[2, 4, 5, 3, 3])
    customers = with_columns(codes("C", 6, "Customer"), Demand=[1] * 6)
    costs = (10 - np.array(profit, dtype=float)).T
    answer = solved(tmp_path, sites, customers, lane_costs=costs)
    assert answer.total_cost == pytest.approx(32, rel=1e-6)
    assert answer.plan["open"] in (["D1", "D2", "D4"], ["D2", "D4", "D5"])


@pytest.mark.parametrize(("fixed", "value"), [(1000, 5610), (0, 3370)])
def test_three_sites_with_capacity(tmp_path, fixed, value) -> None:
    """FL-05, Pedroso, Rais, Kubo & Muramatsu, *Solving Problems using SCIP and Python*."""
    costs = [[4, 5, 6, 8, 10], [6, 4, 3, 5, 8], [9, 7, 4, 3, 4]]
    sites = with_columns(codes("S", 3, "Site"), Fixed_cost=[fixed] * 3, Capacity=[500] * 3)
    customers = with_columns(codes("C", 5, "Customer"), Demand=[80, 270, 250, 160, 180])
    answer = solved(tmp_path, sites, customers, lane_costs=costs)
    assert answer.verdict is Verdict.PROVEN_BEST
    assert answer.total_cost == pytest.approx(value, rel=1e-6)


TWELVE = """100 80 50 50 60 100 120 90 60 70 65 110|120 90 60 70 65 110 140 110 80 80 75 130
140 110 80 80 75 130 160 125 100 100 80 150|160 125 100 100 80 150 190 150 130 - - -
190 150 130 - - - 200 180 150 - - -|200 180 150 - - - 100 80 50 50 60 100"""


@pytest.mark.parametrize(("single", "value"), [("no", 18103.041666667), ("yes", 18135)])
def test_twelve_depots_with_forbidden_lanes(tmp_path, single, value) -> None:
    """FL-06, Gueret, Prins & Sevaux (2002), depot location: 18,103 split; single source is our variant."""
    half = [row.split() for row in TWELVE.replace("\n", "|").split("|")]
    costs = [[None if c == "-" else float(c) for c in row] for row in half + half]
    sites = with_columns(
        codes("D", 12, "Site"),
        Fixed_cost=[3500, 9000, 10000, 4000, 3000, 9000, 9000, 3000, 4000, 10000, 9000, 3500],
        Capacity=[300, 250, 100, 180, 275, 300, 200, 220, 270, 250, 230, 180],
    )
    demand = [120, 80, 75, 100, 110, 100, 90, 60, 30, 150, 95, 120]
    customers = with_columns(codes("C", 12, "Customer"), Demand=demand)
    settings = {"Lane cost basis": "whole demand", "Single sourcing": single}
    answer = solved(tmp_path, sites, customers, lane_costs=costs, settings=settings)
    assert answer.verdict is Verdict.PROVEN_BEST
    assert answer.total_cost == pytest.approx(value, rel=1e-6)
    assert answer.plan == {"open": ["D1", "D5", "D8", "D9", "D12"]}


def test_site_and_size(tmp_path) -> None:
    """FL-07, Chopra & Meindl, *Supply Chain Management*, network design: 23,751, three large plants."""
    regions = ["N America", "S America", "Europe", "Asia", "Africa"]
    unit = [[81, 92, 101, 130, 115], [117, 77, 108, 98, 100], [102, 105, 95, 119, 111],
            [115, 125, 90, 59, 74], [142, 100, 103, 105, 71]]
    small, large = [6000, 4500, 6500, 4100, 4000], [9000, 6750, 9750, 6150, 6000]
    sites, costs = [], []
    for r, region in enumerate(regions):
        for size, capacity, fixed in (("small", 10, small[r]), ("large", 20, large[r])):
            sites.append({"Site": f"{region} {size}", "Fixed cost": fixed, "Capacity": capacity,
                          "Group": region})
            costs.append(unit[r])
    customers = with_columns([{"Customer": region} for region in regions], Demand=[12, 8, 14, 16, 7])
    answer = solved(tmp_path, sites, customers, lane_costs=costs)
    assert answer.verdict is Verdict.PROVEN_BEST
    assert answer.total_cost == pytest.approx(23751, rel=1e-6)
    assert answer.plan == {"open": ["S America large", "Asia large", "Africa large"]}


def cap(tmp_path, capacity, fixed, free_site=10):
    """The table of Kuehn & Hamburger (1963) as OR-Library has it, as a workbook, solved."""
    with (HERE / "kuehn_hamburger.csv").open() as stream:
        rows = list(csv.reader(stream))[1:]
    fixed_costs = [0 if k == free_site else fixed for k in range(16)]
    sites = with_columns(codes("w", 16, "Site"), Fixed_cost=fixed_costs, Capacity=[capacity] * 16)
    customers = [{"Customer": row[0], "Demand": float(row[1])} for row in rows]
    costs = np.array([[float(cost) for cost in row[2:]] for row in rows]).T
    return solved(tmp_path, sites, customers, lane_costs=costs, settings={"Lane cost basis": "whole demand"})


@pytest.mark.parametrize(
    ("capacity", "fixed", "value"),
    [
        (58268, 7500, 932615.750), (58268, 25000, 1034976.975), (5000, 7500, 1040444.375),
        (5000, 25000, 1235500.450), (15000, 7500, 932615.750), (15000, 25000, 1045650.250),
    ],
)
def test_or_library_sixteen_by_fifty(tmp_path, capacity, fixed, value) -> None:
    """FL-09, Beasley, OR-Library: cap71, cap74, cap41, cap44, cap61, cap64."""
    answer = cap(tmp_path, capacity, fixed)
    assert answer.verdict is Verdict.PROVEN_BEST
    assert answer.total_cost == pytest.approx(value, rel=1e-6)


def test_a_fixed_cost_of_nothing_is_honoured(tmp_path) -> None:
    """FL-09: were w11 charged 7,500 too, cap71 would cost 940,115.75."""
    assert cap(tmp_path, 58268, 7500, free_site=-1).total_cost == pytest.approx(940115.75, rel=1e-6)


ROADS = """1-2:15 1-5:24 1-7:18 2-3:22 3-4:18 3-5:16 3-9:20 4-6:12 5-8:12 5-9:24 6-9:12 6-12:22 7-8:15 7-10:22
8-9:30 8-11:25 9-11:19 9-12:19 10-11:19 11-12:21"""
PEOPLE = [15, 10, 12, 18, 5, 24, 11, 16, 13, 22, 19, 20]


def town_distances() -> np.ndarray:
    """Shortest paths between the twelve towns."""
    far = np.full((12, 12), np.inf)
    np.fill_diagonal(far, 0)
    for road in ROADS.split():
        ends, length = road.split(":")
        a, b = (int(end) - 1 for end in ends.split("-"))
        far[a, b] = far[b, a] = float(length)
    for k in range(12):
        far = np.minimum(far, far[:, [k]] + far[[k], :])
    return far


@pytest.mark.parametrize(
    ("count", "value", "open_sites"),
    [(1, 4772, [9]), (2, 3145, [7, 9]), (3, 2438, [1, 6, 11]), (4, 1884, [1, 6, 8, 10]),
     (5, 1444, [1, 6, 8, 10, 12])],
)
def test_twelve_towns_so_many_offices(tmp_path, count, value, open_sites) -> None:
    """FL-10, Gueret, Prins & Sevaux (2002), 15.5: 2,438 with three; the other counts by full enumeration."""
    sites = with_columns(codes("T", 12, "Site"), Fixed_cost=[0] * 12)
    customers = with_columns(codes("C", 12, "Customer"), Demand=PEOPLE)
    settings = {"Fewest sites": count, "Most sites": count}
    answer = solved(tmp_path, sites, customers, lane_costs=town_distances(), settings=settings)
    assert answer.total_cost == pytest.approx(value, rel=1e-6)
    assert answer.plan == {"open": [f"T{k}" for k in open_sites]}


@pytest.mark.parametrize(("within", "fewest"), [(12, 9), (15, 7), (18, 6), (20, 5), (24, 3), (37, 2)])
def test_twelve_towns_covered(tmp_path, within, fewest) -> None:
    """FL-10, fewest offices so that every town is within a distance, by full enumeration."""
    sites = with_columns(codes("T", 12, "Site"), Fixed_cost=[1] * 12)
    customers = with_columns(codes("C", 12, "Customer"), Demand=PEOPLE)
    answer = solved(
        tmp_path, sites, customers, lane_costs=np.zeros((12, 12)), distances=town_distances(),
        settings={"Longest distance": within},
    )
    assert answer.total_cost == pytest.approx(fewest, rel=1e-6)


@pytest.mark.parametrize(("count", "radius"), [(1, 48), (2, 33), (3, 22), (4, 21), (5, 19)])
def test_twelve_towns_smallest_radius(tmp_path, count, radius) -> None:
    """FL-10, p-centre by full enumeration: the radius can be kept, one less cannot."""
    sites = with_columns(codes("T", 12, "Site"), Fixed_cost=[1] * 12)
    customers = with_columns(codes("C", 12, "Customer"), Demand=PEOPLE)
    for within, verdict in ((radius, Verdict.PROVEN_BEST), (radius - 1, Verdict.NO_PLAN_EXISTS)):
        answer = solved(
            tmp_path, sites, customers, lane_costs=np.zeros((12, 12)), distances=town_distances(),
            settings={"Longest distance": within, "Most sites": count},
        )
        assert answer.verdict is verdict


@pytest.mark.parametrize(("within", "fewest"), [(15, 2), (10, 4), (20, 2), (25, 1)])
def test_fire_stations(tmp_path, within, fewest) -> None:
    """FL-11, Winston, 9.2: two stations within 15 minutes; the other times by full enumeration."""
    minutes = [[0, 10, 20, 30, 30, 20], [10, 0, 25, 35, 20, 10], [20, 25, 0, 15, 30, 20],
               [30, 35, 15, 0, 15, 25], [30, 20, 30, 15, 0, 14], [20, 10, 20, 25, 14, 0]]
    sites = with_columns(codes("S", 6, "Site"), Fixed_cost=[1] * 6)
    customers = with_columns(codes("C", 6, "Customer"), Demand=[1] * 6)
    answer = solved(tmp_path, sites, customers, lane_costs=np.zeros((6, 6)), distances=minutes,
                    settings={"Longest distance": within})
    assert answer.total_cost == pytest.approx(fewest, rel=1e-6)


def test_transport_from_two_breweries(tmp_path) -> None:
    """FL-13, PuLP project, case studies, "A Transportation Problem": 8,600."""
    sites = with_columns(codes("B", 2, "Site"), Fixed_cost=[0, 0], Capacity=[1000, 4000])
    customers = with_columns(codes("C", 5, "Customer"), Demand=[500, 900, 1800, 200, 700])
    answer = solved(tmp_path, sites, customers, lane_costs=[[2, 4, 5, 2, 1], [3, 1, 3, 2, 3]])
    assert answer.total_cost == pytest.approx(8600, rel=1e-6)
