"""Workbooks without a plan: none exists, none was found, the run failed, the file cannot be read."""

from collections.abc import Mapping
from dataclasses import replace

from ledgersolve.findings import Answered, Conflict
from ledgersolve.report import names, style
from ledgersolve.report.fix_list import fix_list, unreadable
from ledgersolve.report.inputs import NoPlan, RunFacts, Workbook
from ledgersolve.report.run_record import Outcome, run_record
from ledgersolve.report.tables import FOOTER, Column, paragraph, quoted, write_table
from ledgersolve.workbook.origins import CellRef, Origins
from ledgersolve.workbook.problems import Problem
from ledgersolve.workbook.sheets import ResultSheet, Style

WIDTHS = (46.0, 16.0, 40.0, 46.0)
MOST_NOTICES = 12
"""Notices on the first page of a copy without a plan."""

_SAID = {
    "no plan exists": (
        "No plan can keep all the rules of this workbook.",
        "This is proven, not a matter of time: more of it would not help. Each line below says what cannot hold and "
        "the smallest change that mends it; it may take more than one of them. Then save the workbook and drop it "
        "again.",
    ),
    "none found": (
        "No plan was found within the time limit.",
        "That does not mean that there is none. Raise the time limit in Settings, or loosen a rule (capacity, "
        "counts, distances, unmet demand at a cost), save the workbook and drop it again.",
    ),
    "failed": (
        "This workbook could not be solved, for a reason that does not lie in it.",
        "Nothing in your sheets has to be changed. Drop the workbook again; if the same happens, hand this copy to "
        "whoever looks after the service.",
    ),
}


def no_plan_sheets(given: NoPlan, settled: Mapping[str, str]) -> list[ResultSheet]:
    """Sheets of a workbook without a plan: what happened and what to do, then the run record."""
    name = settled.get(names.NO_PLAN, names.NO_PLAN)
    sheet = ResultSheet(name, tab_colour=style.RUST, widths=dict(enumerate(WIDTHS)))
    headline, advice = _SAID.get(given.what, _SAID["failed"])
    sheet.put(0, 0, given.workbook.title, replace(style.TITLE, size=13.0, colour=style.QUIET))
    paragraph(sheet, 1, 0, 3, headline, Style(size=15.0, bold=True))
    row = 2
    for words in filter(None, (advice, given.words, _bound(given))):
        paragraph(sheet, row, 0, 3, words, replace(style.TEXT, size=11.0))
        row += 1
    row = _looks_wrong(sheet, row, given)
    if given.conflicts:
        _conflicts(sheet, row + 1, given)
    row = row + 3 + len(given.conflicts)
    for table in given.closest:
        row = _closest(sheet, row, table)
    made = f"{given.run.file_name}, {given.run.when:%Y-%m-%d %H:%M}."
    sheet.put(row, 0, f"{made} No cost is shown, because there is no plan to have one.",
              style.SMALL)
    sheet.landscape = True
    sheet.footer = FOOTER
    outcome = Outcome((("Verdict", given.what, style.BOLD),), tuple((n, s, "") for n, s in given.stages))
    record = run_record(settled.get(names.RUN_RECORD, names.RUN_RECORD), given.workbook, given.run, outcome)
    return [sheet, record]


def _bound(given: NoPlan) -> str:
    if given.bound is None or given.what != "none found":
        return ""
    least = style.money_words(given.bound, given.workbook.currency, "down")
    return f"Any plan, if there is one, costs at least {least}."


def _looks_wrong(sheet: ResultSheet, row: int, given: NoPlan) -> int:
    """Cells that looked wrong when the workbook was read: they may be why no plan came of it. Next free row."""
    notices = [problem for problem in given.workbook.problems if not problem.is_error and problem.cell]
    if given.what == "failed" or not notices:
        return row
    sheet.put(row + 1, 0, "Look at these cells first: they may be the cause", style.SECTION)
    shown = notices[:MOST_NOTICES]
    look = style.WRAPPED_CELL
    write_table(sheet, row + 2, [
        Column("title", "Column or setting", [p.title or None for p in shown], look, WIDTHS[0]),
        Column("cell", "Cell", [f"{p.sheet}, {p.cell}" for p in shown], replace(style.LINK, wrap=True), WIDTHS[1],
               links=[f"{quoted(p.sheet)}!{p.cell}" for p in shown]),
        Column("found", "What was found", [_found(p) for p in shown], look, WIDTHS[2]),
        Column("remedy", "What to do, if it is wrong", [p.remedy for p in shown], look, WIDTHS[3]),
    ])
    row += 3 + len(shown)
    if len(notices) > len(shown):
        sheet.put(row, 0, f"{len(notices) - len(shown)} more stand in the run record.", style.NOTE)
        row += 1
    return row + 1


