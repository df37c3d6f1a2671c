"""What the first page says: one sentence with names and money, today, certainty, limits, in plain words."""

from dataclasses import replace
from datetime import datetime
from types import SimpleNamespace

import numpy as np
import pytest

from ledgersolve.findings import NOT_ANSWERED, Answered, Audit, Column, CostPart
from ledgersolve.lot_sizing.audit import audit as audit_lots
from ledgersolve.lot_sizing.case import plain_case as plain_lots
from ledgersolve.lot_sizing.plan import plan_from_made
from ledgersolve.mip import Solved, Verdict
from ledgersolve.report.answers import answers_sheet
from ledgersolve.report.certainty import how_sure, made_of, most_saved
from ledgersolve.report.inputs import LotReport, RunFacts, SiteReport, Today
from ledgersolve.report.lot_book import lot_sheets
from ledgersolve.report.site_book import site_sheets
from ledgersolve.site_selection.audit import audit as audit_sites
from ledgersolve.site_selection.case import Case, plain_case
from ledgersolve.site_selection.plan import Plan
from ledgersolve.workbook.figures import unit_words
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


def test_the_headline_says_what_is_not_delivered() -> None:
    """By hand: 5 of 20 units at 3 stay unmet, a quarter of one customer, 16.7 % of all 30."""
    case = replace(CASE, unmet_cost=3.0, demand_unit="roll cage")
    plan = plan_of(case, [0, 2])
    plan = replace(plan, share=np.array([1.0, 0.75]), unmet=np.array([0.0, 0.25]))
    audit = audit_sites(case, plan)
    report = SiteReport(WORKBOOK, case, Solved(Verdict.PROVEN_BEST, plan, audit.total, audit.total), audit, FACTS)
    page = words(site_sheets(report, {})[0])
    assert ("5\u00a0roll cages (16.7\u00a0% of the demand) will not be delivered: 1 customer does not get everything."
            in page)
    assert "will not be delivered" not in words(site_page(CASE, [0, 2]))


def test_the_headline_says_what_is_paid_once() -> None:
    """By hand: opening Turin once for 50 and closing Lyon once for 7 are part of 220 + 57."""
    case = replace(CASE, today=np.array([True, True, False]), opening_cost=np.full(3, 50.0),
                   closing_cost=np.full(3, 7.0))
    page = words(site_page(case, [0, 2]))
    assert ("All together that costs 277.00\u00a0EUR in the first year, 57.00\u00a0EUR of it once, for opening and "
            "closing." in page)
    assert "in the first year; line by line" in page


def test_sizes_of_one_site_count_once() -> None:
    """Three sites, two of them sizes of one, are two to choose from."""
    case = replace(CASE, group=np.array([0, 0, -1]), group_names=("big or small",))
    assert "Run 2 of 2 sites (sizes of one site counted once): Hamburg and Turin." in words(site_page(case, [0, 2]))


def test_why_today_cannot_be() -> None:
    """Without a cost of today the page says which rule today's sites break, and the customers have no such column."""
    case = replace(CASE, today=np.array([False, True, False]))
    plan = plan_of(case, [0, 2])
    audit = audit_sites(case, plan)
    today = Today(Solved(Verdict.NO_PLAN_EXISTS, None, None, None), None, "Lyon is 20 units too small")
    solved = Solved(Verdict.PROVEN_BEST, plan, audit.total, audit.total)
    report = SiteReport(WORKBOOK, case, solved, audit, FACTS, today)
    sheets = {sheet.name: sheet for sheet in site_sheets(report, {})}
    assert "cannot keep the rules of this workbook, so that they have no cost here. Lyon is 20 units too small." in (
        words(sheets["Decision"]))
    assert "Main site today" not in words(sheets["Plan customers"])


def looser(rule: str, loosened: str, least: float | None, most: float | None) -> tuple[Answered, ...]:
    """The answer that says what a looser rule saves."""
    columns = (Column("What is at its limit"), Column("Loosened to"), Column("Saves at least", "money"),
               Column("and at most", "money"))
    return (Answered("What holds the plan back?", "", columns, ((rule, loosened, least, most),)),)


