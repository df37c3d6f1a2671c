"""One workbook from path to returned copy: outcomes, names, nothing overwritten, failures answered."""

import errno
import hashlib
import os
import zipfile
from importlib import import_module

import numpy as np
import openpyxl
import pytest

from ledgersolve import Outcome, Verdict, check_workbook, job, solve_workbook
from ledgersolve.mip import Solved
from ledgersolve.work import AuditError
from tests.books import lot_book, site_book

SITES = [{"Site": "A", "Fixed cost": 10}, {"Site": "B", "Fixed cost": 30}]
CUSTOMERS = [{"Customer": "x", "Demand": 4}, {"Customer": "y", "Demand": 6}]
COSTS = [[1, 9], [8, 1]]


def good(tmp_path, **settings):
    """Two sites, two customers: both open, 10 + 30 + 4 x 1 + 6 x 1 = 50."""
    given = {"Title": "Two by two", "Questions": "no", **settings}
    return site_book(tmp_path / "plan.xlsx", SITES, CUSTOMERS, lane_costs=COSTS, settings=given)


def digest(path) -> str:
    """SHA-256 of a file."""
    return hashlib.sha256(path.read_bytes()).hexdigest()


def test_a_good_workbook_comes_back_solved(tmp_path) -> None:
    """The answer holds the pencil optimum, and the copy opens on the decision."""
    answer = solve_workbook(good(tmp_path))
    assert answer.outcome is Outcome.SOLVED
    assert answer.verdict is Verdict.PROVEN_BEST
    assert answer.total_cost == pytest.approx(50)
    assert answer.returned == tmp_path / "plan solved.xlsx"
    book = openpyxl.load_workbook(answer.returned)
    assert book.sheetnames[0] == "Decision"
    assert book.active.title == "Decision"
    assert book.sheetnames[-4:] == ["Settings", "Sites", "Customers", "Lane costs"]


def test_the_machine_readable_answer_has_the_fixed_keys(tmp_path) -> None:
    """All keys of the contract, and no others."""
    told = solve_workbook(good(tmp_path)).as_json()
    assert list(told) == [
        "file", "job", "title", "outcome", "verdict", "total_cost", "lower_bound", "gap_pct", "returned",
        "problems", "seconds", "plan", "variants",
    ]
    assert list(told["seconds"]) == ["read", "check", "solve", "write", "total"]
    assert told["gap_pct"] <= 0.01
    assert told["plan"] == {"open": ["A", "B"]}


def test_the_original_is_only_read(tmp_path) -> None:
    """Solving leaves the bytes of the analyst's file alone."""
    path = good(tmp_path)
    before = digest(path)
    solve_workbook(path)
    assert digest(path) == before


def test_nothing_is_overwritten(tmp_path) -> None:
    """A second answer stands beside the first, which stays as it is."""
    path = good(tmp_path)
    first = solve_workbook(path).returned
    kept = digest(first)
    second = solve_workbook(path).returned
    assert second.name == "plan solved 2.xlsx"
    assert digest(first) == kept


@pytest.mark.parametrize(("dropped", "returned"), [
    ("plan to fix.xlsx", "plan solved.xlsx"), ("plan to fix to fix.xlsx", "plan solved.xlsx"),
    ("plan solved 2.xlsx", "plan solved.xlsx"), ("plan solved.xlsx", "plan solved 2.xlsx"),
    ("plan failed.xlsx", "plan solved.xlsx"), ("to fix.xlsx", "to fix solved.xlsx"),
    ("plan solved 2027.xlsx", "plan solved 2027 solved.xlsx"), ("unsolved.xlsx", "unsolved solved.xlsx"),
])
def test_the_ending_of_a_former_answer_is_replaced(tmp_path, dropped, returned) -> None:
    """Names do not grow from drop to drop, and the dropped file itself stays as it is."""
    path = good(tmp_path).rename(tmp_path / dropped)
    before = digest(path)
    assert solve_workbook(path).returned.name == returned
    assert digest(path) == before


def test_a_folder_without_hard_links_is_served_too(tmp_path, monkeypatch) -> None:
    """Where links are refused, the answer still comes under an unused name."""
    def refuse(*_: object) -> None:
        raise OSError("no links here")

    monkeypatch.setattr(os, "link", refuse)
    path = good(tmp_path)
    names = [solve_workbook(path).returned.name for _ in range(2)]
    assert names == ["plan solved.xlsx", "plan solved 2.xlsx"]


def test_a_long_name_is_cut_not_lost(tmp_path) -> None:
    """A name of 255 bytes leaves room for the word behind it, cut between characters."""
    path = good(tmp_path)
    long = path.rename(tmp_path / ("ü" * 125 + ".xlsx"))
    returned = solve_workbook(long).returned
    assert returned.exists()
    assert len(os.fsencode(returned.name)) <= 255
    assert returned.name.endswith(" solved.xlsx")


