"""Checks across the sheets of a lot-sizing workbook."""

import datetime

import numpy as np
import pytest

from tests.books import errors, lot_sheets, read_sheets

ITEMS = [{"Item": "A", "Setup cost": 10, "Holding cost": 1}, {"Item": "B", "Setup cost": 20, "Holding cost": 2}]
DEMAND = [[1, 2, 3], [4, 5, None]]


def read(tmp_path, items=ITEMS, demand=DEMAND, **more):
    """Read a workbook of two items and three periods."""
    return read_sheets(tmp_path, lot_sheets(items, demand, **more))


def with_column(rows: list[dict[str, object]], title: str, values: list[object]) -> list[dict[str, object]]:
    """Give rows with one more column."""
    return [{**row, title: value} for row, value in zip(rows, values, strict=True)]


def test_defaults_of_items(tmp_path):
    """Every optional column takes the contract's default; an empty demand is 0."""
    case = read(tmp_path).case
    assert case.demand.tolist() == [[1, 2, 3], [4, 5, 0]]
    assert (case.item_names, case.units) == (("A", "B"), ("unit", "unit"))
    for zero in (case.unit_cost, case.receipts, case.opening_stock, case.safety_stock, case.closing_stock,
                 case.least_lot,
                 case.lot_multiple, case.time_per_unit, case.setup_time):
        assert not zero.any()
    for unlimited in (case.most_stock, case.most_lot):
        assert np.isinf(unlimited).all()
    for none in (case.backlog_cost, case.lost_cost):
        assert np.isnan(none).all()
    assert case.item_resource.tolist() == case.item_family.tolist() == [-1, -1]
    assert case.setup_allowed.all()
    assert case.capacity.shape == (0, 3)
    assert case.today is None
    assert not case.compare_today


def test_closing_stock_is_the_safety_stock_where_it_is_not_given(tmp_path):
    """An empty Closing stock takes the safety stock; 0 is 0."""
    items = with_column(with_column(ITEMS, "Safety stock", [5, 6]), "Closing stock", [None, 0])
    assert read(tmp_path, items=items).case.closing_stock.tolist() == [5, 0]


def test_holding_cost_comes_from_the_yearly_rate(tmp_path):
    """Rate x value / periods a year, for items without a holding cost of their own."""
    items = with_column(with_column(ITEMS, "Holding cost", [None, 2]), "Unit value", [52, 1000])
    case = read(tmp_path, items=items, settings={"Yearly holding rate (%)": 20, "Periods a year": 52}).case
    np.testing.assert_allclose(case.holding_cost, [[0.2] * 3, [2] * 3])


@pytest.mark.parametrize(("settings", "value", "expected"), [
    ({}, 52, [("holding cost not known", "Items", "C2")]),
    ({"Yearly holding rate (%)": 20}, 52, [("half a rule", "Settings", "B4")]),
    ({"Yearly holding rate (%)": 20, "Periods a year": 52}, None, [("holding cost not known", "Items", "D2")]),
    ({"Yearly holding rate (%)": 20, "Periods a year": 0}, 52, [("number too small", "Settings", "B5")]),
    ({"Yearly holding rate (%)": "much"}, 52, [("number expected", "Settings", "B4")]),
])
def test_a_missing_holding_cost_is_told_by_its_missing_part(tmp_path, settings, value, expected):
    """Whichever of cost, rate, periods and value is missing is the fault, and only that."""
    items = with_column(with_column(ITEMS, "Holding cost", [None, 2]), "Unit value", [value, None])
    assert errors(read(tmp_path, items=items, settings=settings)) == expected


def test_holding_costs_in_period_costs_are_enough(tmp_path):
    """An item whose holding cost is given for every period needs none of its own."""
    items = with_column(ITEMS, "Holding cost", [None, 2])
    costs = [{"Item": "A", "Period": t, "Holding cost": t} for t in (1, 2, 3)]
    assert read(tmp_path, items=items, period_costs=costs).case.holding_cost[0].tolist() == [1, 2, 3]
    assert errors(read(tmp_path, items=items, period_costs=costs[:2])) == [("holding cost not known", "Items", "C2")]


