"""Answers about lots that ran out of time assert no more than their rows, and their rows no more than the truth.

The engine is replaced by one that works for so many re-solves and then gives nothing, the plan it was started
from, or a wide range; what the answers say then is held against the textbook model.
"""

import pickle
import re
from dataclasses import dataclass, replace
from functools import cache

import numpy as np
import pytest

from ledgersolve.findings import NOT_ANSWERED, Answered
from ledgersolve.lot_sizing import bottlenecks, firmness
from ledgersolve.lot_sizing.against_rules import against_rules
from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.firmness import LEVERS, moved
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.questions import answer_questions
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.lot_sizing.why_lots import why_this_lot
from ledgersolve.mip import Limits, Solved, Verdict
from tests.lot_textbook import textbook_cost
from tests.test_lot_sizing_questions import LIMITS, WW, on_one_line, planned

WAYS = ("nothing", "start", "wide range")


@cache
def solved_once(case: bytes, start: bytes) -> Solved[Plan]:
    """The true end of a re-solve; the same cases are asked about over and over."""
    return solve(pickle.loads(case), LIMITS, pickle.loads(start))


@cache
def best_of(case: bytes) -> float | None:
    """Cost of the best plan by the textbook model; None where there is none."""
    return textbook_cost(pickle.loads(case))


@dataclass
class Rationed:
    """Solves truly ``k`` times, then no more than ``how`` says."""

    k: int
    how: str
    calls: int = 0

    def __call__(self, case: Case, limits: Limits, start: Plan | None = None) -> Solved[Plan]:
        """Solve, or run out of time."""
        self.calls += 1
        if self.calls <= self.k:
            return solved_once(pickle.dumps(case), pickle.dumps(start))
        checked = None if start is None else audit(case, start)
        if self.how == "nothing" or start is None or checked is None or not checked.ok:
            return Solved(Verdict.NONE_FOUND, None, None, None)
        bound = None if self.how == "start" else 0.6 * checked.total
        return Solved(Verdict.BEST_FOUND, start, checked.total, bound)


@cache
def tight(seed: int) -> tuple[Case, Solved[Plan]]:
    """Two items on a line that holds the demand, but not a tenth more of it; and its best plan."""
    case = on_one_line(1.0, seed, n=2, t=5)
    load = float(max(case.demand.sum(axis=0).cumsum() / np.arange(1, case.t + 1)))
    case = replace(case, capacity=np.full((1, case.t), 1.04 * load))
    return case, planned(case)


@cache
def best_cost(seed: int, lever: str, factor: float) -> float | None:
    """Cost of the best plan of a changed case; None where there is none."""
    return best_of(pickle.dumps(moved(tight(seed)[0], lever, factor)))


