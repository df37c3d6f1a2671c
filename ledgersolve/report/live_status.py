"""The live status of an entry of the list: a formula over the cells at fault, "done" once all are right.

A cell whose row was taken out is right: its reference has become an error, which ``ISREF`` tells apart from an
error that stands in a cell. Runs of cells are asked in one go, so that a thousand cells are one short formula;
what a run cannot be asked is asked cell by cell, where the cells are few. No IF stands in another one.
"""

import re
from collections.abc import Sequence

from ledgersolve.report.tables import quoted
from ledgersolve.workbook.cells import column_letters, column_number
from ledgersolve.workbook.problems import CELL, Problem, asked

TO_FIX, DONE, DROP_AGAIN = "to fix", "done", "to fix (*)"

WATCHED_SPANS = 40
"""At most so many runs of cells of one entry are watched."""

SEARCHES = 10
"""At most so many cells of one entry are each looked for in a whole column."""

LONGEST = 7500
"""Longest formula; programs take 8,192 characters."""

_ADDRESS = re.compile(r"([A-Z]{1,3})(\d+)")


def status(problem: Problem) -> tuple[str, str]:
    """Cached status of an entry and its formula; "" where only a new drop can tell."""
    cells = [problem.cell, *problem.more]
    if not problem.sheet or not problem.cell or problem.count != len(cells):
        return DROP_AGAIN, ""
    wrong = _of_cells(problem, cells) or _of_spans(problem, cells)
    return (TO_FIX, f'CHOOSE(1+({wrong}>0),"{DONE}","{TO_FIX}")') if wrong else (DROP_AGAIN, "")


def _of_cells(problem: Problem, cells: Sequence[str]) -> str:
    """Number of cells that are wrong, each asked by the entry's test; "" where that is not possible."""
    searches = "SUMPRODUCT" in problem.test
    if not problem.test or len(cells) * len(problem.test) > LONGEST or (searches and len(cells) > SEARCHES):
        return ""
    own = f"{quoted(problem.sheet)}!"
    terms = []
    for column, row in map(_parts, cells):
        test = asked(problem.test, own, column, row, "$")
        terms.append(f"ISREF({own}${column}${row})*IFERROR(1-({test}),1)")
    formula = "+".join(terms)
    return formula if len(formula) <= LONGEST else ""


def _of_spans(problem: Problem, cells: Sequence[str]) -> str:
    """Number of cells that are wrong, counted by runs of cells; "" where that is not possible."""
    spans = _spans(cells)
    if len(spans) > WATCHED_SPANS or (problem.recheck == "static" and not problem.tally):
        return ""
    whole = [f"{quoted(problem.sheet)}!{span}" for span in spans]
    formula = "+".join(f"ISREF({span})*IFERROR({_wrong(problem, span)},1)" for span in whole)
    return formula if len(formula) <= LONGEST else ""


def _wrong(problem: Problem, span: str) -> str:
    """Number of the span's cells that are wrong."""
    if problem.recheck == "empty":
        return f"COUNTA({span})"
    if problem.recheck == "no error":
        return f"SUMPRODUCT(ISERROR({span})*1)"
    if problem.recheck == "filled":
        return f"ROWS({span})-COUNTA({span})"
    right = problem.tally.replace(CELL, span) if problem.tally else _numbers(problem, span)
    return f"ROWS({span})-({right})" + (f"-COUNTBLANK({span})" if problem.may_be_empty else "")


def _numbers(problem: Problem, span: str) -> str:
    """Number of the span's cells that hold a number within the limits."""
    low = 0.0 if problem.recheck == "not negative" else problem.low
    limits = ((">" if problem.above else ">=", low), ("<=", problem.high))
    tests = [f'{span},"{sign}"&{limit:.15g}' for sign, limit in limits if limit is not None]
    return f"COUNTIFS({','.join(tests)})" if tests else f"COUNT({span})"


def _parts(cell: str) -> tuple[str, int]:
    """Letters and row of an address."""
    match = _ADDRESS.fullmatch(cell)
    if match is None:
        raise ValueError(f"{cell} is no address")
    return match[1], int(match[2])


def _spans(cells: Sequence[str]) -> list[str]:
    """Cells as runs of one column, in sheet order: ``D8``, ``D10:D14``."""
    parsed = sorted((column_number(letters), row) for letters, row in map(_parts, set(cells)))
    runs: list[list[int]] = []
    for column, row in parsed:
        if runs and runs[-1][0] == column and runs[-1][2] + 1 == row:
            runs[-1][2] = row
        else:
            runs.append([column, row, row])
    return [f"${column_letters(c)}${first}" + ("" if first == last else f":${column_letters(c)}${last}")
            for c, first, last in runs]
