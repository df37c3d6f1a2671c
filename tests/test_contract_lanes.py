"""Lanes from rows, matrices and coordinates: which figure wins, which pairs exist, what is a fault."""

import numpy as np
import pytest

from tests.books import errors, notices, read_sheets, site_sheets

SITES = [{"Site": "A", "Fixed cost": 1, "Latitude": 0, "Longitude": 0},
         {"Site": "B", "Fixed cost": 1, "Latitude": 0, "Longitude": 1}]
CUSTOMERS = [{"Customer": "X", "Demand": 10, "Latitude": 0, "Longitude": 2},
             {"Customer": "Y", "Demand": 20, "Latitude": 0, "Longitude": 3}]
DEGREE = 111.195080
RATE = {"Cost per unit and distance": 0.1, "Road factor": 1.2}


def bare(rows: list[dict[str, object]]) -> list[dict[str, object]]:
    """Give rows without coordinates."""
    return [{k: v for k, v in row.items() if k not in ("Latitude", "Longitude")} for row in rows]


def read(tmp_path, *, placed: bool = False, **more):
    """Read a workbook of two sites and two customers."""
    sites, customers = (SITES, CUSTOMERS) if placed else (bare(SITES), bare(CUSTOMERS))
    return read_sheets(tmp_path, site_sheets(sites, customers, **more))


def lane(site: str, customer: str, **more: object) -> dict[str, object]:
    """Give a row of Lanes."""
    return {"Site": site, "Customer": customer, **{key.replace("_", " "): value for key, value in more.items()}}


def test_pairs_that_are_not_listed_do_not_exist_without_a_rate(tmp_path):
    """With Lanes and no cost per unit and distance, other pairs are no lanes, coordinates or not."""
    case = read(tmp_path, placed=True, lanes=[lane("A", "X", Unit_cost=5)]).case
    assert case.lane_cost.tolist() == [[5, np.inf], [np.inf, np.inf]]


def test_pairs_that_are_not_listed_are_costed_from_coordinates_with_a_rate(tmp_path):
    """With a cost per unit and distance, pairs that are not listed cost distance x road factor x rate."""
    case = read(tmp_path, placed=True, lanes=[lane("A", "X", Unit_cost=5)], settings=RATE).case
    assert case.lane_cost[0, 0] == 5
    np.testing.assert_allclose(case.lane_cost[[0, 1, 1], [1, 0, 1]], DEGREE * 1.2 * 0.1 * np.array([3, 1, 2]),
                               rtol=1e-6)
    np.testing.assert_allclose(case.distance, DEGREE * 1.2 * np.array([[2, 3], [1, 2]]), rtol=1e-6)


def test_rows_win_over_a_matrix_and_a_matrix_over_coordinates(tmp_path):
    """Lanes rows beat Lane costs, Lane costs beat coordinates; the same for distances."""
    case = read(tmp_path, placed=True, settings=RATE, lanes=[lane("A", "X", Unit_cost=5, Distance=7)],
                lane_costs=[[1, 2], [3, 4]], distances=[[10, 20], [None, 40]]).case
    assert case.lane_cost.tolist() == [[5, 2], [3, 4]]
    assert case.distance[0].tolist() == [7, 20]
    assert case.distance[1, 0] == pytest.approx(DEGREE * 1.2, rel=1e-6)
    assert case.distance[1, 1] == 40


def test_an_empty_cell_of_lane_costs_is_no_lane(tmp_path):
    """An empty cell is no lane even with a rate and coordinates; a row of Lanes for the pair makes one again."""
    case = read(tmp_path, placed=True, settings=RATE, lane_costs=[[1, None], [None, 4]],
                lanes=[lane("B", "X", Distance=50)]).case
    assert case.lane_cost[0].tolist() == [1, np.inf]
    np.testing.assert_allclose(case.lane_cost[1], [5.0, 4.0])


def test_pairs_outside_a_matrix_are_costed_from_coordinates_with_a_rate(tmp_path):
    """A customer without a column in Lane costs is not listed; with a rate its lanes come from coordinates."""
    sheets = site_sheets(SITES, CUSTOMERS, settings=RATE)
    sheets["Lane costs"] = [["Site", "X"], ["A", 1], ["B", 2]]
    case = read_sheets(tmp_path, sheets).case
    np.testing.assert_allclose(case.lane_cost, [[1, DEGREE * 0.36], [2, DEGREE * 0.24]], rtol=1e-6)


def test_an_empty_cell_of_distances_falls_back_to_coordinates(tmp_path):
    """A distance that is not given comes from the coordinates, where there is a rate."""
    case = read(tmp_path, placed=True, settings=RATE, distances=[[10, None], [30, 40]]).case
    np.testing.assert_allclose(case.lane_cost, [[1, DEGREE * 0.36], [3, 4]], rtol=1e-6)


