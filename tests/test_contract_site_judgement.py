"""Suspicious inputs of a site-selection workbook."""

import numpy as np
import pytest

from tests.books import errors, notices, read_sheets, site_sheets

RNG = np.random.default_rng(3)
SITES = [{"Site": f"S{j}", "Fixed cost": 100 + j} for j in range(6)]
CUSTOMERS = [{"Customer": f"C{i}", "Demand": 10 + i} for i in range(6)]
COSTS = RNG.uniform(5, 15, (6, 6)).round(2)


def read(tmp_path, sites=SITES, customers=CUSTOMERS, **more):
    """Read a workbook of six sites and six customers."""
    return read_sheets(tmp_path, site_sheets(sites, customers, **{"lane_costs": COSTS, **more}))


def changed(rows: list[dict[str, object]], number: int, **values: object) -> list[dict[str, object]]:
    """Give rows with one row changed."""
    return [{**row, **values} if k == number else row for k, row in enumerate(rows)]


def placed(rows: list[dict[str, object]], seed: int) -> list[dict[str, object]]:
    """Give rows with coordinates around 50 north, 10 east."""
    rng = np.random.default_rng(seed)
    return [{**row, "Latitude": round(50 + rng.uniform(-2, 2), 3), "Longitude": round(10 + rng.uniform(-3, 3), 3)}
            for row in rows]


def test_a_right_workbook_gives_no_notice(tmp_path):
    """Nothing is said where nothing is odd."""
    assert notices(read(tmp_path)) == []


@pytest.mark.parametrize("factor", [100, 0.01])
def test_a_lane_a_hundred_times_off_is_noticed(tmp_path, factor):
    """A lane cost that fits neither its site's nor its customer's other lanes is named by its cell."""
    costs = COSTS.copy()
    costs[2, 3] = 10 * factor * (2 if factor > 1 else 0.4)
    assert notices(read(tmp_path, lane_costs=costs)) == [("figure far off", "Lane costs", "E4")]


def test_a_dear_site_or_a_far_customer_is_not_odd(tmp_path):
    """A whole row or column of high costs is how things are, not a slip."""
    costs = COSTS.copy()
    costs[2] *= 300
    costs[:, 4] *= 300
    assert notices(read(tmp_path, lane_costs=costs)) == []


def test_a_lane_row_far_off_is_noticed_at_its_row(tmp_path):
    """Rows of Lanes are judged beside the matrix they replace."""
    lanes = [{"Site": "S1", "Customer": "C1", "Unit cost": 5000}]
    assert notices(read(tmp_path, lanes=lanes)) == [("figure far off", "Lanes", "C2")]


def test_a_fixed_cost_far_off_is_noticed(tmp_path):
    """A fixed cost of a hundred times the middle one is named."""
    reading = read(tmp_path, sites=changed(SITES, 4, **{"Fixed cost": 10400}))
    assert notices(reading) == [("figure far off", "Sites", "B6")]
    assert "10400" in reading.problems[0].found


def test_swapped_coordinates_are_noticed(tmp_path):
    """A place that is far from all others and near when turned round is asked about (check case GEO-04)."""
    customers = placed(CUSTOMERS, 2)
    turned = changed(customers, 3, Latitude=customers[3]["Longitude"], Longitude=customers[3]["Latitude"])
    reading = read(tmp_path, sites=placed(SITES, 1), customers=turned)
    assert notices(reading) == [("coordinates swapped", "Customers", "C5")]


def test_places_at_zero_are_noticed(tmp_path):
    """Latitude 0 and longitude 0 is a place in the sea."""
    reading = read(tmp_path, sites=changed(placed(SITES, 1), 2, Latitude=0, Longitude=0),
                   customers=placed(CUSTOMERS, 2))
    assert notices(reading) == [("place at zero", "Sites", "C4")]


