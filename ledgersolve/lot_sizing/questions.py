"""The questions a manager asks of a lot plan, answered ahead by solving, within the time given."""

from ledgersolve.findings import Answered
from ledgersolve.lot_sizing.case import Case
from ledgersolve.lot_sizing.plan import Plan
from ledgersolve.mip import Limits, Solved


def answer_questions(case: Case, solved: Solved[Plan], limits: Limits) -> tuple[Answered, ...]:
    """Answer the questions about a plan."""
    return ()
