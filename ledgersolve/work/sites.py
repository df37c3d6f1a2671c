"""Site selection from a case to all that its sheets are made of."""

from dataclasses import replace
from typing import Any

import numpy as np

from ledgersolve.answer import VariantAnswer
from ledgersolve.contract.reading import Reading
from ledgersolve.findings import Answered
from ledgersolve.mip import Solved, Verdict
from ledgersolve.report.inputs import SiteReport, Today, VariantResult
from ledgersolve.report.names import wanted_names
from ledgersolve.report.site_book import site_sheets
from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.case import Case
from ledgersolve.site_selection.explain import explain
from ledgersolve.site_selection.plan import Plan
from ledgersolve.site_selection.questions import answer_questions
from ledgersolve.site_selection.solve import solve
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

BESIDE_SHARE = 0.3
"""Share of the time limit kept for today's network and the variants, where there are any."""


def work(reading: Reading, case: Case, budget: Budget) -> Worked:
    """Solve, audit, compare with today, vary and question a case."""
    beside = BESIDE_SHARE if case.compare_today or case.variants else 0.0
    solved = solve(case, main_part(reading, budget, beside))
    audited = confirmed(case, solved, audit)
    if audited is None:
        return without_plan(reading, case, solved, budget, explain)
    today = None
    if case.compare_today:
        seconds = budget.left() / (2 + len(case.variants))
        network = case.as_today()
        found = solve(network, budget.part("today's network", seconds))
        today = Today(found, confirmed(network, found, audit), _why(network, found, budget))
    variants = _variants(case, budget, reading.run.questions_share if reading.run.questions else 0.0)
    answers: tuple[Answered, ...] = ()
    if reading.run.questions:
        answers = answer_questions(
            case, solved, questions_part(reading, budget), None if today is None else today.solved,
            tuple(result.solved for result in variants))
    given = SiteReport(reading, case, solved, audited, NO_FACTS, today, variants, answers)
    return Worked(
        solved,
        {"open": solved.plan.open_codes(case.sites)} if solved.plan is not None else None,
        wanted_names("site selection"),
        lambda facts, names: site_sheets(replace(given, run=facts), names),
        tuple(_variant_answer(case, result) for result in variants),
        record=times(reading, answers),
    )


def _why(case: Case, found: Solved[Plan], budget: Budget) -> str:
    """Which rule today's network cannot keep, in one sentence without a stop; "" where that is not known."""
    if found.verdict is not Verdict.NO_PLAN_EXISTS:
        return ""
    conflicts = explain(_without_others(case), budget.part("why today cannot be", 0.2 * budget.left())).conflicts
    return conflicts[0].words.rstrip(".") if conflicts else ""


def _without_others(case: Case) -> Case:
    """The case as if it knew today's sites only: that others are closed is no reason why today cannot be."""
    kept = np.flatnonzero(case.today)
    changes: dict[str, Any] = {name: tuple(getattr(case, name)[j] for j in kept) for name in ("sites", "site_names")}
    for name in _BY_SITE:
        figures = getattr(case, name)
        changes[name] = None if figures is None else figures[kept]
    return replace(case, **changes)


_BY_SITE = ("fixed_cost", "capacity", "least_volume", "handling_cost", "rule", "today", "opening_cost",
            "closing_cost", "group", "lane_cost", "distance", "lane_most", "site_latitude", "site_longitude")
"""Fields of a case with a row a site."""


def _variants(case: Case, budget: Budget, questions_share: float) -> tuple[VariantResult, ...]:
    results = []
    for number, variant in enumerate(case.variants):
        left = budget.left() - questions_share * budget.limits.seconds
        part = budget.part(f"variant {variant.name}", left / (len(case.variants) - number))
        changed = case.under(variant)
        solved = solve(changed, part)
        results.append(VariantResult(variant, solved, confirmed(changed, solved, audit)))
    return tuple(results)


def _variant_answer(case: Case, result: VariantResult) -> VariantAnswer:
    solved = result.solved
    opened = None if solved.plan is None else tuple(solved.plan.open_codes(case.sites))
    return VariantAnswer(result.variant.name, solved.verdict, solved.cost, solved.bound, opened)
