"""One workbook from path to returned copy: the only place that knows the whole way."""

import hashlib
import logging
import os
import re
import secrets
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from datetime import datetime
from importlib.metadata import version
from pathlib import Path

from ledgersolve import __version__
from ledgersolve.answer import Answer, Outcome
from ledgersolve.contract import read_workbook
from ledgersolve.contract.reading import Reading
from ledgersolve.findings import Conflict
from ledgersolve.mip import Limits, Progress, Verdict
from ledgersolve.report.inputs import NoPlan, RunFacts
from ledgersolve.report.names import wanted_names
from ledgersolve.report.outcomes import failed_sheets, fix_sheets, no_plan_sheets, unreadable_sheets
from ledgersolve.work import AuditError, Worked, work
from ledgersolve.workbook.graft import fresh, graft, plan_names
from ledgersolve.workbook.package import open_package
from ledgersolve.workbook.problems import Problem, UnreadableWorkbookError
from ledgersolve.workbook.sheets import ResultSheet

logger = logging.getLogger(__name__)
ProgressSink = Callable[[Progress], None]


def solve_workbook(
    file: str | Path, into: str | Path | None = None, *, progress: ProgressSink | None = None
) -> Answer:
    """Solve one workbook and write the copy with its results, or with its faults marked.

    Parameters
    ----------
    file
        A filled workbook (.xlsx or .xlsm).
    into
        Folder for the returned copy; beside the file when left out. Nothing there is overwritten.
    progress
        Receives the progress stream of the solve.

    Raises
    ------
    FileNotFoundError
        There is no such file. Every other trouble is an answer.
    """
    return _handle_path(Path(file), into, solve=True, progress=progress)


def check_workbook(file: str | Path, into: str | Path | None = None) -> Answer:
    """Check one workbook without solving it; a faulty one comes back as a copy with its faults marked.

    Parameters and errors are those of ``solve_workbook``.
    """
    return _handle_path(Path(file), into, solve=False, progress=None)


def _handle_path(
    file: Path, into: str | Path | None, *, solve: bool, progress: ProgressSink | None
) -> Answer:
    if not file.is_file():
        raise FileNotFoundError(f"there is no file {file}")
    return handle(file, Path(into) if into is not None else file.parent, solve=solve, progress=progress)


def handle(
    source: Path, into: Path, *, solve: bool = True, progress: ProgressSink | None = None,
    cancelled: Callable[[], bool] | None = None, shown_name: str | None = None,
    limit_known: Callable[[float], None] | None = None,
) -> Answer:
    """Answer one workbook; trouble of any kind becomes an answer, never an exception.

    Parameters
    ----------
    source
        The workbook; it is only read.
    into
        Folder for the copy, made if missing.
    solve
        False: stop after checking; a copy is written only where there are errors.
    progress, cancelled
        See ``Limits``.
    shown_name
        The name that the analyst knows the file by, where ``source`` is a claimed copy.
    limit_known
        Told the workbook's own time limit in seconds before solving starts.
    """
    run = _Run(source, into, shown_name or source.name)
    try:
        return run.answered(solve, progress, cancelled, limit_known)
    except Exception as trouble:
        logger.exception("%s failed", run.shown_name)
        return run.failed(trouble)


