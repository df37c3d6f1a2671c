"""The proof of a site-selection plan in its sheet: every rule that can raise the bound does, and says how."""

from pathlib import Path

import numpy as np
import openpyxl
import pytest
from openpyxl.worksheet.worksheet import Worksheet

from ledgersolve.report.certificate import SHARE_BACK, certify
from ledgersolve.site_selection.bound import price_bound
from ledgersolve.site_selection.case import plain_case
from ledgersolve.site_selection.lanes import Lanes
from tests import books, report_cases
from tests.recalculation import OFFICE, differences, recalculated_all
from tests.report_books import returned, site_report
from tests.site_reference import brute_force
from tests.site_strategies import FEATURES, random_case

needs_office = pytest.mark.skipif(OFFICE is None, reason="LibreOffice is not installed")
WHOLE_CASES = 150


@pytest.mark.parametrize("seed", range(WHOLE_CASES))
def test_no_plan_undercuts_the_sheet(seed: int) -> None:
    """Any prices, any mix of all features: what the sheet shows stays at or below the best plan by trying all."""
    rng = np.random.default_rng([21, seed])
    case = random_case(rng, int(rng.integers(1, 5)), int(rng.integers(1, 5)),
                       {name for name in FEATURES if rng.random() < 0.45})
    best, lanes = brute_force(case), Lanes.of(case)
    for low, high in ((-40, 60), (0, 15), (0, 80)):
        bound = certify(case, lanes, rng.uniform(low, high, case.n)).bound
        assert np.isinf(best) or bound <= best + 1e-6 * (1 + abs(best))


@pytest.mark.parametrize("seed", range(60))
def test_nothing_is_lost_by_writing_it_out(seed: int) -> None:
    """Share rule, volumes and limits: the sheet reaches the program's own bound at the same prices."""
    rng = np.random.default_rng([22, seed])
    chosen = {"share within", *(name for name in FEATURES if name != "groups" and rng.random() < 0.4)}
    case = random_case(rng, 4, 5, chosen)
    prices = rng.uniform(-20, 60, case.n)
    engine = price_bound(case, prices)
    if np.isfinite(engine):
        assert certify(case, Lanes.of(case), prices).bound >= engine - 1e-5 * (1 + abs(engine))


def test_a_least_volume_has_a_price_below_nothing() -> None:
    """By hand: 4 units each, lost 2 and 4; 6 must go: the price is the loss a unit of the last one, 1, times 6.

    Then 4 x (1 - 1/2) = 2 is gained on the first and nothing on the second: the site costs 1 + 6 - 2 = 5.
    """
    case = plain_case([1.0], [[12.0, 14.0]], [4.0, 4.0], cost_is_whole=True, least_volume=np.array([6.0]))
    certificate = certify(case, Lanes.of(case), np.array([10.0, 10.0]))
    assert (certificate.volume_price[0], certificate.volume[0], certificate.gain[0]) == (-1.0, 6.0, 2.0)
    assert certificate.fixed[0] - certificate.volume[0] * certificate.volume_price[0] - certificate.gain[0] == 5.0


def share_book(path: Path, **how: object) -> Path:
    """Sites from coordinates alone with a share rule that costs something: the cheap site is far away."""
    rng = np.random.default_rng(4)
    sites = [{"Site": f"S{j}", "Fixed cost": fixed, "Least volume": least, "Latitude": 50.0, "Longitude": longitude}
             for j, (fixed, least, longitude) in enumerate(
                 ((900.0, None, 7.0), (150.0, 60.0, 9.0), (1000.0, None, 8.0)))]
    customers = [{"Customer": f"C{i}", "Demand": float(rng.integers(10, 30)),
                  "Latitude": 50.0 + rng.uniform(-0.3, 0.3), "Longitude": 7.0 + rng.uniform(0, 1.2)}
                 for i in range(10)]
    settings = {"Cost per unit and distance": 0.02, "Road factor": 1.2, "Share within distance (%)": 90,
                "Distance for share": 60, "Demand unit": "crate", "Currency": "EUR"}
    return books.site_book(path, sites, customers, settings=settings | how)


def matrix_book(path: Path, basis: str) -> Path:
    """A matrix of costs with distances, a limit on a lane, a least volume and a share rule."""
    rng = np.random.default_rng(8)
    sites = [{"Site": f"S{j}", "Fixed cost": float(rng.integers(60, 120)), "Least volume": 25.0 if j == 1 else None,
              "Capacity": 60.0 if j == 2 else None} for j in range(4)]
    customers = [{"Customer": f"C{i}", "Demand": float(rng.integers(5, 15))} for i in range(7)]
    costs = [[float(c) for c in row] for row in rng.integers(1, 30, (4, 7))]
    lanes = [{"Site": f"S{j}", "Customer": f"C{i}", "Unit cost": costs[j][i], "Distance": float(rng.integers(5, 90)),
              "Most": 4.0 if (j, i) in ((0, 2), (3, 5)) else None} for j in range(4) for i in range(7)]
    settings = {"Lane cost basis": basis, "Share within distance (%)": 80, "Distance for share": 40,
                "Unmet demand cost": 25}
    return books.site_book(path, sites, customers, lanes=lanes, settings=settings)


