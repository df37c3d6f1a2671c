"""The list of checks on a Proof sheet: each rule with what it requires, a live figure, and ok or BROKEN."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

from ledgersolve.findings import Audit
from ledgersolve.report import style
from ledgersolve.report.tables import Column, Figure, paragraph, write_table
from ledgersolve.workbook.sheets import LiveFormat, ResultSheet

TOLERANCE = 1e-6
OK, BROKEN = "ok", "BROKEN"


@dataclass(frozen=True)
class LiveCheck:
    """A rule as the sheets themselves can check it.

    ``got`` is a figure from the plan's sheets, ``broken_by`` by how much the rule is broken (0 where it
    holds), both formulas; ``required`` is in words, or a formula. ``number_format`` is as its figures need unless
    given.
    """

    rule: str
    subject: str
    required: str | Figure
    got: Figure
    broken_by: Figure
    number_format: str = ""


@dataclass(frozen=True)
class ChecksAt:
    """Where the live checks stand: span of the status column, for the master check."""

    status: str
    count: int

    def master(self) -> str:
        """Formula (without =) that says whether all checks hold."""
        return f'IF(COUNTIF({self.status},"{OK}")=ROWS({self.status}),"All checks hold","A check is BROKEN")'


def count_check(rule: str, subject: str, required: str, counted: str) -> LiveCheck:
    """Check that a count of offenders, given as a formula, is zero."""
    return LiveCheck(rule, subject, required, Figure(0, counted), Figure(0, counted))


def write_checks(sheet: ResultSheet, row: int, checks: Sequence[LiveCheck], tolerance: str) -> int:
    """Write the live checks at ``row``; ``tolerance`` is the cell of the tolerance. Gives the next free row."""
    last = row + len(checks)
    rows = range(row + 2, last + 2)
    required = [c.required.value if isinstance(c.required, Figure) else c.required for c in checks]
    formulas = [c.required.formula if isinstance(c.required, Figure) else "" for c in checks]
    figures = [style.number(c.number_format or style.figure_format(_figures(c))) for c in checks]
    asked = [replace(style.WRAPPED_CELL, number_format=look.number_format) for look in figures]
    plain = style.number(style.WHOLE)
    write_table(sheet, row, [
        Column("rule", "Rule", [c.rule for c in checks], style.WRAPPED_CELL, 30),
        Column("subject", "Checked on", [c.subject for c in checks], style.WRAPPED_CELL, 36),
        Column("required", "Required (in the rule's unit)", required, style.WRAPPED_CELL, 30, formulas, styles=asked),
        Column("got", "Found in the sheets (in the rule's unit)", [c.got.value for c in checks], plain, 18,
               [c.got.formula for c in checks], styles=figures),
        Column("broken", "Broken by (in the rule's unit)", [c.broken_by.value for c in checks], plain, 13,
               [c.broken_by.formula for c in checks], styles=figures),
        Column("status", "Status", [OK if c.broken_by.value <= TOLERANCE else BROKEN for c in checks],
               replace(style.BOLD, align="center"), 12,
               [f'IF(E{r}<={tolerance},"{OK}","{BROKEN}")' for r in rows]),
    ])
    shade_status(sheet, row + 1, last, 5)
    return last + 1


def _figures(check: LiveCheck) -> list[float]:
    required = [check.required.value] if isinstance(check.required, Figure) else []
    return [check.got.value, check.broken_by.value, *required]


def checks_at(name: str, row: int, count: int) -> ChecksAt:
    """Where ``write_checks`` at ``row`` puts the status column; ``name`` is the sheet as formulas name it."""
    return ChecksAt(f"{name}!$F${row + 2}:$F${row + 1 + count}", count)


def shade_status(sheet: ResultSheet, first: int, last: int, column: int) -> None:
    """Shade ok and BROKEN in a status column as it changes."""
    letter = "ABCDEFGHIJ"[column]
    for word, look in ((OK, style.FINE), (BROKEN, style.BAD)):
        sheet.live_formats.append(
            LiveFormat(first, column, last, column, f'=${letter}{first + 1}="{word}"', look)
        )


def write_audit(sheet: ResultSheet, row: int, audit: Audit) -> int:
    """Write what the audit found before the workbook was returned; gives the next free row."""
    sheet.put(row, 0, "Audit before the workbook was returned", style.SECTION)
    paragraph(sheet, row + 1, 0, 5, "The plan recomputed from the checked rows by a part of the program that "
                                    "shares nothing with the search. These are its findings as words; they do not "
                                    "change with the sheet.", style.NOTE)
    checks = audit.checks
    write_table(sheet, row + 2, [
        Column("rule", "Rule", [c.rule for c in checks], style.WRAPPED_CELL, 30),
        Column("subject", "Checked on", [c.subject for c in checks], style.WRAPPED_CELL, 36),
        Column("required", "Required", [c.required for c in checks], style.WRAPPED_CELL, 30),
        Column("got", "Found by the audit", [c.got for c in checks], style.WRAPPED_CELL, 16),
        Column("broken", "Broken by (in the rule's unit)", [c.worst for c in checks],
               style.number(style.figure_format([c.worst for c in checks])), 13),
        Column("status", "Status", [OK if c.ok else BROKEN for c in checks], replace(style.BOLD, align="center"), 12),
    ])
    shade_status(sheet, row + 3, row + 2 + max(1, len(checks)), 5)
    return row + 3 + len(checks)
