"""One folder and a cluster whose scheduler is killed while jobs run, and started again at the same address.

Run as a program of its own (``python -m tests.faults.service_scheduler``); prints what went wrong. The workers
are started again when they end, as an administrator's system does it.
"""

import json
import logging
import os
import signal
import socket
import subprocess
import sys
import tempfile
import threading
import time
from pathlib import Path

import psutil

from ledgersolve.service.verify import verify
from ledgersolve.service.watch import open_shop
from tests.service_share import HANDLERS, ROOT, drop, names, quick_settings

JOBS, WORKERS = 6, 2


def main() -> None:
    """Six jobs of three seconds; the scheduler dies while the first ones run and is away for four seconds."""
    os.environ["PYTHONPATH"] = os.pathsep.join((str(ROOT), str(HANDLERS)))
    logging.disable(logging.CRITICAL)
    folder = Path(tempfile.mkdtemp())
    for number in range(JOBS):
        drop(folder, f"plan {number}.xlsx", "slow 3")
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    cluster = _Cluster(f"tcp://127.0.0.1:{port}", port)
    try:
        print(json.dumps(_serve(folder, cluster)))
    finally:
        cluster.end()


class _Cluster:
    """A scheduler and workers, each a process of its own; a worker that ended is started again."""

    def __init__(self, address: str, port: int) -> None:
        self.address, self.port, self.ending = address, port, False
        self.scheduler = self._start("scheduler", "--host", "127.0.0.1", "--port", str(port), "--no-dashboard")
        self.workers: list[subprocess.Popen] = []
        threading.Thread(target=self._keep_workers, daemon=True).start()

    def _start(self, kind: str, *words: str) -> subprocess.Popen:
        command = [sys.executable, "-m", f"distributed.cli.dask_{kind}", *words]
        return subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL, cwd=tempfile.mkdtemp())

    def _keep_workers(self) -> None:
        while not self.ending:
            self.workers = [worker for worker in self.workers if worker.poll() is None]
            while len(self.workers) < WORKERS and not self.ending:
                self.workers.append(self._start(
                    "worker", self.address, "--nthreads", "1", "--no-dashboard", "--death-timeout", "20"))
            time.sleep(0.2)

    def restart_scheduler(self) -> None:
        """Kill it, stay without one for a while, start another at the same address."""
        self.scheduler.kill()
        self.scheduler.wait()
        time.sleep(4.0)
        self.scheduler = self._start(
            "scheduler", "--host", "127.0.0.1", "--port", str(self.port), "--no-dashboard")

    def end(self) -> None:
        """End every process."""
        self.ending = True
        time.sleep(0.3)
        for process in (*self.workers, self.scheduler):
            process.send_signal(signal.SIGTERM)
            try:
                process.wait(10)
            except subprocess.TimeoutExpired:
                process.kill()


def _serve(folder: Path, cluster: _Cluster) -> dict:
    settings = quick_settings(workers=WORKERS, beat_seconds=0.5, scan_seconds=0.5)
    watcher, pool = open_shop(folder, cluster.address, settings, "handlers:solve")
    began, restarts = time.monotonic(), 0
    while time.monotonic() - began < 200 and not watcher.is_empty():
        watcher.step()
        watcher.wait()
        if not restarts and _solvers():
            restarts += 1
            threading.Thread(target=cluster.restart_scheduler).start()
    took = time.monotonic() - began
    watcher.leave()
    pool.close()
    time.sleep(1.0)
    return {
        "restarts": restarts, "returned": len(names(folder / "Returned")), "seconds": round(took, 1),
        "faults": verify(folder, settled=True), "left": len(_solvers()),
        "attempts": len(list((folder / ".ledgersolve" / "done").glob("*/failed.*"))),
    }


def _solvers() -> list[psutil.Process]:
    """Processes that solve a workbook, below this one."""
    found = []
    for child in psutil.Process().children(recursive=True):
        try:
            found += [child] if "ledgersolve.service.child" in child.cmdline() else []
        except psutil.NoSuchProcess:
            continue
    return found


if __name__ == "__main__":
    main()