def test_a_faulty_workbook_comes_back_to_fix(tmp_path) -> None:
    """The list leads, the faults are in the answer with their cells."""
    customers = [{"Customer": "x", "Demand": "many"}, {"Customer": "y", "Demand": 6}]
    path = site_book(tmp_path / "bad.xlsx", SITES, customers, lane_costs=COSTS)
    answer = solve_workbook(path)
    assert answer.outcome is Outcome.TO_FIX
    assert answer.verdict is None
    assert [(p.sheet, p.cell) for p in answer.problems if p.is_error] == [("Customers", "B2")]
    assert openpyxl.load_workbook(answer.returned).sheetnames[0] == "To fix"


def test_a_mended_copy_comes_back_solved_without_list_and_marks(tmp_path) -> None:
    """Fix and drop again: the returned file itself is mended and solved."""
    customers = [{"Customer": "x", "Demand": "many"}, {"Customer": "y", "Demand": 6}]
    path = site_book(tmp_path / "bad.xlsx", SITES, customers, lane_costs=COSTS, settings={"Questions": "no"})
    returned = solve_workbook(path).returned
    book = openpyxl.load_workbook(returned)
    book["Customers"]["B2"] = 4
    book.save(tmp_path / "mended.xlsx")
    answer = solve_workbook(tmp_path / "mended.xlsx")
    assert answer.total_cost == pytest.approx(50)
    names = openpyxl.load_workbook(answer.returned).sheetnames
    assert "To fix" not in names
    with zipfile.ZipFile(answer.returned) as package:
        assert not any(b"ledgersolve-flag" in package.read(name) for name in package.namelist())


def test_checking_writes_a_copy_for_faults_only(tmp_path) -> None:
    """A fit workbook is told fit, and no file appears."""
    answer = check_workbook(good(tmp_path))
    assert (answer.outcome, answer.verdict, answer.returned) == (Outcome.SOLVED, None, None)
    assert [path.name for path in tmp_path.iterdir()] == ["plan.xlsx"]


def test_a_file_that_is_no_workbook_is_answered_in_a_fresh_one(tmp_path) -> None:
    """The answer to a text file is a workbook of ours."""
    path = tmp_path / "notes.xlsx"
    path.write_text("site;cost\nA;10\n")
    answer = solve_workbook(path)
    assert answer.outcome is Outcome.TO_FIX
    assert openpyxl.load_workbook(answer.returned).sheetnames[0] == "To fix"


def test_a_missing_file_is_the_caller_s_mistake(tmp_path) -> None:
    """No answer is made up for a path without a file."""
    with pytest.raises(FileNotFoundError, match="there is no file"):
        solve_workbook(tmp_path / "none.xlsx")


def test_a_plan_that_fails_its_audit_is_never_handed_out(tmp_path, monkeypatch) -> None:
    """The outcome is failed, it says what differed, and the copy holds no decision."""
    def wrong(*_: object) -> None:
        raise AuditError("the plan costs 51 by the audit, 50 by the solver")

    monkeypatch.setattr(job, "work", wrong)
    answer = solve_workbook(good(tmp_path))
    assert answer.outcome is Outcome.FAILED
    assert "51 by the audit" in answer.reason
    assert answer.total_cost is None
    assert openpyxl.load_workbook(answer.returned).sheetnames[0] == "No plan"


def test_a_fault_of_our_own_shows_no_traceback(tmp_path, monkeypatch) -> None:
    """An unforeseen error becomes an answer in words."""
    def broken(*_: object) -> None:
        raise ZeroDivisionError("division by zero")

    monkeypatch.setattr(job, "work", broken)
    answer = solve_workbook(good(tmp_path))
    assert answer.outcome is Outcome.FAILED
    assert "division" not in answer.reason
    assert answer.returned is not None


@pytest.mark.parametrize("trouble", [OSError(errno.ENOSPC, "No space left on device"), ImportError("numpy")])
def test_a_machine_that_gets_in_the_way_is_told_from_a_fault_of_our_own(tmp_path, monkeypatch, trouble) -> None:
    """A full disk or a program in mid-upgrade may pass: the answer says so and asks for another try."""
    def stopped(*_: object) -> None:
        raise trouble

    monkeypatch.setattr(job, "work", stopped)
    answer = solve_workbook(good(tmp_path))
    assert (answer.outcome, answer.may_pass) == (Outcome.FAILED, True)
    assert "drop it again" in answer.reason
    assert ("No space left" in answer.reason) == isinstance(trouble, OSError)


