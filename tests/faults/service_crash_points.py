"""Kill a watch process before every changing call of two jobs; print what contradicts the invariants.

Run as a program of its own (``python -m tests.faults.service_crash_points [STEP]``): it forks, which a test
runner with threads should not.
"""

import json
import os
import shutil
import sys
import tempfile
from pathlib import Path

from ledgersolve.service.verify import verify
from tests.service_share import (
    FaultyDisk,
    KillAt,
    drop,
    faults_after_recovery,
    hasten,
    memory_root,
    quick_watcher,
    run_until_empty,
)

DROPS = ["plan a.xlsx", "plan b.xlsx"]


def main() -> None:
    """Go through all points, or every STEP-th."""
    step = int(sys.argv[1]) if len(sys.argv) > 1 else 1
    hasten()
    faults, points, number = [], 0, 1
    while True:
        folder = Path(tempfile.mkdtemp(dir=memory_root()))
        for name in DROPS:
            drop(folder, name)
        killed = _in_a_fork(lambda folder=folder, number=number: _work(folder, number)) == -9
        after_kill = verify(folder) if (folder / ".ledgersolve" / "done").is_dir() else []
        left = _in_a_fork(lambda folder=folder: _recover(folder))
        if after_kill or left:
            told = (folder / "faults.json").read_text() if (folder / "faults.json").exists() else f"code {left}"
            faults.append({"point": number, "after the kill": after_kill, "after recovery": told})
        shutil.rmtree(folder)
        if not killed:
            break
        points += 1
        number += step
    print(json.dumps({"points": points, "faults": faults}))


def _in_a_fork(work) -> int:
    """Run in a copy of this process; its exit code, negative for a signal."""
    pid = os.fork()
    if pid == 0:
        try:
            os._exit(work())
        finally:
            os._exit(99)
    return os.waitstatus_to_exitcode(os.waitpid(pid, 0)[1])


def _work(folder: Path, number: int) -> int:
    run_until_empty(quick_watcher(folder, FaultyDisk(KillAt(number))))
    return 0


def _recover(folder: Path) -> int:
    faults = faults_after_recovery(folder, DROPS)
    if faults:
        (folder / "faults.json").write_text(json.dumps(faults))
    return 1 if faults else 0


if __name__ == "__main__":
    main()
