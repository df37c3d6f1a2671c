"""More file events than the system keeps: those of the drops are lost, the drops are not.

Run as a program of its own (``python -m tests.faults.service_overflow``). The service sleeps while tens of
thousands of temporary files and then the drops are made, so that the queue of events runs over.
"""

import json
import logging
import os
import shutil
import signal
import tempfile
import time
from pathlib import Path

from ledgersolve.service.verify import verify
from ledgersolve.service.watch import open_shop
from tests.service_share import child_at_once, drop, memory_root, names, quick_settings

FILES, DROPS, SECONDS = 12_000, 40, 60.0


def main() -> None:
    """Overflow, then wait for every drop."""
    folder = Path(tempfile.mkdtemp(dir=memory_root()))
    (folder / "Inbox").mkdir()
    pid = os.fork()
    if pid == 0:
        try:
            _serve(folder)
        finally:
            os._exit(98)
    _wait(lambda: (folder / "ready").exists())
    os.kill(pid, signal.SIGSTOP)
    inbox = folder / "Inbox"
    for number in range(FILES):
        path = inbox / f"{number}.tmp"
        path.write_bytes(b"x")
        path.unlink()
    for number in range(DROPS):
        drop(folder, f"plan {number}.xlsx")
    os.kill(pid, signal.SIGCONT)
    _wait(lambda: len(list((folder / ".ledgersolve" / "done").iterdir())) == DROPS)
    os.kill(pid, signal.SIGKILL)
    os.waitpid(pid, 0)
    result = {
        "returned": len([name for name in names(folder / "Returned") if name.endswith(".xlsx")]),
        "overflowed": "overflow" in (folder / "watchdog.log").read_text("utf-8").lower(),
        "faults": verify(folder, settled=True),
    }
    shutil.rmtree(folder)
    print(json.dumps(result))


def _wait(reached) -> None:
    until = time.monotonic() + SECONDS
    while not reached() and time.monotonic() < until:
        time.sleep(0.05)


def _serve(folder: Path) -> None:
    """A real observer and a real scan every half second; jobs are answered by a stand-in."""
    import ledgersolve.service.supervise as supervise_module

    logging.getLogger("watchdog").addHandler(logging.FileHandler(folder / "watchdog.log"))
    supervise_module.run_child = child_at_once
    watcher, _ = open_shop(folder, None, quick_settings(workers=2, scan_seconds=0.5), "handlers:solve")
    while True:
        watcher.step()
        (folder / "ready").touch()
        watcher.wait()


if __name__ == "__main__":
    main()