def test_period_costs_replace_only_what_they_give(tmp_path):
    """An empty cell of Period costs leaves the item's figure; setups may be forbidden."""
    items = with_column(ITEMS, "Unit cost", [3, 4])
    case = read(tmp_path, items=items, period_costs=[
        {"Item": "A", "Period": 2, "Setup cost": 99, "Unit cost": None, "Holding cost": 0,
         "Setup allowed": "no"}]).case
    assert case.setup_cost.tolist() == [[10, 99, 10], [20, 20, 20]]
    assert case.unit_cost.tolist() == [[3] * 3, [4] * 3]
    assert case.holding_cost.tolist() == [[1, 0, 1], [2] * 3]
    assert case.setup_allowed.tolist() == [[True, False, True], [True] * 3]


def test_receipts_arrive_in_their_period(tmp_path):
    """Receipts are a row an item and period; a pair twice is an error."""
    rows = [{"Item": "B", "Period": 2, "Quantity": 7}]
    assert read(tmp_path, receipts=rows).case.receipts.tolist() == [[0, 0, 0], [0, 7, 0]]
    assert errors(read(tmp_path, receipts=rows * 2)) == [("duplicate pair", "Receipts", "A3")]


def test_resources_and_families(tmp_path):
    """Resources, families and their defaults reach the case by number."""
    items = with_column(with_column(ITEMS, "Resource", ["M2", None]), "Family", [None, "F"])
    case = read(tmp_path, items=items, resources=[
        {"Resource": "M1", "Capacity": 10, "Overtime limit": 2, "Overtime cost": 3, "Use cost": 4},
        {"Resource": "M2", "Capacity": 20}], families=[{"Family": "F", "Setup cost": 9, "Setup time": 1,
                                                        "Resource": "M1"}],
    ).case
    assert case.capacity.tolist() == [[10] * 3, [20] * 3]
    assert (case.overtime_limit.tolist(), case.overtime_cost.tolist(), case.use_cost.tolist()) == ([2, 0], [3, 0],
                                                                                                   [4, 0])
    assert (case.item_resource.tolist(), case.item_family.tolist()) == ([1, -1], [-1, 0])
    assert (case.family_cost.tolist(), case.family_time.tolist(), case.family_resource.tolist()) == ([9], [1], [0])


def test_capacity_by_period_wins_over_the_one_figure(tmp_path):
    """The matrix stands in place of the figure; its empty cells take the figure."""
    resources = [{"Resource": "M1", "Capacity": 10}, {"Resource": "M2", "Capacity": None}]
    case = read(tmp_path, resources=resources, capacity=[[1, None, 3], [4, 5, 6]]).case
    assert case.capacity.tolist() == [[1, 10, 3], [4, 5, 6]]


def test_a_capacity_that_nothing_gives_is_an_error(tmp_path):
    """A hole in the matrix without the one figure, and no figure without a matrix, are errors."""
    resources = [{"Resource": "M1", "Capacity": None}]
    assert errors(read(tmp_path, resources=resources, capacity=[[1, None, 3]])) == [
        ("required cell empty", "Resources", "B2")]
    assert errors(read(tmp_path, resources=resources)) == [("required cell empty", "Resources", "B2")]
    assert errors(read(tmp_path, resources=[{"Resource": "M1", "Use cost": 1}])) == [("missing column", "Resources",
                                                                                      "A1")]
    assert errors(read(tmp_path, resources=[{"Resource": "M1", "Use cost": 1}], capacity=[[1, 2, 3]])) == []


@pytest.mark.parametrize(("column", "value", "kind"), [
    ("Resource", "M1", "missing sheet"), ("Family", "F1", "missing sheet"),
    ("Setup time", 1, "time without resource"),
    ("Time per unit", 0.5, "time without resource"), ("Opening stock", -1, "negative number"),
    ("Lot multiple", 0, "number too small"), ("Backlog cost", -1, "negative number"),
])
def test_faults_of_items(tmp_path, column, value, kind):
    """Codes of sheets that are not there, times nobody provides, and wrong figures are errors of the item."""
    assert errors(read(tmp_path, items=with_column(ITEMS, column, [value, None]))) == [(kind, "Items", "D2")]


