"""The run record: what was read, with which settings and defaults, by which versions, in which time."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import datetime, timedelta
from typing import Any

from ledgersolve.mip import Solved
from ledgersolve.report import names, style
from ledgersolve.report.inputs import RunFacts, Workbook
from ledgersolve.report.tables import FOOTER, Column, heading, paragraph, write_table
from ledgersolve.workbook.problems import Problem
from ledgersolve.workbook.sheets import ResultSheet, Scalar, Style

RECORDED_COST = "$B$9"
"""Cell of the cost the plan was solved with; ``outcome_of`` puts it second."""


@dataclass(frozen=True)
class Outcome:
    """How the run ended: label and value pairs, with the style of each value."""

    rows: tuple[tuple[str, Scalar, Style], ...]
    stages: tuple[tuple[str, float, str], ...] = ()
    notes: tuple[str, ...] = ()


def outcome_of(solved: Solved[Any], currency: str, per: str) -> Outcome:
    """Give verdict, cost, bound and stages of a solve; a figure that does not exist is said not to."""
    money = style.number(style.money_format(currency))
    rows: list[tuple[str, Scalar, Style]] = [("Verdict", solved.verdict.value, style.BOLD)]
    for label, value in ((f"Cost of the plan ({currency}{per})", solved.cost),
                         (f"Proven lower bound ({currency}{per})", solved.bound)):
        rows.append((label, "none known" if value is None else value, style.TEXT if value is None else money))
    gap = solved.gap
    rows.append(("Gap between them (% of the cost)", "none known" if gap is None or gap == float("inf") else gap,
                 style.TEXT if gap is None else style.number("0.0000%")))
    stages = tuple((stage.name, stage.seconds, stage.note) for stage in solved.stages)
    return Outcome(tuple(rows), stages, solved.notes)


def run_record(name: str, workbook: Workbook, run: RunFacts, outcome: Outcome) -> ResultSheet:
    """Write the run record."""
    sheet = ResultSheet(name, tab_colour=style.QUIET, widths={0: 40.0, 1: 62.0, 2: 22.0, 3: 36.0})
    heading(sheet, names.RUN_RECORD, "How these results came about, so that they can be repeated and checked.", 4)
    row = _facts(sheet, 3, run, outcome)
    row = _steps(sheet, row + 1, run, outcome)
    row = _settings(sheet, row + 1, workbook)
    row = _defaults(sheet, row + 1, workbook)
    row = _notices(sheet, row + 1, [p for p in workbook.problems if not p.is_error])
    _notes(sheet, row + 1, outcome.notes)
    sheet.footer = FOOTER
    return sheet


def _facts(sheet: ResultSheet, row: int, run: RunFacts, outcome: Outcome) -> int:
    sheet.put(row, 0, "Run", style.SECTION)
    rows: list[tuple[str, Scalar, Style]] = [
        ("Workbook", run.file_name, style.WRAPPED_CELL),
        ("SHA-256 of the workbook", run.sha256, style.WRAPPED_CELL),
        ("Date and time of the run", serial(run.when), Style(number_format=style.DATE_TIME)),
        *outcome.rows,
        *[(f"Version of {program}", version, style.TEXT) for program, version in run.versions],
        *[(label, words, style.WRAPPED_CELL) for label, words in run.more],
    ]
    for place, (label, value, look) in enumerate(rows, start=row + 1):
        sheet.put(place, 0, label, style.CELL)
        sheet.put(place, 1, value, replace(look, align="left", indent=1))
    return row + 1 + len(rows)


def serial(when: datetime) -> float:
    """Date and time as the number a sheet shows as a date."""
    return (when.replace(tzinfo=None) - datetime(1899, 12, 30)) / timedelta(days=1)


def _steps(sheet: ResultSheet, row: int, run: RunFacts, outcome: Outcome) -> int:
    sheet.put(row, 0, "Steps and times", style.SECTION)
    steps = [(f"{step} (whole step)", seconds, "") for step, seconds in run.seconds]
    stages = [(f"solve: {name}", seconds, note) for name, seconds, note in outcome.stages]
    rows = steps + stages
    if not rows:
        sheet.put(row + 1, 0, "not recorded", style.NOTE)
        return row + 2
    write_table(sheet, row + 1, [
        Column("step", "Step", [step for step, _, _ in rows], width=40),
        Column("note", "What happened", [note for _, _, note in rows], style.WRAPPED_CELL, 62),
        Column("seconds", "Time (seconds)", [seconds for _, seconds, _ in rows], style.number(style.SECONDS), 22),
    ])
    return row + 2 + len(rows)


def _settings(sheet: ResultSheet, row: int, workbook: Workbook) -> int:
    sheet.put(row, 0, "Settings used", style.SECTION)
    write_table(sheet, row + 1, [
        Column("setting", "Setting", [name for name, _ in workbook.settings], width=40),
        Column("value", "Value used", [value for _, value in workbook.settings], style.WRAPPED_CELL, 62),
    ])
    return row + 2 + len(workbook.settings)


def _defaults(sheet: ResultSheet, row: int, workbook: Workbook) -> int:
    sheet.put(row, 0, "Defaults taken where a cell was empty", style.SECTION)
    defaults = workbook.defaults
    if not defaults:
        sheet.put(row + 1, 0, "none", style.NOTE)
        return row + 2
    write_table(sheet, row + 1, [
        Column("what", "Column or setting", [d.title for d in defaults], width=40),
        Column("value", "Default taken", [d.value for d in defaults], style.WRAPPED_CELL, 62),
        Column("cells", "Cells (number)", [d.cells for d in defaults], style.number(style.WHOLE), 22),
        Column("sheet", "Sheet", [d.sheet for d in defaults], width=36),
    ])
    return row + 2 + len(defaults)


def _notices(sheet: ResultSheet, row: int, notices: Sequence[Problem]) -> int:
    sheet.put(row, 0, "Notices about the workbook", style.SECTION)
    if not notices:
        sheet.put(row + 1, 0, "none", style.NOTE)
        return row + 2
    write_table(sheet, row + 1, [
        Column("where", "Where", [where(p) for p in notices], style.WRAPPED_CELL, 40),
        Column("found", "Found", [p.found for p in notices], style.WRAPPED_CELL, 62),
        Column("count", "Places (number)", [p.count for p in notices], style.number(style.WHOLE), 22),
        Column("remedy", "What to do", [p.remedy for p in notices], style.WRAPPED_CELL, 36),
    ])
    return row + 2 + len(notices)


def _notes(sheet: ResultSheet, row: int, notes: Sequence[str]) -> None:
    sheet.put(row, 0, "How the search went", style.SECTION)
    for place, words in enumerate(notes or ("nothing to add",), start=row + 1):
        paragraph(sheet, place, 0, 3, words, style.TEXT)


def where(problem: Problem) -> str:
    """Place of a problem in words: sheet, cell, title."""
    return ", ".join(part for part in (problem.sheet, problem.cell, problem.title) if part) or "the workbook"
