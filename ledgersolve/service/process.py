"""One child process: started, listened to, held to its limits, and ended for certain."""

import contextlib
import json
import math
import os
import signal
import subprocess
import sys
import threading
import time
from collections import deque
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, BinaryIO

import ledgersolve
from ledgersolve.service.child import TOO_BIG
from ledgersolve.service.order import ChildLimits

_LOOK_SECONDS = 0.25
_LONGEST_LINE = 4096
_KEPT_LINES = 40
_PASSED_ON = ("PATH", "LANG", "LC_ALL", "TZ", "SYSTEMROOT", "PYTHONPATH")
_ONE_THREAD = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "NUMEXPR_NUM_THREADS")


@dataclass
class Heard:
    """What the child said so far."""

    limit: float | None = None
    limit_heard: float = 0.0
    progress: dict[str, Any] = field(default_factory=dict)
    last_words: deque[str] = field(default_factory=lambda: deque(maxlen=_KEPT_LINES))


@dataclass(frozen=True)
class Ended:
    """How the child ended: ``cause`` is empty where it ended by itself with code 0."""

    cause: str
    stopped: bool
    too_big: bool
    last_words: str
    seconds: float


def run_child(
    request: dict[str, Any],
    private: Path,
    limits: ChildLimits,
    stop: Callable[[], bool],
    tell: Callable[[Heard], None],
) -> Ended:
    """Run the child to its end, or end it.

    Parameters
    ----------
    request
        Goes to the child as a file; the limits are added to it.
    private
        The private folder of the job; the child works in it.
    limits
        Wall time: ``reading_seconds`` until the child tells the workbook's own limit, then that limit and a
        tenth more; never more than ``longest_seconds``. Then the child is asked to end with the best plan
        so far, and killed after ``grace_seconds``.
    stop
        Asked four times a second; True kills the child at once.
    tell
        Called as often with what the child said so far.
    """
    started = time.monotonic()
    child = _start(request, private, limits)
    heard = Heard()
    listeners = [
        threading.Thread(target=_listen, args=(child.stdout, heard), daemon=True),
        threading.Thread(target=_note_words, args=(child.stderr, heard), daemon=True),
    ]
    for listener in listeners:
        listener.start()
    cause, stopped = "", False
    try:
        while child.poll() is None and not cause and not stopped:
            with contextlib.suppress(subprocess.TimeoutExpired):
                child.wait(_LOOK_SECONDS)
                break
            over = time.monotonic() - started - _allowed(heard, limits)
            stopped = stop()
            if over > limits.grace_seconds:
                cause = _overdue_words(heard, limits)
            elif over > 0:
                _ask_to_end(child)
            tell(heard)
    finally:
        _end(child)
    for listener in listeners:
        listener.join(2.0)
    if not cause and not stopped:
        cause = _exit_words(child.returncode)
    words = "\n".join(heard.last_words)
    too_big = child.returncode == TOO_BIG or "MemoryError" in words or "bad_alloc" in words
    return Ended(cause, stopped, bool(cause) and too_big, words, time.monotonic() - started)


def _allowed(heard: Heard, limits: ChildLimits) -> float:
    """Seconds after which the child should have ended by itself."""
    own = limits.reading_seconds if heard.limit is None else limits.reading_seconds + 1.1 * heard.limit
    return min(own, limits.longest_seconds)


def _overdue_words(heard: Heard, limits: ChildLimits) -> str:
    """That a child did not end, with the settings that an administrator may raise."""
    allowed = _allowed(heard, limits)
    if allowed >= limits.longest_seconds:
        names = "longest_job_seconds"
    else:
        names = "reading_seconds" if heard.limit is None else "its time limit, reading_seconds"
    return f"it did not end within {allowed + limits.grace_seconds:.0f} s ({names} and grace_seconds)"