@dataclass
class _Run:
    """One workbook on its way; holds what is known so far, so that a failure can still be answered."""

    source: Path
    into: Path
    shown_name: str
    started: float = field(default_factory=time.monotonic)
    seconds: dict[str, float] = field(default_factory=dict)
    reading: Reading | None = None
    sha256: str = ""
    record: tuple[tuple[str, str], ...] = ()

    def answered(
        self, solve: bool, progress: ProgressSink | None, cancelled: Callable[[], bool] | None,
        limit_known: Callable[[float], None] | None = None,
    ) -> Answer:
        try:
            with self.step("read"):
                self.sha256 = _sha256(self.source)
                package = open_package(self.source)
        except UnreadableWorkbookError as trouble:
            return self.unreadable(trouble.problem)
        try:
            with package, self.step("check"):
                self.reading = read_workbook(package, self.shown_name)
        except UnreadableWorkbookError as trouble:
            return self.unreadable(trouble.problem)
        if self.reading.case is None:
            return self.to_fix(self.reading)
        if not solve:
            return self.answer(Outcome.SOLVED)
        limits = Limits(self.reading.run.time_limit, self.reading.run.accepted_gap)
        if progress is not None:
            limits = replace(limits, progress=progress)
        if cancelled is not None:
            limits = replace(limits, cancelled=cancelled)
        if limit_known is not None:
            limit_known(limits.seconds)
        with self.step("solve"):
            worked = work(self.reading, limits)
        return self.solved(self.reading, worked)

    def solved(self, reading: Reading, worked: Worked) -> Answer:
        solved = worked.solved
        self.record = worked.record
        trouble = [] if solved.verdict.has_plan else _trouble(reading, worked)
        with self.step("write"):
            word = "to fix" if trouble else "solved"
            # what only looked wrong may be why there is no plan
            marks = [*trouble, *reading.problems] if trouble else []
            returned = self.write(word, worked.wanted_names, worked.sheets, marks)
        return replace(
            self.answer(Outcome.TO_FIX if trouble else Outcome.SOLVED),
            verdict=solved.verdict, total_cost=solved.cost, lower_bound=solved.bound, gap=solved.gap,
            returned=returned, plan=worked.plan, variants=worked.variants,
            problems=(*trouble, *reading.problems),
        )

    def to_fix(self, reading: Reading) -> Answer:
        with self.step("write"):
            returned = self.write(
                "to fix", wanted_names("to fix"),
                lambda facts, names: fix_sheets(reading, facts, names), reading.problems,
            )
        return replace(self.answer(Outcome.TO_FIX), returned=returned)

    def unreadable(self, problem: Problem) -> Answer:
        """A file that cannot carry its own list: a fresh workbook does."""
        with self.step("write"):
            sheets = unreadable_sheets(problem, self.facts())
            returned = _publish(self.into, self.shown_name, "to fix", lambda path: fresh(path, sheets))
        return replace(self.answer(Outcome.TO_FIX), returned=returned, problems=(problem,))

    def failed(self, trouble: Exception) -> Answer:
        """Say so in a copy where that is possible; the original is never touched."""
        reason = str(trouble) if isinstance(trouble, AuditError) else _FAULT
        if isinstance(trouble, MemoryError):
            reason = _TOO_BIG
        # a full disk, too many open files, an upgrade of the program under way
        may_pass = isinstance(trouble, OSError | ImportError)
        if may_pass:
            reason = _MACHINE.format(getattr(trouble, "strerror", None) or "a part of the program was missing")
        returned = None
        try:
            returned = self.write_failure(reason)
        except Exception:
            logger.exception("%s: no copy could be written", self.shown_name)
        return replace(self.answer(Outcome.FAILED), returned=returned, reason=reason, may_pass=may_pass)

    def write_failure(self, reason: str) -> Path:
        if self.reading is None:
            sheets = failed_sheets(reason, self.facts())
            return _publish(self.into, self.shown_name, "failed", lambda path: fresh(path, sheets))
        given = NoPlan(self.reading, "failed", self.facts(), reason)
        return self.write(
            "failed", wanted_names("no plan"),
            lambda facts, names: no_plan_sheets(replace(given, run=facts), names), (),
        )

    def write(
        self, word: str, wanted: Sequence[str],
        sheets: Callable[[RunFacts, dict[str, str]], list[ResultSheet]], marks: Sequence[Problem],
    ) -> Path:
        names = plan_names(self.source, wanted)
        made = sheets(self.facts(), names)
        # a copy that is to be edited must not open with two tabs selected, where an edit hits both
        edited = word == "to fix"
        return _publish(
            self.into, self.shown_name, word,
            lambda path: graft(self.source, path, made, marks, free_tab=edited),
        )

    def facts(self) -> RunFacts:
        versions = [("LedgerSolve", __version__)]
        versions += [(name, version(package)) for name, package in _RECORDED]
        return RunFacts(
            self.shown_name, self.sha256, datetime.now().replace(microsecond=0), tuple(versions),
            tuple(self.seconds.items()), self.record,
        )

    def answer(self, outcome: Outcome) -> Answer:
        """Give the answer as far as reading goes."""
        reading = self.reading
        self.seconds["total"] = time.monotonic() - self.started
        return Answer(
            file=self.shown_name, outcome=outcome,
            job=reading.job.value if reading and reading.job else None,
            title=reading.title if reading else None,
            problems=reading.problems if reading else (), seconds=dict(self.seconds),
        )

    @contextmanager
    def step(self, name: str) -> Iterator[None]:
        began = time.monotonic()
        try:
            yield
        finally:
            self.seconds[name] = self.seconds.get(name, 0.0) + time.monotonic() - began


