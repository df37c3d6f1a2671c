"""What this machine lets the service use: memory and processors, also inside a container or a unit with limits."""

import math
import os
from collections.abc import Iterator
from contextlib import suppress
from pathlib import Path

import psutil

_GROUPS = Path("/sys/fs/cgroup")
_OWN = Path("/proc/self/cgroup")


def memory_bytes(groups: Path = _GROUPS, own: Path = _OWN) -> int:
    """Memory for this process and all it starts: the machine's, or the least limit of a control group above it."""
    limits = [int(psutil.virtual_memory().total)]
    for folder in _folders("memory", groups, own):
        for name in ("memory.max", "memory.high", "memory.limit_in_bytes"):
            with suppress(OSError, ValueError):  # not there, or "max"
                limits.append(int((folder / name).read_text("ascii")))
    return min(limits)


def processors(groups: Path = _GROUPS, own: Path = _OWN) -> int:
    """Processors for this process and all it starts; a quota of one and a half counts as two."""
    counts = [len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1]
    for folder in _folders("cpu", groups, own):
        with suppress(OSError, ValueError):
            quota, period = (folder / "cpu.max").read_text("ascii").split()
            counts.append(math.ceil(int(quota) / int(period)))
    return max(1, min(counts))


def _folders(kind: str, groups: Path, own: Path) -> Iterator[Path]:
    """The own control group and all above it, of the one hierarchy and of the older one for each kind."""
    try:
        lines = own.read_text("utf-8", "surrogateescape").splitlines()
    except OSError:
        return
    for line in lines:
        _, kinds, place = line.split(":", 2)
        if kinds and kind not in kinds.split(","):
            continue
        root = groups / kinds if kinds else groups
        folder = root / place.strip("/")
        while folder.is_relative_to(root):
            yield folder
            folder = folder.parent
