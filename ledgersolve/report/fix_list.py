"""The list of what is to be fixed: where, what was found, what is expected, what to do, and a live status."""

from collections import Counter
from collections.abc import Sequence
from dataclasses import replace

from ledgersolve.report import style
from ledgersolve.report.inputs import RunFacts
from ledgersolve.report.tables import FOOTER, Column, paragraph, quoted, write_table
from ledgersolve.workbook.cells import column_letters, column_number
from ledgersolve.workbook.problems import Problem
from ledgersolve.workbook.sheets import LiveFormat, ResultSheet

TO_FIX, DONE, DROP_AGAIN = "to fix", "done", "to fix (*)"
WIDTHS = (17.0, 8.0, 19.0, 36.0, 32.0, 40.0, 8.0, 13.0, 12.0, 12.0)
WATCHED_SPANS = 40
"""At most so many runs of cells of one entry are watched by its status."""
_LETTERS = "ABCDEFGHIJKLMNOPQRSTUVWXYZ"


def fix_list(name: str, problems: Sequence[Problem], run: RunFacts, title: str) -> ResultSheet:
    """Write the list: errors first, notices apart, counts by sheet at the top."""
    errors = [problem for problem in problems if problem.is_error]
    notices = [problem for problem in problems if not problem.is_error]
    sheet = ResultSheet(name, tab_colour=style.RUST, landscape=True, widths=dict(enumerate(WIDTHS)))
    row = _head(sheet, errors, run, title)
    row = _counts(sheet, errors, row)
    first = row + 1
    _entries(sheet, errors, row, live=True)
    row = first + len(errors)
    if notices:
        sheet.put(row + 1, 0, "Notices: nothing has to be done, but look at these", style.SECTION)
        _entries(sheet, notices, row + 2, live=False)
        row += 3 + len(notices)
    sheet.repeat_rows = (first - 1, first - 1)
    sheet.footer = FOOTER
    return sheet


def unreadable(name: str, problem: Problem, run: RunFacts) -> ResultSheet:
    """Write the one entry of a file that cannot be read: what it is, what is expected, what to do."""
    sheet = ResultSheet(name, tab_colour=style.RUST, landscape=True, widths=dict(enumerate((30.0, *WIDTHS[3:6]))))
    sheet.put(0, 0, f"To fix: {run.file_name} cannot be read", style.TITLE)
    sheet.heights[0] = 26.0
    paragraph(sheet, 1, 0, 3, "Nothing was solved. Your file is kept as it was dropped; this workbook beside it says "
                              "why it could not be read and what to do.", replace(style.TEXT, size=11.0))
    sheet.put(2, 0, f"{run.file_name}, {run.when:%Y-%m-%d %H:%M}", style.SMALL)
    write_table(sheet, 4, [
        Column(title, title, [words], style.WRAPPED_CELL, width)
        for title, words, width in (
            ("File", run.file_name, 30.0), ("Found", problem.found, WIDTHS[3]),
            ("Expected", problem.expected, WIDTHS[4]), ("What to do", problem.remedy, WIDTHS[5]))
    ])
    sheet.footer = FOOTER
    return sheet


def _head(sheet: ResultSheet, errors: Sequence[Problem], run: RunFacts, title: str) -> int:
    places = sum(problem.count for problem in errors)
    sheet.put(0, 0, f"To fix: {style.counted(places, 'place')} in {title or run.file_name}", style.TITLE)
    sheet.heights[0] = 26.0
    paragraph(sheet, 1, 0, 7, "This workbook was not solved, because something in it is missing or cannot be "
                              "right. Nothing in your sheets was changed; the cells are marked where they "
                              "stand.", replace(style.TEXT, size=11.0))
    paragraph(sheet, 2, 0, 7, "What to do: go down the list (a click on the cell leads there), mend each cell, and "
                              f"watch its status turn to \"{DONE}\" and its mark vanish. An entry marked (*) is "
                              "compared with other cells: it is looked at again at the next drop, and its status "
                              "stays until then. Save the workbook and drop it again: list and marks go by "
                              "themselves.", replace(style.TEXT, size=11.0))
    words = f"{run.file_name}, {run.when:%Y-%m-%d %H:%M}"
    sheet.put(3, 0, words, style.SMALL)
    return 5


def _counts(sheet: ResultSheet, errors: Sequence[Problem], row: int) -> int:
    """Counts by sheet, and how many entries are still to fix (live)."""
    counts: Counter[str] = Counter()
    for problem in errors:
        counts[problem.sheet or "the workbook"] += problem.count
    listed = list(counts.items())
    list_row = row + 3 + len(listed)
    write_table(sheet, row, [
        Column("sheet", "Sheet", [name for name, _ in listed], width=WIDTHS[0]),
        Column("count", "Places (number)", [count for _, count in listed], style.number(style.WHOLE), WIDTHS[1]),
    ])
    span = f"H{list_row + 2}:H{list_row + 1 + max(1, len(errors))}"
    left = sum(1 for problem in errors if _status(problem, 0)[1])
    sheet.put(row, 3, "Entries mended so far", style.BOLD)
    sheet.put(row, 4, 0, style.number(style.WHOLE), formula=f'=COUNTIF({span},"{DONE}")')
    sheet.put(row + 1, 3, f"of {style.counted(len(errors), 'entry', 'entries')}, {left} of which count themselves "
                          "as soon as the cell is right", style.NOTE)
    sheet.put(list_row - 1, 0, "Errors", style.SECTION)
    return list_row


