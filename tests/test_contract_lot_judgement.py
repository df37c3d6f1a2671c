"""Suspicious inputs of a lot-sizing workbook."""

import pytest

from tests.books import lot_sheets, notices, read_sheets

ITEMS = [{"Item": f"I{k}", "Setup cost": 100 + k, "Holding cost": 1} for k in range(6)]
DEMAND = [[10 + k + t for t in range(6)] for k in range(6)]


def read(tmp_path, items=ITEMS, demand=DEMAND, **more):
    """Read a workbook of six items and six periods."""
    return read_sheets(tmp_path, lot_sheets(items, demand, **more))


def changed(number: int, **values: object) -> list[dict[str, object]]:
    """Give the items with one changed."""
    return [{**row, **values} if k == number else row for k, row in enumerate(ITEMS)]


def test_a_right_workbook_gives_no_notice(tmp_path):
    """Nothing is said where nothing is odd."""
    assert notices(read(tmp_path)) == []


@pytest.mark.parametrize(("rate", "kind"), [
    (0.2, "percent or fraction"), (1.7, "unusual yearly rate"), (90, "unusual yearly rate"), (20, None), (5, None)])
def test_yearly_rates_are_judged(tmp_path, rate, kind):
    """Rates outside 5 to 60 % a year look like fractions or monthly rates (ECO-04: 20 to 35 % is quoted)."""
    items = [{"Item": f"I{k}", "Setup cost": 100, "Unit value": 9} for k in range(6)]
    reading = read(tmp_path, items=items, settings={"Yearly holding rate (%)": rate, "Periods a year": 12})
    assert notices(reading) == ([] if kind is None else [(kind, "Settings", "B4")])


def test_a_monthly_looking_rate_says_so(tmp_path):
    """1.7 % is what a month costs."""
    items = [{"Item": f"I{k}", "Setup cost": 100, "Unit value": 9} for k in range(6)]
    reading = read(tmp_path, items=items, settings={"Yearly holding rate (%)": 1.7, "Periods a year": 12})
    assert "monthly" in reading.problems[0].found


def test_an_item_without_demand_is_noticed(tmp_path):
    """An item that nobody wants is named, whether its row is empty or not there."""
    demand = [*DEMAND[:2], [0] * 6, *DEMAND[3:]]
    assert notices(read(tmp_path, demand=demand)) == [("item without demand", "Items", "A4")]
    sheets = lot_sheets(ITEMS, DEMAND)
    del sheets["Demand"][5]
    assert notices(read_sheets(tmp_path, sheets)) == [("item without demand", "Items", "A6")]


def test_a_demand_a_hundred_times_off_is_noticed(tmp_path):
    """A slip of the decimal sign in one demand is named by its cell."""
    demand = [list(row) for row in DEMAND]
    demand[1][2] = 1500
    assert notices(read(tmp_path, demand=demand)) == [("figure far off", "Demand", "D3")]


def test_costs_far_off_are_noticed(tmp_path):
    """A setup cost of a hundred times the middle one, and a holding cost above the value."""
    assert notices(read(tmp_path, items=changed(2, **{"Setup cost": 20000}))) == [("figure far off", "Items", "B4")]
    reading = read(tmp_path, items=changed(2, **{"Unit value": 0.5}))
    assert notices(reading) == [("figure far off", "Items", "C4")]


def test_backlog_costs_without_late_deliveries_are_noticed(tmp_path):
    """A backlog cost that has no effect is said, and so is a permission that no item uses."""
    assert notices(read(tmp_path, items=changed(2, **{"Backlog cost": 3}))) == [("not used", "Items", "D4")]
    assert notices(read(tmp_path, settings={"Late deliveries": "yes"})) == [("not used", "Settings", "B4")]
    assert notices(read(tmp_path, items=changed(2, **{"Backlog cost": 3}), settings={"Late deliveries": "yes"})) == []


@pytest.mark.parametrize(("codes", "cell"), [
    ([1, 2, 3, 4, 6, 5], "A7"), (["2026-W53", "2027-W01", "2026-W52", "a", "b", "c"], None),
    (["2026-W51", "2026-W52", "2026-W53", "2027-W01", "2027-W02", "2027-W03"], None),
    (["2026-10", "2026-11", "2026-12", "2026-01", "2026-02", "2026-03"], "A5"), ([1, 2, 3, 10, 11, 12], None),
])
def test_periods_out_of_order_by_their_codes_are_noticed(tmp_path, codes, cell):
    """Numbers, months and ISO weeks have an order; weeks over New Year keep it (check case GEO-07)."""
    reading = read(tmp_path, periods=[{"Period": code} for code in codes])
    assert notices(reading) == ([] if cell is None else [("periods out of order", "Periods", cell)])


def test_capacities_that_never_bind_are_noticed(tmp_path):
    """A resource that could make everything in any one period is asked about."""
    items = [{**row, "Resource": "M", "Time per unit": 1, "Setup time": 2} for row in ITEMS]
    total = sum(map(sum, DEMAND)) + 12
    assert notices(read(tmp_path, items=items, resources=[{"Resource": "M", "Capacity": total}])) == [
        ("capacity never binds", "Resources", "B2")]
    assert notices(read(tmp_path, items=items, resources=[{"Resource": "M", "Capacity": total - 1}])) == []
