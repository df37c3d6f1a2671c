"""Who holds a lease, in words this machine can check: a holder known to be dead is not waited for."""

import hashlib
import os
import socket
from contextlib import suppress
from pathlib import Path
from typing import Any

_BOOT = Path("/proc/sys/kernel/random/boot_id")


def describe() -> dict[str, Any]:
    """Words on this process for its leases and its sign of life."""
    words: dict[str, Any] = {"host": socket.gethostname(), "pid": os.getpid()}
    place = _place()
    with suppress(OSError):
        if place is not None:
            words |= {"started": _started(os.getpid()), "place": place}
    return words


def is_gone(words: dict[str, Any]) -> bool:
    """Whether the holder certainly runs no more; False where this cannot be told from here.

    A process number means something only in the same boot and the same process namespace.
    """
    place, pid = words.get("place"), words.get("pid")
    if place is None or place != _place() or not isinstance(pid, int):
        return False
    try:
        return _started(pid) != words.get("started")
    except OSError:
        return False


def process_words() -> str:
    """The own process for the name of a file: its number, boot and process namespace."""
    return f"{os.getpid()}-{_place_digest()}"


def is_of_dead_process(words: str) -> bool:
    """Whether such words name a process of this place that runs no more."""
    pid, _, rest = words.partition("-")
    ours = rest.partition("-")[0] == _place_digest()
    try:
        return ours and pid.isdigit() and _place() is not None and _started(int(pid)) is None
    except OSError:
        return False


def _place_digest() -> str:
    return hashlib.sha256((_place() or "").encode()).hexdigest()[:12]


def _place() -> str | None:
    """Boot and process namespace; None where the system does not tell."""
    try:
        return f"{_BOOT.read_text('ascii').strip()} {Path('/proc/self/ns/pid').readlink()}"
    except OSError:
        return None


def _started(pid: int) -> str | None:
    """When a process started, in clock ticks since the boot; None where there is no such process.

    Raises OSError where the system does not tell (no file descriptor is left, say): that is no proof of death.
    """
    try:
        stat = Path(f"/proc/{pid}/stat").read_text("utf-8", "replace")
    except (FileNotFoundError, ProcessLookupError):
        return None
    return stat.rpartition(")")[2].split()[19]
