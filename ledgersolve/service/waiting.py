"""What waits, in the order it would go, and in the analyst's words what for."""

from dataclasses import dataclass
from typing import Any

from ledgersolve.service.fair import Line
from ledgersolve.service.names import is_conflict_copy, show
from ledgersolve.service.protocol import Protocol
from ledgersolve.service.settle import Drop, account
from ledgersolve.service.states import JobView

MOST_SHOWN = 200
_HELD_BACK = {
    "paused": "held back by PAUSE",
    "quiet hours": "held back by the quiet hours",
    "held": "held back, see above",
    "suspended": "held back: the share is out of reach",
    "stopped": "waits for the service to start",
}


@dataclass(frozen=True)
class Held:
    """A workbook that is out of Inbox and not returned yet, and that this process has not in hand."""

    view: JobView
    owner: str
    why: str

    def entry(self, why: str) -> dict[str, str]:
        """The line for the page."""
        name = self.view.job if self.view.input is None else show(self.view.input.name)
        return {"name": name, "owner": show(self.owner), "why": why, "job": self.view.job}


def hold(protocol: Protocol, view: JobView, attempts: int, *, left_behind: bool) -> Held:
    """Whose a job is that was taken, and why it does not run here.

    Parameters
    ----------
    attempts
        Failed attempts after which it is given up.
    left_behind
        Whether nobody holds its lease.
    """
    lease = protocol.lease_words(view)
    owner = str(lease.get("owner") or "")
    if not owner and view.input is not None:
        owner = account(protocol.disk.status(view.input))
    if view.reply is not None:
        why = "answered; is being put into Returned"
    elif not left_behind:
        holder = show(str(lease.get("host") or "another process"))
        why = f"taken by {holder}; starts again here if that shows no sign of life"
    elif view.generation in view.failed:
        why = f"taken; attempt {len(view.failed)} of {attempts} failed, starts again"
    elif view.generation in view.released:
        why = "taken and given back, starts again"
    else:
        why = "taken, starts again" if view.leases else "taken, not started yet"
    return Held(view, owner, why)


def entries(
    drops: list[Drop], held: list[Held], line: Line | None, state: str
) -> tuple[list[dict[str, str]], int]:
    """The first of what waits, with the reason, and how many there are."""
    queue = line.in_order() if line is not None else []
    position = {id(one.item): number for number, one in enumerate(queue, 1)}
    back = _HELD_BACK.get(state, "")
    found: list[tuple[int, Held | Drop]] = [(position.get(id(one.view), 0), one) for one in held]
    stopped = state in ("stopped", "suspended")
    found += [
        (position.get(id(drop), 0), drop)
        for drop in drops
        if not drop.alert and (not drop.ready or stopped or id(drop) in position)
    ]
    found.sort(key=lambda one: one[0])
    return [_entry(one, place, back) for place, one in found[:MOST_SHOWN]], len(found)


def _entry(one: Held | Drop, place: int, back: str) -> dict[str, str]:
    turn = back or (f"number {place} in the queue" if place else "")
    if isinstance(one, Held):
        return one.entry(f"{one.why}: {turn}" if turn else one.why)
    words = turn if place or one.ready else one.why
    if is_conflict_copy(one.name):
        words += "; looks like a sync program's conflict copy"
    return {"name": show(one.name), "owner": show(one.owner), "why": words}


def stuck_entries(drops: list[Drop]) -> list[dict[str, str]]:
    """Drops that need the administrator, with the reason."""
    return [{"name": show(one.name), "owner": show(one.owner), "why": one.why} for one in drops if one.alert]


def as_waiting(running: dict[str, Any]) -> dict[str, Any]:
    """What a dead service ran, as what it is now."""
    kept = {key: running[key] for key in ("name", "owner", "job") if key in running}
    return kept | {"why": "taken; starts again when the service does"}
