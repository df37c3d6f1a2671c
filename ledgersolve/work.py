"""From a case to all that its sheets are made of: solved, audited, compared with today, varied, questioned.

One function a job, and the table ``TRADES`` that names them: a third job is one more entry. Every plan is
recomputed by its audit before anyone sees it.
"""

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from datetime import datetime
from typing import Any

from ledgersolve import report
from ledgersolve.answer import VariantAnswer
from ledgersolve.contract.reading import Job, Reading
from ledgersolve.findings import Answered, Audit, Conflict, Explanation
from ledgersolve.lot_sizing.audit import audit as audit_lots
from ledgersolve.lot_sizing.case import Case as LotCase
from ledgersolve.lot_sizing.explain import explain as explain_lots
from ledgersolve.lot_sizing.plan import plan_from_made
from ledgersolve.lot_sizing.questions import answer_questions as answer_lot_questions
from ledgersolve.lot_sizing.solve import solve as solve_lots
from ledgersolve.mip import Limits, Progress, Solved, Verdict
from ledgersolve.report.inputs import LotReport, NoPlan, RunFacts, SiteReport, Today, VariantResult
from ledgersolve.site_selection.audit import audit as audit_sites
from ledgersolve.site_selection.case import Case as SiteCase
from ledgersolve.site_selection.explain import explain as explain_sites
from ledgersolve.site_selection.questions import answer_questions as answer_site_questions
from ledgersolve.site_selection.solve import solve as solve_sites
from ledgersolve.workbook.sheets import ResultSheet

COST_TOLERANCE = 1e-6
BESIDE_SHARE = 0.3
"""Share of the time limit kept for today's network and the variants, where there are any."""

_NO_FACTS = RunFacts("", "", datetime.min)  # takes the place of the facts until the run is over
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


def work(reading: Reading, limits: Limits) -> Worked:
    """Solve what a workbook asks for, within the limits."""
    if reading.job is None or reading.case is None:
        raise ValueError("only a reading without errors can be solved")
    return TRADES[reading.job](reading, reading.case, Budget(limits, time.monotonic()))


def _work_sites(reading: Reading, case: SiteCase, budget: Budget) -> Worked:
    solved = solve_sites(case, _main_part(reading, case, budget))
    audit = confirmed(case, solved, audit_sites)
    if audit is None:
        return _without_plan(reading, case, solved, budget, explain_sites)
    today = None
    if case.compare_today:
        seconds = budget.left() / (2 + len(case.variants))
        found = solve_sites(case.as_today(), budget.part("today's network", seconds))
        today = Today(found, confirmed(case.as_today(), found, audit_sites))
    variants = _variants(case, budget, reading.run.questions_share if reading.run.questions else 0.0)
    answers: tuple[Answered, ...] = ()
    if reading.run.questions:
        answers = answer_site_questions(
            case, solved, _questions_part(reading, budget), None if today is None else today.solved)
    given = SiteReport(reading, case, solved, audit, _NO_FACTS, today, variants, answers)
    return Worked(
        solved,
        {"open": solved.plan.open_codes(case.sites)} if solved.plan is not None else None,
        report.wanted_names("site selection"),
        lambda facts, names: report.site_sheets(replace(given, run=facts), names),
        tuple(_variant_answer(case, result) for result in variants),
        record=_times(reading, answers),
    )


def _work_lots(reading: Reading, case: LotCase, budget: Budget) -> Worked:
    solved = solve_lots(case, _main_part(reading, case, budget))
    audit = confirmed(case, solved, audit_lots)
    if audit is None:
        return _without_plan(reading, case, solved, budget, explain_lots)
    answers: tuple[Answered, ...] = ()
    if reading.run.questions:
        answers = answer_lot_questions(case, solved, _questions_part(reading, budget))
    given = LotReport(reading, case, solved, audit, _NO_FACTS, _today_plan(case), answers)
    return Worked(
        solved,
        {"setups": solved.plan.setups} if solved.plan is not None else None,
        report.wanted_names("lot sizing"),
        lambda facts, names: report.lot_sheets(replace(given, run=facts), names),
        record=_times(reading, answers),
    )


TRADES: Mapping[Job, Callable[[Reading, Any, Budget], Worked]] = {
    Job.SITE_SELECTION: _work_sites,
    Job.LOT_SIZING: _work_lots,
}


def _times(reading: Reading, answers: tuple[Answered, ...]) -> tuple[tuple[str, str], ...]:
    """Time that each question took, and the share of the time limit that was kept for them."""
    if not reading.run.questions:
        return (("Kept for questions", "nothing: Settings says that none are asked"),)
    if not answers:
        return ()
    seconds = reading.run.questions_share * reading.run.time_limit
    kept = f"{100 * reading.run.questions_share:.0f} % of {reading.run.time_limit:g} seconds: {seconds:g} at most"
    times = [(f"Question: {answer.question}", f"{answer.seconds:.2f} seconds") for answer in answers]
    return (("Kept for questions", kept), *times)


def _questions_part(reading: Reading, budget: Budget) -> Limits:
    """Limits of the questions: their share of the time limit, however much of it the plan has left over."""
    return budget.part("questions", reading.run.questions_share * budget.limits.seconds)


def _main_part(reading: Reading, case: SiteCase | LotCase, budget: Budget) -> Limits:
    """Limits of the workbook's own case; what it leaves goes to the rest."""
    beside = isinstance(case, SiteCase) and (case.compare_today or case.variants)
    kept = (BESIDE_SHARE if beside else 0.0) + (reading.run.questions_share if reading.run.questions else 0.0)
    return budget.part("plan", (1.0 - min(kept, 0.6)) * budget.limits.seconds)


def _variants(case: SiteCase, budget: Budget, questions_share: float) -> tuple[VariantResult, ...]:
    results = []
    for number, variant in enumerate(case.variants):
        left = budget.left() - questions_share * budget.limits.seconds
        part = budget.part(f"variant {variant.name}", left / (len(case.variants) - number))
        changed = case.under(variant)
        solved = solve_sites(changed, part)
        results.append(VariantResult(variant, solved, confirmed(changed, solved, audit_sites)))
    return tuple(results)


def _variant_answer(case: SiteCase, result: VariantResult) -> VariantAnswer:
    solved = result.solved
    opened = None if solved.plan is None else tuple(solved.plan.open_codes(case.sites))
    return VariantAnswer(result.variant.name, solved.verdict, solved.cost, solved.bound, opened)


def _today_plan(case: LotCase) -> Today[Any] | None:
    """Today's plan as it is, costed, with the rules it breaks: it is shown, never solved."""
    if not case.compare_today or case.today is None:
        return None
    plan = plan_from_made(case, case.today)
    audit = audit_lots(case, plan)
    return Today(Solved(Verdict.BEST_FOUND, plan, audit.total, None), audit)


def _without_plan(
    reading: Reading, case: Any, solved: Solved[Any], budget: Budget,
    explain: Callable[[Any, Limits], Explanation[Any]],
) -> Worked:
    why: Explanation[Any] = Explanation(())
    if solved.verdict is Verdict.NO_PLAN_EXISTS:
        why = explain(case, budget.part("why no plan exists", budget.left()))
    words = f"The plan that comes closest {why.closest_words}." if why.closest_words else ""
    given = NoPlan(
        reading, solved.verdict.value, _NO_FACTS, words, why.conflicts, solved.bound,
        tuple((stage.name, stage.seconds) for stage in solved.stages),
    )
    return Worked(
        solved, None, report.wanted_names("no plan"),
        lambda facts, names: report.no_plan_sheets(replace(given, run=facts), names), conflicts=why.conflicts,
    )
