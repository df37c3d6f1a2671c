"""Many drops at once, a small one behind long ones, and nothing at all; prints figures and what went wrong.

Run as a program of its own: ``python -m tests.faults.service_load COUNT`` (real child processes with a
stand-in that answers at once), ``... service_load behind`` (fifty long ones, then a small one) or ``...
service_load idle`` (what an empty folder costs in a minute).
"""

import json
import logging
import os
import resource
import shutil
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import psutil

from ledgersolve.service.config import ServiceSettings
from ledgersolve.service.verify import verify
from ledgersolve.service.watch import open_shop
from tests.service_share import HANDLERS, ROOT, drop, memory_root, names


def main() -> None:
    """Run the load that is asked for."""
    os.environ["PYTHONPATH"] = os.pathsep.join((str(ROOT), str(HANDLERS)))
    logging.disable(logging.CRITICAL)
    folder = Path(tempfile.mkdtemp(dir=memory_root()))
    try:
        ways = {"behind": _behind, "idle": _idle}
        way = ways.get(sys.argv[1])
        print(json.dumps(_many(folder, int(sys.argv[1])) if way is None else way(folder)))
    finally:
        shutil.rmtree(folder)


def _scan_seconds(folder: Path, count: int) -> float:
    """How long a scan of so many settled drops takes, nothing being started."""
    for number in range(len(names(folder / "Inbox")), count):
        drop(folder, f"plan {number}.xlsx", content=str(number))
    watcher, pool = open_shop(folder, None, ServiceSettings(free_mb=1 << 40), "handlers:solve")
    pool.close()
    watcher._scan()
    time.sleep(2.5)
    watcher._scan()
    watcher._scan()
    return watcher._scan_took


def _many(folder: Path, count: int) -> dict:
    (folder / "Inbox").mkdir()
    scans = {f"scan seconds at {size}": round(_scan_seconds(folder, size), 4) for size in (count // 10, count)}
    watcher, pool = open_shop(folder, None, ServiceSettings(workers=2), "handlers:solve")
    began = time.monotonic()
    before = resource.getrusage(resource.RUSAGE_SELF)
    marks = []
    while not watcher.is_empty():
        watcher.step()
        watcher.wait()
        done = len(names(folder / ".ledgersolve" / "done")) if len(marks) < 10 and time.monotonic() - began > 1 else 0
        if done > (len(marks) + 1) * count / 10:
            marks.append(round(time.monotonic() - began, 1))
    took = time.monotonic() - began
    after = resource.getrusage(resource.RUSAGE_SELF)
    watcher.leave()
    pool.close()
    return {
        "returned": len([name for name in names(folder / "Returned") if name.endswith(".xlsx")]),
        "faults": verify(folder, settled=True)[:5], "seconds": round(took, 1), **scans,
        "service cpu seconds": round(after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime, 1),
        "service peak MB": round(after.ru_maxrss / 1024), "scans": watcher.scans, "tenths done at": marks,
    }


def _behind(folder: Path) -> dict:
    """Fifty jobs of a minute each, of the size of large workbooks; ten seconds later a small one."""
    (folder / "Inbox").mkdir()
    for number in range(50):
        drop(folder, f"long {number}.xlsx", "slow 60", content="x" * 200_000 + str(number))
    watcher, pool = open_shop(folder, None, ServiceSettings(workers=2), "handlers:solve")
    began, dropped, back = time.monotonic(), 0.0, 0.0
    while not back and time.monotonic() - began < 200:
        watcher.step()
        watcher.wait()
        now = time.monotonic() - began
        if now > 10 and not dropped:
            drop(folder, "small.xlsx", "slow 1")
            dropped = now
        if any(name.startswith("small") for name in names(folder / "Returned")):
            back = now
    running = len(watcher.desk.trays)
    watcher.leave()
    pool.close()
    return {"own seconds": 1.0, "back after": round(back - dropped, 2), "running meanwhile": running}


def _idle(folder: Path) -> dict:
    """The command itself on a folder with a few jobs done, a minute long, once it has come to rest."""
    for number in range(20):
        drop(folder, f"plan {number}.xlsx", content=str(number))
    watcher, pool = open_shop(folder, None, ServiceSettings(workers=2), "handlers:solve")
    while not watcher.is_empty():
        watcher.step()
        watcher.wait()
    watcher.leave()
    pool.close()
    command = [sys.executable, "-m", "ledgersolve", "watch", str(folder)]
    service = subprocess.Popen(command, cwd=ROOT, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    process = psutil.Process(service.pid)
    time.sleep(15.0)
    before, began = process.cpu_times(), time.monotonic()
    time.sleep(60.0)
    after, took = process.cpu_times(), time.monotonic() - began
    memory = process.memory_info().rss / (1 << 20)
    service.terminate()
    service.wait(20)
    spent = after.user + after.system - before.user - before.system
    return {"cpu percent of a core": round(100.0 * spent / took, 2), "memory MB": round(memory)}


if __name__ == "__main__":
    main()