@pytest.mark.parametrize(("least", "most", "said"), [
    (0.0, 0.0, "; a looser rule (one more site) would save nothing."),
    (12.5, 12.5, "; a looser rule (one more site) would save 12.50\u00a0EUR."),
    (12.5, None, "; a looser rule (one more site) would save 12.50\u00a0EUR or more."),
    (None, 80.0, "."),
])
def test_a_rule_at_its_limit_says_what_a_looser_one_saves(least: float | None, most: float | None, said: str) -> None:
    """What was asked ahead stands beside the rule; what is not known is not claimed."""
    page = words(site_page(replace(CASE, most_sites=2), [0, 2], answers=looser("2 sites at most", "one more site",
                                                                               least, most)))
    assert f"The most sites allowed (2) are open{said}" in page


def test_lanes_at_their_most_are_named() -> None:
    """A lane that carries all it may limits the plan; one with room to spare does not."""
    most = np.full((3, 2), np.inf)
    most[0, 0], most[2, 1] = 10.0, 25.0
    case = replace(CASE, lane_most=most)
    assert "Lanes that carry the most they may: Hamburg to C1." in words(site_page(case, [0, 2]))


def test_barred_lanes_name_who_misses_deliveries() -> None:
    """A promise that keeps a customer from an open site is told with the customer that goes short."""
    distance = np.array([[1.0, 90.0], [1.0, 90.0], [90.0, 90.0]])
    case = replace(CASE, distance=distance, longest_distance=50.0, unmet_cost=2.0)
    plan = replace(plan_of(case, [0]), unmet=np.array([0.0, 1.0]))
    audit = audit_sites(case, plan)
    report = SiteReport(WORKBOOK, case, Solved(Verdict.PROVEN_BEST, plan, audit.total, audit.total), audit, FACTS)
    assert "The longest distance allowed rules out 4 lanes, among them C2 that miss deliveries" in words(
        site_sheets(report, {})[0])


def test_a_saving_says_what_it_is_made_of() -> None:
    """Parts that move against each other are named; a saving in one part alone needs no list."""
    was = Audit((CostPart("Setup cost", 60.0), CostPart("Holding cost", 0.0)), ())
    now = Audit((CostPart("Setup cost", 30.0), CostPart("Holding cost", 10.0)), ())
    assert made_of(was, now, "EUR") == (
        " The difference: setup cost 30.00\u00a0EUR less, holding cost 10.00\u00a0EUR more.")
    assert made_of(was, replace(was, parts=(CostPart("Setup cost", 40.0),)), "EUR") == ""
    assert made_of(None, now, "EUR") == ""


@pytest.mark.parametrize(("cost", "bound", "most"), [(100.0, 98.474, 1.53), (100.0, 100.0, 0.0), (100.0, 99.99, 0.01),
                                                     (1e6, 1e6 - 1e-9, 0.0), (100.0, 101.0, 0.0)])
def test_one_figure_for_what_could_be_saved(cost: float, bound: float, most: float) -> None:
    """Tile and sentence show the same figure, in whole cents, never rounded in our favour."""
    assert most_saved(cost, bound, "EUR") == pytest.approx(most)


def test_the_lot_headline_says_what_is_late_or_lost() -> None:
    """By hand: of 10 units 4 are made too late for one week, and 3 of the second item never."""
    case = plain_lots([[10.0, 0.0, 5.0], [3.0, 0.0, 0.0]], 5.0, 1.0, backlog_cost=np.array([1.0, np.nan]),
                      lost_cost=np.array([np.nan, 2.0]))
    plan = plan_from_made(case, np.array([[6.0, 4.0, 5.0], [0.0, 0.0, 0.0]]))
    audit = audit_lots(case, plan)
    assert audit.ok
    page = words(lot_sheets(LotReport(WORKBOOK, case, Solved(Verdict.PROVEN_BEST, plan, audit.total, audit.total),
                                      audit, FACTS), {})[0])
    unit = unit_words(3.0, case.units[1])
    assert f"3\u00a0{unit} of {case.item_names[1]} will never be delivered." in page
    assert f"Up to 4\u00a0{unit} of {case.item_names[0]} will be late at a time." in page
