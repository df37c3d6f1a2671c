"""The questions a manager asks of a choice of sites, answered ahead by solving, within the time given.

Each answer is checked by re-solving and says whether it is exact, a proven interval, or not answered in the time
given. The order is the order of need: what comes later gets the time that is left.
"""

import time
from collections.abc import Callable
from dataclasses import replace

from ledgersolve.findings import Answered
from ledgersolve.mip import Limits, Solved
from ledgersolve.site_selection.alternatives import how_many, runner_up, why_closed, why_open
from ledgersolve.site_selection.asker import Asker
from ledgersolve.site_selection.binding import today_against_plan, what_binds
from ledgersolve.site_selection.case import Case
from ledgersolve.site_selection.firmness import demand_off, how_firm
from ledgersolve.site_selection.plan import Plan

QUESTIONS: tuple[tuple[str, Callable[[Asker], Answered]], ...] = (
    ("why open", why_open),
    ("how many", how_many),
    ("demand off", demand_off),
    ("why closed", why_closed),
    ("runner-up", runner_up),
    ("what binds", what_binds),
    ("how firm", how_firm),
)


def answer_questions(
    case: Case, solved: Solved[Plan], limits: Limits, today: Solved[Plan] | None = None
) -> tuple[Answered, ...]:
    """Answer the questions about a plan, each with the time it took."""
    if solved.plan is None or solved.cost is None:
        return ()
    clock = limits.start()
    asker = Asker(case, solved.plan, solved.cost, clock)
    answers = []
    if today is not None and today.plan is not None and today.cost is not None:
        answers.append(today_against_plan(case, solved.plan, today.plan, today.cost, solved.cost))
    for name, question in QUESTIONS:
        began = time.monotonic()
        answer = question(asker)
        answers.append(replace(answer, seconds=time.monotonic() - began))
        clock.note(name)
    return tuple(answers)
