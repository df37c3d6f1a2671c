"""What working on a workbook has in common for all jobs: its time, the audit's word, workbooks without a plan."""

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from datetime import datetime
from typing import Any

from ledgersolve.answer import VariantAnswer
from ledgersolve.contract.reading import Reading
from ledgersolve.findings import Answered, Audit, Conflict, Explanation
from ledgersolve.mip import Limits, Progress, Solved, Verdict
from ledgersolve.report.inputs import NoPlan, RunFacts
from ledgersolve.report.names import wanted_names
from ledgersolve.report.outcomes import no_plan_sheets
from ledgersolve.workbook.sheets import ResultSheet

COST_TOLERANCE = 1e-6
NO_FACTS = RunFacts("", "", datetime.min)  # takes the place of the facts until the run is over
Sheets = Callable[[RunFacts, Mapping[str, str]], list[ResultSheet]]


class AuditError(Exception):
    """The audit does not confirm a plan: it is not handed out."""


@dataclass(frozen=True)
class Worked:
    """What solving gave: figures for the answer, and how to make the sheets once their names are settled.

    ``record`` are rows of the run record: what each answer ahead took.
    """

    solved: Solved[Any]
    plan: dict[str, Any] | None
    wanted_names: tuple[str, ...]
    sheets: Sheets
    variants: tuple[VariantAnswer, ...] = ()
    conflicts: tuple[Conflict, ...] = ()
    record: tuple[tuple[str, str], ...] = ()


@dataclass
class Budget:
    """The time limit of one workbook, shared between its solves; steps are named in the progress stream."""

    limits: Limits
    started: float

    def part(self, stage: str, seconds: float) -> Limits:
        """Limits of one solve of at most this many seconds, and of what is left."""

        def tell(progress: Progress) -> None:
            self.limits.progress(replace(progress, stage=f"{stage}: {progress.stage}"))

        return replace(self.limits, seconds=max(0.2, min(seconds, self.left())), progress=tell)

    def left(self) -> float:
        """Seconds left."""
        return self.limits.seconds - (time.monotonic() - self.started)


def confirmed(case: Any, solved: Solved[Any], audit: Callable[[Any, Any], Audit]) -> Audit | None:
    """Audit of the plan, or None without a plan.

    Raises
    ------
    AuditError
        A rule is broken, or cost or bound are not what the solver said; the words name what differed.
    """
    if solved.plan is None or solved.cost is None:
        return None
    found = audit(case, solved.plan)
    slack = COST_TOLERANCE * max(1.0, abs(found.total))
    if not found.ok:
        broken = found.broken()[0]
        raise AuditError(f"the plan breaks the rule {broken.rule} on {broken.subject}: required "
                         f"{broken.required}, got {broken.got}")
    if not abs(found.total - solved.cost) <= slack:  # so put, a cost that is not a number fails too
        raise AuditError(f"the plan costs {found.total:.6f} by the audit, {solved.cost:.6f} by the solver")
    if solved.bound is not None and not solved.bound <= found.total + slack:
        raise AuditError(f"the bound {solved.bound:.6f} lies above the plan's cost {found.total:.6f}")
    return found


def times(reading: Reading, answers: tuple[Answered, ...]) -> tuple[tuple[str, str], ...]:
    """Time that each question took, and the share of the time limit that was kept for them."""
    if not reading.run.questions:
        return (("Kept for questions", "nothing: Settings says that none are asked"),)
    if not answers:
        return ()
    seconds = reading.run.questions_share * reading.run.time_limit
    kept = (f"{100 * reading.run.questions_share:.0f} % of {reading.run.time_limit:g} seconds: {seconds:g} at most, "
            "a part of the step solve")
    taken = [(f"Question: {answer.question}", f"{answer.seconds:.2f} seconds") for answer in answers]
    return (("Kept for questions", kept), *taken)


def questions_part(reading: Reading, budget: Budget) -> Limits:
    """Limits of the questions: their share of the time limit, however much of it the plan has left over."""
    return budget.part("questions", reading.run.questions_share * budget.limits.seconds)


def main_part(reading: Reading, budget: Budget, beside: float = 0.0) -> Limits:
    """Limits of the workbook's own case; what it leaves goes to the rest.

    ``beside`` is the share kept for what is solved beside it, the questions apart.
    """
    kept = beside + (reading.run.questions_share if reading.run.questions else 0.0)
    return budget.part("plan", (1.0 - min(kept, 0.6)) * budget.limits.seconds)


def without_plan(
    reading: Reading, case: Any, solved: Solved[Any], budget: Budget,
    explain: Callable[[Any, Limits], Explanation[Any]],
) -> Worked:
    """Say what happened to a case without a plan, and why, where none exists."""
    why: Explanation[Any] = Explanation(())
    if solved.verdict is Verdict.NO_PLAN_EXISTS:
        why = explain(case, budget.part("why no plan exists", budget.left()))
    words = f"The plan that comes closest {why.closest_words}." if why.closest_words else ""
    given = NoPlan(
        reading, solved.verdict.value, NO_FACTS, words, why.conflicts, solved.bound,
        tuple((stage.name, stage.seconds) for stage in solved.stages), why.shown,
    )
    return Worked(
        solved, None, wanted_names("no plan"),
        lambda facts, names: no_plan_sheets(replace(given, run=facts), names), conflicts=why.conflicts,
    )
