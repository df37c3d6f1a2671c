"""The questions a manager asks of a lot plan, answered ahead by solving, within the time given."""

import time
from collections.abc import Callable
from dataclasses import replace

from ledgersolve.findings import Answered
from ledgersolve.lot_sizing.case import Case
from ledgersolve.lot_sizing.firmness import bottlenecks, how_firm
from ledgersolve.lot_sizing.plan import Plan
from ledgersolve.lot_sizing.why_lots import against_rules, why_this_lot
from ledgersolve.mip import Limits, Solved


def answer_questions(case: Case, solved: Solved[Plan], limits: Limits) -> tuple[Answered, ...]:
    """Answer the questions about a plan, each with the time it took."""
    if solved.plan is None or solved.cost is None:
        return ()
    plan, cost, clock = solved.plan, solved.cost, limits.start()
    questions: tuple[Callable[[], Answered], ...] = (
        lambda: against_rules(case, plan, cost),
        lambda: why_this_lot(case, plan, clock),
        lambda: bottlenecks(case, solved, clock),
        lambda: how_firm(case, solved, clock),
    )
    answers = []
    for question in questions:
        began = time.monotonic()
        answer = question()
        answers.append(replace(answer, seconds=time.monotonic() - began))
        clock.note(answer.question)
    return tuple(answers)
