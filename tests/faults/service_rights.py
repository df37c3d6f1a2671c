"""Drops that the service may not read, may not move, or cannot take out of their folder at all.

Run as a program of its own as root (``python -m tests.faults.service_rights``): the service runs as an account
without rights. Prints, scenario by scenario, what went wrong.
"""

import json
import logging
import os
import shutil
import subprocess
import tempfile
import traceback
from collections.abc import Callable
from pathlib import Path

from ledgersolve.service.verify import verify
from tests.service_share import drop, faults_after_recovery, hasten, names, quick_watcher

NOBODY = 65534


def main() -> None:
    """All scenarios."""
    logging.disable(logging.CRITICAL)
    hasten()
    _load_everything()
    scenarios = (unreadable, others_file, closed_folder, immutable)
    print(json.dumps({scenario.__name__: _in_a_folder(scenario) for scenario in scenarios}))


def _load_everything() -> None:
    """Do a job once: the account without rights may not be able to read the modules that it loads."""
    folder = Path(tempfile.mkdtemp())
    drop(folder, "plan.xlsx")
    assert faults_after_recovery(folder, ["plan.xlsx"]) == []
    shutil.rmtree(folder)


def unreadable(plan: Path) -> Callable[[], object]:
    """A file that only its owner may read."""
    os.chown(plan, 0, 0)
    plan.chmod(0)
    return lambda: plan.chmod(0o644)


def others_file(plan: Path) -> Callable[[], object]:
    """Somebody else's file in a folder where everybody may move their own files only."""
    os.chown(plan.parent, 0, 0)
    plan.parent.chmod(0o1777)
    os.chown(plan, 0, 0)
    return lambda: os.chown(plan, NOBODY, NOBODY)


def closed_folder(plan: Path) -> Callable[[], object]:
    """A folder that nothing may be taken out of."""
    os.chown(plan.parent, 0, 0)
    plan.parent.chmod(0o755)
    return lambda: plan.parent.chmod(0o777)


def immutable(plan: Path) -> Callable[[], object]:
    """A file that even root cannot move."""
    subprocess.run(["chattr", "+i", str(plan)], check=True, capture_output=True)
    return lambda: subprocess.run(["chattr", "-i", str(plan)], check=True, capture_output=True)


def _in_a_folder(scenario: Callable[[Path], Callable[[], object]]) -> list[str]:
    """Hinder one of two drops: the other comes back, this one is told; let go, it comes back, too."""
    folder = Path(tempfile.mkdtemp())
    try:
        folder.chmod(0o777)
        _as_nobody(folder, lambda: quick_watcher(folder))
        plan, other = drop(folder, "team/plan.xlsx"), drop(folder, "other/good.xlsx")
        for path in (plan, plan.parent, other, other.parent):
            os.chown(path, NOBODY, NOBODY)
        release = scenario(plan)
        try:
            faults = _as_nobody(folder, lambda: _while_hindered(folder))
        finally:
            release()
        faults += _as_nobody(folder, lambda: faults_after_recovery(folder, ["plan.xlsx", "good.xlsx"]))
        returned = [name for name in names(folder / "Returned") if name.endswith(".xlsx")]
        return faults + ([] if len(returned) == 2 else [f"returned in the end: {returned}"])
    finally:
        shutil.rmtree(folder)


def _while_hindered(folder: Path) -> list[str]:
    watcher = quick_watcher(folder)
    told = set()
    for _ in range(300):
        watcher.step()
        watcher.wait()
        told |= {(alert["name"], alert["why"]) for alert in watcher.picture()["alerts"]}
    faults = verify(folder)
    returned = [name for name in names(folder / "Returned") if name.endswith(".xlsx")]
    if len(returned) != 1 or not returned[0].startswith("good"):
        faults.append(f"returned while hindered: {returned}")
    if not (folder / "Inbox" / "team" / "plan.xlsx").exists():
        faults.append("the hindered drop is not in the inbox any more")
    if {name for name, _ in told} != {"plan.xlsx"} or "right" not in str(told):
        faults.append(f"told: {sorted(told)}")
    jobs = len(list((folder / ".ledgersolve" / "done").iterdir()))
    return faults + ([] if jobs == 1 else [f"{jobs} jobs were done"])


def _as_nobody(folder: Path, work: Callable[[], object]) -> list[str]:
    """Do something in a process of an account without rights; what it found."""
    told = folder / "told.json"
    pid = os.fork()
    if pid == 0:
        try:
            os.umask(0o002)
            os.setgroups([])
            os.setgid(NOBODY)
            os.setuid(NOBODY)
            found = work()
            told.write_text(json.dumps(found if isinstance(found, list) else []))
            os._exit(0)
        except BaseException:
            traceback.print_exc()
            os._exit(99)
    code = os.waitstatus_to_exitcode(os.waitpid(pid, 0)[1])
    return json.loads(told.read_text()) if code == 0 else [f"the process ended with code {code}"]


if __name__ == "__main__":
    main()
