"""Whole jobs end to end: the demo inbox, cap71 and the 1958 lot-sizing case, by rule and by recalculation."""

import csv
from pathlib import Path

import numpy as np
import openpyxl
import pytest
from openxml_audit import FileFormat, OpenXmlValidator

from ledgersolve import solve_workbook
from tests import books
from tests.packages import contents
from tests.recalculation import OFFICE, differences, recalculated_all
from tests.sheet_rules import check_workbook

pytestmark = [pytest.mark.slow, pytest.mark.skipif(OFFICE is None, reason="LibreOffice is not installed")]
ROOT = Path(__file__).parents[1]
DEMOS = sorted(path for path in (ROOT / "inbox_demo").glob("*.xlsx"))
SECONDS = 6
"""Time limit that the demo workbooks get here; their plans need not be the best ones."""


@pytest.fixture(scope="module")
def returned(tmp_path_factory: pytest.TempPathFactory) -> list[tuple[Path, Path]]:
    """Pairs of source and returned workbook."""
    folder = tmp_path_factory.mktemp("whole")
    sources = [_hurried(demo, folder) for demo in DEMOS]
    sources += [_cap71(folder / "cap71.xlsx"), _wagner_whitin(folder / "wagner.xlsx")]
    pairs = []
    for source in sources:
        answer = solve_workbook(source, folder / "back")
        assert answer.outcome != "failed", (source.name, answer.reason)
        assert answer.returned is not None
        pairs.append((source, Path(answer.returned)))
    return pairs


def _hurried(demo: Path, folder: Path) -> Path:
    """A demo workbook with a short time limit."""
    book = openpyxl.load_workbook(demo)
    settings = book["Settings"]
    rows = [row for row in settings.iter_rows() if str(row[0].value).startswith("Time limit")]
    if rows:
        rows[0][1].value = SECONDS
    else:
        settings.append(["Time limit (seconds)", SECONDS])
    book.save(folder / demo.name)
    return folder / demo.name


def _cap71(path: Path) -> Path:
    """FL-09: the table of Kuehn & Hamburger (1963) as OR-Library has it (cap71: 932,615.750)."""
    with (Path(__file__).parent / "external" / "kuehn_hamburger.csv").open() as stream:
        rows = list(csv.reader(stream))[1:]
    sites = [{"Site": f"w{k + 1}", "Fixed cost": 0 if k == 10 else 7500, "Capacity": 58268} for k in range(16)]
    customers = [{"Customer": row[0], "Demand": float(row[1])} for row in rows]
    costs = np.array([[float(cost) for cost in row[2:]] for row in rows]).T
    return books.site_book(path, sites, customers, lane_costs=costs, settings={"Lane cost basis": "whole demand"})


def _wagner_whitin(path: Path) -> Path:
    """LS-01: Wagner & Whitin (1958), twelve periods: 864."""
    demand = [69, 29, 36, 61, 61, 26, 34, 67, 45, 67, 79, 56]
    setup = [85, 102, 102, 101, 98, 114, 105, 86, 119, 110, 98, 114]
    costs = [{"Item": "A", "Period": t + 1, "Setup cost": setup[t]} for t in range(12)]
    return books.lot_book(path, [{"Item": "A", "Setup cost": 85, "Holding cost": 1}], [demand], period_costs=costs)


def test_every_formula_has_its_value(returned: list[tuple[Path, Path]], tmp_path: Path) -> None:
    """LibreOffice, always recalculating, gives the cached value of every formula of every returned workbook."""
    values = recalculated_all([back for _, back in returned], tmp_path)
    found = {back.name: differences(back, values[back]) for _, back in returned}
    assert {name: changed[:3] for name, changed in found.items() if changed} == {}


def test_rules_for_good_sheets_hold(returned: list[tuple[Path, Path]]) -> None:
    """WB-01 to WB-23 hold on every returned workbook."""
    found = {back.name: check_workbook(back, source) for source, back in returned}
    assert {name: broken for name, broken in found.items() if broken} == {}


def test_the_schema_finds_nothing(returned: list[tuple[Path, Path]]) -> None:
    """A schema check finds in no returned workbook what it does not find in its source.

    The large one is left out: it would take half a minute. The library that sets the time limit of the demo
    workbooks orders their fonts in a way of its own.
    """
    found = {back.name: faults(back) - faults(source)
             for source, back in returned if not back.name.startswith("6 large")}
    assert {name: errors for name, errors in found.items() if errors} == {}


def faults(path: Path) -> set[str]:
    """What the schema check reports, by part."""
    check = OpenXmlValidator(file_format=FileFormat.OFFICE_2019)
    return {f"{error.part_uri}: {error.description}" for error in check.validate(str(path)).errors}


@pytest.mark.long
def test_the_schema_finds_nothing_in_the_large_one(returned: list[tuple[Path, Path]]) -> None:
    """A schema check reports nothing on the large demo workbook either."""
    source, back = next(pair for pair in returned if pair[1].name.startswith("6 large"))
    assert faults(back) <= faults(source)


SHARED = {"[Content_Types].xml", "xl/workbook.xml", "xl/_rels/workbook.xml.rels", "xl/styles.xml",
          "xl/sharedStrings.xml", "xl/calcChain.xml"}
"""Parts that our sheets are entered in."""


def test_the_analysts_parts_come_back_byte_for_byte(returned: list[tuple[Path, Path]], tmp_path: Path) -> None:
    """After one whole solve and after a second one of the answer, every part of the analyst's is as it was."""
    solved = [pair for pair in returned if pair[1].name.endswith("solved.xlsx")]
    assert solved
    for source, back in solved:
        before = {part: data for part, data in contents(source).items() if part not in SHARED}
        assert before.items() <= contents(back).items(), back.name
    source, back = next(pair for pair in solved if pair[1].name.startswith("wagner"))
    again = Path(str(solve_workbook(back, tmp_path).returned))
    before = {part: data for part, data in contents(source).items() if part not in SHARED}
    assert before.items() <= contents(again).items()


@pytest.mark.parametrize(("name", "cost"), [("cap71 solved.xlsx", 932615.750), ("wagner solved.xlsx", 864.0)])
def test_the_ledger_holds_the_published_cost(returned: list[tuple[Path, Path]], name: str, cost: float) -> None:
    """The ledger adds up to the published values of FL-09 (Beasley, OR-Library) and LS-01 (Wagner & Whitin 1958)."""
    back = next(path for _, path in returned if path.name == name)
    assert openpyxl.load_workbook(back, data_only=True)["Ledger"]["I5"].value == pytest.approx(cost, rel=1e-9)
