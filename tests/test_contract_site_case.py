"""Checks across the sheets of a site-selection workbook."""

import numpy as np
import pytest

from tests.books import errors, read_sheets, site_sheets

SITES = [{"Site": "A", "Fixed cost": 1}, {"Site": "B", "Fixed cost": 2}, {"Site": "7", "Fixed cost": 3}]
CUSTOMERS = [{"Customer": "X", "Demand": 10}, {"Customer": "Y", "Demand": 20}]
COSTS = [[1, 2], [3, 4], [5, 6]]


def read(tmp_path, sites=SITES, customers=CUSTOMERS, **more):
    """Read a workbook of three sites and two customers."""
    return read_sheets(tmp_path, site_sheets(sites, customers, **{"lane_costs": COSTS, **more}))


def with_column(rows: list[dict[str, object]], title: str, values: list[object]) -> list[dict[str, object]]:
    """Give rows with one more column."""
    return [{**row, title: value} for row, value in zip(rows, values, strict=True)]


def test_every_setting_reaches_the_case(tmp_path):
    """Each setting of the contract changes the case as it says."""
    case = read(tmp_path, distances=COSTS, settings={
        "Title": "North", "Currency": "SEK", "Demand unit": "pallet", "Period covered": "month",
        "Lane cost basis": "whole demand", "Distance unit": "mi", "Fewest sites": 1, "Most sites": 2.0,
        "Longest distance": 99, "Share within distance (%)": 80, "Distance for share": 50, "Single sourcing": 1,
        "Unmet demand cost": 12,
    }).case
    assert (case.title, case.currency, case.demand_unit, case.period_covered) == ("North", "SEK", "pallet", "month")
    assert (case.cost_is_whole, case.distance_unit) == (True, "mi")
    assert (case.fewest_sites, case.most_sites, case.longest_distance) == (1, 2, 99)
    assert (case.share_within, case.share_distance, case.unmet_cost) == (0.8, 50, 12)
    assert case.single_source.all()


def test_defaults_of_settings(tmp_path):
    """Settings that are not given leave the rules out."""
    case = read(tmp_path).case
    assert (case.title, case.demand_unit, case.period_covered, case.distance_unit) == ("book", "unit", "year", "km")
    assert not case.cost_is_whole
    for value in (case.fewest_sites, case.most_sites, case.longest_distance, case.share_within, case.share_distance,
                  case.unmet_cost, case.distance, case.lane_most):
        assert value is None
    assert not case.single_source.any()
    assert case.variants == ()


def test_variants_change_only_what_they_name(tmp_path):
    """Codes with commas or semicolons, numbers as codes, and defaults of factors."""
    case = read(tmp_path, distances=COSTS, variants=[
        {"Variant": "low", "Demand factor": 0.9, "Open": "A, 7.0", "Closed": "B"},
        {"Variant": "dear", "Lane cost factor": 1.5, "Fixed cost factor": 2, "Fewest sites": 1, "Most sites": 2,
         "Longest distance": 8, "Open": 7},
        {"Variant": "plain", "Closed": "A;B"},
    ]).case
    low, dear, plain = case.variants
    assert (low.demand_factor, low.lane_cost_factor, low.fixed_cost_factor) == (0.9, 1, 1)
    assert (low.open, low.closed, low.longest_distance) == (("A", "7"), ("B",), None)
    assert (dear.lane_cost_factor, dear.fixed_cost_factor, dear.fewest_sites, dear.most_sites) == (1.5, 2, 1, 2)
    assert (dear.longest_distance, dear.open) == (8, ("7",))
    assert (plain.open, plain.closed) == ((), ("A", "B"))


@pytest.mark.parametrize(("variant", "kind", "cell"), [
    ({"Open": "A, C"}, "unknown code", "B2"),
    ({"Open": "A", "Closed": "B, A"}, "rules conflict", "C2"),
    ({"Fewest sites": 3, "Most sites": 2}, "rules conflict", "B2"),
    ({"Most sites": 0.5}, "whole number expected", "B2"),
    ({"Demand factor": -1}, "negative number", "B2"),
    ({"Longest distance": "x"}, "number expected", "B2"),
])
def test_faults_of_variants(tmp_path, variant, kind, cell):
    """Unknown sites, a site both open and closed, and counts that conflict are errors."""
    assert errors(read(tmp_path, variants=[{"Variant": "v", **variant}])) == [(kind, "Variants", cell)]


