"""One process's jobs on their way: leased, handed to the pool, answered, published, done."""

import hashlib
import json
import logging
import time
from collections.abc import Callable, Iterator
from concurrent.futures import Future
from contextlib import suppress
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from ledgersolve import __version__
from ledgersolve.service.board import now_words
from ledgersolve.service.fair import Estimates, Running
from ledgersolve.service.flagged import flagged_workbook
from ledgersolve.service.keeper import Keeper
from ledgersolve.service.names import returned_name, show
from ledgersolve.service.order import ChildLimits, Order, Report
from ledgersolve.service.pool import Pool, outcome_of
from ledgersolve.service.protocol import Handover, Protocol
from ledgersolve.service.states import JobView, Reply, short_id

logger = logging.getLogger(__name__)
_FIRST_WAIT, _LONGEST_WAIT = 1.0, 60.0
_PUBLISH_WAIT = 10.0
_RETURNED_KEPT = 50


@dataclass(frozen=True)
class DeskSettings:
    """What the desk needs of the service's settings."""

    mark: str
    limits: ChildLimits = field(default_factory=ChildLimits)
    handler: str = "ledgersolve.job:handle"
    most_bytes: int = 100 << 20
    quiet_seconds: float = 2.0
    private_root: str = ""
    attempts: int = 3
    lost_leases: int = 10
    retry_seconds: float = 5.0


@dataclass
class Tray:
    """One job that this process holds a lease of."""

    job: str
    generation: int
    input: Path
    owner: str
    size: int
    expected: float
    started: float
    since: str
    future: "Future[Report] | None" = None
    report: Report | None = None
    handover: Handover | None = None
    given_up: list[str] | None = None
    tries: int = 0
    next_try: float = 0.0

    @property
    def name(self) -> str:
        """The drop's name as it may be shown."""
        return show(self.input.name)


