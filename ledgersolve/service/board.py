"""The folder's state for people and programs: Status.html, status.json, the command and its health."""

import json
import time
from collections.abc import Iterable
from contextlib import suppress
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from ledgersolve import __version__
from ledgersolve.service.disk import Disk
from ledgersolve.service.holder import describe, is_gone
from ledgersolve.service.layout import Layout
from ledgersolve.service.page import local_time, render, running_words
from ledgersolve.service.waiting import as_waiting

NEVER_SERVED = "never served"
NOT_READABLE = "not readable"
NO_SIGN_OF_LIFE = "no sign of life"
OUT_OF_REACH = "out of reach"
_TELLS_NOTHING = (NEVER_SERVED, NOT_READABLE, OUT_OF_REACH)
_TELLS_ITSELF = ("starting", "stopped", "suspended", "held")
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
    live = [beacon for beacon in beacons if beacon is own or not _trouble(beacon)]
    told = live or beacons[:1]
    newest = next((beacon for beacon in live if not _trouble(beacon)), told[0] if told else {})
    running = _all(live, "running")
    taken = {one.get("job") for one in running}
    seen = [one for one in newest.get("waiting", []) if one.get("job", "") not in taken]
    left = [] if live else [as_waiting(one) for one in newest.get("running", [])]
    returned = sorted(_all(beacons, "returned"), key=lambda one: str(one.get("at", "")), reverse=True)
    return {
        "state": newest.get("state", "not running"),
        "why": newest.get("why", ""),
        "version": newest.get("version", ""),
        "last_scan": newest.get("last_scan"),
        "last_scan_unix": newest.get("last_scan_unix"),
        "stale_after_seconds": newest.get("stale_after_seconds", stale_after(0.0)),
        "services": [{key: beacon.get(key) for key in _SERVICE} for beacon in beacons],
        "waiting": [*left, *seen][:MOST_SHOWN],
        "waiting_count": newest.get("waiting_count", 0) + len(left) + len(seen) - len(newest.get("waiting", [])),
        "running": running,
        "returned": returned[:MOST_RETURNED],
        "alerts": _all(told, "alerts")[:MOST_SHOWN],
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

    ``well`` says whether a service looks after it, ``trouble`` in words why not. An account that may not
    look into the service's own folder is told what ``status.json`` says.
    """
    layout = Layout(folder)
    try:
        if not folder.is_dir():
            return _nothing(OUT_OF_REACH, f"{folder} is not there; is its share mounted?")
        layout.share_id.stat()
        return _judged(gather(layout, Disk()))
    except (FileNotFoundError, NotADirectoryError):
        return _nothing(NEVER_SERVED, "the folder was never served, or its share is not mounted")
    except PermissionError:
        return _public(folder)
    except OSError as error:
        return _nothing(OUT_OF_REACH, f"the share is out of reach ({error})")


def _public(folder: Path) -> dict[str, Any]:
    """The state as the file for everybody has it."""
    file = folder / "status.json"
    try:
        found = json.loads(file.read_bytes())
        return _judged(_nothing("", "") | found)
    except (OSError, ValueError, TypeError, AttributeError):
        sentence = (
            f"this account may not read {file}: ask as a member of the folder's group, as the service's account "
            "or as root"
        )
        return _nothing(NOT_READABLE, sentence)


def _judged(state: dict[str, Any]) -> dict[str, Any]:
    """The state with the verdict of now: whether any of the services lives."""
    troubles = [_trouble(service) for service in state["services"]]
    if not troubles:
        state |= {"state": "not running", "trouble": "no service is running"}
    elif all(troubles):
        state["trouble"] = troubles[0]
        if state["state"] not in _TELLS_ITSELF or "ago" in troubles[0]:
            waiting = [*map(as_waiting, state["running"]), *state["waiting"]]
            count = state["waiting_count"] + len(state["running"])
            state |= {"state": NO_SIGN_OF_LIFE, "why": troubles[0], "running": []}
            state |= {"waiting": waiting, "waiting_count": count}
    else:
        state["trouble"] = ""
    state["well"] = not state["trouble"]
    return state


def _nothing(state: str, trouble: str) -> dict[str, Any]:
    """The state of a folder that tells nothing."""
    lists: dict[str, Any] = {key: [] for key in ("services", "waiting", "running", "returned", "alerts")}
    told = {"state": state, "why": "", "last_scan": None, "waiting_count": 0, "trouble": trouble, "well": False}
    return told | lists


def exit_code(state: dict[str, Any]) -> int:
    """The exit code of the command ``status``, with and without ``--health``.

    0 where a service looks after the folder (also paused or in quiet hours), 1 where none does, it can take
    nothing in, or the share is out of reach, 2 where the folder was never served, 3 where this account may
    not know.
    """
    if state["well"]:
        return 0
    return {NEVER_SERVED: 2, NOT_READABLE: 3}.get(str(state["state"]), 1)


def health(folder: Path) -> int:
    """The exit code for a folder; see ``exit_code``."""
    return exit_code(status(folder))


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


def this_process() -> dict[str, Any]:
    """Words on this process for its sign of life."""
    holder = describe()
    words = {"host": holder["host"], "pid": holder["pid"], "boot": boot(), "holder": holder}
    return words | {"version": __version__}


def now_words() -> str:
    """Now as ISO 8601 with the machine's offset."""
    return datetime.now(UTC).astimezone().isoformat(timespec="seconds")


def as_text(state: dict[str, Any]) -> str:
    """The state as lines for a terminal; times are this machine's."""
    why = state["why"] or state.get("trouble", "")
    lines = [f"Service: {state['state']}" + (f" ({why})" if why else "")]
    if state["state"] in _TELLS_NOTHING:
        return lines[0]
    lines.append(f"Last complete look at Inbox: {local_time(state['last_scan']) or 'never'}")
    if state.get("trouble") and state["trouble"] != why:
        lines.append(f"Trouble: {state['trouble']}")
    lines += _section("Needs the administrator", [_line(one, one["why"]) for one in state["alerts"]])
    lines += _section("Running", [_line(one, ", ".join(running_words(one))) for one in state["running"]])
    waiting = [_line(one, one["why"]) for one in state["waiting"]]
    more = state["waiting_count"] - len(waiting)
    lines += _section("Waiting", waiting + ([f"and {more} more"] if more > 0 else []), state["waiting_count"])
    lines += _section("Came back", [_line({**one, "name": one["returned"]}, "") for one in state["returned"]])
    return "\n".join(lines)


def _section(title: str, lines: list[str], count: int | None = None) -> list[str]:
    return [f"{title}: {(len(lines) if count is None else count) or 'nothing'}", *(f"  {line}" for line in lines)]


def _line(one: dict[str, Any], words: str) -> str:
    owner = f" ({one['owner']})" if one.get("owner") else ""
    return f"{one['name']}{owner}" + (f": {words}" if words else "")