def _ask_to_end(child: "subprocess.Popen[bytes]") -> None:
    """A byte on the life line cancels the solve; one that is not read does no harm."""
    if child.stdin is not None:
        with contextlib.suppress(OSError):
            if sys.platform != "win32":
                os.set_blocking(child.stdin.fileno(), False)
            os.write(child.stdin.fileno(), b"c")


def _start(request: dict[str, Any], private: Path, limits: ChildLimits) -> "subprocess.Popen[bytes]":
    file = private / "request.json"
    cpu = math.ceil(4 * (limits.longest_seconds + limits.grace_seconds))
    file.write_text(
        json.dumps(
            {
                **request,
                "memory_bytes": limits.memory_bytes,
                "file_bytes": limits.file_bytes,
                "cpu_seconds": cpu,
                "nice": limits.nice,
            }
        ),
        "utf-8",
    )
    # -P: the private folder holds the analyst's file, whatever its name; nothing is ever imported from there
    command = [sys.executable, "-P", "-m", "ledgersolve.service.child", str(file)]
    return subprocess.Popen(
        command,
        cwd=private,
        env=_environment(private),
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        start_new_session=True,
    )


def _environment(private: Path) -> dict[str, str]:
    """Only what the child needs; nothing of the service's own environment goes further."""
    passed = {name: os.environ[name] for name in _PASSED_ON if name in os.environ}
    package = str(Path(ledgersolve.__file__).parent.parent)
    paths = [package, *filter(None, passed.get("PYTHONPATH", "").split(os.pathsep))]
    return {
        **passed,
        **dict.fromkeys(_ONE_THREAD, "1"),
        "PYTHONPATH": os.pathsep.join(paths),
        "PYTHONFAULTHANDLER": "1",
        "HOME": str(private),
        "TMPDIR": str(private),
        "TEMP": str(private),
        "TMP": str(private),
    }


def _listen(stream: BinaryIO, heard: Heard) -> None:
    """Read the child's lines; one that is no such line is passed over, a very long one is cut."""
    with stream:
        while line := stream.readline(_LONGEST_LINE):
            try:
                said = json.loads(line)
            except ValueError:
                continue
            if isinstance(said, dict):
                _take_in(said, heard)


def _take_in(said: dict[str, Any], heard: Heard) -> None:
    limit = said.get("limit")
    if isinstance(limit, int | float) and 0 < limit < 1e7:
        heard.limit, heard.limit_heard = float(limit), time.monotonic()
    elif isinstance(said.get("stage"), str):
        figures = {name: _figure(said.get(name)) for name in ("best", "bound", "seconds")}
        heard.progress = {"stage": said["stage"][:120], **figures}


def _figure(value: Any) -> float | None:
    is_number = isinstance(value, int | float) and not isinstance(value, bool)
    return float(value) if is_number and math.isfinite(value) else None


def _note_words(stream: BinaryIO, heard: Heard) -> None:
    """Keep the last lines of what the child and its solvers print; a solver may print megabytes."""
    with stream:
        while line := stream.readline(_LONGEST_LINE):
            heard.last_words.append(line.decode("utf-8", "replace").rstrip())


def _end(child: "subprocess.Popen[bytes]") -> None:
    """Make sure that the child and all it started are gone, and let go of its life line."""
    if child.poll() is None:  # once it was waited for, its number may be another process's
        if sys.platform == "win32":
            child.kill()
        else:
            with contextlib.suppress(ProcessLookupError, PermissionError):
                os.killpg(child.pid, signal.SIGKILL)
        child.wait()
    if child.stdin is not None:
        with contextlib.suppress(OSError):
            child.stdin.close()


def _exit_words(code: int) -> str:
    if code == 0:
        return ""
    if code == TOO_BIG:
        return "it needs more memory than one job may use"
    if code < 0:
        name = signal.Signals(-code).name if -code in set(signal.Signals) else f"signal {-code}"
        return f"it was ended by the system ({name})"
    return f"it ended with code {code}"
