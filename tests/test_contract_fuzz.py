"""Whatever stands in a workbook's cells, it is answered: a case or errors, never a crash."""

import datetime
import re

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.books import Formula, Percent, lot_sheets, read_sheets, site_sheets

ADDRESS = re.compile(r"[A-Z]{1,3}[1-9][0-9]*|")
VALUES = st.one_of(
    st.none(), st.booleans(), st.integers(-10, 10), st.floats(-1e13, 1e13), st.text(max_size=8),
    st.sampled_from([
        "A", "B", "7", 7.0, "X", "Y", "yes", "open", "1,5", "1.200", "Total", "Site", "Customer", "Demand", "Item",
        "Period", "site selection", "lot sizing", "Job", "Value", "Capacity", "W1", datetime.date(2026, 1, 5),
        Formula("=A1"), Formula("=NA()", "#N/A"), Formula("=1", 1.0), Percent(0.2), "x" * 300, "=1+1", 1e12, -1e12,
        1e-300,
    ]),
)


def site_start() -> dict[str, list[list[object]]]:
    """Give a right site-selection workbook that uses every sheet."""
    sites = [{"Site": code, "Fixed cost": 10, "Capacity": 50, "Rule": "free", "Today": "yes", "Group": None,
              "Latitude": 50 + k, "Longitude": 8 + k} for k, code in enumerate("AB7")]
    customers = [{"Customer": code, "Demand": 5, "Longest distance": None, "Latitude": 51, "Longitude": 9 + k}
                 for k, code in enumerate("XYZ")]
    return site_sheets(
        sites, customers, lanes=[{"Site": "A", "Customer": "X", "Unit cost": 4, "Distance": 9, "Most": 5}],
        lane_costs=[[1, 2, 3]] * 3, distances=[[1, 2, 3]] * 3,
        variants=[{"Variant": "v", "Demand factor": 0.9, "Longest distance": 90, "Open": "A,7", "Closed": "B"}],
        settings={"Longest distance": 500, "Cost per unit and distance": 0.1, "Share within distance (%)": 50,
                  "Distance for share": 5})


def lot_start() -> dict[str, list[list[object]]]:
    """Give a right lot-sizing workbook that uses every sheet."""
    items = [{"Item": code, "Setup cost": 10, "Holding cost": None, "Unit value": 5, "Least lot": 1, "Most lot": 99,
              "Lot multiple": 2, "Resource": "M", "Setup time": 1, "Family": "F"} for code in "AB7"]
    return lot_sheets(
        items, [[1, 2]] * 3, periods=[{"Period": f"W{t}", "Start": datetime.date(2026, 1, 5 * t)} for t in (1, 2)],
        resources=[{"Resource": "M", "Capacity": 9}], capacity=[[8, 9]], families=[{"Family": "F", "Setup cost": 1}],
        period_costs=[{"Item": "A", "Period": "W1", "Setup cost": 3}], today_plan=[[1, 1]] * 3,
        receipts=[{"Item": "A", "Period": "W2", "Quantity": 3}],
        settings={"Yearly holding rate (%)": 20, "Periods a year": 52})


@st.composite
def mutated(draw, start: dict[str, list[list[object]]]) -> dict[str, list[list[object]]]:
    """Change, add and take out some cells, rows and sheets of a right workbook."""
    sheets = {name: [list(row) for row in rows] for name, rows in start.items()}
    for _ in range(draw(st.integers(1, 6))):
        name = draw(st.sampled_from(sorted(sheets)))
        rows = sheets[name]
        kind = draw(st.sampled_from(["cell"] * 6 + ["drop row", "drop sheet", "repeat row", "heading", "rename"]))
        row = draw(st.integers(0, len(rows) + 1))
        if kind == "cell":
            column = draw(st.integers(0, 9))
            rows += [[] for _ in range(row + 1 - len(rows))]
            rows[row] += [None] * (column + 1 - len(rows[row]))
            rows[row][column] = draw(VALUES)
        elif kind == "drop row" and row < len(rows):
            del rows[row]
        elif kind == "repeat row" and row < len(rows):
            rows.append(list(rows[row]))
        elif kind == "heading":
            rows[:0] = [[draw(VALUES)], [None]] * draw(st.integers(1, 16))
        elif kind == "drop sheet" and len(sheets) > 1:
            del sheets[name]
        elif kind == "rename" and len(sheets) > 1:
            sheets[f"{name[:-1]}q"] = sheets.pop(name)
    return sheets


def answered(tmp_path_factory, sheets: dict[str, list[list[object]]]) -> None:
    """Assert that a workbook gives a case or errors, all of them with words and a right address."""
    reading = read_sheets(tmp_path_factory.mktemp("fuzz"), sheets)
    assert (reading.case is None) == any(p.is_error for p in reading.problems)
    for problem in reading.problems:
        assert ADDRESS.fullmatch(problem.cell)
        assert problem.found and problem.expected and problem.remedy and problem.kind
        assert problem.count >= 1 + len(problem.more)


@pytest.mark.parametrize("start", [site_start, lot_start])
def test_the_start_is_right(tmp_path, start):
    """The workbooks that are mutated have no errors themselves."""
    assert not any(p.is_error for p in read_sheets(tmp_path, start()).problems)


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large])
@given(data=st.data())
def test_a_mutated_site_workbook_is_answered(tmp_path_factory, data):
    """Any change of cells, rows and sheets gives an answer."""
    answered(tmp_path_factory, data.draw(mutated(site_start())))


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large])
@given(data=st.data())
def test_a_mutated_lot_workbook_is_answered(tmp_path_factory, data):
    """Any change of cells, rows and sheets gives an answer."""
    answered(tmp_path_factory, data.draw(mutated(lot_start())))


@pytest.mark.long
@pytest.mark.timeout(3600)
@settings(max_examples=3000, deadline=None, suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large])
@given(data=st.data(), start=st.sampled_from([site_start, lot_start]))
def test_many_mutated_workbooks_are_answered(tmp_path_factory, data, start):
    """The long form: three thousand of both jobs."""
    answered(tmp_path_factory, data.draw(mutated(start())))
