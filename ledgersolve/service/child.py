"""The child process: one workbook, read, solved and written, under hard limits.

``python -P -m ledgersolve.service.child REQUEST`` where REQUEST is a JSON file in a private folder. The
child lives as long as its standard input stays open: when the supervisor dies the system closes it, and
the child kills itself. On its standard output it writes one JSON object a line: ``{"limit": seconds}``
once the workbook's own time limit is known, and the progress of the solve. Whatever the solvers print goes
to standard error.
"""

import contextlib
import gc
import importlib
import json
import os
import signal
import sys
import threading
from collections.abc import Callable
from pathlib import Path
from typing import Any, TextIO

if sys.platform != "win32":
    import resource

TOO_BIG = 77
"""Exit code of a child that ran into its memory limit."""

FEW_COLLECTIONS = (100_000, 50, 100)
"""Thresholds of the garbage collector: a job makes hundreds of thousands of values that live to its end."""


def main() -> int:
    """Do what the request says; 0 once the result is written."""
    gc.set_threshold(*FEW_COLLECTIONS)
    request = json.loads(Path(sys.argv[1]).read_text("utf-8"))
    _restrain(request)
    cancelled = _live_with_the_supervisor()
    says = _own_channel()
    try:
        result = _handle(request, says, cancelled)
    except MemoryError:
        return TOO_BIG
    _write_result(Path(request["result"]), result)
    return 0


def _handle(
    request: dict[str, Any], says: Callable[[dict[str, Any]], None], cancelled: threading.Event
) -> dict[str, Any]:
    module, _, name = request["handler"].partition(":")
    handle = getattr(importlib.import_module(module), name)

    def progress(step: Any) -> None:
        says({"stage": step.stage, "best": step.best, "bound": step.bound, "seconds": step.seconds})

    answer = handle(
        Path(request["source"]),
        Path(request["into"]),
        progress=progress,
        cancelled=cancelled.is_set,
        shown_name=request["shown_name"],
        limit_known=lambda seconds: says({"limit": seconds}),
    )
    words: dict[str, Any] = answer.as_json()
    return {**words, "reason": getattr(answer, "reason", ""), "may_pass": getattr(answer, "may_pass", False)}


def _write_result(target: Path, result: dict[str, Any]) -> None:
    """Write the result so that it is there whole or not at all."""
    half = target.with_suffix(".half")
    half.write_text(json.dumps(result), "utf-8")
    half.replace(target)


def _restrain(request: dict[str, Any]) -> None:
    """Take on the limits before anything of the workbook is touched."""
    os.umask(0o077)
    if sys.platform == "win32":
        return
    hard = {
        resource.RLIMIT_CORE: 0,
        resource.RLIMIT_AS: request["memory_bytes"],
        resource.RLIMIT_FSIZE: request["file_bytes"],
        resource.RLIMIT_CPU: request["cpu_seconds"],
    }
    for kind, wanted in hard.items():
        _, most = resource.getrlimit(kind)
        value = wanted if most == resource.RLIM_INFINITY else min(wanted, most)
        resource.setrlimit(kind, (value, value))
    with contextlib.suppress(OSError):
        os.nice(request["nice"])


def _live_with_the_supervisor() -> threading.Event:
    """Die when standard input ends; a byte on it asks to stop with the best plan so far."""
    line = os.dup(0)
    nothing = os.open(os.devnull, os.O_RDONLY)
    os.dup2(nothing, 0)
    os.close(nothing)
    cancelled = threading.Event()

    def watch() -> None:
        while os.read(line, 1):
            cancelled.set()
        if sys.platform == "win32":
            os._exit(1)
        if os.getpgrp() == os.getpid():
            os.killpg(os.getpid(), signal.SIGKILL)
        os.kill(os.getpid(), signal.SIGKILL)

    threading.Thread(target=watch, name="life line", daemon=True).start()
    return cancelled


def _own_channel() -> Callable[[dict[str, Any]], None]:
    """Keep standard output for the supervisor alone and send everything else to standard error."""
    channel: TextIO = os.fdopen(os.dup(1), "w", encoding="utf-8", buffering=1)
    os.dup2(2, 1)
    lock = threading.Lock()

    def says(line: dict[str, Any]) -> None:
        with lock, contextlib.suppress(OSError):
            channel.write(json.dumps(line) + "\n")

    return says


if __name__ == "__main__":
    sys.exit(main())
