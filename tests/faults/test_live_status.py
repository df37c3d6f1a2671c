"""What an analyst sees of the status while mending in LibreOffice: "done" once the cell is right, not before.

Each case is a bad workbook of the corpus or one like it. Its returned copy is saved as it is, mended in a way
that its advice names, and mended wrongly.
"""

import datetime
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import pytest

from ledgersolve import check_workbook
from tests.books import write_book
from tests.faults.corpus import Sheets, append, both, column_out, lot, put, setting, site
from tests.mending import Step, mend
from tests.office import needs_office


@dataclass(frozen=True)
class Case:
    """A change of a good workbook, steps that mend it (any of them suffices), and steps that do not."""

    name: str
    base: Callable[[], Sheets]
    change: Callable[[Sheets], None]
    right: Sequence[Sequence[Step]]
    wrong: Sequence[Sequence[Step]] = ()


def typed(sheet: str, cell: str, text: str) -> list[Step]:
    """One cell typed by hand."""
    return [("type", sheet, cell, text)]


def cleared(sheet: str, cell: str) -> list[Step]:
    """One cell cleared."""
    return [("clear", sheet, cell)]


def row_out(sheet: str, row: int) -> list[Step]:
    """One row taken out."""
    return [("take out", sheet, str(row))]


def many(sheet: str, column: str, value: object, rows: int) -> Callable[[Sheets], None]:
    """A column filled with one value, for a list made longer."""
    def change(sheets: Sheets) -> None:
        for row in range(2, rows + 2):
            put(sheet, f"{column}{row}", value)(sheets)
    return change


def long_lanes(sheets: Sheets) -> None:
    """Sixty customers, and a lane from a site that is not known to each."""
    for number in range(5, 61):
        append("Customers", f"C{number}", 5, "no")(sheets)
        append("Lanes", "HAM", f"C{number}", 5, 60)(sheets)
    for number in range(1, 61):
        append("Lanes", "Hamurg", f"C{number}", 5, 60)(sheets)


