"""The questions a manager asks of a choice of sites, answered ahead by solving, within the time given.

Each answer is checked by re-solving and says whether it is exact, a proven interval, or not answered in the time
given. Each question has its part of the time; what it leaves goes to the next ones, and what is left in the end
to those that stayed open.
"""

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

from ledgersolve.findings import Answered
from ledgersolve.mip import Limits, Solved, Verdict
from ledgersolve.site_selection.alternatives import runner_up, why_closed, why_open
from ledgersolve.site_selection.asker import LEAST_SECONDS, Asker
from ledgersolve.site_selection.binding import today_against_plan, what_binds
from ledgersolve.site_selection.case import Case
from ledgersolve.site_selection.counts import how_many
from ledgersolve.site_selection.firmness import demand_off, how_firm
from ledgersolve.site_selection.plan import Plan
from ledgersolve.site_selection.variants_regret import variants_regret


@dataclass(frozen=True)
class Question:
    """A question, the order in which it is asked (the cheap ones first), and its part of the time."""

    name: str
    ask: Callable[[Asker], Answered]
    turn: int
    weight: float


QUESTIONS = (
    Question("demand off", demand_off, 1, 1.0),
    Question("why open", why_open, 3, 1.0),
    Question("why closed", why_closed, 5, 1.5),
    Question("how many", how_many, 4, 1.0),
    Question("runner-up", runner_up, 6, 0.5),
    Question("how firm", how_firm, 7, 1.5),
    Question("what binds", what_binds, 2, 1.0),
)
"""In the order in which the answers are shown: what the plan's sites cannot carry must reach the first page."""
VARIANTS_PART = 0.1
"""Part of the time for keeping the plan's sites under the variants, which are solved beside the questions."""


def answer_questions(
    case: Case, solved: Solved[Plan], limits: Limits, today: Solved[Plan] | None = None,
    variants: Sequence[Solved[Plan]] = (),
) -> tuple[Answered, ...]:
    """Answer the questions about a plan, each with the time it took; ``variants`` as they were solved already."""
    if solved.plan is None or solved.cost is None:
        return ()
    whole = sum(stage.seconds for stage in solved.stages) if solved.verdict is Verdict.PROVEN_BEST else 0.0
    asker = Asker(case, solved.plan, solved.cost, limits.start(), solved.bound, solved.prices, whole)
    first: tuple[Answered, ...] = ()
    if variants:
        began = time.monotonic()
        with asker.part(VARIANTS_PART):
            answer = variants_regret(asker, variants)
        first = (replace(answer, seconds=time.monotonic() - began),)
    answers: dict[str, Answered] = {}
    by_turn = sorted(QUESTIONS, key=lambda question: question.turn)
    _ask(asker, by_turn, answers)
    if asker.clock.left() > LEAST_SECONDS:  # what is settled is not solved again
        _ask(asker, by_turn, answers)
    if today is not None and today.plan is not None and today.cost is not None:
        first = (today_against_plan(case, solved.plan, today.plan, today.cost, solved.cost), *first)
    return (*first, *(answers[question.name] for question in QUESTIONS))


def _ask(asker: Asker, questions: list[Question], answers: dict[str, Answered]) -> None:
    """Ask one after the other, each within its part of the time left; seconds of an earlier round count too."""
    for number, question in enumerate(questions):
        began = time.monotonic()
        with asker.part(question.weight / sum(one.weight for one in questions[number:])):
            answer = question.ask(asker)
        before = answers[question.name].seconds if question.name in answers else 0.0
        answers[question.name] = replace(answer, seconds=before + time.monotonic() - began)
        asker.clock.note(question.name)
