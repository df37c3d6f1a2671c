"""One folder, a real scheduler and two workers of a cluster, one of them killed in mid-solve.

Run as a program of its own (``python -m tests.faults.service_cluster``); prints what went wrong.
"""

import json
import logging
import os
import signal
import tempfile
import threading
import time
from pathlib import Path

import psutil

from ledgersolve.service.pool import ClusterPool
from ledgersolve.service.verify import verify
from ledgersolve.service.watch import open_shop
from tests.service_share import HANDLERS, ROOT, drop, names, quick_settings

JOBS = 6


def main() -> None:
    """Six jobs of two seconds, a worker killed while two run, a second folder service stopped in between."""
    os.environ["PYTHONPATH"] = os.pathsep.join((str(ROOT), str(HANDLERS)))
    logging.disable(logging.CRITICAL)
    from distributed import LocalCluster

    folder = Path(tempfile.mkdtemp())
    for number in range(JOBS):
        drop(folder, f"plan {number}.xlsx", "slow 2")
    with LocalCluster(n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None) as cluster:
        print(json.dumps(_serve(folder, cluster)))


def _serve(folder: Path, cluster) -> dict:
    settings = quick_settings(workers=2, beat_seconds=0.5, scan_seconds=0.5)
    watcher, pool = open_shop(folder, cluster.scheduler_address, settings, "handlers:solve")
    assert isinstance(pool, ClusterPool)
    killed: list[int] = []
    threading.Thread(target=_kill_one, args=(cluster, killed), daemon=True).start()
    until = time.monotonic() + 120
    while time.monotonic() < until and not (watcher.is_empty() and killed):
        watcher.step()
        watcher.wait()
    watcher.leave()
    pool.close()
    left = [child for child in psutil.Process().children(recursive=True) if "service.child" in str(child.cmdline())]
    return {
        "killed": len(killed), "returned": names(folder / "Returned"), "faults": verify(folder, settled=True),
        "left": len(left),
    }


def _kill_one(cluster, killed: list[int]) -> None:
    """SIGKILL a worker that has a solver child."""
    while not killed:
        time.sleep(0.05)
        for nanny in cluster.workers.values():
            try:
                worker = psutil.Process(nanny.process.pid)
                if any("service.child" in str(child.cmdline()) for child in worker.children(recursive=True)):
                    time.sleep(0.5)
                    os.kill(worker.pid, signal.SIGKILL)
                    killed.append(worker.pid)
                    return
            except (psutil.NoSuchProcess, AttributeError):
                continue


if __name__ == "__main__":
    main()
