"""One watch process: looks, takes, starts, hands on, and tells; each step may fail and is taken again."""

import errno
import logging
import math
import os
import secrets
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

from ledgersolve.service.board import now_words, stale_after, this_process, write_board
from ledgersolve.service.desk import Desk
from ledgersolve.service.disk import Disk
from ledgersolve.service.doorbell import Doorbell
from ledgersolve.service.fair import Line, Turns, Waiting
from ledgersolve.service.intake import Intake
from ledgersolve.service.keeper import Keeper
from ledgersolve.service.layout import Layout, guard
from ledgersolve.service.leases import LeaseWatch
from ledgersolve.service.names import show
from ledgersolve.service.settle import ALERT_AFTER, Drop, Settler
from ledgersolve.service.states import JobView, State
from ledgersolve.service.waiting import Held, entries, hold, stuck_entries

logger = logging.getLogger(__name__)
_SCAN_SHARE = 5.0
"""After a scan of s seconds there is none for five times s: scanning stays a sixth of the time."""
_LONG_LINE = 50
"""With so many in the queue nothing is gained by looking before the next scan is due."""
_BOARD_SECONDS = 15.0
_SHORTEST_WAIT, _BUSY_WAIT = 0.02, 2.0


@dataclass(frozen=True)
class Pace:
    """How much at a time, and how often things are done, in seconds; see ``ServiceSettings``."""

    workers: int = 2
    scan: float = 5.0
    beat: float = 5.0
    board: float = 2.0


