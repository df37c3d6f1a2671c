"""Four watch processes on one folder under SIGKILL and SIGSTOP; print what contradicts the invariants.

Run as a program of its own (``python -m tests.faults.service_storm DROPS LEASE_SECONDS SEED [RATE]``): it
forks. LEASE_SECONDS 0 ignores all leases: then everybody steals from everybody. RATE is the share of calls
that fail on top. Names recur, so that drops of one name meet.
"""

import json
import logging
import os
import shutil
import signal
import sys
import tempfile
import time
from pathlib import Path
from random import Random

import ledgersolve.service.supervise as supervise_module
from ledgersolve.service.leases import LeaseWatch
from ledgersolve.service.pool import LocalPool
from tests.service_share import (
    CHANGES,
    LOOKS,
    FaultyDisk,
    Plan,
    RandomErrors,
    child_at_once,
    drop,
    faults_after_recovery,
    hasten,
    memory_root,
    quick_watcher,
)

WATCHERS, NAMES = 4, 10
LONGEST_SECONDS = 240.0


def main() -> None:
    """Storm until all drops were made (or for four minutes), then recover and check."""
    drops, lease, seed = int(sys.argv[1]), float(sys.argv[2]), int(sys.argv[3])
    rate = float(sys.argv[4]) if len(sys.argv) > 4 else 0.0
    hasten()
    logging.disable(logging.CRITICAL)
    random = Random(seed)
    folder = Path(tempfile.mkdtemp(dir=memory_root()))
    quick_watcher(folder)
    pids = [_watch(folder, lease, random.random(), rate) for _ in range(WATCHERS)]
    dropped, kills, stops = [], 0, 0
    until = time.monotonic() + LONGEST_SECONDS
    while len(dropped) < drops and time.monotonic() < until:
        for _ in range(random.randint(1, 4)):
            name = f"plan {random.randrange(NAMES)}.xlsx"
            if not (folder / "Inbox" / name).exists():
                drop(folder, name, content=str(len(dropped)))
                dropped.append(name)
        time.sleep(random.uniform(0.0, 0.15))
        place = random.randrange(WATCHERS)
        if random.random() < 0.5:
            os.kill(pids[place], signal.SIGKILL)
            os.waitpid(pids[place], 0)
            pids[place] = _watch(folder, lease, random.random(), rate)
            kills += 1
        else:
            os.kill(pids[place], signal.SIGSTOP)
            time.sleep(random.uniform(0.0, 0.4))
            os.kill(pids[place], signal.SIGCONT)
            stops += 1
    time.sleep(0.5)
    for pid in pids:
        os.kill(pid, signal.SIGKILL)
        os.waitpid(pid, 0)
    answers = sum(len(list(job.glob("payload.*"))) for job in (folder / ".ledgersolve" / "jobs").glob("*"))
    faults = faults_after_recovery(folder, dropped)
    leases = [len(list(job.glob("lease.*"))) for job in (folder / ".ledgersolve" / "done").glob("*")]
    shutil.rmtree(folder)
    print(json.dumps({"drops": len(dropped), "kills": kills, "stops": stops, "faults": faults,
                      "taken over": sum(count > 1 for count in leases), "left answers": answers}))


def _watch(folder: Path, lease: float, seed: float, rate: float) -> int:
    pid = os.fork()
    if pid:
        return pid
    random = Random(seed)

    def slow_child(*arguments):
        time.sleep(random.choice((0.0, 0.0, 0.02, 0.2)))
        return child_at_once(*arguments)

    try:
        supervise_module.run_child = slow_child
        disk = FaultyDisk(Plan(), (*LOOKS, *CHANGES))
        watcher = quick_watcher(folder, disk, workers=2, beat_seconds=0.02, lost_leases=1000)
        if rate:
            disk.plan = RandomErrors(random.randrange(1 << 30), rate)
        watcher.desk.pool = LocalPool(3, None, disk)
        watcher.leases = LeaseWatch(disk, lease)
        while True:
            watcher.step()
            watcher.wait()
    finally:
        os._exit(98)


if __name__ == "__main__":
    main()
