"""What came of one workbook, as programs read it."""

from dataclasses import dataclass, field
from enum import StrEnum
from pathlib import Path
from typing import Any

from ledgersolve.mip import Verdict
from ledgersolve.workbook.problems import Problem


class Outcome(StrEnum):
    """Where a workbook goes: back solved, back to be fixed, or to whoever looks after the program."""

    SOLVED = "solved"
    TO_FIX = "to fix"
    FAILED = "failed"


@dataclass(frozen=True)
class VariantAnswer:
    """One row of the sheet Variants, solved beside the workbook's own case."""

    variant: str
    verdict: Verdict
    total_cost: float | None
    lower_bound: float | None
    open: tuple[str, ...] | None

    def as_json(self) -> dict[str, Any]:
        """The fixed keys."""
        return {
            "variant": self.variant,
            "verdict": self.verdict.value,
            "total_cost": self.total_cost,
            "lower_bound": self.lower_bound,
            "open": None if self.open is None else list(self.open),
        }


@dataclass(frozen=True)
class Answer:
    """The answer to one workbook; ``as_json`` gives the fixed keys of the machine-readable form.

    ``seconds`` holds read, check, solve, write and total. ``reason`` says in words why a run failed, and
    ``may_pass`` that it was the machine's doing: the same workbook may be answered at another try.
    Checking without solving gives the outcome ``solved`` with no verdict: the workbook is fit to be solved.
    """

    file: str
    outcome: Outcome
    job: str | None = None
    title: str | None = None
    verdict: Verdict | None = None
    total_cost: float | None = None
    lower_bound: float | None = None
    gap: float | None = None
    returned: Path | None = None
    problems: tuple[Problem, ...] = ()
    seconds: dict[str, float] = field(default_factory=dict)
    plan: dict[str, Any] | None = None
    variants: tuple[VariantAnswer, ...] = ()
    reason: str = ""
    may_pass: bool = False

    def as_json(self) -> dict[str, Any]:
        """The object that ``--json`` prints."""
        return {
            "file": self.file,
            "job": self.job,
            "title": self.title,
            "outcome": self.outcome.value,
            "verdict": None if self.verdict is None else self.verdict.value,
            "total_cost": self.total_cost,
            "lower_bound": self.lower_bound,
            "gap_pct": None if self.gap is None else 100.0 * self.gap,
            "returned": None if self.returned is None else str(self.returned),
            "problems": [problem.as_json() for problem in self.problems],
            "seconds": {step: round(self.seconds.get(step, 0.0), 4) for step in STEPS},
            "plan": self.plan,
            "variants": [variant.as_json() for variant in self.variants],
        }


STEPS = ("read", "check", "solve", "write", "total")
EXIT_CODES = {Outcome.SOLVED: 0, Outcome.TO_FIX: 3, Outcome.FAILED: 4}


def exit_code(answers: list[Answer]) -> int:
    """0 when all are solved, 4 when one failed, else 3."""
    return max((EXIT_CODES[answer.outcome] for answer in answers), default=0)
