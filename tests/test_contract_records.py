"""What travels beside a case."""

import numpy as np

from ledgersolve.contract.records import PairRows
from tests.books import lot_sheets, read_sheets, site_sheets


def test_pairs_are_found_without_a_dictionary():
    """Every pair gives its row; pairs that are not there, and codes that are not known, give none."""
    rng = np.random.default_rng(1)
    pairs = sorted({(f"S{a}", f"C{b}") for a, b in rng.integers(0, 30, (400, 2)).tolist()}, key=lambda p: hash(p))
    rows = PairRows([a for a, _ in pairs], [b for _, b in pairs], np.arange(2, len(pairs) + 2))
    assert len(rows) == len(pairs)
    assert dict(rows) == {pair: k + 2 for k, pair in enumerate(pairs)}
    assert ("S1", "C99") not in rows
    missing = next((f"S{a}", f"C{b}") for a in range(30) for b in range(30) if (f"S{a}", f"C{b}") not in set(pairs))
    assert missing not in rows


def site_reading(tmp_path):
    """Read a workbook with a heading, so that rows and columns are shifted."""
    sheets = site_sheets([{"Site": "A", "Name": None, "Fixed cost": 5, "Capacity": None},
                          {"Site": "B", "Name": "Bonn", "Fixed cost": "6", "Capacity": 7}],
                         [{"Customer": "X", "Demand": 1}, {"Customer": "Y", "Demand": 2}],
                         lanes=[{"Site": "B", "Customer": "X", "Unit cost": 3, "Distance": None}],
                         lane_costs=[[1, "2"], [None, 4]])
    sheets["Sites"] = [["My sites"], [None], *[[None, *row] for row in sheets["Sites"]]]
    return read_sheets(tmp_path, sheets)


def test_cells_of_lists_are_found_by_code_and_title(tmp_path):
    """A filled number cell gives its address; blanks, texts and absent ones give none for formulas."""
    origins = site_reading(tmp_path).origins
    assert origins.number("Sites", ("A",), "Fixed cost").formula == "'Sites'!$D$4"
    assert origins.number("Sites", ("B",), "Fixed cost") is None
    assert origins.number("Sites", ("A",), "Capacity") is None
    assert origins.number("Sites", ("B",), "Capacity").address == "E5"
    assert origins.cell("Sites", ("A",), "Capacity").address == "E4"
    assert origins.number("Sites", ("C",), "Capacity") is None
    assert origins.number("Sites", ("A",), "Handling cost") is None
    assert origins.number("Lanes", ("B", "X"), "Unit cost").formula == "'Lanes'!$C$2"
    assert origins.number("Lanes", ("A", "X"), "Unit cost") is None
    assert origins.number("Lanes", ("B", "X"), "Distance") is None


def test_cells_of_matrices_are_found_by_both_codes(tmp_path):
    """A filled number cell of a matrix gives its address; blanks and texts give none."""
    origins = site_reading(tmp_path).origins
    assert origins.matrix_number("Lane costs", "A", "X").formula == "'Lane costs'!$B$2"
    assert origins.matrix_number("Lane costs", "A", "Y") is None
    assert origins.matrix_number("Lane costs", "B", "X") is None
    assert origins.matrix_number("Lane costs", "B", "Y").address == "C3"
    assert origins.matrix_number("Lane costs", "B", "Z") is None


def test_defaults_are_counted_by_column(tmp_path):
    """Empty cells of optional columns, and columns that are not there, are listed with their number of cells."""
    defaults = {(d.sheet, d.title): (d.value, d.cells) for d in site_reading(tmp_path).defaults}
    assert defaults["Sites", "Capacity"] == ("unlimited", 1)
    assert defaults["Sites", "Name"] == ("the code", 1)
    assert defaults["Sites", "Handling cost"] == ("0", 2)
    assert defaults["Settings", "Road factor"] == ("1", 1)
    assert ("Sites", "Fixed cost") not in defaults


def test_empty_demands_are_defaults(tmp_path):
    """Empty cells of Demand are 0, and counted."""
    reading = read_sheets(tmp_path, lot_sheets([{"Item": "A", "Setup cost": 1, "Holding cost": 1}], [[1, None,
                                                                                                      None]]))
    assert ("Demand", "Demand", "0", 2) in {(d.sheet, d.title, d.value, d.cells) for d in reading.defaults}