def _found(problem: Problem) -> str:
    more = f" (and {style.counted(problem.count - 1, 'more cell')})" if problem.count > 1 else ""
    return f"{problem.found}{more}"


def _conflicts(sheet: ResultSheet, row: int, given: NoPlan) -> None:
    conflicts, origins = given.conflicts, given.workbook.origins
    refs = [_place(origins, conflict) for conflict in conflicts]
    sheet.put(row - 1, 0, "What cannot hold together", style.SECTION)
    look = style.WRAPPED_CELL
    write_table(sheet, row, [
        Column("what", "What cannot hold", [c.words for c in conflicts], look, WIDTHS[0]),
        Column("cell", "Cell", [f"{r.sheet}, {r.address}" if r is not None else None for r in refs],
               replace(style.LINK, wrap=True), WIDTHS[1],
               links=[f"{quoted(r.sheet)}!{r.address}" if r is not None else "" for r in refs]),
        Column("stake", "Rows and rules at stake", [_subjects(c) for c in conflicts], look, WIDTHS[2]),
        Column("remedy", "The smallest change that helps", [c.remedy for c in conflicts], look, WIDTHS[3]),
    ])


def _closest(sheet: ResultSheet, row: int, table: Answered) -> int:
    """Write a table of the plan that comes closest; gives the next free row but one."""
    sheet.put(row, 0, table.question, style.SECTION)
    paragraph(sheet, row + 1, 0, 3, table.words, style.TEXT)
    columns = []
    for number, given in enumerate(table.columns):
        values = [line[number] for line in table.rows]
        figures = [value for value in values if isinstance(value, int | float)]
        look = style.WRAPPED_CELL if given.kind == "text" else style.number(style.figure_format(figures))
        unit = "" if given.kind == "text" or "(" in given.title else " (number)"
        columns.append(Column(given.title, given.title + unit, values, look, WIDTHS[number]))
    write_table(sheet, row + 2, columns)
    return row + 4 + len(table.rows)


def _place(origins: Origins, conflict: Conflict) -> CellRef | None:
    for subject in conflict.subjects:
        ref = origins.cell(subject.sheet, subject.key, subject.title)
        if ref is None and len(subject.key) == 2:
            ref = origins.matrix_cell(subject.sheet, *subject.key)
        if ref is not None:
            return ref
    return None


def _subjects(conflict: Conflict) -> str:
    words = []
    for subject in conflict.subjects[:8]:
        parts = [", ".join(subject.key), subject.title and f"({subject.title})"]
        words.append(f"{subject.sheet}: {' '.join(part for part in parts if part)}")
    return "; ".join(words)


def fix_sheets(workbook: Workbook, run: RunFacts, settled: Mapping[str, str]) -> list[ResultSheet]:
    """Sheets of a workbook with errors: the list, then the run record."""
    listed = fix_list(settled.get(names.TO_FIX, names.TO_FIX), workbook.problems, run, workbook.title)
    outcome = Outcome((("Outcome", "to fix: not solved", style.BOLD),))
    return [listed, run_record(settled.get(names.RUN_RECORD, names.RUN_RECORD), workbook, run, outcome)]


def unreadable_sheets(problem: Problem, run: RunFacts) -> list[ResultSheet]:
    """The one sheet of a fresh workbook beside a file that cannot be read."""
    return [unreadable(names.TO_FIX, problem, run)]


def failed_sheets(reason: str, run: RunFacts) -> list[ResultSheet]:
    """The one sheet of a fresh workbook after a fault of ours, before the workbook could be read."""
    sheet = ResultSheet(names.NO_PLAN, tab_colour=style.RUST, widths=dict(enumerate(WIDTHS)), landscape=True)
    headline, advice = _SAID["failed"]
    paragraph(sheet, 0, 0, 3, headline, Style(size=15.0, bold=True))
    for row, words in enumerate((advice, reason, f"{run.file_name}, {run.when:%Y-%m-%d %H:%M}"), start=1):
        paragraph(sheet, row, 0, 3, words, replace(style.TEXT, size=11.0))
    sheet.footer = FOOTER
    return [sheet]
