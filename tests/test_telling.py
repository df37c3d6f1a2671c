"""What the commands say: nothing rounded in our favour, one line a fault where no terminal is watched."""

import pytest

from ledgersolve import check_workbook, telling
from ledgersolve.mip import Progress
from tests.books import site_sheets, write_book


@pytest.mark.parametrize(("best", "bound", "words"), [
    (704_622.0, None, "plan, 3 s, best 704,622"),
    (100.0, 99.9999, "plan, 3 s, best 100, at most 0.01 % could be saved"),
    (100.0, 100.0, "plan, 3 s, best 100, at most 0.00 % could be saved"),
    (None, 50.0, "plan, 3 s"),
])
def test_what_could_be_saved_is_rounded_up_and_left_out_where_unknown(best, bound, words) -> None:
    """Without a bound nothing is said of a saving; a hundredth of a per cent is not lost."""
    assert telling.progress_words(Progress("plan", best, bound, 3.2)) == words


def test_each_returned_workbook_of_a_folder_is_told_once(capsys) -> None:
    """Two workbooks come back while the block runs: two numbered lines, the last with its cost."""
    state = {"returned": []}
    with telling.returning(lambda: state, 2):
        state["returned"] = [{"name": "a.xlsx", "outcome": "to fix", "job": "1"}]
        state["returned"] = [
            {"name": "b.xlsx", "outcome": "solved", "verdict": "proven best", "total_cost": 1234.4, "job": "2"},
            *state["returned"],
        ]
    lines = capsys.readouterr().out.splitlines()
    assert [line.split(" back")[0] for line in lines] == ["  1 of 2", "  2 of 2"]
    assert lines[1].endswith("b.xlsx: solved, proven best, total cost 1,234")


def test_a_run_nobody_watches_is_told_in_plain_lines(monkeypatch, capsys, tmp_path) -> None:
    """Standard error is no terminal: a line each ten seconds at most; with JSON asked for, none."""
    now = iter([0.0, 4.0, 11.0, 11.0, 12.0])
    monkeypatch.setattr(telling.time, "monotonic", lambda: next(now))
    with telling.progress_line(tmp_path / "x.xlsx", quiet=False) as show:
        for seconds in (4.0, 11.0, 12.0):
            show(Progress("search", 5.0, None, seconds))
    assert capsys.readouterr().err.splitlines() == ["x.xlsx: search, 11 s, best 5"]
    with telling.progress_line(tmp_path / "x.xlsx", quiet=True) as show:
        assert show is None


@pytest.mark.parametrize(("lanes", "settings", "words"), [
    ([[1, 1]], {}, "book.xlsx: fit to be solved\n"),
    ([[1, 1]], {"Most site": 1}, "book.xlsx: fit to be solved; 1 notice\n"),
    ([[1, None]], {}, "book.xlsx: complete, but no plan can exist: 1 customer that no site can serve\n"),
])
def test_a_check_says_what_it_noticed_and_whether_a_plan_can_exist(tmp_path, capsys, lanes, settings, words) -> None:
    """Notices are counted and listed, and a workbook with a customer that no site can serve is not called fit."""
    customers = [{"Customer": "x", "Demand": 4}, {"Customer": "y", "Demand": 5}]
    sheets = site_sheets([{"Site": "A", "Fixed cost": 7}], customers, lane_costs=lanes, settings=settings)
    telling.tell(check_workbook(write_book(tmp_path / "book.xlsx", sheets)), solving=False)
    said = capsys.readouterr().out
    assert said.startswith(words)
    assert said.count("notice: ") == ("notice" in words or "no plan" in words)
