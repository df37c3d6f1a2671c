"""The supervising function: one job from claimed input to finished workbook in the share's ``tmp``.

It is handed to any ``concurrent.futures.Executor``. It starts one fresh child process, so nothing that a
workbook does can harm the executor; it never answers or publishes, so running it twice harms nothing.
"""

import contextlib
import errno
import hashlib
import json
import logging
import shutil
import tempfile
import threading
import time
import zipfile
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from ledgersolve.service import answers
from ledgersolve.service.answers import Former
from ledgersolve.service.disk import Disk
from ledgersolve.service.flagged import flagged_workbook
from ledgersolve.service.holder import process_words
from ledgersolve.service.layout import Layout, guard
from ledgersolve.service.names import private_name, show
from ledgersolve.service.order import Order, Report
from ledgersolve.service.process import Ended, Heard, run_child
from ledgersolve.service.snapshot import Snapshot, is_still, take_snapshot
from ledgersolve.service.states import ANSWER, sha256_of
from ledgersolve.service.whole import Shape, shape

logger = logging.getLogger(__name__)
PRIVATE_PREFIX = "ledgersolve-job-"
_LOCAL = Disk()
_OUTCOMES = ("solved", "to fix", "failed")
_MOST_RESULT = 8 << 20
_TELL_SECONDS = 2.0
_STOP_SECONDS = 0.5
_DELIVERY_WAITS = (1.0, 2.0, 4.0, 8.0, 15.0, 30.0)
_DELIVERY_TRIES = 40
_FOR_GOOD = (errno.EACCES, errno.EPERM, errno.EINVAL, errno.ELOOP, errno.ENXIO, errno.EISDIR)
_SHOWN = ("job", "title", "outcome", "verdict", "total_cost", "lower_bound", "gap_pct", "seconds", "reason")


def supervise(order: Order, halt: threading.Event | None = None, disk: Disk | None = None) -> Report:
    """Do one order; whatever happens comes back as a report.

    ``halt`` ends it at once where supervisor and service are one process; from elsewhere a file
    ``stop.G`` in the job's folder does.
    """
    started = time.monotonic()
    root = order.private_root or None
    try:
        private = Path(tempfile.mkdtemp(prefix=f"{PRIVATE_PREFIX}{process_words()}-", dir=root))
    except OSError as error:
        place = root or "the folder for temporary files"
        return Report("share lost", f"no job can work in {place} ({error.strerror or error})")
    try:
        report = _Supervisor(order, disk or Disk(), private, halt or threading.Event()).run()
    finally:
        shutil.rmtree(private, ignore_errors=True)
    return replace(report, seconds=time.monotonic() - started)


