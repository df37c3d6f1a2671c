"""What the commands say: progress and answers on a terminal, plain lines where nobody watches."""

import math
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rich.console import Console
from rich.markup import escape
from rich.text import Text

from ledgersolve.answer import Answer, Outcome
from ledgersolve.mip import Progress

if TYPE_CHECKING:
    from rich.table import Table

console = Console()
errors = Console(stderr=True)

PLAIN_SECONDS = 10.0
"""Where no terminal is watched, a line on a running solve appears this often at most."""

LOOK_SECONDS = 0.5


@contextmanager
def progress_line(file: Path, *, quiet: bool) -> Iterator[Callable[[Progress], None] | None]:
    """Show the running solve: on one line of a terminal, else as a plain line now and then."""
    if quiet:
        yield None
        return
    if not errors.is_terminal:
        yield _plain_lines(file.name)
        return
    with errors.status(_one_line(f"{file.name}: reading")) as line:
        yield lambda progress: line.update(_one_line(f"{file.name}: {progress_words(progress)}"))


def _one_line(words: str) -> Text:
    """Words that are cut, not folded, where the terminal is narrow."""
    room = max(20, errors.width - 4)
    return Text(words if len(words) <= room else words[: room - 1] + "…", no_wrap=True)


def _plain_lines(name: str) -> Callable[[Progress], None]:
    said = time.monotonic()

    def show(progress: Progress) -> None:
        nonlocal said
        if time.monotonic() - said >= PLAIN_SECONDS:
            said = time.monotonic()
            _plain(f"{name}: {progress_words(progress)}", errors)

    return show


def progress_words(progress: Progress) -> str:
    """One line on where a solve stands; what could still be saved is rounded up, never down."""
    words = f"{progress.stage}, {progress.seconds:.0f} s"
    if progress.best is not None:
        words += f", best {progress.best:,.0f}"
        if progress.bound is not None and progress.best:
            saving = max(0.0, progress.best - progress.bound) / abs(progress.best)
            words += f", at most {math.ceil(1e4 * saving) / 100:.2f} % could be saved"
    return words


def tell(answer: Answer, *, solving: bool) -> None:
    """Say what came of a workbook, with its faults and where the copy is."""
    console.print(f"[bold]{escape(Path(answer.file).name)}[/bold]: {escape(_outcome_words(answer, solving))}",
                  highlight=False, soft_wrap=True)
    if answer.problems and console.is_terminal:
        console.print(_problem_table(answer))
    elif answer.problems:
        for line in _problem_lines(answer):
            _plain(f"  {line}", console)
    if answer.returned is not None:
        _plain(f"  returned: {answer.returned}", console)


def _plain(line: str, where: Console) -> None:
    where.print(line, markup=False, highlight=False, soft_wrap=True)


def _outcome_words(answer: Answer, solving: bool) -> str:
    if answer.outcome is Outcome.FAILED:
        return f"failed. {answer.reason}"
    if answer.outcome is Outcome.TO_FIX:
        return "to fix" + (f", {answer.verdict.value}" if answer.verdict else "")
    return _solved_words(answer) if solving else _fit_words(answer)


def _fit_words(answer: Answer) -> str:
    """What checking alone can say of a workbook without errors: its notices, and whether a plan is out of reach."""
    lost = sum(problem.count for problem in answer.problems if problem.kind == "demand no site can serve")
    if lost:
        return (f"complete, but no plan can exist: {lost:,} {'customer' if lost == 1 else 'customers'} that no site "
                "can serve")
    notices = len(answer.problems)
    return "fit to be solved" + (f"; {notices} {'notice' if notices == 1 else 'notices'}" if notices else "")


def _solved_words(answer: Answer) -> str:
    verdict = answer.verdict.value if answer.verdict else "solved"
    cost = "" if answer.total_cost is None else f", total cost {answer.total_cost:,.2f}"
    bound = "" if answer.lower_bound is None else f", no plan costs less than {answer.lower_bound:,.2f}"
    return verdict + cost + bound


def _problem_table(answer: Answer) -> "Table":
    from rich.table import Table

    table = Table("", "where", "found", "expected", "what to do", box=None, pad_edge=False)
    for problem in answer.problems:
        told = problem.as_json()
        where = f"{told['sheet']} {told['cell']} {told['title']}".strip()
        table.add_row(*(escape(text) for text in (
            told["severity"], where, told["found"], told["expected"], told["remedy"])))
    return table


def _problem_lines(answer: Answer) -> Iterator[str]:
    """One line a fault, for programs that search them."""
    for problem in answer.problems:
        told = problem.as_json()
        where = f"{told['sheet']} {told['cell']} {told['title']}".strip()
        yield (f"{told['severity']}: {where}: found {told['found']}; expected {told['expected']}. {told['remedy']}"
               .replace("\n", " "))


@contextmanager
def returning(status: Callable[[], dict[str, Any]], total: int) -> Iterator[None]:
    """Say of each workbook of a served folder when it is back; ``status`` gives the folder's state."""
    began, ended, told = time.monotonic(), threading.Event(), set[str]()

    def look() -> None:
        for entry in reversed(status()["returned"]):
            if entry["job"] not in told:
                told.add(entry["job"])
                seconds = time.monotonic() - began
                _plain(f"  {len(told)} of {total} back after {seconds:.0f} s: {returned_words(entry)}", console)

    def follow() -> None:
        while not ended.wait(LOOK_SECONDS):
            look()

    follower = threading.Thread(target=follow, daemon=True)
    follower.start()
    try:
        yield
    finally:
        ended.set()
        follower.join()
        look()


def returned_words(entry: dict[str, Any]) -> str:
    """One line on a workbook that came back."""
    words = f"{entry['name']}: {entry['outcome']}"
    if entry.get("verdict"):
        words += f", {entry['verdict']}"
    if entry.get("total_cost") is not None:
        words += f", total cost {entry['total_cost']:,.0f}"
    return words
