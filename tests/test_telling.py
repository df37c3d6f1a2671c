"""What the commands say: nothing rounded in our favour, one line a fault where no terminal is watched."""

import pytest

from ledgersolve import telling
from ledgersolve.mip import Progress


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