def test_given_distances_are_costed_without_the_road_factor(tmp_path):
    """The road factor is for great-circle distances only."""
    case = read(tmp_path, settings=RATE, distances=[[10, 20], [30, None]]).case
    np.testing.assert_allclose(case.lane_cost, [[1, 2], [3, np.inf]])


def test_the_rate_is_per_unit_also_on_the_whole_demand_basis(tmp_path):
    """A lane costed by distance costs rate x distance x demand where costs are for the whole demand."""
    case = read(tmp_path, settings={**RATE, "Lane cost basis": "Whole demand"}, distances=[[10, 20], [30, 40]],
                lanes=[lane("A", "X", Unit_cost=5)]).case
    assert case.cost_is_whole
    np.testing.assert_allclose(case.lane_cost, [[5, 40], [30, 80]])


def test_a_lane_that_is_not_allowed_is_none(tmp_path):
    """Allowed = no beats a cost, a matrix and coordinates, and needs neither cost nor distance."""
    reading = read(tmp_path, placed=True, settings=RATE, lane_costs=[[1, 2], [3, 4]],
                   lanes=[lane("A", "X", Unit_cost=5, Allowed="no"), lane("B", "Y", Allowed=False)])
    assert errors(reading) == []
    assert reading.case.lane_cost.tolist() == [[np.inf, 2], [3, np.inf]]


def test_limits_of_lanes(tmp_path):
    """Most is unlimited where it is not given."""
    case = read(tmp_path, lane_costs=[[1, 2], [3, 4]], lanes=[lane("A", "X", Unit_cost=5, Most=7)]).case
    assert case.lane_most.tolist() == [[7, np.inf], [np.inf, np.inf]]
    assert read(tmp_path, lane_costs=[[1, 2], [3, 4]]).case.lane_most is None


def test_a_row_may_limit_a_lane_of_the_matrix(tmp_path):
    """A row with Most alone takes its cost from the matrix."""
    case = read(tmp_path, lane_costs=[[1, 2], [3, 4]], lanes=[
        {"Site": "A", "Customer": "X", "Unit cost": None, "Most": 7}]).case
    assert case.lane_cost[0, 0] == 1
    assert case.lane_most[0, 0] == 7


def test_a_row_with_neither_cost_nor_distance_is_an_error(tmp_path):
    """One of Unit cost and Distance has to be given."""
    reading = read(tmp_path, lanes=[lane("A", "X", Unit_cost=1, Distance=2), lane("A", "Y", Unit_cost=None)])
    assert errors(reading) == [("required cell empty", "Lanes", "C3")]


def test_lanes_need_one_of_cost_and_distance_as_a_title(tmp_path):
    """Without both columns the title row is incomplete, and the error names the alternatives."""
    reading = read(tmp_path, lane_costs=[[1, 2], [3, 4]], lanes=[lane("A", "X", Most=2)])
    assert errors(reading) == [("missing column", "Lanes", "A1")]
    assert "\u201cUnit cost\u201d or \u201cDistance\u201d" in reading.problems[0].expected


def test_a_distance_without_a_rate_is_no_cost(tmp_path):
    """A listed lane with a distance and no cost from anywhere is an error at the row."""
    reading = read(tmp_path, lanes=[lane("A", "X", Unit_cost=1, Distance=5), lane("A", "Y", Distance=5)])
    assert errors(reading) == [("cost not known", "Lanes", "C3")]


@pytest.mark.parametrize(("placed", "more", "kind", "sheet"), [
    (False, {}, "no lanes", "Lanes"),
    (True, {}, "no lane costs", "Settings"),
    (False, {"distances": [[1, 2], [3, 4]]}, "no lane costs", "Settings"),
    (False, {"settings": RATE}, "no lanes", "Lanes"),
])
def test_a_workbook_without_lanes_is_told_so(tmp_path, placed, more, kind, sheet):
    """Nothing that gives lanes, or nothing that gives their cost, is one error."""
    assert errors(read(tmp_path, placed=placed, **more)) == [(kind, sheet, "")]


def test_no_cost_per_unit_and_distance_is_reported_at_its_empty_cell(tmp_path):
    """Where Settings names the rate without a value, its value cell is at fault."""
    sheets = site_sheets(SITES, CUSTOMERS)
    sheets["Settings"].append(["Cost per unit and distance"])
    assert errors(read_sheets(tmp_path, sheets)) == [("no lane costs", "Settings", "B4")]


def test_a_bad_rate_has_no_consequences(tmp_path):
    """A rate that is no number is one error; the lanes that need it are none."""
    reading = read(tmp_path, lanes=[lane("A", "X", Unit_cost=None, Distance=5)],
                   settings={"Cost per unit and distance": "dear"})
    assert errors(reading) == [("number expected", "Settings", "B4")]


