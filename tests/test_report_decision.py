"""What the first page says: one sentence with names and money, today, certainty, limits, in plain words."""

from dataclasses import replace
from datetime import datetime
from types import SimpleNamespace

import numpy as np
import pytest

from ledgersolve.findings import NOT_ANSWERED, Answered, Column
from ledgersolve.lot_sizing.audit import audit as audit_lots
from ledgersolve.lot_sizing.case import plain_case as plain_lots
from ledgersolve.lot_sizing.plan import plan_from_made
from ledgersolve.mip import Solved, Verdict
from ledgersolve.report.answers import answers_sheet
from ledgersolve.report.decision import how_sure
from ledgersolve.report.inputs import LotReport, RunFacts, SiteReport, Today
from ledgersolve.report.lot_book import lot_sheets
from ledgersolve.report.site_book import site_sheets
from ledgersolve.site_selection.audit import audit as audit_sites
from ledgersolve.site_selection.case import Case, plain_case
from ledgersolve.site_selection.plan import Plan
from ledgersolve.workbook.origins import Origins
from ledgersolve.workbook.sheets import ResultSheet

FACTS = RunFacts("book.xlsx", "0" * 64, datetime(2026, 12, 1, 12, 0), (("LedgerSolve", "0.1.0"),))
WORKBOOK = SimpleNamespace(
    title="Depots", currency="EUR", problems=(), run=SimpleNamespace(time_limit=60.0, accepted_gap=0.01),
    origins=Origins(), settings=(("Currency", "EUR"),), defaults=(), road_cost=None, road_factor=1.0)
SOLVER_WORDS = ("optim", "heuristic", "relax", "dual", "infeasible", "MIP", "objective", "constraint", "variable",
                "solver", "branch", "Lagrang", "lower bound")


def plan_of(case: Case, site: list[int]) -> Plan:
    """Plan in which customer i is served by site[i] alone."""
    opened = np.zeros(case.m, dtype=bool)
    opened[site] = True
    n = len(site)
    return Plan(opened, np.array(site), np.arange(n), np.ones(n), np.zeros(case.n))


def site_page(case: Case, site: list[int], *, bound: float | None = None, verdict: Verdict = Verdict.PROVEN_BEST,
              today: list[int] | None = None, answers: tuple[Answered, ...] = ()) -> ResultSheet:
    """First page of a plan."""
    plan = plan_of(case, site)
    audit = audit_sites(case, plan)
    solved = Solved(verdict, plan, audit.total, audit.total if bound is None else bound)
    was = None
    if today is not None:
        before = plan_of(case, today)
        checked = audit_sites(case.as_today(), before)
        was = Today(Solved(Verdict.PROVEN_BEST, before, checked.total, checked.total), checked)
    return site_sheets(SiteReport(WORKBOOK, case, solved, audit, FACTS, was, (), answers), {})[0]


def words(sheet: ResultSheet) -> str:
    """All texts of a page, from the top."""
    return "\n".join(str(cell.value) for _, cell in sorted(sheet.cells.items()) if isinstance(cell.value, str))


CASE = replace(plain_case([100.0, 120.0, 90.0], [[1.0, 9.0], [2.0, 2.0], [8.0, 1.0]], [10.0, 20.0]),
               site_names=("Hamburg", "Lyon", "Turin"))


def test_the_headline_names_sites_and_money() -> None:
    """By hand: Hamburg and Turin cost 100 + 90 + 10 x 1 + 20 x 1 = 220."""
    assert "Run 2 of 3 sites: Hamburg and Turin. All together that costs 220.00\u00a0EUR per year." in words(
        site_page(CASE, [0, 2]))


def test_one_site_is_counted_too() -> None:
    """A single site is one of so many; without any, only a proven plan says that no site is cheaper."""
    assert "Run 1 of 3 sites: Lyon." in words(site_page(CASE, [1, 1]))
    none = replace(CASE, unmet_cost=1.0)
    plan = Plan(np.zeros(3, dtype=bool), np.zeros(0, dtype=np.int64), np.zeros(0, dtype=np.int64), np.zeros(0),
                np.ones(2))
    audit = audit_sites(none, plan)
    for verdict, said in ((Verdict.PROVEN_BEST, True), (Verdict.BEST_FOUND, False)):
        solved = Solved(verdict, plan, audit.total, audit.total if said else None)
        page = words(site_sheets(SiteReport(WORKBOOK, none, solved, audit, FACTS), {})[0])
        assert ("no site makes that cheaper" in page) == said


def test_the_sheet_of_answers_says_how_many_lines_have_none_and_what_to_do() -> None:
    """Two lines ran out of time: counted at the top, with the settings that give more; else no such words."""
    rows = (("S1", None, NOT_ANSWERED), ("S2", 5.0, "exact"), ("S3", None, f"upwards: {NOT_ANSWERED}"))
    columns = (Column("Site"), Column("More", "money"), Column("How sure"))
    for given, said in ((rows, True), (rows[1:2], False)):
        sheet = answers_sheet("Answers", (Answered("Why?", "So.", columns, given),), "EUR", " per year")
        assert ('2 lines say "not answered in the time given"' in words(sheet)) == said
        assert ("Share of time for questions (%)" in words(sheet)) == said


