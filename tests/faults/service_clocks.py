"""A service whose clock is ten years ahead, then ten years behind, changed in mid-solve and over a restart.

Run as a program of its own (``python -m tests.faults.service_clocks``); needs a C compiler. A small library in
front of the system's own moves the date and leaves the monotonic clock alone, as a wrong clock does
(libfaketime 0.9.10 breaks ``clock_nanosleep``, and with it Python's ``sleep``). Prints what went wrong.
"""

import json
import os
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from datetime import datetime
from pathlib import Path

from ledgersolve.service.verify import verify
from ledgersolve.service.watch import serve
from tests.service_share import HANDLERS, ROOT, drop, names, quick_settings

DROPS, AHEAD, BEHIND, RIGHT = 12, str(3650 * 86_400), str(-3650 * 86_400), "0"
LIBRARY = r"""
#define _GNU_SOURCE
#include <stdio.h>
#include <stdlib.h>
#include <sys/syscall.h>
#include <sys/time.h>
#include <time.h>
#include <unistd.h>

static long offset(void) {
    long seconds = 0;
    FILE *file = fopen(getenv("CLOCK_FILE"), "r");
    if (file) { if (fscanf(file, "%ld", &seconds) != 1) seconds = 0; fclose(file); }
    return seconds;
}
int clock_gettime(clockid_t id, struct timespec *when) {
    int code = syscall(SYS_clock_gettime, id, when);
    if (code == 0 && id == CLOCK_REALTIME) when->tv_sec += offset();
    return code;
}
int gettimeofday(struct timeval *restrict when, void *restrict zone) {
    struct timespec now;
    clock_gettime(CLOCK_REALTIME, &now);
    when->tv_sec = now.tv_sec; when->tv_usec = now.tv_nsec / 1000;
    return 0;
}
time_t time(time_t *into) {
    struct timespec now;
    clock_gettime(CLOCK_REALTIME, &now);
    if (into) *into = now.tv_sec;
    return now.tv_sec;
}
"""


def main() -> None:
    """Serve twelve drops by two processes, one after the other, under changing clocks."""
    if sys.argv[1:2] == ["serve"]:
        # originals of a day ago would be deleted, if the date counted
        settings = quick_settings(beat_seconds=0.5, scan_seconds=0.5, keep_days=1.0, keep_at_least=0)
        sys.exit(serve(Path(sys.argv[2]), once=True, settings=settings, handler="handlers:solve"))
    folder, clock = Path(tempfile.mkdtemp()), Path(tempfile.mkdtemp()) / "clock"
    (clock.parent / "clock.c").write_text(LIBRARY)
    build = ["cc", "-shared", "-fPIC", "-O1", "-o", str(clock.with_suffix(".so")), str(clock.with_suffix(".c"))]
    subprocess.run(build, check=True)
    for number in range(DROPS):
        drop(folder, f"plan {number}.xlsx", "slow 1")
    years = []
    clock.write_text(AHEAD)
    first = _start(folder, clock)
    _wait(lambda: len(_returned(folder)) > 0)
    for setting in (BEHIND, AHEAD, RIGHT, AHEAD):
        clock.write_text(setting)
        _wait(lambda setting=setting: _is_told(folder, setting))
        years.append(_year_told(folder))
    first.kill()
    first.wait()
    clock.write_text(BEHIND)
    code = _start(folder, clock).wait(120)
    years.append(_year_told(folder))
    done = folder / ".ledgersolve" / "done"
    result = {
        "returned": len(_returned(folder)), "code": code, "years told": years, "faults": verify(folder, settled=True),
        "originals": len(list(done.glob("*/in/*"))), "attempts": len(list(done.glob("*/failed.*"))),
    }
    shutil.rmtree(folder)
    shutil.rmtree(clock.parent)
    print(json.dumps(result))


def _start(folder: Path, clock: Path) -> subprocess.Popen:
    environment = {
        **os.environ, "LD_PRELOAD": str(clock.with_suffix(".so")), "CLOCK_FILE": str(clock),
        "PYTHONPATH": os.pathsep.join((str(ROOT), str(HANDLERS))),
    }
    command = [sys.executable, "-m", "tests.faults.service_clocks", "serve", str(folder)]
    return subprocess.Popen(command, env=environment, stderr=subprocess.DEVNULL)


def _returned(folder: Path) -> list[str]:
    place = folder / "Returned"
    return [name for name in names(place) if name.endswith(".xlsx")] if place.is_dir() else []


def _wait(reached: Callable[[], bool]) -> None:
    until = time.monotonic() + 30.0
    while not reached() and time.monotonic() < until:
        time.sleep(0.05)


def _is_told(folder: Path, setting: str) -> bool:
    """Whether the last scan was done under the clock that was set."""
    year = datetime.fromtimestamp(time.time() + int(setting)).year
    return _year_told(folder) == year


def _year_told(folder: Path) -> int:
    """Year of the last scan as the status says it: proves that the clock was off."""
    return int((json.loads((folder / "status.json").read_text("utf-8"))["last_scan"] or "0000")[:4])


if __name__ == "__main__":
    main()
