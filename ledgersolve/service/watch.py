"""Serving a folder: the process that an administrator starts once and forgets."""

import logging
import os
import shutil
import signal
import tempfile
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from types import FrameType

from ledgersolve import __version__
from ledgersolve.service.board import gather, sweep_beacons
from ledgersolve.service.config import ServiceSettings, SettingsError, check_cluster, load_settings
from ledgersolve.service.desk import Desk, DeskSettings
from ledgersolve.service.disk import Disk
from ledgersolve.service.doorbell import Doorbell, is_remote
from ledgersolve.service.fair import Turns
from ledgersolve.service.holder import describe, is_of_dead_process
from ledgersolve.service.intake import Intake, private_trouble
from ledgersolve.service.keeper import Keeper
from ledgersolve.service.layout import Layout, UnfitFolderError, prepare, self_test
from ledgersolve.service.leases import LeaseWatch
from ledgersolve.service.logs import service_log
from ledgersolve.service.machine import memory_bytes
from ledgersolve.service.names import show
from ledgersolve.service.order import ChildLimits
from ledgersolve.service.pool import ClusterPool, LocalPool, Pool
from ledgersolve.service.protocol import Protocol
from ledgersolve.service.settle import Patience, Settler
from ledgersolve.service.supervise import PRIVATE_PREFIX
from ledgersolve.service.watcher import Pace, Watcher

logger = logging.getLogger(__name__)
_SCAN_LOCAL, _SCAN_REMOTE = 5.0, 15.0
_QUIET_LOCAL, _QUIET_REMOTE = 2.0, 10.0
_BEATS = 6
_MB = 1 << 20
_LEAST_MEMORY_MB = 2048
_ONCE_PATIENCE = 60.0


def serve(
    folder: Path,
    *,
    once: bool = False,
    cluster: str | None = None,
    settings: ServiceSettings | None = None,
    handler: str = "ledgersolve.job:handle",
) -> int:
    """Serve a folder until SIGINT or SIGTERM, or with ``once`` until it is empty.

    Parameters
    ----------
    folder
        The served folder; laid out on first use.
    once
        End when every drop is answered. What cannot be taken, or is open in a spreadsheet program, is left.
    cluster
        Address of a dask scheduler whose workers see the folder at the same path.
    settings
        See ``ServiceSettings``; read from the environment where None.
    handler
        ``module:function`` that answers one workbook in the child process.

    Returns
    -------
    int
        0 in good order, whatever came of the workbooks; 1 when ``once`` left something, or the share went
        away; 2 where the folder cannot be served at all, or not with these settings.
    """
    settings = settings or load_settings()
    with service_log(settings):
        try:
            if cluster:
                check_cluster(cluster)
            opened = _open_when_there(folder.absolute(), cluster, settings, handler, once=once)
        except (UnfitFolderError, SettingsError) as error:
            logger.error("%s", error)
            return 2
        if opened is None:
            return 1
        watcher, pool = opened
        with _stopped_by_signals(watcher):
            try:
                return _serve(watcher, once=once)
            finally:
                watcher.leave()
                pool.close()


def _open_when_there(
    folder: Path, cluster: str | None, settings: ServiceSettings, handler: str, *, once: bool
) -> tuple[Watcher, Pool] | None:
    """Open the shop, waiting for a share that is not there yet; None where ``once`` forbids to wait."""
    while True:
        try:
            return open_shop(folder, cluster, settings, handler)
        except OSError as error:
            logger.error("%s cannot be served yet (%s)", folder, error)
            if once:
                return None
            time.sleep(settings.scan_seconds or _SCAN_REMOTE)


