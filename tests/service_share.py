"""A served folder for tests: drops, a disk that fails on demand, and a watch process that steps at once."""

import errno
import json
import os
import signal
import threading
import zipfile
from collections.abc import Callable
from concurrent.futures import Executor, Future
from io import BytesIO
from pathlib import Path
from random import Random
from typing import Any

import ledgersolve.service.desk as desk_module
import ledgersolve.service.keeper as keeper_module
import ledgersolve.service.settle as settle_module
import ledgersolve.service.supervise as supervise_module
from ledgersolve.service.config import ServiceSettings
from ledgersolve.service.disk import Disk
from ledgersolve.service.names import same_name_key
from ledgersolve.service.pool import LocalPool
from ledgersolve.service.process import Ended
from ledgersolve.service.verify import verify
from ledgersolve.service.watch import open_shop
from ledgersolve.service.watcher import Watcher

LOOKS = ("names", "entries", "status", "open_to_read", "read", "free_bytes")
CHANGES = (
    "make_folder", "remove_folder", "write_stream", "refresh", "rename", "replace", "link", "remove",
    "sync_file", "sync_folder", "open_up",
)
ROOT = Path(__file__).parent.parent
HANDLERS = ROOT / "tests" / "faults" / "stand_ins"


def names(folder: Path) -> list[str]:
    """Names in a folder, sorted."""
    return sorted(path.name for path in folder.iterdir())


def returned(folder: Path) -> list[str]:
    """Returned files without their ids."""
    whole = [name for name in names(folder / "Returned") if not name.startswith(".")]
    return sorted(name[: name.index(" [")] + name[name.index("]") + 1 :] for name in whole)


# ---- with real child processes ----------------------------------------------------------------------


def memory_root() -> str | None:
    """A folder in memory, where bringing files to the disk costs nothing; the usual one where there is none."""
    shared = Path("/dev/shm")
    return str(shared) if os.access(shared, os.W_OK) else None


def package(word: str = "", content: str = "") -> bytes:
    """A small zip package; ``word`` tells a stand-in handler what to do."""
    made = BytesIO()
    with zipfile.ZipFile(made, "w") as archive:
        archive.writestr(zipfile.ZipInfo("word.txt"), word)
        archive.writestr(zipfile.ZipInfo("content.txt"), content)
    return made.getvalue()


def drop(folder: Path, name: str, word: str = "", content: str | None = None) -> Path:
    """Drop a workbook the way a careful program does: written elsewhere, then moved in."""
    inbox = folder / "Inbox"
    target = inbox / name
    target.parent.mkdir(parents=True, exist_ok=True)
    half = target.parent / f".{target.name[:20]}.half"
    half.write_bytes(package(word, name if content is None else content))
    half.rename(target)
    return target


class Plan:
    """What happens around a call of the disk; by default nothing."""

    def before(self, number: int, name: str, arguments: tuple[Any, ...]) -> None:
        """Run before the call of this number."""

    def after(self, number: int, name: str, arguments: tuple[Any, ...]) -> None:
        """Run after the call took effect."""


class FaultyDisk(Disk):
    """A disk whose calls are counted and spoiled by a plan."""

    def __init__(self, plan: Plan | None = None, watched: tuple[str, ...] = CHANGES) -> None:
        self.plan = plan or Plan()
        self.watched = watched
        self.calls: list[str] = []


def _spoiled(name: str) -> Callable[..., Any]:
    plain = getattr(Disk, name)

    def method(self: FaultyDisk, *arguments: Any, **options: Any) -> Any:
        if name not in self.watched:
            return plain(self, *arguments, **options)
        self.calls.append(name)
        number = len(self.calls)
        self.plan.before(number, name, arguments)
        result = plain(self, *arguments, **options)
        self.plan.after(number, name, arguments)
        return result

    return method


for _name in (*LOOKS, *CHANGES):
    setattr(FaultyDisk, _name, _spoiled(_name))


class KillAt(Plan):
    """SIGKILL right before one call; a file being written is left half written."""

    def __init__(self, number: int) -> None:
        self.number = number

    def before(self, number: int, name: str, arguments: tuple[Any, ...]) -> None:
        if number != self.number:
            return
        if name == "write_stream":
            Path(arguments[0]).write_bytes(arguments[1](1 << 20)[:7])
        os.kill(os.getpid(), signal.SIGKILL)


class ErrorAt(Plan):
    """One call fails, before or (a lost reply) after it took effect; a write fails half way."""

    def __init__(self, number: int, code: int, lost: bool = False) -> None:
        self.number, self.code, self.lost = number, code, lost

    def before(self, number: int, name: str, arguments: tuple[Any, ...]) -> None:
        if number == self.number and not self.lost:
            if name == "write_stream":
                Path(arguments[0]).write_bytes(arguments[1](1 << 20)[:7])
            raise OSError(self.code, os.strerror(self.code))

    def after(self, number: int, name: str, arguments: tuple[Any, ...]) -> None:
        if number == self.number and self.lost:
            raise OSError(self.code, os.strerror(self.code))


