"""A folder on file systems that fill up, turn read-only, go away, come back, or are swapped for another one.

Run as a program of its own as root under ``unshare -m`` (``unshare -m python -m tests.faults.service_mounts``);
prints what contradicts the invariants, scenario by scenario.
"""

import json
import logging
import os
import subprocess
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import ledgersolve.service.supervise as supervise_module
from ledgersolve.service.pool import LocalPool
from ledgersolve.service.verify import verify
from ledgersolve.service.watcher import Watcher
from tests.service_share import child_at_once, drop, faults_after_recovery, hasten, names, quick_watcher

SOLVE_SECONDS = 0.5
answers = []


def main() -> None:
    """All scenarios, each on a fresh file system in memory."""
    logging.disable(logging.CRITICAL)
    hasten()

    def slow_child(request, private, *rest):
        time.sleep(SOLVE_SECONDS)
        ended = child_at_once(request, private, *rest)
        answers.append(request["shown_name"])
        return ended

    supervise_module.run_child = slow_child
    scenarios = (full_disk, read_only_returned, unmounted, swapped, apart)
    print(json.dumps({scenario.__name__: _in_a_mount(scenario) for scenario in scenarios}))


def mount(*words: str) -> None:
    """Run mount or umount."""
    subprocess.run(words, check=True, capture_output=True)


def _in_a_mount(scenario: Callable[[Path], list[str]]) -> list[str]:
    folder = Path(tempfile.mkdtemp())
    mount("mount", "-t", "tmpfs", "-o", "size=1m", "tmpfs", str(folder))
    answers.clear()
    try:
        return scenario(folder)
    finally:
        mount("umount", "-l", str(folder))
        folder.rmdir()


def watcher_on(folder: Path) -> Watcher:
    """A watch process with real threads for its jobs."""
    watcher = quick_watcher(folder)
    watcher.desk.pool = LocalPool(2)
    return watcher


def step_until(watcher: Watcher, reached: Callable[[], bool], seconds: float = 20.0) -> list[str]:
    """Step until something holds; a fault in words where it does not come about."""
    until = time.monotonic() + seconds
    while not reached():
        if time.monotonic() > until:
            return [f"not reached: {watcher.state} {watcher.why} {[drop.why for drop in watcher.drops]}"]
        watcher.step()
        watcher.wait()
    return []


def full_disk(folder: Path) -> list[str]:
    """Full when the answer is delivered; space later: answered once, nothing half."""
    watcher = watcher_on(folder)
    drop(folder, "plan.xlsx", content="x" * 20_000)
    faults = step_until(watcher, lambda: bool(watcher.desk.trays))
    ballast = folder / "ballast"
    with ballast.open("wb", buffering=0) as stream:
        try:
            while True:
                stream.write(b"\0" * 4096)
        except OSError:
            pass
    faults += step_until(watcher, lambda: len(answers) == 1)
    for _ in range(100):
        watcher.step()
        watcher.wait()
    faults += [f"returned on a full disk: {name}" for name in names(folder / "Returned")]
    ballast.unlink()
    faults += step_until(watcher, watcher.is_empty)
    faults += [] if len(answers) == 1 else [f"solved {len(answers)} times"]
    return faults + faults_after_recovery(folder, ["plan.xlsx"])


def read_only_returned(folder: Path) -> list[str]:
    """Returned turns read-only in mid-solve and back: held meanwhile, then published once."""
    watcher = watcher_on(folder)
    drop(folder, "plan.xlsx")
    faults = step_until(watcher, lambda: bool(watcher.desk.trays))
    returned = str(folder / "Returned")
    mount("mount", "--bind", returned, returned)
    mount("mount", "-o", "remount,ro,bind", returned)
    answered = folder / ".ledgersolve" / "jobs"
    faults += step_until(watcher, lambda: bool(list(answered.glob("*/answer.json"))))
    drop(folder, "second.xlsx")
    watcher.intake._next_probe = 0.0
    faults += step_until(watcher, lambda: watcher.state == "held")
    faults += [] if (folder / "Inbox" / "second.xlsx").exists() else ["taken in while nothing can be returned"]
    mount("umount", returned)
    faults += step_until(watcher, watcher.is_empty)
    faults += [] if sorted(answers) == ["plan.xlsx", "second.xlsx"] else [f"solved {answers}"]
    return faults + faults_after_recovery(folder, ["plan.xlsx", "second.xlsx"])


def unmounted(folder: Path) -> list[str]:
    """The share goes away in mid-solve and comes back: suspended, nothing made in the empty mount point."""
    watcher = watcher_on(folder)
    drop(folder, "plan.xlsx")
    faults = step_until(watcher, lambda: bool(watcher.desk.trays))
    aside = Path(tempfile.mkdtemp())
    mount("mount", "--bind", str(folder), str(aside))
    mount("umount", "-l", str(folder))
    faults += step_until(watcher, lambda: watcher.state == "suspended" and len(answers) == 1)
    for _ in range(100):
        watcher.step()
        watcher.wait()
    faults += [f"made in the empty mount point: {name}" for name in names(folder)]
    mount("mount", "--bind", str(aside), str(folder))
    faults += step_until(watcher, lambda: watcher.state == "at work" and watcher.is_empty())
    mount("umount", "-l", str(aside))
    aside.rmdir()
    faults += [] if len(answers) == 1 else [f"solved {len(answers)} times"]
    return faults + faults_after_recovery(folder, ["plan.xlsx"])


def swapped(folder: Path) -> list[str]:
    """Another served share is mounted at the same path in mid-solve: it is not touched."""
    watcher = watcher_on(folder)
    drop(folder, "plan.xlsx")
    faults = step_until(watcher, lambda: bool(watcher.desk.trays))
    mount("mount", "-t", "tmpfs", "-o", "size=1m", "tmpfs", str(folder))
    quick_watcher(folder)
    drop(folder, "theirs.xlsx")
    before = _everything(folder)
    faults += step_until(watcher, lambda: watcher.state == "suspended" and len(answers) == 1)
    for _ in range(100):
        watcher.step()
        watcher.wait()
    if _everything(folder) != before:
        faults.append("the other share was changed")
    mount("umount", "-l", str(folder))
    faults += step_until(watcher, lambda: watcher.state == "at work" and watcher.is_empty())
    faults += [] if len(answers) == 1 else [f"solved {len(answers)} times"]
    return faults + faults_after_recovery(folder, ["plan.xlsx"])


def apart(folder: Path) -> list[str]:
    """Returned on another file system: refused at the start, with nothing claimed."""
    from ledgersolve.service.layout import UnfitFolderError

    quick_watcher(folder)
    drop(folder, "plan.xlsx")
    mount("mount", "-t", "tmpfs", "tmpfs", str(folder / "Returned"))
    try:
        quick_watcher(folder)
    except UnfitFolderError:
        faults = []
    else:
        faults = ["served although Returned is on another file system"]
    mount("umount", str(folder / "Returned"))
    return faults + verify(folder) + ([] if (folder / "Inbox" / "plan.xlsx").exists() else ["claimed"])


def _everything(folder: Path) -> list[tuple[str, int, int]]:
    found = []
    for root, _, files in os.walk(folder):
        for name in files:
            status = (Path(root) / name).stat()
            found.append((f"{root}/{name}", status.st_size, status.st_mtime_ns))
    return sorted(found)


if __name__ == "__main__":
    main()
