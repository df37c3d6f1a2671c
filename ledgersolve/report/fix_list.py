"""The list of what is to be fixed: where, what was found, what is expected, what to do, and a live status."""

from collections import Counter
from collections.abc import Sequence
from dataclasses import replace

from ledgersolve.report import style
from ledgersolve.report.inputs import RunFacts
from ledgersolve.report.live_status import DONE, DROP_AGAIN, TO_FIX, status
from ledgersolve.report.tables import FOOTER, Column, paragraph, quoted, write_table
from ledgersolve.workbook.problems import Problem
from ledgersolve.workbook.sheets import LiveFormat, ResultSheet

WIDTHS = (17.0, 8.0, 19.0, 38.0, 34.0, 44.0, 8.0, 13.0)


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
    waiting = (" An entry marked (*) is looked at again at the next drop only, and its status stays until then."
               if any(not status(problem)[1] for problem in errors) else "")
    paragraph(sheet, 2, 0, 7, "What to do: go down the list (a click on the cell leads there), mend each cell or "
                              f"take its row out, and watch its status turn to “{DONE}”.{waiting} Save the workbook "
                              "and drop it again: list and marks go by themselves.", replace(style.TEXT, size=11.0))
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
    left = sum(1 for problem in errors if status(problem)[1])
    sheet.put(row, 3, "Entries mended so far", style.BOLD)
    sheet.put(row, 4, 0, style.number(style.WHOLE), formula=f'=COUNTIF({span},"{DONE}")')
    counted = "" if left == len(errors) else f", {left} of which count themselves as soon as the cell is right"
    sheet.put(row + 1, 3, f"of {style.counted(len(errors), 'entry', 'entries')}{counted}", style.NOTE)
    sheet.put(list_row - 1, 0, "Errors", style.SECTION)
    return list_row


def _entries(sheet: ResultSheet, problems: Sequence[Problem], row: int, live: bool) -> None:
    wrapped = style.WRAPPED_CELL
    live_ones = [status(problem) for problem in problems]
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
        columns.append(Column("status", "Status", [value for value, _ in live_ones],
                              replace(style.BOLD, align="center"), WIDTHS[7],
                              [formula for _, formula in live_ones]))
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