_FAULT = (
    "The program met a fault of its own. Nothing in the workbook needs to be mended for it; "
    "please hand the workbook to whoever looks after LedgerSolve."
)
_TOO_BIG = (
    "The workbook is too big for this machine: it needs more memory than one job may use. Leave out lanes, "
    "customers or periods that cannot matter, or ask the administrator for more memory."
)
_MACHINE = (
    "The machine got in the way ({}). Nothing in the workbook needs to be mended for it; please drop it again, "
    "and tell whoever looks after LedgerSolve if it comes back like this once more."
)
_FORMER = re.compile(r"(?<=\S)(?: (?:solved|to fix|failed)(?: (?:[2-9]|[1-9]\d{1,2}))?)+$")
"""Endings of names that earlier answers gave; a number behind them is at most 999, so that a year stays."""

_RECORDED = (
    ("OR-Tools", "ortools"), ("NumPy", "numpy"), ("pydantic", "pydantic"), ("XlsxWriter", "xlsxwriter"),
)


def _trouble(reading: Reading, worked: Worked) -> list[Problem]:
    """Why there is no plan, as entries at the cells at stake; never an empty list."""
    if worked.solved.verdict is Verdict.NO_PLAN_EXISTS and worked.conflicts:
        return [_mark(reading, conflict) for conflict in worked.conflicts]
    if worked.solved.verdict is Verdict.NO_PLAN_EXISTS:
        found = " ".join(worked.solved.notes) or "the rules of the workbook cannot all hold together"
        remedy = "Loosen a rule, add capacity, or allow unmet demand at a cost."
        expected = "rules and figures that some plan can keep"
        return [Problem("error", "no plan exists", "", "", "", found, expected, remedy)]
    ref = reading.origins.cell("Settings", ("Time limit (seconds)",), "Value")
    return [Problem(
        "error", "no plan found in time", ref.sheet if ref else "Settings", ref.address if ref else "",
        "Time limit (seconds)", f"no plan was found in {reading.run.time_limit:g} seconds",
        "a time limit that lets the search find a plan", "Raise the time limit and drop the workbook again.",
    )]


def _mark(reading: Reading, conflict: Conflict) -> Problem:
    sheet, cell, title = "", "", ""
    for subject in conflict.subjects:
        ref = reading.origins.cell(subject.sheet, subject.key, subject.title)
        if ref is None and len(subject.key) == 2:
            ref = reading.origins.matrix_cell(subject.sheet, *subject.key)
        if ref is not None:
            sheet, cell, title = ref.sheet, ref.address, subject.title
            break
    return Problem(
        "error", "rules that cannot hold together", sheet, cell, title, conflict.words,
        "rules and figures that some plan can keep", conflict.remedy,
    )


def _sha256(path: Path) -> str:
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def _publish(into: Path, shown_name: str, word: str, write: Callable[[Path], None]) -> Path:
    """Write under a hidden name, then put the finished file in place; nothing is ever overwritten.

    A workbook that came back once keeps its own name: the ending it was given then is replaced.
    """
    into.mkdir(parents=True, exist_ok=True)
    name = Path(shown_name)
    suffix = ".xlsm" if name.suffix.lower() == ".xlsm" else ".xlsx"
    stem = _FORMER.sub("", name.stem) if name.suffix.lower() in (".xlsx", ".xlsm") else name.name
    hidden = into / f".{secrets.token_hex(8)}{suffix}.tmp"
    try:
        write(hidden)
        for number in range(1, 10_000):
            extra = f" {word}{suffix}" if number == 1 else f" {word} {number}{suffix}"
            target = into / (_cut(stem, 255 - len(extra.encode())) + extra)
            if _put_if_absent(hidden, target):
                return target
    finally:
        hidden.unlink(missing_ok=True)
    raise FileExistsError(f"the folder {into} already holds 9,999 answers to {shown_name}")


def _put_if_absent(hidden: Path, target: Path) -> bool:
    try:
        os.link(hidden, target)
    except FileExistsError:
        return False
    except OSError:  # a file system without hard links: reserve the name, then replace our own reservation
        try:
            target.touch(exist_ok=False)
        except FileExistsError:
            return False
        hidden.replace(target)
    return True


def _cut(stem: str, limit: int) -> str:
    """Cut a stem to so many bytes, on a character boundary."""
    return os.fsencode(stem)[:limit].decode(errors="ignore")