@pytest.mark.parametrize("rule", [
    {"settings": {"Longest distance": 9}},
    {"settings": {"Share within distance (%)": 50, "Distance for share": 9}},
    {"variants": [{"Variant": "near", "Longest distance": 9}]},
])
def test_a_distance_rule_over_a_lane_without_distance_is_an_error(tmp_path, rule):
    """Each rule that needs distances names the lanes that have none: rows by their own cell, matrix lanes too."""
    reading = read(tmp_path, lane_costs=[[1, 2], [3, None]], distances=[[5, None], [None, None]],
                   lanes=[lane("B", "X", Unit_cost=1, Distance=None)], **rule)
    assert sorted(errors(reading)) == [("distance not known", "Lane costs", "C2"),
                                       ("distance not known", "Lanes", "D2")]
    assert any("B – X" in p.found for p in reading.problems)
    assert any("A – Y" in p.found for p in reading.problems)


def test_a_promise_to_one_customer_needs_the_distances_of_its_lanes_only(tmp_path):
    """Longest distance in Customers asks for the distances of that customer."""
    customers = [{"Customer": "X", "Demand": 1, "Longest distance": 8}, {"Customer": "Y", "Demand": 1}]
    reading = read_sheets(tmp_path, site_sheets(bare(SITES), customers, lane_costs=[[1, 2], [3, 4]]))
    assert errors(reading) == [("distance not known", "Lane costs", "B2"), ("distance not known", "Lane costs", "B3")]


def test_a_bad_distance_is_not_reported_as_unknown(tmp_path):
    """A distance or coordinate at fault is one error, not two."""
    reading = read(tmp_path, lane_costs=[[1, 2], [3, 4]], distances=[[5, "far"], [6, 7]],
                   settings={"Longest distance": 9})
    assert errors(reading) == [("number expected", "Distances", "C2")]
    sites = [{**SITES[0], "Latitude": 95}, SITES[1]]
    reading = read_sheets(tmp_path, site_sheets(sites, CUSTOMERS, lane_costs=[[1, 2], [3, 4]],
                                                settings={"Longest distance": 900}))
    assert errors(reading) == [("number too large", "Sites", "C2")]


def test_distances_from_coordinates_serve_the_rules_without_a_rate(tmp_path):
    """Coordinates give the distances of lanes that have a cost of their own."""
    case = read(tmp_path, placed=True, lane_costs=[[1, 2], [3, 4]], settings={"Longest distance": 300}).case
    np.testing.assert_allclose(case.distance, DEGREE * np.array([[2, 3], [1, 2]]), rtol=1e-6)


def test_without_any_distance_there_is_none(tmp_path):
    """No source of distances: the case has no distances, and no road factor notice is given."""
    reading = read(tmp_path, lane_costs=[[1, 2], [3, 4]])
    assert reading.case.distance is None
    assert reading.road_cost is None
    assert notices(reading) == []


def test_the_rate_travels_beside_the_case(tmp_path):
    """The ledger is given the rate and the factor where lanes were costed by distance."""
    reading = read(tmp_path, placed=True, settings=RATE)
    assert (reading.road_cost, reading.road_factor) == (0.1, 1.2)


def test_columns_and_rows_of_a_matrix_are_checked(tmp_path):
    """Unknown codes, codes twice, totals and figures without codes are each told at their own cell."""
    sheets = site_sheets(bare(SITES), bare(CUSTOMERS))
    sheets["Lane costs"] = [
        ["Site", "X", "Z", "Y", "X", "Total"], ["A", 1, 1, 2, 9, 12], ["C", 1, 1, 2, 9, 12], ["B", 3, 3, 4, 9, 16],
        [None, 1, 1, 1, 1, 1], ["A", 1, 1, 1, 1, 1], ["Sum", 1, 1, 1, 1, 1]]
    assert errors(read_sheets(tmp_path, sheets)) == [
        ("unknown code", "Lane costs", "C1"), ("duplicate code", "Lane costs", "E1"),
        ("totals row", "Lane costs", "F1"),
        ("unknown code", "Lane costs", "A3"), ("required cell empty", "Lane costs", "A5"),
        ("duplicate code", "Lane costs", "A6"), ("totals row", "Lane costs", "A7")]


def test_figures_above_which_no_code_stands_are_an_error(tmp_path):
    """A column of figures beside the titled ones is not lost silently; notes farther right are left alone."""
    sheets = site_sheets(bare(SITES), bare(CUSTOMERS))
    sheets["Lane costs"] = [["Site", "X"], ["A", 1, 2, None, 7], ["B", 3, 4, None, "note"]]
    assert errors(read_sheets(tmp_path, sheets)) == [("required cell empty", "Lane costs", "C1")]


def test_names_and_notes_beside_a_matrix_are_left_alone(tmp_path):
    """Words under an unknown title, and words in a row below, are no data."""
    sheets = site_sheets(bare(SITES), bare(CUSTOMERS))
    sheets["Lane costs"] = [["Site", "X", "Y", "Remark"], ["A", 1, 2, None], ["B", 3, 4, None], [None],
                            ["Source: ERP"]]
    reading = read_sheets(tmp_path, sheets)
    assert errors(reading) == []
    assert reading.case.lane_cost.tolist() == [[1, 2], [3, 4]]
