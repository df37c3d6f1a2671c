"""Damaged and retyped workbooks go the whole way: each comes back solved or with a list, never as a failure."""

import random
import re
import time
from collections import Counter
from pathlib import Path

import pytest

from ledgersolve.answer import Outcome
from ledgersolve.job import handle
from tests.books import write_book
from tests.faults.corpus import lot, site
from tests.mutations import mutated, retyped
from tests.packages import contents, zipped


def run(folder: Path, count: int, seed: int, longest: float = float("inf")) -> Counter[str]:
    """Outcomes of ``count`` spoiled workbooks, or of as many as ``longest`` seconds allow.

    Each is answered, and where it came back to be mended, the returned workbook is answered once more.
    """
    draw = random.Random(seed)
    bases = [contents(write_book(folder / "base.xlsx", base())) for base in (site, lot)]
    found: Counter[str] = Counter()
    until = time.monotonic() + longest
    while found.total() < count and time.monotonic() < until:
        spoil = draw.choice((mutated, retyped))
        path = zipped(folder / "spoiled.xlsx", spoil(draw.choice(bases), draw))
        answer = handle(path, folder / "out")
        assert answer.outcome is not Outcome.FAILED, f"number {found.total()} of seed {seed}: {answer.reason}"
        assert answer.returned is not None
        if answer.outcome is Outcome.TO_FIX:
            assert any(problem.is_error for problem in answer.problems)
            again = handle(answer.returned, folder / "out")
            assert again.outcome is Outcome.TO_FIX
            assert again.returned is not None
            again.returned.unlink()
        words = " ".join(problem.found + problem.remedy for problem in answer.problems)
        assert not re.search(r"Traceback|Error:|object at|ledgersolve\.", words)
        answer.returned.unlink()
        found[answer.outcome.value] += 1
    return found


@pytest.mark.slow
def test_spoiled_workbooks_are_answered(tmp_path: Path) -> None:
    """Sixty spoiled workbooks: solved ones and lists, no failure, and a list dropped again is a list again."""
    assert min(run(tmp_path, 60, seed=20261201).values()) > 5


@pytest.mark.long
@pytest.mark.timeout(3600)
def test_many_spoiled_workbooks_are_answered(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The long form: 10,000 of them, or those of 25 minutes; counted."""
    seed = random.randrange(10**9)
    found = run(tmp_path, 10_000, seed, longest=1500.0)
    with capsys.disabled():
        print(f"\n{found.total():,} spoiled workbooks of seed {seed}: {dict(found)}")
    assert found.total() > 300