CASES = (
    Case("totals row", site, append("Customers", "Total", 50, None), [row_out("Customers", 6)]),
    Case("duplicate code", site, append("Customers", "C1", 50, "no"),
         [row_out("Customers", 6), row_out("Customers", 2), typed("Customers", "A6", "C9")],
         [typed("Customers", "A6", "C2"), typed("Customers", "A6", "c 1")]),
    Case("codes alike", site, append("Customers", "C 1", 5, "no"),
         [row_out("Customers", 6), typed("Customers", "A6", "C9")], [typed("Customers", "A6", "c1")]),
    Case("pair twice", site, append("Lanes", "HAM", "C1", 3, 60), [row_out("Lanes", 14), row_out("Lanes", 2)],
         [typed("Lanes", "C14", "4")]),
    Case("setting twice", site, append("Settings", "Currency", "USD"), [row_out("Settings", 9)],
         [typed("Settings", "B9", "EUR")]),
    Case("title twice", site, put("Sites", "H1", "Fixed cost"), [typed("Sites", "H1", "My cost")],
         [typed("Sites", "H1", "fixed  cost")]),
    Case("near miss of a title", site, put("Sites", "B1", "Fixd cost"),
         [typed("Sites", "B1", "Fixed cost"), typed("Sites", "B1", "fixed cost (EUR)")],
         [typed("Sites", "B1", "Fixedcosts")]),
    Case("unknown rule", site, put("Sites", "E2", "maybe"),
         [typed("Sites", "E2", "open"), typed("Sites", "E2", " Free"), cleared("Sites", "E2")],
         [typed("Sites", "E2", "opened")]),
    Case("no yes or no", site, put("Sites", "F2", "perhaps"),
         [typed("Sites", "F2", "yes"), typed("Sites", "F2", "TRUE"), typed("Sites", "F2", "0"),
          cleared("Sites", "F2"), row_out("Sites", 2)], [typed("Sites", "F2", "ja")]),
    Case("currency sign", site, setting("Currency", "\u20ac"),
         [typed("Settings", "B3", "eur"), typed("Settings", "B3", "ZAR")],
         [typed("Settings", "B3", "EURO"), typed("Settings", "B3", "UR,"), cleared("Settings", "B3")]),
    Case("job unknown", site, setting("Job", "cooking"), [typed("Settings", "B2", "site selection")],
         [cleared("Settings", "B2")]),
    Case("unknown site in lanes", site, put("Lanes", "A2", "HAMM"),
         [typed("Lanes", "A2", "HAM"), typed("Sites", "A5", "HAMM"), row_out("Lanes", 2)],
         [typed("Lanes", "A2", "ham"), typed("Lanes", "A2", "XYZ"), cleared("Lanes", "A2")]),
    Case("sixty unknown sites", site, long_lanes,
         [[("type", "Lanes", f"A{row}", "LEJ") for row in range(70, 130)], typed("Sites", "A5", "Hamurg")],
         [typed("Lanes", "A70", "LEJ"), [("type", "Lanes", f"A{row}", "XXX") for row in range(70, 130)]]),
    Case("unknown item in demand", lot, put("Demand", "A2", "SPADES"),
         [typed("Demand", "A2", "SPADE"), row_out("Demand", 2)], [typed("Demand", "A2", "Spade")]),
    Case("empty required", site, put("Customers", "B3", None),
         [typed("Customers", "B3", "5"), row_out("Customers", 3), [("clear", "Customers", "A3:C3")]],
         [typed("Customers", "B3", "-5"), typed("Customers", "B3", "some")]),
    Case("empty code", site, put("Sites", "A3", None),
         [typed("Sites", "A3", "X"), row_out("Sites", 3), [("clear", "Sites", "A3:G3")]],
         [typed("Sites", "B3", "1")]),
    Case("half sites", site, setting("Most sites", 2.5), [typed("Settings", "B7", "3"), cleared("Settings", "B7")],
         [typed("Settings", "B7", "3.5"), typed("Settings", "B7", "-1"), typed("Settings", "B7", "two")]),
    Case("number out of limits", site, setting("Accepted gap (%)", 200), [typed("Settings", "B9", "1"),
                                                                        cleared("Settings", "B9")],
         [typed("Settings", "B9", "101")]),
    Case("not above 0", lot, both(put("Items", "M1", "Lot multiple"), put("Items", "M2", -1)),
         [typed("Items", "M2", "0.5"), cleared("Items", "M2")], [typed("Items", "M2", "0")]),
    Case("too large", site, put("Sites", "B2", 1e300), [typed("Sites", "B2", "5"), row_out("Sites", 2)],
         [typed("Sites", "B2", "1E+13"), cleared("Sites", "B2")]),
    Case("several texts in a column", site, both(*(put("Lanes", f"C{row}", "dear") for row in range(2, 10))),
         [[("type", "Lanes", f"C{row}", "5") for row in range(2, 10)],
          [("take out", "Lanes", "2")] * 3 + [("type", "Lanes", f"C{row}", "5") for row in range(2, 7)]],
         [row_out("Lanes", 2), typed("Lanes", "C2", "5")]),
    Case("date as text", lot, put("Periods", "B3", "11.01.2027"),
         [typed("Periods", "B3", "'2027-01-18"), typed("Periods", "B3", "2027-01-18"), cleared("Periods", "B3")],
         [typed("Periods", "B3", "'18.01.2027"), typed("Periods", "B3", "'2027-13-01")]),
    Case("many dates as text", lot, both(*(append("Periods", f"W{week}", "soon") for week in range(5, 13))),
         [[("type", "Periods", f"B{week + 1}", f"'2027-03-{week:02d}") for week in range(5, 13)],
          [("type", "Periods", f"B{week + 1}", f"2027-03-{week:02d}") for week in range(5, 13)],
          [("clear", "Periods", "B6:B13")]],
         [[("type", "Periods", f"B{week + 1}", f"'2027-03-{week + 20:02d}") for week in range(5, 13)],
          [("type", "Periods", f"B{week + 1}", f"{week}.3.27x") for week in range(5, 13)]]),
    Case("periods out of order", lot, put("Periods", "B3", datetime.date(2026, 1, 1)),
         [typed("Periods", "B3", "2027-01-18"), cleared("Periods", "B3"), typed("Periods", "B2", "2025-01-01")],
         [typed("Periods", "B3", "2027-01-04")]),
    Case("share alone", site, both(setting("Share within distance (%)", 50), setting("Distance for share", None)),
         [typed("Settings", "B10", "120"), cleared("Settings", "B9")], [typed("Settings", "B10", "far")]),
    Case("fewest above most", site, setting("Fewest sites", 9),
         [typed("Settings", "B9", "2"), typed("Settings", "B7", "9"), row_out("Settings", 7), row_out("Settings", 9)],
         [typed("Settings", "B9", "4")]),
    Case("least above capacity", site, put("Sites", "D3", 500),
         [typed("Sites", "D3", "5"), typed("Sites", "C3", "600"), cleared("Sites", "C3")],
         [typed("Sites", "D3", "91")]),
    Case("latitude alone", site, both(put("Sites", "H1", "Latitude"), put("Sites", "I1", "Longitude"),
                                      put("Sites", "H2", 53)),
         [typed("Sites", "I2", "10"), cleared("Sites", "H2")], [typed("Sites", "I2", "east")]),
    Case("lane without cost and distance", site, both(put("Lanes", "C2", None), put("Lanes", "D2", None),
                                                      setting("Longest distance", None)),
         [typed("Lanes", "C2", "4"), typed("Lanes", "D2", "4"), row_out("Lanes", 2)], [typed("Lanes", "C2", "x")]),
    Case("no holding cost", lot, both(put("Items", "D2", None), setting("Yearly holding rate (%)", 20),
                                      setting("Periods a year", 52)),
         [typed("Items", "D2", "1")], [typed("Items", "D2", "-1")]),
    Case("rate without periods", lot, both(column_out("Items", "Unit cost"), setting("Yearly holding rate (%)", 20),
                                           setting("Periods a year", None), put("Items", "C2", None)),
         [typed("Settings", "B8", "52")], [typed("Settings", "B8", "0")]),
)


def first_status(column: list[str]) -> str:
    """The status of the first entry of the list of errors."""
    return column[column.index("Status") + 1]


@needs_office
@pytest.mark.slow
def test_the_status_follows_the_mending(tmp_path) -> None:
    """Before mending "to fix", after each way of mending "done", also where the row is gone; else "to fix"."""
    books, wanted = [], []
    for number, case in enumerate(CASES):
        sheets = case.base()
        case.change(sheets)
        bad = write_book(tmp_path / f"bad {number}.xlsx", sheets)
        returned = check_workbook(bad, tmp_path / "returned").returned
        for state, ways in (("to fix", ([], *case.wrong)), ("done", case.right)):
            for steps in ways:
                books.append((returned, steps))
                wanted.append((case.name, state, steps))
    for (name, state, steps), column in zip(wanted, mend(books, "To fix", "H1:H40", tmp_path), strict=True):
        assert first_status(column) == state, (name, steps[:2])


def test_no_two_cases_are_alike() -> None:
    """Each case has its own name."""
    assert len({case.name for case in CASES}) == len(CASES)
