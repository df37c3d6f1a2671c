"""The folder's state for people and programs: Status.html, status.json, the command and its health."""

import json
import time
from collections.abc import Iterable
from contextlib import suppress
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from ledgersolve.service.disk import Disk
from ledgersolve.service.holder import is_gone
from ledgersolve.service.layout import Layout
from ledgersolve.service.page import render

NEVER_SERVED = "never served"
MOST_SHOWN = 200
MOST_RETURNED = 50
_SERVICE = (
    "id", "host", "pid", "boot", "state", "workers", "last_scan", "last_scan_unix", "monotonic", "scan_took",
    "stale_after_seconds",
)
_MISSED_SCANS = 3
_LEAST_STALE_SECONDS = 60.0


def write_board(layout: Layout, disk: Disk, beacon: Path, own: dict[str, Any]) -> None:
    """Write this process's sign of life, then the page and its data from those of all processes."""
    _put(layout, disk, beacon, json.dumps(own).encode("ascii"))
    state = gather(layout, disk, own)
    _put(layout, disk, layout.folder / "status.json", json.dumps(state, indent=1).encode("ascii"), public=True)
    _put(layout, disk, layout.folder / "Status.html", render(state).encode("utf-8"), public=True)


def _put(layout: Layout, disk: Disk, target: Path, content: bytes, *, public: bool = False) -> None:
    tmp = layout.new_tmp("page")
    try:
        disk.write_new(tmp, content)
        if public:
            disk.open_up(tmp, target.parent)
        disk.replace(tmp, target)
    except OSError:
        with suppress(OSError):
            disk.remove(tmp)
        raise


def stale_after(scan_seconds: float) -> float:
    """Seconds without a completed scan after which a service counts as dead."""
    return max(_LEAST_STALE_SECONDS, _MISSED_SCANS * scan_seconds)


def gather(layout: Layout, disk: Disk, own: dict[str, Any] | None = None) -> dict[str, Any]:
    """The state of a folder from the signs of life of all processes that serve it."""
    beacons = [own] if own is not None else []
    for name in disk.names(layout.hosts):
        with suppress(OSError, ValueError):
            found = json.loads(disk.read(layout.hosts / name, 1 << 24))
            if isinstance(found, dict) and (own is None or found.get("id") != own.get("id")):
                beacons.append(found)
    beacons.sort(key=lambda beacon: -float(beacon.get("last_scan_unix") or 0.0))
    newest = beacons[0] if beacons else {}
    live = [beacon for beacon in beacons if beacon is own or not _trouble(beacon)] or beacons[:1]
    returned = sorted(_all(beacons, "returned"), key=lambda one: str(one.get("at", "")), reverse=True)
    return {
        "state": newest.get("state", "not running"),
        "why": newest.get("why", ""),
        "version": newest.get("version", ""),
        "last_scan": newest.get("last_scan"),
        "last_scan_unix": newest.get("last_scan_unix"),
        "stale_after_seconds": newest.get("stale_after_seconds", stale_after(0.0)),
        "services": [{key: beacon.get(key) for key in _SERVICE} for beacon in beacons],
        "waiting": newest.get("waiting", [])[:MOST_SHOWN],
        "waiting_count": newest.get("waiting_count", 0),
        "running": _all(live, "running"),
        "returned": returned[:MOST_RETURNED],
        "alerts": _all(live, "alerts")[:MOST_SHOWN],
    }


def sweep_beacons(layout: Layout, disk: Disk) -> None:
    """Remove the signs of life of processes that ended in good order, or are known to be dead."""
    for name in disk.names(layout.hosts):
        with suppress(OSError, ValueError, AttributeError):
            found = json.loads(disk.read(layout.hosts / name, 1 << 24))
            if found.get("state") == "stopped" or is_gone(found.get("holder") or {}):
                disk.remove(layout.hosts / name)


def _all(beacons: Iterable[dict[str, Any]], key: str) -> list[dict[str, Any]]:
    """Entries of all processes, equal ones (two processes see the same Inbox) once."""
    found: dict[str, dict[str, Any]] = {}
    for beacon in beacons:
        for entry in beacon.get(key) or []:
            if isinstance(entry, dict):
                found.setdefault(json.dumps(entry, sort_keys=True), entry)
    return list(found.values())