@pytest.mark.parametrize("seed", range(2))
@pytest.mark.parametrize("k", (0, 1, 2, 4, 7, 30))
@pytest.mark.parametrize("how", WAYS)
def test_no_answer_says_more_than_its_rows(seed: int, k: int, how: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """What was not answered is named; no lot is called safe for a plan that was not searched for; ranges hold."""
    case, solved = tight(seed)
    for module in (bottlenecks, firmness):
        monkeypatch.setattr(module, "solve", Rationed(k, how))
    told = {answer.question: answer for answer in answer_questions(case, solved, LIMITS)}
    firm(told["Which of the first lots are safe to release?"], told.get("How much of each first lot?"), seed)
    savings(told["Where are the bottlenecks?"], case, solved)


def firm(answer: Answered, lots: Answered | None, seed: int) -> None:
    """Rows that count as answered have the true cost, to what counts as good enough; the words count the others."""
    answered = [row for row in answer.rows if row[1] is not None]
    missing = [row for row in answer.rows if row[5] == NOT_ANSWERED]
    impossible = [row for row in answer.rows if row[5] == "no plan exists then"]
    assert len(answered) + len(missing) + len(impossible) == len(LEVERS)
    for row, (label, lever, factor) in zip(answer.rows, LEVERS, strict=True):
        best = best_cost(seed, lever, factor)
        assert row[0] == label
        if row in answered:
            assert best - 1e-6 <= row[1] <= best * 1.011
        elif row in impossible:
            assert best is None
            assert f"{label}: no plan exists then." in answer.words
        else:
            assert label.lower() in answer.words.partition("Not answered in the time given:")[2]
    assert answer.headline == bool(answered or impossible)
    assert ("made in the plans found for all 6" in answer.words) == (len(answered) == len(LEVERS))
    assert bool(answered) == (lots is not None)
    assert lots is None or ("can be released now" in lots.words) == (len(answered) == len(LEVERS))


def savings(answer: Answered, case: Case, solved: Solved[Plan]) -> None:
    """A tenth more time saves what the textbook model says, within the row; nothing at least is no figure."""
    more = next(row for row in answer.rows if str(row[0]).startswith("a tenth more time"))
    true = solved.cost - best_of(pickle.dumps(replace(case, capacity=case.capacity * 1.1)))
    assert more[1] is None or more[1] <= true + 1e-3
    assert more[2] is None or more[2] >= true - 1e-3
    missing = [row for row in answer.rows if row[3] == NOT_ANSWERED]
    assert (NOT_ANSWERED in answer.words.lower()) == bool(missing)
    for _, least, most, how in answer.rows:
        assert least is None or least == most or least > 0
        assert not (least is None and most is None) or how == NOT_ANSWERED
    claims = "saves anything" in answer.words or re.search("Most is saved", answer.words)
    unknown = [row for row in answer.rows if row[2] is None]
    assert not (claims and (missing or unknown)), answer.words


def test_a_demand_that_no_plan_meets_is_named_first() -> None:
    """A line that holds the demand, but not a tenth more: the sentence begins with that case."""
    case, solved = tight(0)
    assert best_cost(0, "demand", 1.1) is None
    answer = firmness.how_firm(case, solved, LIMITS.start())[0]
    assert answer.words.startswith("Demand 10 % higher: no plan exists then.")
    assert "the 5 of 6 changed cases that have one" in answer.words


def test_rules_of_thumb_that_break_rules_stay_off_the_first_page() -> None:
    """Where none keeps all rules there is no comparison to show; today's plan is none of them."""
    case, solved = tight(1)
    answer = against_rules(case, solved.plan, solved.cost)
    assert not any(row[5] == "yes" for row in answer.rows[1:])
    assert not answer.headline
    same = replace(case, today=solved.plan.made, compare_today=True)
    assert not against_rules(same, solved.plan, solved.cost).headline
    assert against_rules(WW, planned(WW).plan, 864.0).headline


class Over:
    """A clock that is over after so many questions to it."""

    def __init__(self, asks: int) -> None:
        self.asks = asks

    def left(self) -> float:
        """Seconds left."""
        return 5.0 if self.asks > 0 else 0.0

    def over(self) -> bool:
        """Whether the run must end."""
        self.asks -= 1
        return self.asks < 0


@pytest.mark.parametrize("asks", range(14))
def test_lots_that_were_not_tried_are_not_spoken_of(asks: int) -> None:
    """An item is said to hardly matter, or none to, only where all of its lots were tried."""
    case = plain_case([[10, 10, 10], [10, 10, 10]], [[9.99] * 3, [9.99] * 3], 1.0)
    plan = plan_from_made(case, [[10, 10, 10], [10, 10, 10]])
    answer = why_this_lot(case, plan, Over(asks))
    tried = {code: sum(row[0] == code for row in answer.rows) for code in case.items}
    named = re.search(r"Lots of ([^.]*) hardly matter", answer.words)
    for code in named[1].split(", ") if named else ():
        assert tried[code] == 3, answer.words
    assert "no item whose lots hardly matter" not in answer.words or sum(tried.values()) == 6
    assert (f"{sum(tried.values())} of 6 lots were tried" in answer.words) == bool(answer.rows)
    assert bool(answer.rows) or answer.words == "Not answered in the time given."