def test_against_today_in_one_sentence() -> None:
    """By hand: Lyon alone costs 120 + 60 = 180, today's Hamburg and Turin 220: 40 less, 18.1 % rounded down."""
    case = replace(CASE, today=np.array([True, False, True]), compare_today=True)
    page = words(site_page(case, [1, 1], today=[0, 2]))
    assert "That is 40.00\u00a0EUR (18.1\u00a0%) less than today's 2 sites cost with deliveries" in page
    assert "Opens: Lyon." in page
    assert "Closes: Hamburg and Turin." in page
    assert "2 customers get another main site" in page


def test_today_that_cannot_run_has_no_figure() -> None:
    """Where today's sites cannot keep the rules, no cost of today is shown."""
    case = replace(CASE, today=np.array([True, False, False]), compare_today=True)
    plan = plan_of(case, [1, 1])
    audit = audit_sites(case, plan)
    solved = Solved(Verdict.PROVEN_BEST, plan, audit.total, audit.total)
    was = Today(Solved(Verdict.NO_PLAN_EXISTS, None, None, None), None)
    page = site_sheets(SiteReport(WORKBOOK, case, solved, audit, FACTS, was), {})[0]
    assert "Today's sites alone cannot keep the rules" in words(page)
    assert "not possible" in words(page)


def test_no_change_is_said() -> None:
    """Where the plan is today's network, the page says that no change pays."""
    case = replace(CASE, today=np.array([False, True, False]), compare_today=True)
    page = words(site_page(case, [1, 1], today=[1, 1]))
    assert "no change pays" in page
    assert "No customer gets another main site." in page


def test_limits_are_named() -> None:
    """A full site, a count at its limit and a site closed by rule are named as what limits the plan."""
    case = replace(CASE, capacity=np.array([np.inf, 30.0, np.inf]), most_sites=1, rule=np.array([-1, 0, 0]))
    page = words(site_page(case, [1, 1]))
    assert "Full to capacity: Lyon." in page
    assert "The most sites allowed (1) are open." in page
    assert "Closed by rule: Hamburg." in page


@pytest.mark.parametrize(("verdict", "bound", "said"), [
    (Verdict.PROVEN_BEST, 1000.0, "not even by 0.01 EUR"),
    (Verdict.PROVEN_BEST, 999.95, "cheaper by more than 0.05\u00a0EUR (0.005"),
    (Verdict.WITHIN_GAP, 995.0, "stopped once no plan could be cheaper by more than 1.0\u00a0%. At most "
                                "5.00\u00a0EUR (0.5"),
    (Verdict.BEST_FOUND, 900.0, "The time limit ended the search"),
])
def test_certainty_in_words(verdict: Verdict, bound: float, said: str) -> None:
    """Each verdict has its sentence, with the most that could still be saved."""
    solved = Solved(verdict, plan_of(CASE, [1, 1]), 1000.0, bound)
    assert said in how_sure(solved, "EUR", 0.01)[0]


def test_an_unknown_bound_is_said_to_be_unknown() -> None:
    """Without a bound nothing is claimed."""
    solved = Solved(Verdict.BEST_FOUND, plan_of(CASE, [1, 1]), 1000.0, None)
    assert "not known" in how_sure(solved, "EUR", 0.01)[0]


def test_headline_answers_stand_on_the_page() -> None:
    """Answers meant for the first page are there, others not."""
    page = words(site_page(CASE, [0, 2], answers=(
        Answered("Why Turin?", "Without it the plan costs 12 EUR more.", headline=True),
        Answered("Else?", "Nothing."))))
    assert "Why Turin? Without it the plan costs 12 EUR more." in page
    assert "Else?" not in page


def test_no_solver_language() -> None:
    """The first page of either job has no word of solver language."""
    pages = [words(site_page(CASE, [0, 2])), words(lot_page())]
    for page in pages:
        assert [word for word in SOLVER_WORDS if word.casefold() in page.casefold()] == []


def lot_page(today: bool = False) -> ResultSheet:
    """First page of a lot-sizing plan on one machine that is full in the first week."""
    case = plain_lots([[10.0, 10.0, 0.0]], 30.0, 1.0, period_unit="week", item_names=("Spade",), resources=("Press",),
                      capacity=np.array([[20.0, 20.0, 20.0]]), overtime_limit=np.zeros(1), overtime_cost=np.zeros(1),
                      use_cost=np.zeros(1), item_resource=np.array([0]), time_per_unit=np.array([1.0]),
                      today=np.array([[10.0, 10.0, 0.0]]), compare_today=today)
    plan = plan_from_made(case, [[20.0, 0.0, 0.0]])
    audit = audit_lots(case, plan)
    solved = Solved(Verdict.PROVEN_BEST, plan, audit.total, audit.total)
    was = None
    if today:
        before = plan_from_made(case, case.today)
        checked = audit_lots(case, before)
        was = Today(Solved(Verdict.BEST_FOUND, before, checked.total, None), checked)
    return lot_sheets(LotReport(WORKBOOK, case, solved, audit, FACTS, was), {})[0]


def test_the_lot_headline_and_today() -> None:
    """By hand: one lot of 20 costs 30 + 10 in stock = 40; two lots of 10 cost 60: 20 less, 33.3 %."""
    page = words(lot_page(today=True))
    assert "Make 1 lot of 1 item, week 1 to 3. All together that costs 40.00\u00a0EUR." in page
    assert "That is 20.00\u00a0EUR (33.3\u00a0%) less than today's plan with 2 lots costs." in page
    assert "Press is full in week 1." in page
    assert "Start now (week 1): Spade." in page