def test_no_plan_exists_goes_back_to_be_fixed(tmp_path) -> None:
    """The rule that cannot hold is named with its cell, and no cost is shown."""
    sites = [{**site, "Capacity": 4} for site in SITES]
    path = site_book(tmp_path / "tight.xlsx", sites, CUSTOMERS, lane_costs=COSTS)
    answer = solve_workbook(path)
    assert (answer.outcome, answer.verdict) == (Outcome.TO_FIX, Verdict.NO_PLAN_EXISTS)
    assert answer.total_cost is None
    assert [(p.sheet, p.cell) for p in answer.problems if p.is_error] == [("Sites", "C2")]


def test_variants_are_answered_beside_the_case(tmp_path) -> None:
    """A variant changes what its row names: with A closed, B serves both for 30 + 4 x 8 + 6 x 1."""
    path = site_book(
        tmp_path / "plan.xlsx", SITES, CUSTOMERS, lane_costs=COSTS, settings={"Questions": "no"},
        variants=[{"Variant": "without A", "Closed": "A"}, {"Variant": "double", "Demand factor": 2}],
    )
    answer = solve_workbook(path)
    told = {variant.variant: (variant.total_cost, variant.open) for variant in answer.variants}
    assert told["without A"] == (pytest.approx(68), ("B",))
    assert told["double"] == (pytest.approx(60), ("A", "B"))


def test_lot_sizing_takes_the_same_way(tmp_path) -> None:
    """Two periods, one setup: 5 + 3 held once."""
    path = lot_book(tmp_path / "lots.xlsx", [{"Item": "a", "Setup cost": 5, "Holding cost": 1}], [[2, 3]],
                    settings={"Questions": "no"})
    answer = solve_workbook(path)
    assert answer.total_cost == pytest.approx(8)
    assert answer.as_json()["plan"] == {"setups": 1}


def run_record(answer) -> dict[str, object]:
    """First two cells of every row of the run record."""
    book = openpyxl.load_workbook(answer.returned)
    return {row[0]: row[1] for row in book["Run record"].iter_rows(values_only=True) if row[0] is not None}


def test_switched_off_questions_are_not_asked_and_the_record_says_so(tmp_path, monkeypatch) -> None:
    """`Questions: no`: no answer is sought, no sheet of answers, and a line in the run record."""
    def never(*_: object) -> tuple:
        raise AssertionError("asked although switched off")

    monkeypatch.setattr("ledgersolve.work.sites.answer_questions", never)
    answer = solve_workbook(good(tmp_path))
    assert "Questions answered" not in openpyxl.load_workbook(answer.returned).sheetnames
    assert run_record(answer)["Kept for questions"] == "nothing: Settings says that none are asked"


@pytest.mark.parametrize("job_kind", ["sites", "lots"])
def test_questions_get_their_share_of_the_time_limit_and_no_more(tmp_path, monkeypatch, job_kind) -> None:
    """A quarter of 40 seconds is 10, even where the plan took none; the record names share and times."""
    steering = {"Time limit (seconds)": 40, "Share of time for questions (%)": 25, "Questions": "yes"}
    work = import_module(f"ledgersolve.work.{job_kind}")
    asked, real = [], work.answer_questions

    def spied(case, solved, limits, *more):
        asked.append(limits.seconds)
        return real(case, solved, limits, *more)

    monkeypatch.setattr(work, "answer_questions", spied)
    path = good(tmp_path, **steering) if job_kind == "sites" else lot_book(
        tmp_path / "lots.xlsx", [{"Item": "I", "Setup cost": 5, "Holding cost": 1}], [[3, 4]], settings=steering)
    answer = solve_workbook(path)
    assert asked == [10.0]
    record = run_record(answer)
    assert record["Kept for questions"] == "25 % of 40 seconds: 10 at most, a part of the step solve"
    assert sum(str(label).startswith("Question: ") for label in record) >= 4


def test_questions_without_any_answer_stay_off_the_first_page(tmp_path, monkeypatch) -> None:
    """Every re-solve runs out of time: no "Asked ahead", and the sheet says how many lines have no answer."""
    out_of_time = Solved(Verdict.NONE_FOUND, None, None, None)
    monkeypatch.setattr("ledgersolve.site_selection.asker.solve", lambda *_: out_of_time)
    monkeypatch.setattr("ledgersolve.site_selection.asker.Asker.flip_lows", np.full(2, -np.inf))
    book = openpyxl.load_workbook(solve_workbook(good(tmp_path, Questions="yes")).returned)
    texts = {sheet: [str(cell.value) for row in book[sheet].iter_rows() for cell in row if cell.value is not None]
             for sheet in ("Decision", "Questions answered")}
    assert "Asked ahead" not in texts["Decision"]
    assert not any("0.00" in text or "No closed site" in text for text in texts["Questions answered"])
    said = next(text for text in texts["Questions answered"] if "lines say" in text)
    count = sum("not answered in the time given" in text for text in texts["Questions answered"])
    assert int(said.partition(" lines say")[0].rpartition(" ")[2]) <= count
    assert "Share of time for questions (%)" in said
