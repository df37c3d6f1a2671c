"""From file to file, the whole process: the strong model handed whole to the wrapper beside ours, in one run.

Run with ``python -m tests.bench.bench_file_to_file [CASE ...] [--repeats N]``. A CASE is ``capa`` or ``capb``
(published) or ``like-capc`` (generated); without one, all three. Each measurement is a fresh process that starts,
reads a workbook with the case as a matrix, solves, audits, and writes the copy with its results; both ways differ in
the engine alone. Ours is run ``--repeats`` times and its median counts; the whole model, which takes longer, once.
"""

import argparse
import os
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from ledgersolve.site_selection.case import Case
from tests.bench.bench_site_selection import FOLDERS
from tests.books import book_of_site_case
from tests.site_benchmarks import like_capc, published

OURS = "from ledgersolve.cli import main; main()"
WHOLE = (
    "from ledgersolve.site_selection import solve; from ledgersolve.site_selection.whole import solve_whole; "
    "solve._run = solve_whole; " + OURS
)


def case_named(name: str) -> Case:
    """The case of this name."""
    if name == "like-capc":
        return like_capc()
    return next(entry.case() for folder in FOLDERS for entry in published(folder) if entry.name == name)


def measured(book: Path, into: Path, code: str) -> tuple[float, float]:
    """Wall and CPU seconds of one process from workbook to workbook."""
    before = os.times()
    began = time.monotonic()
    done = subprocess.run(
        [sys.executable, "-c", code, "solve", str(book), "--into", str(into)], capture_output=True, text=True
    )
    wall, after = time.monotonic() - began, os.times()
    if done.returncode or "proven best" not in done.stdout:
        raise RuntimeError(f"{book.name} was not solved to a proven plan: {done.stdout} {done.stderr}")
    cpu = after.children_user + after.children_system - before.children_user - before.children_system
    return wall, cpu


def main() -> None:
    """Print a row a case, and the ratio of the sums."""
    choose = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    choose.add_argument("cases", nargs="*", default=["capa", "capb", "like-capc"])
    choose.add_argument("--repeats", type=int, default=3)
    chosen = choose.parse_args()
    sums = [0.0, 0.0, 0.0, 0.0]
    print("| case | whole, wall s | whole, CPU s | ours, wall s | ours, CPU s |\n|---|---|---|---|---|")
    with tempfile.TemporaryDirectory() as folder:
        for name in chosen.cases:
            settings = {"Questions": "no", "Time limit (seconds)": 600}
            book = book_of_site_case(Path(folder) / f"{name}.xlsx", case_named(name), settings)
            runs = [measured(book, Path(folder) / f"ours{k}", OURS) for k in range(chosen.repeats)]
            row = [*measured(book, Path(folder) / "whole", WHOLE), *map(statistics.median, zip(*runs, strict=True))]
            print(f"| {name} | " + " | ".join(f"{figure:.2f}" for figure in row) + " |", flush=True)
            sums = [total + figure for total, figure in zip(sums, row, strict=True)]
    print(f"\nratio of the sums: wall {sums[0] / sums[2]:.1f}, CPU {sums[1] / sums[3]:.1f}")


if __name__ == "__main__":
    main()