def _entries(sheet: ResultSheet, problems: Sequence[Problem], row: int, live: bool) -> None:
    wrapped = style.WRAPPED_CELL
    status = [_status(problem, place) for place, problem in enumerate(problems, start=row + 1)]
    columns = [
        Column("sheet", "Sheet", [p.sheet or "the workbook" for p in problems], wrapped, WIDTHS[0]),
        Column("cell", "Cell", [p.cell or None for p in problems], style.LINK, WIDTHS[1],
               links=[_link(p) for p in problems]),
        Column("title", "Column or setting", [p.title for p in problems], wrapped, WIDTHS[2]),
        Column("found", "Found", [_found(p) for p in problems], wrapped, WIDTHS[3]),
        Column("expected", "Expected", [p.expected for p in problems], wrapped, WIDTHS[4]),
        Column("remedy", "What to do", [p.remedy for p in problems], wrapped, WIDTHS[5]),
        Column("count", "Places (number)", [p.count for p in problems],
               style.number(style.WHOLE), WIDTHS[6]),
    ]
    if live:
        columns.append(Column("status", "Status", [value for value, _ in status],
                              replace(style.BOLD, align="center"), WIDTHS[7],
                              [formula for _, formula in status]))
        limits = replace(style.number("General"), size=9.0, colour=style.QUIET)
        live_ones = list(zip(problems, status, strict=True))
        low = [_low(problem) if formula else None for problem, (_, formula) in live_ones]
        high = [problem.high if formula else None for problem, (_, formula) in live_ones]
        columns.append(Column("low", "Smallest allowed (value)", low, limits, WIDTHS[8]))
        columns.append(Column("high", "Largest allowed (value)", high, limits, WIDTHS[9]))
    write_table(sheet, row, columns)
    if live and problems:
        for word, look in ((DONE, style.FINE), (TO_FIX, style.BAD), (DROP_AGAIN, style.BAD)):
            sheet.live_formats.append(LiveFormat(row + 1, 7, row + len(problems), 7, f'=$H{row + 2}="{word}"', look))


def _found(problem: Problem) -> str:
    if not problem.more and problem.count == 1:
        return problem.found
    shown = problem.more[:8]
    rest = problem.count - 1 - len(shown)
    cells = f"; also {', '.join(shown)}" if shown else ""
    return f"{problem.found}{cells}" + (f" and {rest:,} more" if rest > 0 else "")


def _link(problem: Problem) -> str:
    return f"{quoted(problem.sheet)}!{problem.cell}" if problem.sheet and problem.cell else ""


def _status(problem: Problem, row: int) -> tuple[str, str]:
    """Cached status and its formula for the entry in ``row`` (from 0); "" where only a new drop can tell."""
    watched = [problem.cell, *problem.more]
    if problem.recheck == "static" or not problem.sheet or not problem.cell or problem.count != len(watched):
        return DROP_AGAIN, ""
    spans = _spans(watched)
    if len(spans) > WATCHED_SPANS:
        return DROP_AGAIN, ""
    counted = "+".join(_count(problem, f"{quoted(problem.sheet)}!{span}", row + 1) for span in spans)
    wanted = "0" if problem.recheck in ("empty", "no error") else f"$G{row + 1}"
    return TO_FIX, f'IF({counted}={wanted},"{DONE}","{TO_FIX}")'


def _count(problem: Problem, span: str, row: int) -> str:
    """Count of the span's cells that are right (for ``empty`` and ``no error``: that are still wrong)."""
    if problem.recheck in ("filled", "empty"):
        return f"COUNTA({span})"
    if problem.recheck == "no error":
        return f"SUMPRODUCT(ISERROR({span})*1)"
    tests = [f'{span},"{sign}"&${letter}{row}' for sign, letter, limit in
             ((">=", "I", _low(problem)), ("<=", "J", problem.high)) if limit is not None]
    return f"COUNTIFS({','.join(tests)})" if tests else f"COUNT({span})"


def _low(problem: Problem) -> float | None:
    return 0.0 if problem.recheck == "not negative" else problem.low


def _spans(cells: Sequence[str]) -> list[str]:
    """Cells as runs of one column, in sheet order: ``D8``, ``D10:D14``."""
    parsed = sorted((column_number(cell.rstrip("0123456789")), int(cell.lstrip(_LETTERS))) for cell in set(cells))
    runs: list[list[int]] = []
    for column, row in parsed:
        if runs and runs[-1][0] == column and runs[-1][2] + 1 == row:
            runs[-1][2] = row
        else:
            runs.append([column, row, row])
    return [f"${column_letters(c)}${first}" + ("" if first == last else f":${column_letters(c)}${last}")
            for c, first, last in runs]
