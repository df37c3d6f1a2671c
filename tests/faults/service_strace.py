"""Kill (or fail) a watch process at every system call that touches the served folder, by strace.

Run as a program of its own (``python -m tests.faults.service_strace STEP [ERRNO]``): a first run under
strace tells the calls, then each STEP-th of them gets SIGKILL, or fails with ERRNO. Prints what
contradicts the invariants after a clean process recovered.
"""

import json
import logging
import os
import re
import shutil
import subprocess
import sys
import tempfile
from collections import Counter
from pathlib import Path

from tests.service_share import (
    drop,
    faults_after_recovery,
    hasten,
    memory_root,
    quick_watcher,
    run_until_empty,
)

DROPS = ["plan a.xlsx", "plan b.xlsx"]
CALLS = "openat,mkdir,mkdirat,rmdir,unlink,unlinkat,rename,renameat,renameat2,link,linkat,chmod,fchmod,fsync,write"
LINE = re.compile(r"^(?:\d+ +)?(\w+)\((.*)")


def main() -> None:
    """Learn the calls, then go through them."""
    if sys.argv[1] == "work":
        _work(Path(sys.argv[2]))
        return
    step, error = int(sys.argv[1]), (sys.argv[2] if len(sys.argv) > 2 else "")
    hasten()
    logging.disable(logging.CRITICAL)
    points = _calls()[::step]
    faults = []
    for call, number in points:
        what = f"error={error}" if error else "signal=SIGKILL"
        folder = _share()
        _strace(folder, ["-o", os.devnull, "-e", f"inject={call}:{what}:when={number}"])
        found = faults_after_recovery(folder, DROPS)
        if found:
            faults.append({"call": call, "number": number, "faults": found})
        shutil.rmtree(folder)
    print(json.dumps({"points": len(points), "faults": faults}))


def _share() -> Path:
    folder = Path(tempfile.mkdtemp(dir=memory_root(), prefix="served-"))
    for name in DROPS:
        drop(folder, name)
    return folder


def _work(folder: Path) -> None:
    hasten()
    logging.disable(logging.CRITICAL)
    try:
        run_until_empty(quick_watcher(folder), 300)
    except OSError:
        sys.exit(1)


def _strace(folder: Path, options: list[str]) -> None:
    command = [
        "strace", "-f", "-qq", "-y", "-e", f"trace={CALLS}", *options,
        sys.executable, "-m", "tests.faults.service_strace", "work", str(folder),
    ]
    subprocess.run(command, env={**os.environ, "PYTHONDONTWRITEBYTECODE": "1"}, timeout=120, check=False,
                   stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)


def _calls() -> list[tuple[str, int]]:
    """The calls that touch the folder, each with its number among the calls of its name."""
    folder = _share()
    log = folder.parent / f"{folder.name}.log"
    _strace(folder, ["-o", str(log)])
    counts: Counter[str] = Counter()
    found = []
    for line in log.read_text("utf-8", "replace").splitlines():
        match = LINE.match(line)
        if match is None:
            continue
        counts[match[1]] += 1
        if folder.name in match[2]:
            found.append((match[1], counts[match[1]]))
    log.unlink()
    shutil.rmtree(folder)
    return found


if __name__ == "__main__":
    main()
