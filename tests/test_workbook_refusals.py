"""Every refusal has words, and what a file says is shown safely."""

from ledgersolve.workbook.problems import UnreadableWorkbookError
from ledgersolve.workbook.refusals import EXPECTED, REASONS, refusal, shown


def test_every_reason_is_a_whole_problem() -> None:
    """Each reason gives an error for the whole file: found, expected, what to do."""
    for kind in REASONS:
        problem = refusal(kind, "detail").problem
        assert (problem.severity, problem.kind, problem.sheet, problem.cell) == ("error", kind, "", "")
        assert problem.expected == EXPECTED
        assert len(problem.found) >= 15
        assert len(problem.remedy) > 20
        assert not problem.remedy.endswith(".")


def test_the_error_says_it_in_one_line() -> None:
    """As an exception it shows what was found and what to do."""
    error = refusal("empty file")
    assert isinstance(error, UnreadableWorkbookError)
    assert str(error).startswith("the file is empty (0 bytes); copy the file again")


def test_what_cannot_be_shown_is_named() -> None:
    """Line ends, escapes and direction signs are shown by their code; letters of every script as they are."""
    assert shown("a\x1b\n\u202eб東😀") == "a<U+001B><U+000A><U+202E>б東😀"
    assert shown("x" * 500) == "x" * 119 + "…"