@dataclass
class _Supervisor:
    """One order on its way."""

    order: Order
    disk: Disk
    private: Path
    halt: threading.Event
    _told: float = -1e9
    _asked: float = -1e9
    _layout: Layout = field(init=False)

    def __post_init__(self) -> None:
        self._layout = Layout(self.order.folder)

    def run(self) -> Report:
        order = self.order
        try:
            stayed = is_still(self.disk, order.input, order.quiet_seconds)
            inside = self.private / "in"
            inside.mkdir()
            target = inside / private_name(order.input.name)
            snapshot = take_snapshot(self.disk, order.input, target, order.most_bytes)
            if not stayed():
                return Report("unsettled", "the workbook was still being written")
        except OSError as error:
            return self._unreadable(error)
        report = self._answered(snapshot)
        return replace(report, input_sha256=snapshot.sha256 if snapshot.whole else "", size=snapshot.size)

    def _unreadable(self, error: OSError) -> Report:
        """Tell a job that is gone or a share that is away from an input that can never be read."""
        with contextlib.suppress(OSError):
            guard(self._layout, self.disk, self.order.mark)
            if self.order.input.name not in self.disk.names(self.order.input.parent):
                return Report("stopped", "the job is gone")
            if error.errno in _FOR_GOOD:
                return Report("crashed", f"the workbook cannot be read ({error.strerror or error})")
        return Report("share lost", str(error))

    def _answered(self, snapshot: Snapshot) -> Report:
        if not snapshot.whole:
            limit = self.order.most_bytes / (1 << 20)
            sentences = [
                f"The file has {snapshot.size / (1 << 20):,.0f} MB; at most {limit:,.0f} MB are read.",
                "Delete sheets and pictures that the job does not need, save, and drop the workbook again.",
            ]
            made = self._flag("to fix", "This workbook is too large", sentences)
            return self._delivered(made, "to fix", {"reason": sentences[0]})
        former = self._former(snapshot.sha256)
        if former is not None:
            return self._delivered(former.payload, former.outcome, former.words, former=former)
        ended, words = self._in_child(snapshot)
        if ended.stopped:
            return Report("stopped", "asked to stop")
        if ended.too_big:
            return self._too_big()
        if ended.cause:
            logger.warning("job %s: %s\n%s", self.order.job, ended.cause, ended.last_words)
            return Report("crashed", ended.cause)
        report = self._checked(snapshot, words)
        if words.get("outcome") == "failed":  # the workbook says that the program is at fault; the log says why
            logger.error("job %s: came back as failed\n%s", self.order.job, ended.last_words)
        return report

    def _in_child(self, snapshot: Snapshot) -> tuple[Ended, dict[str, Any]]:
        into = self.private / "out"
        into.mkdir()
        result = self.private / "result.json"
        request = {
            "handler": self.order.handler,
            "source": str(snapshot.path),
            "into": str(into),
            "result": str(result),
            "shown_name": show(self.order.input.name),
        }
        ended = run_child(request, self.private, self.order.limits, self._must_stop, self._tell)
        words: dict[str, Any] = {}
        with contextlib.suppress(OSError, ValueError):
            found = json.loads(_LOCAL.read(result, _MOST_RESULT))
            words = found if isinstance(found, dict) else {}
        return ended, words

    def _checked(self, snapshot: Snapshot, words: dict[str, Any]) -> Report:
        """Believe the child only where its result and its workbook are sound."""
        outcome = words.get("outcome")
        if outcome not in _OUTCOMES:
            return Report("crashed", "the job ended without a sound result")
        if outcome == "failed" and words.get("may_pass") is True:
            return Report("crashed", str(words.get("reason") or "the machine got in the way").partition(". ")[0])
        shown = _shown(words)
        if words.get("returned") is None:
            reason = str(words.get("reason") or "The program met a fault of its own.")
            made = self._flag("failed", "This workbook could not be solved", [reason])
            return self._delivered(made, "failed", shown)
        returned = Path(str(words["returned"]))
        if not self._is_sound(returned):
            return Report("crashed", "the job ended without a sound returned workbook")
        if outcome == "failed":
            return self._delivered(returned, outcome, shown)
        answered = Former(returned, "", outcome, _suffix(returned), shown)
        return self._delivered(returned, outcome, shown, remember=(snapshot.sha256, answered))

    def _is_sound(self, returned: Path) -> bool:
        try:
            inside = returned.resolve().is_relative_to((self.private / "out").resolve())
            size = _LOCAL.status(returned).st_size
            if not inside or shape(_LOCAL, returned, size) is not Shape.COMPLETE:
                return False
            with zipfile.ZipFile(returned) as package:
                return package.testzip() is None
        except (OSError, zipfile.BadZipFile, ValueError, NotImplementedError):
            return False

    def _too_big(self) -> Report:
        megabytes = self.order.limits.memory_bytes / (1 << 20)
        sentences = [
            f"It needs more memory than the {megabytes:,.0f} MB that one job may use on this machine.",
            "Leave out lanes, customers or periods that cannot matter, or ask the administrator for more.",
        ]
        made = self._flag("failed", "This workbook is too big for this machine", sentences)
        return self._delivered(made, "failed", {"reason": sentences[0]})

    def _flag(self, outcome: str, headline: str, sentences: list[str]) -> Path:
        target = self.private / f"flagged {outcome}.xlsx"
        name = show(self.order.input.name)
        target.write_bytes(flagged_workbook(name, headline, sentences, self.order.job))
        return target

    # ---- asking and telling through the job's folder: works from any machine -----------------------

    def _must_stop(self) -> bool:
        """Whether somebody asked to stop, took the job over or finished it; a share out of reach does not."""
        now = time.monotonic()
        if self.halt.is_set():
            return True
        if now - self._asked < _STOP_SECONDS:
            return False
        self._asked = now
        home = self._layout.jobs / self.order.job
        generation = self.order.generation
        try:
            names = self.disk.names(home)
        except FileNotFoundError:
            with contextlib.suppress(OSError):
                guard(self._layout, self.disk, self.order.mark)
                return True
            return False
        except OSError:
            return False
        return bool({f"stop.{generation}", f"lease.{generation + 1}", ANSWER} & set(names))

    def _tell(self, heard: Heard) -> None:
        now = time.monotonic()
        if now - self._told < _TELL_SECONDS or not (heard.progress or heard.limit):
            return
        self._told = now
        left = None if heard.limit is None else max(0.0, heard.limit - (now - heard.limit_heard))
        words = {**heard.progress, "left": left}
        home = self._layout.jobs / self.order.job
        with contextlib.suppress(OSError):
            self.disk.refresh(home / f"progress.{self.order.generation}", json.dumps(words).encode("ascii"))

    # ---- delivering --------------------------------------------------------------------------------

    def _former(self, input_sha256: str) -> Former | None:
        order = self.order
        try:
            return answers.find(self.disk, self._layout, input_sha256, order.version, order.input.name)
        except OSError:
            return None

    def _delivered(
        self,
        made: Path,
        outcome: str,
        words: dict[str, Any],
        *,
        former: Former | None = None,
        remember: tuple[str, Former] | None = None,
    ) -> Report:
        """Bring the workbook to the share's ``tmp``; a share that is away or full is waited for."""
        for attempt in range(_DELIVERY_TRIES):
            try:
                guard(self._layout, self.disk, self.order.mark)
                finished, sha256 = self._copy_in(made)
            except OSError as error:
                logger.info("job %s: not delivered yet (%s)", self.order.job, error)
                if isinstance(error, FileNotFoundError) and former is not None:
                    return Report("stopped", "the former answer is gone")
                if self._waited_in_vain(attempt):
                    return Report("stopped", "asked to stop")
                continue
            if former is not None and sha256 != former.sha256:
                self.disk.remove(finished)
                return Report("stopped", "the former answer was changed")
            report = Report("finished", "", finished, sha256, outcome, _suffix(made), words=words)
            return report if remember is None else self._agreed(report, *remember)
        return Report("share lost", "the served folder could not be reached or is full")

    def _waited_in_vain(self, attempt: int) -> bool:
        until = time.monotonic() + _DELIVERY_WAITS[min(attempt, len(_DELIVERY_WAITS) - 1)]
        while time.monotonic() < until:
            self.halt.wait(0.2)
            if self._must_stop():
                return True
        return False

    def _copy_in(self, made: Path) -> tuple[Path, str]:
        """Copy into the share's ``tmp``, bring it to the disk, and read it back."""
        finished = self._layout.new_tmp("answer")
        content_digest = hashlib.sha256()
        try:
            with made.open("rb") as incoming:
                self.disk.write_stream(finished, _hashed(incoming.read, content_digest))
            found = sha256_of(self.disk, finished)
            if found != content_digest.hexdigest():
                raise OSError("the returned workbook did not arrive whole")
        except OSError:
            with contextlib.suppress(OSError):
                self.disk.remove(finished)
            raise
        return finished, found

    def _agreed(self, report: Report, input_sha256: str, made: Former) -> Report:
        """Enter the answer for this input; where another process was first, its answer is returned."""
        order = self.order
        if report.finished is None:
            return report
        mine = replace(made, payload=report.finished, sha256=report.sha256)
        try:
            counts = answers.remember(
                self.disk, self._layout, input_sha256, order.version, order.input.name, mine
            )
        except OSError as error:
            logger.info("job %s: the answer is not kept for later (%s)", order.job, error)
            return report
        if counts.sha256 == report.sha256:
            return report
        with contextlib.suppress(OSError):
            finished, sha256 = self._copy_in(counts.payload)
            if sha256 == counts.sha256:
                self.disk.remove(report.finished)
                return replace(
                    report, finished=finished, sha256=sha256, outcome=counts.outcome,
                    suffix=counts.suffix, words=counts.words,
                )
        return report


def _hashed(read: Callable[[int], bytes], digest: Any) -> Callable[[int], bytes]:
    def step(size: int) -> bytes:
        block = read(size)
        digest.update(block)
        return block

    return step


def _suffix(path: Path) -> str:
    return ".xlsm" if path.suffix.lower() == ".xlsm" else ".xlsx"


def _shown(words: dict[str, Any]) -> dict[str, Any]:
    """The part of the answer that the status page shows."""
    shown = {name: words[name] for name in _SHOWN if words.get(name) is not None}
    problems = [problem for problem in words.get("problems") or [] if isinstance(problem, dict)]
    errors = [problem for problem in problems if problem.get("severity") == "error"]
    if errors:
        shown["faults"] = len(errors)
        shown["first_fault"] = {
            name: str(errors[0].get(name, ""))[:300] for name in ("sheet", "cell", "found", "remedy")
        }
    return shown
