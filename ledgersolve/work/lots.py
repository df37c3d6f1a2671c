"""Lot sizing from a case to all that its sheets are made of."""

from dataclasses import replace
from typing import Any

from ledgersolve.contract.reading import Reading
from ledgersolve.findings import Answered
from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case
from ledgersolve.lot_sizing.explain import explain
from ledgersolve.lot_sizing.plan import plan_from_made
from ledgersolve.lot_sizing.questions import answer_questions
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.mip import Solved, Verdict
from ledgersolve.report.inputs import LotReport, Today
from ledgersolve.report.lot_book import lot_sheets
from ledgersolve.report.names import wanted_names
from ledgersolve.work.shared import (
    NO_FACTS,
    Budget,
    Worked,
    confirmed,
    main_part,
    questions_part,
    times,
    without_plan,
)


def work(reading: Reading, case: Case, budget: Budget) -> Worked:
    """Solve, audit and question a case; today's plan is costed as it is."""
    solved = solve(case, main_part(reading, budget))
    audited = confirmed(case, solved, audit)
    if audited is None:
        return without_plan(reading, case, solved, budget, explain)
    answers: tuple[Answered, ...] = ()
    if reading.run.questions:
        answers = answer_questions(case, solved, questions_part(reading, budget))
    given = LotReport(reading, case, solved, audited, NO_FACTS, _today_plan(case), answers)
    return Worked(
        solved,
        {"setups": solved.plan.setups} if solved.plan is not None else None,
        wanted_names("lot sizing"),
        lambda facts, names: lot_sheets(replace(given, run=facts), names),
        record=times(reading, answers),
    )


def _today_plan(case: Case) -> Today[Any] | None:
    """Today's plan as it is, costed, with the rules it breaks: it is shown, never solved."""
    if not case.compare_today or case.today is None:
        return None
    plan = plan_from_made(case, case.today)
    audited = audit(case, plan)
    return Today(Solved(Verdict.BEST_FOUND, plan, audited.total, None), audited)