def open_shop(
    folder: Path, cluster: str | None, settings: ServiceSettings, handler: str, disk: Disk | None = None
) -> tuple[Watcher, Pool]:
    """Lay out the folder, try it, and put the parts of a watch process together.

    Raises
    ------
    UnfitFolderError
        The folder cannot be served, or jobs cannot work on this machine.
    OSError
        The share is out of reach.
    """
    disk = disk or Disk()
    if not folder.exists() and not settings.share_id and folder.parent.is_dir():
        folder.mkdir(mode=0o775)
    private = None if cluster else settings.private_folder or Path(tempfile.gettempdir())
    if private is not None and not disk.may_change(private):  # a full disk is waited for, as later on
        raise UnfitFolderError(private_trouble(private) or f"Jobs cannot work in {private}.")
    mark = prepare(folder, disk, settings.share_id)
    layout = Layout(folder)
    self_test(layout, disk)
    _sweep_private(settings)
    remote = is_remote(folder) if settings.polling is None else settings.polling
    scan = settings.scan_seconds or (_SCAN_REMOTE if remote else _SCAN_LOCAL)
    quiet = settings.quiet_seconds
    quiet = quiet if quiet is not None else (_QUIET_REMOTE if remote else _QUIET_LOCAL)
    pool: Pool = ClusterPool(cluster) if cluster else LocalPool(settings.workers + 1)
    protocol = Protocol(layout, disk, describe())
    turns = Turns(small_seconds=settings.small_seconds, age_seconds=settings.age_seconds)
    keeper = Keeper(layout, disk, protocol, settings.keep_days, settings.keep_at_least)
    bell = Doorbell(layout.inbox, polling=remote, seconds=scan)
    desk_settings = _desk_settings(settings, mark, quiet, handler)
    desk = Desk(protocol, pool, keeper, turns.estimates, desk_settings, bell.rung.set)
    desk.returned = list(gather(layout, disk)["returned"])
    sweep_beacons(layout, disk)
    sure = min(settings.sure_quiet_seconds, quiet)
    patience = Patience(
        quiet, quiet if remote else sure, settings.long_quiet_seconds, settings.open_elsewhere_seconds
    )
    watcher = Watcher(
        layout=layout,
        disk=disk,
        mark=mark,
        pace=Pace(settings.workers, scan, settings.beat_seconds),
        settler=Settler(disk, layout.inbox, patience, sure=not remote),
        leases=LeaseWatch(disk, _BEATS * settings.beat_seconds),
        turns=turns,
        desk=desk,
        keeper=keeper,
        intake=Intake(layout, disk, settings.free_mb * _MB, settings.quiet_hours, settings.time_zone, private),
        bell=bell,
    )
    _tell_start(folder, settings, desk_settings.limits, looks="by a timer" if remote else "by events")
    return watcher, pool


def _tell_start(folder: Path, settings: ServiceSettings, limits: ChildLimits, looks: str) -> None:
    """Put into the log what an administrator asks for later."""
    places = "1 place" if settings.workers == 1 else f"{settings.workers} places"
    logger.info(
        "LedgerSolve %s serves %s: %s and one more for small workbooks, %d MB of memory a job, looks %s",
        __version__, folder, places, limits.memory_bytes // _MB, looks,
    )
    quiet = ", ".join(settings.quiet_hours) or "none"
    logger.info("quiet hours: %s; originals are kept for %g days", quiet, settings.keep_days)


def _desk_settings(settings: ServiceSettings, mark: str, quiet: float, handler: str) -> DeskSettings:
    return DeskSettings(
        mark=mark,
        limits=ChildLimits(
            longest_seconds=settings.longest_job_seconds,
            reading_seconds=settings.reading_seconds,
            grace_seconds=settings.grace_seconds,
            memory_bytes=(settings.memory_mb or _fair_memory_mb(settings.workers)) * _MB,
            nice=settings.nice,
        ),
        handler=handler,
        most_bytes=settings.file_mb * _MB,
        quiet_seconds=quiet,
        private_root=str(settings.private_folder or ""),
        attempts=settings.attempts,
        lost_leases=settings.lost_leases,
        retry_seconds=settings.beat_seconds,
    )


def _fair_memory_mb(workers: int) -> int:
    """Four fifths of the memory that the service may use, shared by the places and the one more."""
    return max(_LEAST_MEMORY_MB, int(0.8 * memory_bytes() / _MB / (workers + 1)))


def _serve(watcher: Watcher, *, once: bool) -> int:
    """Step after step; how a folder that should be emptied once came out."""
    stuck_since = time.monotonic()
    while not watcher.stopping:
        watcher.step()
        if once and watcher.is_empty():
            for drop in watcher.drops:
                logger.warning("left in Inbox: %s of %s: %s", show(drop.name), show(drop.owner), drop.why)
            return 1 if watcher.drops else 0
        if watcher.state == "at work" or watcher.desk.trays:
            stuck_since = time.monotonic()
        elif once and (watcher.state == "paused" or time.monotonic() - stuck_since > _ONCE_PATIENCE):
            logger.error("ended with work left: %s %s", watcher.state, watcher.why)
            return 1
        watcher.wait()
    return 0


@contextmanager
def _stopped_by_signals(watcher: Watcher) -> Iterator[None]:
    """SIGINT and SIGTERM end the service in good order, a second one at once."""

    def stop(number: int, _: FrameType | None) -> None:
        if watcher.stopping:
            os._exit(128 + number)  # children die with their life line
        logger.info("asked to stop by %s", signal.Signals(number).name)
        watcher.stopping = True
        watcher.bell.rung.set()

    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = {number: signal.signal(number, stop) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def _sweep_private(settings: ServiceSettings) -> None:
    """Remove private folders of supervisors that are dead: a killed service leaves them behind."""
    root = settings.private_folder or Path(tempfile.gettempdir())
    for left in root.glob(f"{PRIVATE_PREFIX}*"):
        with suppress(FileNotFoundError):  # another service sweeps, too
            mine = not hasattr(os, "getuid") or left.lstat().st_uid == os.getuid()
            if mine and not left.is_symlink() and is_of_dead_process(left.name.removeprefix(PRIVATE_PREFIX)):
                shutil.rmtree(left, ignore_errors=True)
