"""The questions a manager asks of a lot plan, answered ahead by solving, within the time given."""

import time
from collections.abc import Callable
from dataclasses import replace

from ledgersolve.findings import Answered
from ledgersolve.lot_sizing.against_rules import against_rules
from ledgersolve.lot_sizing.bottlenecks import bottlenecks
from ledgersolve.lot_sizing.case import Case
from ledgersolve.lot_sizing.firmness import how_firm
from ledgersolve.lot_sizing.plan import Plan
from ledgersolve.lot_sizing.service import late_and_lost
from ledgersolve.lot_sizing.why_lots import why_this_lot
from ledgersolve.mip import Clock, Limits, Solved

Question = Callable[[Clock], tuple[Answered, ...]]


def answer_questions(case: Case, solved: Solved[Plan], limits: Limits) -> tuple[Answered, ...]:
    """Answer the questions about a plan, each with the time it took.

    Each question has a share of the time that is left; what it leaves goes to the next ones.
    """
    if solved.plan is None or solved.cost is None:
        return ()
    plan, cost, clock = solved.plan, solved.cost, limits.start()
    questions: tuple[tuple[float, Question], ...] = (
        (1.0, lambda _: (against_rules(case, plan, cost),)),
        (1.0, lambda _: (late_and_lost(case, plan),)),
        (0.25, lambda own: (why_this_lot(case, plan, own),)),
        (0.4, lambda own: (bottlenecks(case, solved, own),)),
        (1.0, lambda own: how_firm(case, solved, own)),
    )
    answers: list[Answered] = []
    for share, question in questions:
        began = time.monotonic()
        seconds = max(share * clock.left(), 1e-3)
        given = question(replace(limits, seconds=seconds).start())
        took = time.monotonic() - began
        answers += [replace(answer, seconds=took if k == 0 else 0.0) for k, answer in enumerate(given)]
        clock.note(given[0].question)
    return tuple(answers)