def test_a_variants_count_may_conflict_with_the_settings(tmp_path):
    """Most sites of a variant below Fewest sites of the settings is an error of the variant."""
    reading = read(tmp_path, settings={"Fewest sites": 3}, variants=[{"Variant": "v", "Most sites": 2}])
    assert errors(reading) == [("rules conflict", "Variants", "B2")]


def test_variants_are_named_once(tmp_path):
    """Two variants of one name could not be told apart."""
    reading = read(tmp_path, variants=[{"Variant": "v", "Demand factor": 1}, {"Variant": "v", "Demand factor": 2}])
    assert errors(reading) == [("duplicate code", "Variants", "A3")]


def test_two_open_sites_of_a_group_conflict(tmp_path):
    """A group opens at most one site: two with the rule open, or two in a variant, are errors."""
    grouped = with_column(SITES, "Group", ["g", "g", None])
    opened = with_column(grouped, "Rule", ["open", "open", "open"])
    assert errors(read(tmp_path, sites=opened)) == [("rules conflict", "Sites", "D3")]
    assert errors(read(tmp_path, sites=grouped, variants=[{"Variant": "v", "Open": "A,B"}])) == [
        ("rules conflict", "Variants", "B2")]


def test_group_names_that_are_alike_are_an_error(tmp_path):
    """Two names of a group that differ in case only are nearly always one group."""
    reading = read(tmp_path, sites=with_column(SITES, "Group", ["Rhine", None, "rhine"]))
    assert errors(reading) == [("codes alike", "Sites", "C4")]


def test_a_least_volume_above_the_capacity_conflicts(tmp_path):
    """A site that could never hold what it has to is an error at its Least volume."""
    sites = with_column(with_column(SITES, "Capacity", [5, None, 5]), "Least volume", [6, 100, 5])
    assert errors(read(tmp_path, sites=sites)) == [("rules conflict", "Sites", "D2")]


def test_counts_of_sites_that_conflict(tmp_path):
    """Fewest sites above Most sites is one error in Settings."""
    assert errors(read(tmp_path, settings={"Fewest sites": 3, "Most sites": 2})) == [("rules conflict", "Settings",
                                                                                      "B4")]


@pytest.mark.parametrize("given", [{"Share within distance (%)": 80}, {"Distance for share": 50}])
def test_half_a_share_rule_is_refused(tmp_path, given):
    """Share and distance belong together: one without the other is not silently dropped."""
    assert errors(read(tmp_path, distances=COSTS, settings=given)) == [("half a rule", "Settings", "B4")]


def test_a_comparison_with_nothing_is_refused(tmp_path):
    """Compare with today = yes needs a site in use today."""
    assert errors(read(tmp_path, settings={"Compare with today": "yes"})) == [("nothing to compare", "Settings",
                                                                               "B4")]
    today = with_column(SITES, "Today", ["no", "yes", None])
    assert read(tmp_path, sites=today, settings={"Compare with today": "yes"}).case.compare_today


def test_half_a_coordinate_is_an_error(tmp_path):
    """A latitude without a longitude, and the other way round, is reported at the empty cell."""
    sites = with_column(with_column(SITES, "Latitude", [50, None, None]), "Longitude", [None, 8, None])
    assert errors(read(tmp_path, sites=sites)) == [("half a coordinate", "Sites", "D2"),
                                                   ("half a coordinate", "Sites", "C3")]


def test_coordinates_travel_with_the_case(tmp_path):
    """Places are kept for maps, NaN where a place has none."""
    sites = with_column(with_column(SITES, "Latitude", [50, 51, None]), "Longitude", [7, 8, None])
    customers = with_column(with_column(CUSTOMERS, "Latitude", [50, 51]), "Longitude", [9, 9])
    case = read(tmp_path, sites=sites, customers=customers).case
    np.testing.assert_array_equal(case.site_latitude, [50, 51, np.nan])
    np.testing.assert_array_equal(case.customer_longitude, [9, 9])


def test_order_of_rows_and_columns_does_not_matter(tmp_path):
    """The same rows in another order give the same figures by code."""
    one = read(tmp_path).case
    sheets = site_sheets(SITES[::-1], CUSTOMERS[::-1])
    sheets["Lane costs"] = [["Site", "Y", "X"], ["B", 4, 3], ["7", 6, 5], ["A", 2, 1]]
    other = read_sheets(tmp_path, sheets).case
    assert other.sites == one.sites[::-1]
    np.testing.assert_array_equal(other.lane_cost, one.lane_cost[::-1, ::-1])