def row_of(sheet: Worksheet, start: str, column: int = 3) -> object:
    """Value beside the first row that begins with these words."""
    return next(row[column - 1].value for row in sheet.iter_rows() if str(row[0].value).startswith(start))


BOOKS = {
    "coordinates": (share_book, None),
    "per unit": (lambda path: matrix_book(path, "per unit"), None),
    "whole demand": (lambda path: matrix_book(path, "whole demand"), None),
    "everything": (report_cases.rich_site_book, None),
    "low prices": (report_cases.coordinate_site_book, np.full(12, 1.0)),
}


@pytest.fixture(scope="module")
def proofs(tmp_path_factory: pytest.TempPathFactory) -> dict[str, tuple[Path, object]]:
    """Returned workbooks and their reports."""
    folder, made = tmp_path_factory.mktemp("proofs"), {}
    for name, (write, prices) in BOOKS.items():
        source = write(folder / f"{name} source.xlsx")
        given = site_report(source, prices)
        made[name] = returned(source, folder / f"{name}.xlsx", given), given
    return made


@needs_office
@pytest.mark.slow
def test_formulas_of_the_proof_give_its_figures(proofs, tmp_path: Path) -> None:
    """LibreOffice calculates every figure of the proof again: share prices, least volumes, limits on lanes."""
    paths = [path for path, _ in proofs.values()]
    values = recalculated_all(paths, tmp_path)
    assert [difference for path in paths for difference in differences(path, values[path])] == []


@pytest.mark.parametrize("name", BOOKS)
def test_the_share_rule_stands_in_the_sum(name: str, proofs) -> None:
    """Price of a near unit and what the rule hands back stand in the sheet; the sum is at most the plan's cost."""
    path, given = proofs[name]
    proof = openpyxl.load_workbook(path, data_only=True)["Proof"]
    bound = row_of(proof, "No plan can cost less than (")
    assert 0 <= bound <= given.audit.total + 1e-6
    if name == "coordinates":
        assert row_of(proof, "Price per crate delivered near") > 0
        assert row_of(proof, SHARE_BACK) > 0


def test_a_share_rule_no_longer_hides_the_bound(proofs) -> None:
    """With the rule's price the sheet itself shows nine tenths of the cost; without it, little more than half."""
    path, given = proofs["coordinates"]
    bound = row_of(openpyxl.load_workbook(path, data_only=True)["Proof"], "No plan can cost less than (")
    assert bound >= 0.9 * given.audit.total
    assert price_bound(given.case, given.solved.prices, 0.0) < 0.6 * given.audit.total


def test_weak_prices_are_called_weak(proofs) -> None:
    """Where prices show less than nine tenths of the cost, both pages say so instead of promising a check."""
    for name, weak in (("coordinates", False), ("low prices", True)):
        book = openpyxl.load_workbook(proofs[name][0], data_only=True)
        words = {sheet: " ".join(str(cell.value) for row in book[sheet].iter_rows() for cell in row if cell.value)
                 for sheet in ("Proof", "Decision")}
        assert ("prices alone prove little" in words["Proof"]) == weak
        assert ("You can check most of this yourself" in words["Decision"]) != weak
        assert ("rests on the program's search" in words["Decision"]) == weak


def test_no_bound_is_below_nothing(tmp_path: Path) -> None:
    """Absurd prices add up to less than nothing: the sheet says 0, by a formula that shows it, and not a saving."""
    source = tmp_path / "source.xlsx"
    absurd = site_report(report_cases.coordinate_site_book(source), np.full(12, -9000.0))
    path = returned(source, tmp_path / "out.xlsx", absurd)
    values, formulas = (openpyxl.load_workbook(path, data_only=only)["Proof"] for only in (True, False))
    assert row_of(values, "No plan can cost less than (") == 0
    assert str(row_of(formulas, "No plan can cost less than (")).startswith("=MAX(0,SUM(")


@needs_office
@pytest.mark.slow
def test_other_charges_still_give_a_bound(proofs, tmp_path: Path) -> None:
    """The share price doubled or gone, a price of volume changed: the sum stays below the cost of the best plan."""
    changed, cost = [], {}
    for name in ("coordinates", "everything"):
        path, given = proofs[name]
        for factor in (0.0, 2.0):
            book = openpyxl.load_workbook(path)
            proof = book["Proof"]
            titles = next(row for row in proof.iter_rows() if "Rule in the bound" in str(row[1].value))
            for row in proof.iter_rows(min_row=titles[0].row + 1, max_row=titles[0].row + given.case.m):
                if isinstance(row[4].value, int | float):
                    row[4].value = factor * row[4].value - (0.1 if factor else 0.0)
            for row in proof.iter_rows():
                if str(row[0].value).startswith("Price per") and isinstance(row[2].value, int | float):
                    row[2].value *= factor
            changed.append(tmp_path / f"{name} {factor}.xlsx")
            book.save(changed[-1])
            cost[changed[-1]] = given.solved.cost
    values = recalculated_all(changed, tmp_path)
    for path in changed:
        assert row_of(values[path]["Proof"], "No plan can cost less than (") <= cost[path] + 1e-6