def test_a_customer_that_no_site_can_serve_is_noticed(tmp_path):
    """No lane, too far, closed sites only, or too large for one site: each in its own words."""
    costs = COSTS.copy()
    costs[:, 2] = np.nan
    reading = read(tmp_path, lane_costs=costs)
    assert notices(reading) == [("demand no site can serve", "Customers", "A4")]
    assert "without any lane" in reading.problems[0].found
    far = np.full((6, 6), 10.0)
    far[:, 1] = 500
    reading = read(tmp_path, distances=far, settings={"Longest distance": 100})
    assert notices(reading) == [("demand no site can serve", "Customers", "A3")]
    sites = [{**row, "Capacity": 14} for row in SITES]
    reading = read(tmp_path, sites=sites, settings={"Single sourcing": "yes"})
    assert notices(reading) == [("demand no site can serve", "Customers", "A7")]
    assert "more than any site" in reading.problems[0].found


def test_unmet_demand_may_be_meant(tmp_path):
    """Where unmet demand has a cost, customers without lanes are no notice."""
    costs = COSTS.copy()
    costs[:, 2] = np.nan
    assert notices(read(tmp_path, lane_costs=costs, settings={"Unmet demand cost": 5})) == []


def test_capacities_that_never_bind_are_noticed(tmp_path):
    """Capacities that each hold all demand look like another unit; those that bind do not."""
    loose = [{**row, "Capacity": 1000 + k} for k, row in enumerate(SITES)]
    assert notices(read(tmp_path, sites=loose)) == [("capacity never binds", "Sites", "C2")]
    tight = changed(loose, 3, Capacity=60)
    assert notices(read(tmp_path, sites=tight)) == []


def test_titles_in_other_units_are_noticed(tmp_path):
    """Another currency or another distance unit in a title is asked about."""
    sheets = site_sheets(SITES, CUSTOMERS, lane_costs=COSTS, lanes=[
        {"Site": "S1", "Customer": "C1", "Unit cost (EUR/t)": 9, "Distance (miles)": 3}])
    sheets["Sites"][0][1] = "Fixed cost (USD/year)"
    assert notices(read_sheets(tmp_path, sheets)) == [
        ("another currency", "Sites", "B1"), ("another distance unit", "Lanes", "D1")]


def test_a_share_that_looks_like_a_fraction_is_noticed(tmp_path):
    """0.9 % within the distance was probably meant as 90 %."""
    reading = read(tmp_path, distances=COSTS, settings={"Share within distance (%)": 0.9, "Distance for share": 50})
    assert notices(reading) == [("percent or fraction", "Settings", "B4")]
    assert "Type 90" in reading.problems[0].remedy


def test_slips_in_settings_are_noticed_beside_errors(tmp_path):
    """A share that looks like a fraction is said at once, also where another cell is at fault."""
    sheets = site_sheets(
        [{"Site": "A", "Fixed cost": "dear"}], [{"Customer": "x", "Demand": 1}], lane_costs=[[1]],
        settings={"Share within distance (%)": 0.9})
    sheets["Settings"].append(["Distance for share", None])
    reading = read_sheets(tmp_path, sheets)
    assert [kind for kind, _, _ in errors(reading)] == ["half a rule", "number expected"]
    assert ("percent or fraction", "Settings") in [(kind, sheet) for kind, sheet, _ in notices(reading)]
    assert ("half a rule", "Settings", f"B{len(sheets['Settings'])}") in errors(reading)


@pytest.mark.parametrize("measured", [True, False])
def test_half_a_rule_on_distance_asks_for_distances_too(tmp_path, measured):
    """Who gives the missing half is not sent back once more for distances that the workbook does not hold."""
    more = {"distances": [[120]]} if measured else {}
    sheets = site_sheets([{"Site": "A", "Fixed cost": 1}], [{"Customer": "x", "Demand": 1}], lane_costs=[[1]],
                         settings={"Share within distance (%)": 90}, **more)
    half = next(p for p in read_sheets(tmp_path, sheets).problems if p.kind == "half a rule")
    assert ("and distances" in half.remedy) is not measured