@pytest.mark.parametrize(("rules", "cell"), [
    ({"Least lot": 5, "Most lot": 4}, "D2"), ({"Most lot": 3, "Lot multiple": 4}, "E2"),
    ({"Least lot": 5, "Most lot": 7, "Lot multiple": 4}, "F2"), ({"Safety stock": 5, "Most stock": 4}, "D2"),
    ({"Closing stock": 5, "Most stock": 4}, "D2"),
])
def test_rules_of_lots_and_stock_that_conflict(tmp_path, rules, cell):
    """Rules that no lot, or no stock, can meet are errors."""
    items = [{**ITEMS[0], **rules}, ITEMS[1]]
    assert errors(read(tmp_path, items=items)) == [("rules conflict", "Items", cell)]


@pytest.mark.parametrize("rules", [
    {"Least lot": 5, "Most lot": 5}, {"Least lot": 5, "Most lot": 8, "Lot multiple": 4},
    {"Least lot": 0.3, "Most lot": 0.3, "Lot multiple": 0.1}, {"Most lot": 4, "Lot multiple": 4},
    {"Safety stock": 5, "Most stock": 5},
])
def test_rules_that_just_fit_are_right(tmp_path, rules):
    """A single lot that fits is enough, rounding forgiven."""
    assert errors(read(tmp_path, items=[{**ITEMS[0], **rules}, ITEMS[1]])) == []


def test_a_family_time_needs_a_resource(tmp_path):
    """A family's setup time without a resource would load nothing: it is refused."""
    items = with_column(ITEMS, "Family", ["F", None])
    families = [{"Family": "F", "Setup cost": 1, "Setup time": 2}]
    assert errors(read(tmp_path, items=items, families=families)) == [("time without resource", "Families", "C2")]


def test_late_deliveries(tmp_path):
    """Backlog costs count only where late deliveries are allowed."""
    items = with_column(ITEMS, "Backlog cost", [3, None])
    late = read(tmp_path, items=items, settings={"Late deliveries": "yes"}).case
    np.testing.assert_array_equal(late.backlog_cost, [3, np.nan])
    assert np.isnan(read(tmp_path, items=items).case.backlog_cost).all()


@pytest.mark.parametrize(("given", "plan", "used"), [
    (None, [[1, 2, 3], [4, 5, 6]], True), ("no", [[1, 2, 3], [4, 5, 6]], False), (None, None, False),
    ("yes", [[None, 2, 3], [4, 5, 6]], True),
])
def test_today_is_compared_where_its_plan_is_filled(tmp_path, given, plan, used):
    """Compare with today is yes by default if Today plan is filled; empty cells of it are 0."""
    case = read(tmp_path, today_plan=plan, settings={"Compare with today": given}).case
    assert case.compare_today is used
    assert plan is None or case.today[0, 0] == (plan[0][0] or 0)


def test_a_comparison_with_nothing_is_refused(tmp_path):
    """Compare with today = yes needs the sheet."""
    assert errors(read(tmp_path, settings={"Compare with today": "yes"})) == [("nothing to compare", "Settings",
                                                                               "B4")]


def test_periods_are_in_order_of_their_start(tmp_path):
    """A start that is not after the one before is an error; gaps are none."""
    days = [datetime.date(2026, 1, 5), None, datetime.date(2026, 1, 5)]
    periods = [{"Period": t + 1, "Start": day} for t, day in enumerate(days)]
    assert errors(read(tmp_path, periods=periods)) == [("periods out of order", "Periods", "B4")]
    periods[2]["Start"] = datetime.date(2026, 1, 6)
    assert read(tmp_path, periods=periods).case.period_starts == ("2026-01-05", "", "2026-01-06")


@pytest.mark.parametrize("sheet", ["Periods", "Items", "Demand"])
def test_required_sheets(tmp_path, sheet):
    """Each required sheet that is missing is exactly one error."""
    sheets = lot_sheets(ITEMS, DEMAND)
    del sheets[sheet]
    assert errors(read_sheets(tmp_path, sheets)) == [("missing sheet", sheet, "")]


def test_a_demand_without_figures_is_an_error(tmp_path):
    """A Demand sheet with codes and nothing between them says so."""
    assert errors(read(tmp_path, demand=[[None] * 3] * 2)) == [("empty matrix", "Demand", "")]