@dataclass
class Watcher:
    """The parts of one watch process, and their state between steps."""

    layout: Layout
    disk: Disk
    mark: str
    pace: Pace
    settler: Settler
    leases: LeaseWatch
    turns: Turns
    desk: Desk
    keeper: Keeper
    intake: Intake
    bell: Doorbell
    clock: Callable[[], float] = time.monotonic
    stopping: bool = False
    state: str = "starting"
    why: str = ""
    drops: list[Drop] = field(default_factory=list)
    line: Line | None = None
    scans: int = 0
    left_in_jobs: int = 0
    held: list[Held] = field(default_factory=list)
    _beacon: str = field(default_factory=lambda: secrets.token_hex(8))
    _last_scan: tuple[str, float, float] | None = None
    _scan_took: float = 0.0
    _next_scan: float = -math.inf
    _next_beat: float = -math.inf
    _seen_all: bool = False
    _told: float = -math.inf
    _seen: tuple[int, int, int] = (0, 0, 0)
    _told_gist: tuple[Any, ...] = ()
    _news: bool = False
    _alerted: set[tuple[str, ...]] = field(default_factory=set)

    # ---- one step ----------------------------------------------------------------------------------

    def step(self) -> None:
        """Do what is due now. A share that is away or not the same one suspends everything."""
        try:
            guard(self.layout, self.disk, self.mark)
            self._step_on_the_share()
        except OSError as error:
            self._suspend(error)

    def _step_on_the_share(self) -> None:
        if self.state == "suspended":
            logger.info("the share is back")
            self._next_scan = -math.inf
        self.bell.keep_alive()
        now = self.clock()
        if now >= self._next_beat:
            self._next_beat = now + self.pace.beat
            self.desk.beat()
        changed = self.desk.conclude()
        if changed:
            self._seen_all = False
            self._look_soon()
        if now >= self._next_scan:
            self._scan()
        self._start_more()
        try:
            self.keeper.step()
        except OSError as error:
            logger.warning("housekeeping goes on later (%s)", error)
        self._tell(changed)

    def _suspend(self, error: OSError) -> None:
        if self.state != "suspended":
            logger.error("suspended: %s", error)
        self.state, self.why = "suspended", str(error)
        self.line = None
        self.settler.forget()
        self.leases.forget()
        self.keeper.forget()
        self.bell.silence()
        self._next_scan = self._next_beat = self.clock() + self.pace.scan

    def wait(self) -> None:
        """Sleep until something is due, somebody rings, or a job ends."""
        due = min(self._next_scan, self._next_beat)
        if self.desk.trays:
            due = min(due, self.clock() + _BUSY_WAIT)
        news = self.bell.wait(min(self.pace.scan, max(_SHORTEST_WAIT, due - self.clock())))
        if news and self.state != "suspended":
            self._look_soon()
            time.sleep(_SHORTEST_WAIT)  # one burst of events is one piece of news

    def _look_soon(self) -> None:
        """Bring the next scan forward, unless the queue is long anyway."""
        if self.line is None or len(self.line) < _LONG_LINE:
            earliest = -math.inf if self._last_scan is None else self._last_scan[1]
            self._next_scan = min(self._next_scan, earliest + _SCAN_SHARE * self._scan_took)

    def _enter(self, state: str, why: str) -> None:
        """Note the state, and log that it changed."""
        if state != self.state:
            level = logging.WARNING if state == "held" else logging.INFO
            logger.log(level, "%s%s", state, f": {why}" if why else "")
        self.state, self.why = state, why

    # ---- looking -----------------------------------------------------------------------------------

    def _scan(self) -> None:
        started = self.clock()
        self.drops = self.settler.look()
        self._log_alerts()
        waiting = [Waiting(drop.owner, drop.size, drop.since, drop) for drop in self.drops if drop.ready]
        waiting += self._look_at_jobs()
        guard(self.layout, self.disk, self.mark)
        self.line = self.turns.line_up(waiting)
        self._enter(*self.intake.state(doubts=self.desk.take_doubts()))
        ended = self.clock()
        self.scans += 1
        self._seen_all = True
        ready = sum(drop.ready for drop in self.drops)
        self._seen = (len(self.drops), ready, len(self._alerted))
        self._scan_took = ended - started
        self._last_scan = (now_words(), ended, time.time())
        soonest = min((drop.look_in for drop in self.drops if not drop.ready), default=math.inf)
        pause = max(_SHORTEST_WAIT, _SCAN_SHARE * self._scan_took, min(self.pace.scan, soonest))
        self._next_scan = ended + pause

    def _log_alerts(self) -> None:
        """A line for each drop that began to need the administrator; one look later it is no news."""
        stuck = {tuple(entry.values()) for entry in stuck_entries(self.drops)}
        for name, owner, why in sorted(stuck - self._alerted):
            logger.warning("needs the administrator: %s of %s: %s", name, owner, why)
        self._alerted = stuck

    def _look_at_jobs(self) -> list[Waiting]:
        """Jobs that no process has in hand: claimed and left, answered and not handed on."""
        waiting = []
        self.left_in_jobs = 0
        self.held = []
        jobs = self.disk.names(self.layout.jobs)
        self.leases.forget_others(set(jobs))
        self.desk.forget_others(set(jobs))
        for job in jobs:
            if job in self.desk.trays:
                continue
            try:
                waiting += self._look_at_job(job)
            except OSError as error:  # one job's trouble is not the others'; a lost share shows right after
                self.left_in_jobs += 1
                self.desk.wait_for(job, self.desk.settings.retry_seconds)
                logger.warning("job %s: not looked after yet (%s)", job, error)
        return waiting

    def _look_at_job(self, job: str) -> list[Waiting]:
        view = self.desk.protocol.view(job)
        if view is None:
            return []
        self.left_in_jobs += view.state not in (State.BROKEN, State.EMPTY)
        if view.state is State.EMPTY:
            self.keeper.empty(job)
            return []
        if view.state is State.BROKEN:
            self._alert_broken(view)
            return []
        left_behind = self.leases.left_behind(view)
        owner = self._hold(view, left_behind=left_behind)
        if not self.desk.may_try(job):
            return []
        if view.reply is not None:
            self.desk.hand_on(view)
            return []
        if view.input is None or not left_behind:
            return []
        return [Waiting(owner, self.disk.status(view.input).st_size, -math.inf, view)]

    def _hold(self, view: JobView, *, left_behind: bool) -> str:
        """Keep in mind for the page a workbook that is out of Inbox; gives its owner."""
        attempts = self.desk.settings.attempts
        self.held.append(hold(self.desk.protocol, view, attempts, left_behind=left_behind))
        return self.held[-1].owner

    def _alert_broken(self, view: JobView) -> None:
        if view.job not in self.desk.alerts:
            logger.critical("job %s: its folder is damaged and is left alone", view.job)
        name = view.job if view.input is None else show(view.input.name)
        why = f"the folder of job {view.job} is damaged (answer or input unreadable); it is left alone"
        owner = show(str(self.desk.protocol.lease_words(view).get("owner") or ""))
        self.desk.alerts[view.job] = {"name": name, "owner": owner, "why": why}

    # ---- taking ------------------------------------------------------------------------------------

    def _start_more(self) -> None:
        """Fill the free places from the line."""
        while self.line is not None and self.state == "at work" and not self.stopping:
            running = self.desk.running()
            places = self.turns.places(running, self.pace.workers)
            if places == "none":
                return
            chosen = self.line.take(running, small_only=places == "small")
            if chosen is None:
                return
            self._start(chosen)

    def _start(self, chosen: Waiting) -> None:
        if isinstance(chosen.item, Drop):
            if not self.intake.has_space(chosen.size):
                self.settler.refused(chosen.item.path, OSError(errno.ENOSPC, "too little space"))
                return
            view = self._claim(chosen.item)
        else:
            view = self.desk.protocol.view(chosen.item.job)
            if view is not None and not self.leases.left_behind(view):
                return  # another process took it since the scan
        if view is None or view.reply is not None:
            return
        try:
            self.desk.start(view, chosen.owner)
        except OSError as error:
            self.desk.wait_for(view.job, self.desk.settings.retry_seconds)
            logger.warning("job %s: not started yet (%s)", view.job, error)

    def _claim(self, drop: Drop) -> JobView | None:
        try:
            job = self.desk.protocol.claim(drop.path)
            return None if job is None else self.desk.protocol.view(job)
        except OSError as error:
            times = self.settler.refused(drop.path, error)
            level = logging.WARNING if times in (1, ALERT_AFTER) else logging.DEBUG
            name, owner = show(drop.name), show(drop.owner)
            logger.log(level, "%s of %s is not taken yet (%s), refusal %d", name, owner, error, times)
            return None

    # ---- telling -----------------------------------------------------------------------------------

    def _tell(self, changed: bool) -> None:
        """Write page and sign of life: soon after a change, else now and then."""
        gist = self._gist()
        self._news |= changed or gist != self._told_gist
        busy = self._news or bool(self.desk.trays)
        if self.clock() - self._told >= (self.pace.board if busy else _BOARD_SECONDS):
            self._told, self._told_gist, self._news = self.clock(), gist, False
            self.write_board()

    def _gist(self) -> tuple[Any, ...]:
        """What must be on the page soon once it changes; drops are counted once a scan, as there may be many."""
        return self.state, self._seen, len(self.desk.alerts), len(self.held), len(self.desk.trays)

    def write_board(self) -> None:
        """Write page and sign of life now; that it fails stops nothing."""
        beacon = self.layout.hosts / f"{self._beacon}.json"
        try:
            write_board(self.layout, self.disk, beacon, self.picture())
        except OSError as error:
            logger.info("the status page is not written (%s)", error)

    def picture(self) -> dict[str, Any]:
        """What this process knows, as plain values."""
        words, monotonic, unix = self._last_scan or (None, None, None)
        held = [one for one in self.held if one.view.job not in self.desk.trays]
        waiting, count = entries(self.drops, held, self.line, self.state)
        process = this_process()
        return {
            **process,
            "id": self._beacon,
            "workers": self.pace.workers,
            "state": self.state,
            "why": self.why,
            "last_scan": words,
            "last_scan_unix": unix,
            "monotonic": monotonic,
            "scan_took": round(self._scan_took, 4),
            "scans": self.scans,
            "stale_after_seconds": stale_after(self.pace.scan),
            "waiting": waiting,
            "waiting_count": count,
            "running": [{**one, "host": process["host"]} for one in self.desk.progress()],
            "returned": self.desk.returned,
            "alerts": [*stuck_entries(self.drops)[:100], *list(self.desk.alerts.values())[-100:]],
        }

    # ---- ending ------------------------------------------------------------------------------------

    def is_empty(self) -> bool:
        """Whether nothing is left that this process could still answer."""
        return (
            self._seen_all
            and not self.desk.trays
            and not self.left_in_jobs
            and all(drop.blocked for drop in self.drops)
        )

    def leave(self, seconds: float = 10.0) -> None:
        """Stop what runs, give leases back, say so, and what is left."""
        self.stopping = True
        self.desk.stop(seconds)
        self.bell.silence()
        self.line = None
        try:
            guard(self.layout, self.disk, self.mark)
            self._look_at_what_is_left()
        except OSError as error:
            logger.info("what is left is not listed (%s)", error)
        self._enter("stopped", "The service was stopped in good order.")
        self.write_board()

    def _look_at_what_is_left(self) -> None:
        """Drops and jobs as they stand at the end, for the page alone."""
        self.drops = [drop for drop in self.drops if os.path.lexists(drop.path)]  # a link that leads nowhere is there
        self.held = []
        for job in self.disk.names(self.layout.jobs):
            view = self.desk.protocol.view(job)
            if view is not None and view.input is not None:
                self._hold(view, left_behind=True)