@dataclass
class Desk:
    """Everything this process has in hand."""

    protocol: Protocol
    pool: Pool
    keeper: Keeper
    estimates: Estimates
    settings: DeskSettings
    ring: Callable[[], None]
    clock: Callable[[], float] = time.monotonic
    trays: dict[str, Tray] = field(default_factory=dict)
    returned: list[dict[str, Any]] = field(default_factory=list)
    not_before: dict[str, float] = field(default_factory=dict)
    alerts: dict[str, dict[str, str]] = field(default_factory=dict)
    doubts: bool = False

    def take_doubts(self) -> bool:
        """Whether a job met trouble with folders since the last time this was asked."""
        doubts, self.doubts = self.doubts, False
        return doubts

    def running(self) -> list[Running]:
        """What runs, for the choice of the next."""
        return [Running(tray.size, tray.expected, tray.started) for tray in self.trays.values()]

    def may_try(self, job: str) -> bool:
        """Whether a job that gave trouble is due again."""
        return self.clock() >= self.not_before.get(job, 0.0)

    def forget_others(self, jobs: set[str]) -> None:
        """Keep in mind only the jobs that are still there."""
        self.not_before = {job: when for job, when in self.not_before.items() if job in jobs}

    def wait_for(self, job: str, seconds: float) -> None:
        """Leave a job alone for a while."""
        self.not_before[job] = self.clock() + seconds

    # ---- starting ----------------------------------------------------------------------------------

    def start(self, view: JobView, owner: str) -> bool:
        """Lease a job and hand it to the pool; False where another process has it."""
        if view.input is None:
            return False
        size = self.protocol.disk.status(view.input).st_size
        generation = self.protocol.lease(view, {"owner": owner})
        if generation is None:
            return False
        expected = self.estimates.expected(size)
        tray = Tray(view.job, generation, view.input, owner, size, expected, self.clock(), now_words())
        self.trays[view.job] = tray
        reasons = self.protocol.reasons(view)
        lost = view.lost_leases + (view.generation > 0 and not view.lease_ended)
        if len(reasons) >= self.settings.attempts or lost >= self.settings.lost_leases:
            tray.given_up = reasons
            return True
        try:
            tray.future = self.pool.submit(self._order(tray))
        except OSError as error:
            logger.error("job %s: not started (%s)", tray.job, error)
            tray.report = Report("share lost", str(error))
            return True
        tray.future.add_done_callback(lambda _: self.ring())
        logger.info("job %s: %s of %s started (attempt %d)", tray.job, tray.name, show(owner), generation)
        return True

    def _order(self, tray: Tray) -> Order:
        settings = self.settings
        return Order(
            folder=self.protocol.layout.folder,
            mark=settings.mark,
            job=tray.job,
            generation=tray.generation,
            input=tray.input,
            handler=settings.handler,
            limits=settings.limits,
            most_bytes=settings.most_bytes,
            quiet_seconds=settings.quiet_seconds,
            private_root=settings.private_root,
            version=__version__,
        )

    def _given_up(self, tray: Tray, reasons: list[str]) -> Report:
        """A workbook that stops the program again and again is answered, too."""
        told = [reason for reason in reasons if reason]
        last = told[-1] if told else "the service itself stopped each time"
        sentences = [
            f"It was tried {len(reasons) or tray.generation} times and stopped the program each time; "
            f"the last time: {last}.",
            "The administrator was told. Send them this file, or change the workbook and drop it again.",
        ]
        logger.error("job %s: %s is given up: %s", tray.job, tray.name, "; ".join(reasons))
        why = f"stops the program: {last} (job {tray.job})"
        self.alerts[tray.job] = {"name": tray.name, "owner": show(tray.owner), "why": why}
        made = flagged_workbook(tray.name, "This workbook stops the program", sentences, tray.job)
        finished = self.protocol.layout.new_tmp("flagged")
        self.protocol.disk.write_new(finished, made)
        sha256 = hashlib.sha256(made).hexdigest()
        return Report("finished", "", finished, sha256, "failed", words={"reason": sentences[0]})

    # ---- ending ------------------------------------------------------------------------------------

    def conclude(self) -> bool:
        """Take in what the pool gave back and bring it on its way; True where something ended."""
        ended = False
        for tray in [tray for tray in self.trays.values() if self._is_due(tray)]:
            try:
                if tray.report is None:
                    tray.report = self._report_of(tray)
                self._conclude_one(tray, tray.report)
            except OSError as error:
                wait = min(_LONGEST_WAIT, _FIRST_WAIT * 2.0**tray.tries)
                tray.tries += 1
                tray.next_try = self.clock() + wait
                logger.warning("job %s: not handed on yet (%s), again in %.0f s", tray.job, error, wait)
                continue
            del self.trays[tray.job]
            ended = True
        return ended

    def _is_due(self, tray: Tray) -> bool:
        return self.clock() >= tray.next_try and (tray.future is None or tray.future.done())

    def _report_of(self, tray: Tray) -> Report:
        if tray.given_up is not None:
            return self._given_up(tray, tray.given_up)
        return Report("stopped", "never handed over") if tray.future is None else outcome_of(tray.future)

    def _conclude_one(self, tray: Tray, report: Report) -> None:
        if report.end == "finished":
            self._answer(tray, report)
        elif report.end == "crashed":
            self.protocol.fail(tray.job, tray.generation, report.reason)
            self.wait_for(tray.job, self.settings.retry_seconds)
            logger.error("job %s: %s failed: %s", tray.job, tray.name, report.reason)
        else:
            self.protocol.release(tray.job, tray.generation)
            self.wait_for(tray.job, self.settings.retry_seconds)
            lost = report.end == "share lost"
            self.doubts |= lost
            level = logging.WARNING if lost else logging.INFO
            logger.log(level, "job %s: given back (%s: %s)", tray.job, report.end, report.reason)

    def _answer(self, tray: Tray, report: Report) -> None:
        if tray.handover is None and report.finished is not None:
            name = returned_name(tray.input.name, short_id(tray.job), report.outcome, report.suffix)
            reply = Reply(
                generation=tray.generation,
                sha256=report.sha256,
                name=name,
                outcome=report.outcome,
                input_sha256=report.input_sha256,
                report={
                    **report.words, "owner": show(tray.owner), "size": report.size, "took": round(report.seconds, 3),
                },
            )
            tray.handover = Handover(reply, report.finished)
            self.estimates.learn(report.size, report.seconds)
        if tray.handover is not None:
            self.protocol.answer(tray.job, tray.handover)
        view = self.protocol.view(tray.job)
        if view is not None:
            self.hand_on(view)

    def hand_on(self, view: JobView) -> None:
        """Publish an answered job and put it to the done ones; both may have happened already."""
        if view.reply is None:
            return
        try:
            published = self.protocol.publish(view)
        except OSError as error:
            if self.protocol.view(view.job) is None:
                return  # another process published and finished it
            self.wait_for(view.job, _PUBLISH_WAIT)
            self.alerts[view.job] = {
                "name": view.reply.name,
                "owner": show(str(view.reply.report.get("owner") or "")),
                "why": f"answered, but cannot be put into Returned ({error.strerror or error}); tried again",
            }
            logger.error("job %s: not published yet (%s)", view.job, error)
            return
        if "cannot be put" in self.alerts.get(view.job, {}).get("why", ""):
            del self.alerts[view.job]
        name = published.name if published else view.reply.name
        if self.protocol.finish(view):
            self.keeper.finished(view.job)
            self._note_returned(view, view.reply, name)

    def _note_returned(self, view: JobView, reply: Reply, name: str) -> None:
        drop = "" if view.input is None else view.input.name
        entry: dict[str, Any] = {"name": show(drop), "returned": show(name), "outcome": reply.outcome}
        entry |= {"at": now_words(), "job": view.job}
        entry |= {key: reply.report[key] for key in _TOLD if reply.report.get(key) is not None}
        self.returned = [entry, *self.returned][:_RETURNED_KEPT]
        logger.info("job %s: returned %s to %s", view.job, show(name), entry.get("owner") or "its owner")

    # ---- signs of life and the end -----------------------------------------------------------------

    def beat(self) -> None:
        """Show for every lease that its holder lives; a share out of reach does not end a solve."""
        for tray in self.trays.values():
            with suppress(OSError):
                self.protocol.beat(tray.job, tray.generation)

    def progress(self) -> Iterator[dict[str, Any]]:
        """Where every running job stands, for the status page."""
        for tray in self.trays.values():
            words: dict[str, Any] = {}
            path = self.protocol.home(tray.job) / f"progress.{tray.generation}"
            with suppress(OSError, ValueError):
                found = json.loads(self.protocol.disk.read(path))
                words = found if isinstance(found, dict) else {}
            best, bound = words.get("best"), words.get("bound")
            yield {
                "name": tray.name,
                "owner": show(tray.owner),
                "job": tray.job,
                "since": tray.since,
                "stage": words.get("stage"),
                "best": best,
                "saving": _saving(best, bound),
                "elapsed": round(self.clock() - tray.started, 1),
                "left": words.get("left"),
            }

    def stop(self, seconds: float) -> None:
        """End what runs, within a second or two, and give its leases back."""
        self.pool.halt()
        for tray in self.trays.values():
            with suppress(OSError):
                self.protocol.disk.refresh(self.protocol.home(tray.job) / f"stop.{tray.generation}", b"")
        until = self.clock() + seconds
        while self.trays and self.clock() < until:
            self.conclude()
            time.sleep(0.05)


def _saving(best: float | None, bound: float | None) -> float | None:
    """How much a better plan could save at most; None where nothing is proven yet, or nothing is left."""
    return best - bound if best is not None and bound is not None and best > bound else None


_TOLD = ("owner", "title", "verdict", "total_cost", "lower_bound", "gap_pct", "faults", "first_fault", "reason")
