"""Reading and grafting a workbook of 900,000 cells, beside openpyxl, in one run.

Run with ``python -m tests.bench.bench_reading``. The workbook (100,000 lanes of five columns, a matrix of 200
x 2000) is made in a temporary folder. Figures are CPU seconds of this process; each ratio compares two
measurements of the same run.
"""

import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import openpyxl
import xlsxwriter

from ledgersolve.workbook.graft import graft
from ledgersolve.workbook.package import open_package
from ledgersolve.workbook.problems import Problem
from ledgersolve.workbook.sheets import ResultSheet

LANES, SITES, CUSTOMERS = 100_000, 200, 2_000


def big_book(path: Path) -> Path:
    """Write the workbook, the same on every run."""
    draw = np.random.default_rng(7)
    book = xlsxwriter.Workbook(str(path), {"constant_memory": False})
    lanes = book.add_worksheet("Lanes")
    lanes.write_row(0, 0, ["Site", "Customer", "Unit cost", "Distance", "Allowed"])
    costs, distances = draw.uniform(1, 100, LANES).round(2), draw.uniform(1, 900, LANES).round(1)
    for row in range(LANES):
        codes = [f"S{row % SITES:03d}", f"C{row // SITES:04d}"]
        lanes.write_row(row + 1, 0, [*codes, costs[row], distances[row], "yes"])
    matrix = book.add_worksheet("Lane costs")
    matrix.write_row(0, 1, [f"C{column:04d}" for column in range(CUSTOMERS)])
    for row, figures in enumerate(draw.uniform(1, 100, (SITES, CUSTOMERS)).round(3), 1):
        matrix.write(row, 0, f"S{row - 1:03d}")
        matrix.write_row(row, 1, figures)
    book.close()
    return path


def read_ours(path: Path) -> int:
    """Read every cell in our pass; gives their number."""
    with open_package(path) as package:
        return sum(1 for sheet in package.sheets for _ in package.cells(sheet.name))


def read_openpyxl(path: Path, *, streaming: bool) -> int:
    """Read every cell by openpyxl, whole or streaming; gives the number of filled ones."""
    book = openpyxl.load_workbook(path, data_only=True, read_only=streaming)
    found = sum(value is not None for sheet in book for row in sheet.iter_rows(values_only=True) for value in row)
    book.close()
    return found


def small_results() -> list[ResultSheet]:
    """A result sheet of forty rows."""
    sheet = ResultSheet("Decision")
    for row in range(40):
        sheet.put(row, 0, f"Line {row}")
        sheet.put(row, 1, float(row), formula=f"='Lanes'!$C${row + 2}")
    return [sheet]


def seconds(work: Callable[[], object]) -> float:
    """CPU seconds of one call."""
    start = time.process_time()
    work()
    return time.process_time() - start


def main() -> None:
    """Measure and print."""
    with tempfile.TemporaryDirectory() as folder:
        path = big_book(Path(folder) / "big.xlsx")
        marked, grafted = Path(folder) / "marked.xlsx", Path(folder) / "grafted.xlsx"
        print(f"{read_ours(path):,} cells, {path.stat().st_size / 1e6:.1f} MB")
        ours = min(seconds(lambda: read_ours(path)) for _ in range(3))
        streaming = seconds(lambda: read_openpyxl(path, streaming=True))
        whole = seconds(lambda: read_openpyxl(path, streaming=False))
        print(f"our pass             {ours:6.2f} s")
        print(f"openpyxl, streaming  {streaming:6.2f} s   {streaming / ours:.1f} times ours")
        print(f"openpyxl, whole      {whole:6.2f} s   {whole / ours:.1f} times ours")
        problem = Problem("error", "number expected", "Lanes", "C5", "Unit cost", "", "", "",
                          tuple(f"C{row}" for row in range(7, 2007, 2)), recheck="number")
        print(f"graft of 40 rows     {seconds(lambda: graft(path, grafted, small_results())):6.2f} s")
        print(f"graft once more      {seconds(lambda: graft(grafted, grafted, small_results())):6.2f} s")
        print(f"list and marks       {seconds(lambda: graft(path, marked, small_results(), [problem])):6.2f} s")
        print(f"clearing them        {seconds(lambda: graft(marked, marked, small_results())):6.2f} s")


if __name__ == "__main__":
    main()