def status(folder: Path) -> dict[str, Any]:
    """The state of a served folder, ready for JSON.

    ``well`` says whether a service looks after it, ``trouble`` in words why not.
    """
    layout = Layout(folder)
    if not layout.share_id.exists():
        return _nothing(NEVER_SERVED, "the folder was never served, or its share is not mounted")
    try:
        state = gather(layout, Disk())
    except OSError as error:
        return _nothing("out of reach", f"the share is out of reach ({error})")
    troubles = [_trouble(service) for service in state["services"]]
    if not troubles:
        state["trouble"] = "no service is running"
    elif all(troubles):
        state["trouble"] = troubles[0]
    else:
        state["trouble"] = ""
    state["well"] = not state["trouble"]
    return state


def _nothing(state: str, trouble: str) -> dict[str, Any]:
    """The state of a folder that tells nothing."""
    lists: dict[str, Any] = {key: [] for key in ("services", "waiting", "running", "returned", "alerts")}
    told = {"state": state, "why": "", "last_scan": None, "waiting_count": 0, "trouble": trouble, "well": False}
    return told | lists


def health(folder: Path) -> int:
    """0 where a service looks after the folder, 1 where none does, 2 where it was never served."""
    state = status(folder)
    if state["well"]:
        return 0
    return 2 if state["state"] == NEVER_SERVED else 1


def _trouble(service: dict[str, Any]) -> str:
    """What is wrong with a service; empty where it is well.

    On the same boot of the same machine its age is taken from the clock that no one can set.
    """
    if service.get("state") == "stopped":
        return "no service is running"
    patience = float(service.get("stale_after_seconds") or _LEAST_STALE_SECONDS)
    here = boot()
    if here and service.get("boot") == here and isinstance(service.get("monotonic"), int | float):
        age = time.monotonic() - float(service["monotonic"])
    elif isinstance(service.get("last_scan_unix"), int | float):
        age = abs(time.time() - float(service["last_scan_unix"]))
    else:
        return "its first scan is not complete yet"
    if age > patience:
        return f"the last complete look at Inbox was {age:.0f} s ago"
    return {"suspended": "the share is out of reach", "held": "nothing new can be taken in"}.get(
        str(service.get("state")), ""
    )


def boot() -> str:
    """Name of this boot of this machine; empty where the system does not tell."""
    with suppress(OSError):
        return Path("/proc/sys/kernel/random/boot_id").read_text("ascii").strip()
    return ""


def now_words() -> str:
    """Now as ISO 8601 with the machine's offset."""
    return datetime.now(UTC).astimezone().isoformat(timespec="seconds")


def as_text(state: dict[str, Any]) -> str:
    """The state as lines for a terminal."""
    head = f"Service: {state['state']}" + (f" ({state['why']})" if state["why"] else "")
    lines = [head, f"Last complete look at Inbox: {state['last_scan'] or 'never'}"]
    if state.get("trouble"):
        lines.append(f"Trouble: {state['trouble']}")
    lines += _section("Needs the administrator", [f"{one['name']}: {one['why']}" for one in state["alerts"]])
    lines += _section("Running", [_running_line(one) for one in state["running"]])
    waiting = [f"{one['name']}: {one['why']}" for one in state["waiting"]]
    more = state["waiting_count"] - len(waiting)
    lines += _section("Waiting", waiting + ([f"and {more} more"] if more > 0 else []))
    lines += _section("Came back", [f"{one['returned']}" for one in state["returned"]])
    return "\n".join(lines)


def _section(title: str, lines: list[str]) -> list[str]:
    return [f"{title}: {len(lines) or 'nothing'}", *(f"  {line}" for line in lines)]


def _running_line(one: dict[str, Any]) -> str:
    words = [f"{one['name']}: {one.get('stage') or 'reading'}, {one.get('elapsed') or 0:.0f} s"]
    if one.get("best") is not None:
        words.append(f"best {one['best']:,.2f}")
    if one.get("saving") is not None:
        words.append(f"at most {one['saving']:,.2f} could be saved")
    if one.get("left") is not None:
        words.append(f"{one['left']:.0f} s left")
    return ", ".join(words)