class RandomErrors(Plan):
    """A share of all calls fails, half of them after they took effect, with the errors of bad networks."""

    CODES = (errno.EIO, errno.ESTALE, errno.ENOSPC, errno.EHOSTDOWN, errno.EACCES, errno.EDQUOT)
    LOST = (errno.ENOENT, errno.EEXIST, errno.EIO, errno.ETIMEDOUT)

    def __init__(self, seed: int, rate: float) -> None:
        self.random, self.rate, self.count = Random(seed), rate, 0

    def before(self, number: int, name: str, arguments: tuple[Any, ...]) -> None:
        if self.random.random() < self.rate / 2:
            self.count += 1
            code = self.random.choice(self.CODES)
            raise OSError(code, os.strerror(code))

    def after(self, number: int, name: str, arguments: tuple[Any, ...]) -> None:
        if name in CHANGES and self.random.random() < self.rate / 2:
            self.count += 1
            code = self.random.choice(self.LOST)
            raise OSError(code, os.strerror(code))


class StaleDisk(Disk):
    """Listings are up to so many listings old, as a network folder shows them from its cache."""

    def __init__(self, seed: int, share: float = 0.5) -> None:
        self.random, self.share = Random(seed), share
        self.cached: dict[Path, list[str]] = {}

    def names(self, folder: Path) -> list[str]:
        """An old listing now and then, also of a folder that is gone."""
        if folder not in self.cached or self.random.random() >= self.share:
            self.cached[folder] = super().names(folder)
        return self.cached[folder]


class AtOnce(Executor):
    """Runs what is submitted before it returns."""

    def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> "Future[Any]":
        future: Future[Any] = Future()
        try:
            future.set_result(fn(*args, **kwargs))
        except Exception as error:
            future.set_exception(error)
        return future

    def shutdown(self, wait: bool = True, *, cancel_futures: bool = False) -> None:
        """Nothing is running."""


def child_at_once(request: dict[str, Any], private: Path, *_: Any) -> Ended:
    """Takes the place of the child process: another answer at every call."""
    returned = Path(request["into"]) / "answer.xlsx"
    with zipfile.ZipFile(returned, "w") as archive:
        archive.writestr("random.txt", os.urandom(16).hex())
    words = {"outcome": "solved", "returned": str(returned), "title": "T", "total_cost": 1.0}
    Path(request["result"]).write_text(json.dumps(words))
    return Ended("", False, False, "", 0.0)


def hasten(patch: Callable[[Any, str, Any], None] = setattr) -> None:
    """Make every wait of the service short, and let the stand-in answer in place of a child process."""
    patch(desk_module, "_FIRST_WAIT", 0.001)
    patch(desk_module, "_LONGEST_WAIT", 0.01)
    patch(desk_module, "_PUBLISH_WAIT", 0.001)
    patch(settle_module, "_FIRST_WAIT", 0.001)
    patch(settle_module, "_LONGEST_WAIT", 0.01)
    patch(supervise_module, "_DELIVERY_WAITS", (0.001,))
    patch(supervise_module, "run_child", child_at_once)
    patch(keeper_module, "_EMPTY_SECONDS", 0.0)


class SilentBell:
    """A doorbell without events."""

    def __init__(self) -> None:
        self.rung = threading.Event()

    def keep_alive(self) -> None:
        """Nothing to keep."""

    def silence(self) -> None:
        """It is silent."""

    def wait(self, seconds: float) -> bool:
        """No news, ever."""
        self.rung.wait(min(seconds, 0.002))
        self.rung.clear()
        return False


def quick_settings(**changes: Any) -> ServiceSettings:
    """Settings under which everything is due at once."""
    quick: dict[str, Any] = {
        "workers": 1, "quiet_seconds": 0.0, "sure_quiet_seconds": 0.0, "long_quiet_seconds": 0.0,
        "open_elsewhere_seconds": 0.0, "beat_seconds": 0.001, "scan_seconds": 0.002, "free_mb": 0, "polling": False,
    }
    return ServiceSettings(**(quick | changes))


def quick_watcher(folder: Path, disk: Disk | None = None, **changes: Any) -> Watcher:
    """A watch process without threads: every step does all that is due, jobs end when they start."""
    disk = disk or Disk()
    watcher, pool = open_shop(folder, None, quick_settings(**changes), "handlers:solve", disk)
    pool.close()
    watcher.desk.pool = LocalPool(1, AtOnce(), disk)
    watcher.bell = SilentBell()  # type: ignore[assignment]
    return watcher


def run_until_empty(watcher: Watcher, steps: int = 3000) -> bool:
    """Step until nothing is left; False where that does not come about."""
    for _ in range(steps):
        watcher.step()
        if watcher.is_empty() and watcher.state == "at work":
            return True
        watcher.wait()
    return False


def faults_after_recovery(folder: Path, drops: list[str]) -> list[str]:
    """Let a clean watch process finish what is left, then check invariants and that nothing is missing."""
    watcher = quick_watcher(folder)
    if not run_until_empty(watcher):
        return [f"recovery does not end: {watcher.state} {watcher.why} {watcher.drops}"]
    faults = verify(folder, settled=True)
    kept = sorted(path.name for path in (folder / ".ledgersolve" / "done").glob("*/in/*"))
    if sorted(map(same_name_key, kept)) != sorted(map(same_name_key, drops)):
        faults.append(f"I1: dropped {sorted(drops)}, kept {kept}")
    return faults
