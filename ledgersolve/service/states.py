"""Where a job stands: what one listing of its folder says, as values."""

import hashlib
import json
import os
import secrets
import time
from dataclasses import asdict, dataclass, field, fields
from enum import StrEnum
from pathlib import Path
from typing import Any

from ledgersolve.service.disk import Disk

_ALPHABET = "0123456789ABCDEFGHJKMNPQRSTVWXYZ"
_SHORT = 8
ANSWER = "answer.json"


class State(StrEnum):
    """Where a job stands, read from its folder alone."""

    EMPTY = "empty"  # claimed by nobody yet, or the claim did not come through
    CLAIMED = "claimed"
    LEASED = "leased"
    ANSWERED = "answered"
    PUBLISHED = "published"
    BROKEN = "broken"  # the answer cannot be read, or more than one input: for the administrator


@dataclass(frozen=True)
class Reply:
    """What ``answer.json`` holds: which payload is the answer, and how it is called when published."""

    generation: int
    sha256: str
    name: str
    outcome: str
    input_sha256: str = ""
    report: dict[str, Any] = field(default_factory=dict)

    def as_bytes(self) -> bytes:
        """The content of the file."""
        return json.dumps(asdict(self), indent=1, sort_keys=True).encode("ascii")


@dataclass(frozen=True)
class JobView:
    """A job's folder as one listing shows it."""

    job: str
    home: Path
    state: State
    input: Path | None
    leases: frozenset[int]
    released: frozenset[int]
    failed: frozenset[int]
    payloads: frozenset[int]
    reply: Reply | None

    @property
    def generation(self) -> int:
        """The newest lease, 0 where there is none."""
        return max(self.leases, default=0)

    @property
    def lease_ended(self) -> bool:
        """Whether the newest lease was given back or ended in a failed attempt."""
        return self.generation in self.released | self.failed

    @property
    def lost_leases(self) -> int:
        """Earlier leases whose holder vanished without a word."""
        return len(self.leases - self.released - self.failed - {self.generation})


def new_job() -> str:
    """A job's id: a readable label of time and 64 random bits, of which people see the first eight signs."""
    bits = secrets.randbits(64)
    random = "".join(_ALPHABET[(bits >> shift) & 31] for shift in range(60, -1, -5))
    return f"{time.strftime('%Y%m%dT%H%M%SZ', time.gmtime())}-{random}"


def short_id(job: str) -> str:
    """The part of the id that stands in the returned file's name."""
    return job.rpartition("-")[2][:_SHORT]


def read_job(disk: Disk, job: str, home: Path) -> JobView | None:
    """A job by a fresh listing of its folder; None where that is gone (another process finished it)."""
    try:
        names = disk.names(home)
        inputs = disk.names(home / "in") if "in" in names else []
        reply = read_reply(disk, home) if ANSWER in names else None
    except FileNotFoundError:
        return None
    numbers = {
        kind: frozenset(int(name[len(kind) + 1 :]) for name in names if _numbered(name, kind))
        for kind in ("lease", "released", "failed", "payload")
    }
    return JobView(
        job=job,
        home=home,
        state=_state(ANSWER in names, reply, inputs, numbers),
        input=home / "in" / inputs[0] if len(inputs) == 1 else None,
        leases=numbers["lease"],
        released=numbers["released"],
        failed=numbers["failed"],
        payloads=numbers["payload"],
        reply=reply,
    )


def read_reply(disk: Disk, home: Path) -> Reply | None:
    """The answer of a job; None where it cannot be understood.

    Keys that this version does not know are passed over: a newer one may have answered.
    """
    known = {one.name for one in fields(Reply)}
    try:
        found = json.loads(disk.read(home / ANSWER))
        reply = Reply(**{key: value for key, value in found.items() if key in known})
    except (ValueError, TypeError, AttributeError):
        return None
    sound = isinstance(reply.generation, int) and reply.name == Path(str(reply.name)).name
    return reply if sound and len(str(reply.sha256)) == 64 else None


def _numbered(name: str, kind: str) -> bool:
    number = name.removeprefix(f"{kind}.")
    return number != name and number.isascii() and number.isdigit()


def _state(
    answered: bool, reply: Reply | None, inputs: list[str], numbers: dict[str, frozenset[int]]
) -> State:
    if (answered and reply is None) or len(inputs) > 1:
        return State.BROKEN
    if reply is not None:
        return State.ANSWERED if reply.generation in numbers["payload"] else State.PUBLISHED
    if not inputs:
        return State.BROKEN if numbers["lease"] else State.EMPTY
    return State.LEASED if numbers["lease"] else State.CLAIMED


def sha256_of(disk: Disk, path: Path) -> str:
    """SHA-256 of a file as it stands on the disk, in hexadecimal."""
    digest = hashlib.sha256()
    with os.fdopen(disk.open_to_read(path), "rb") as stream:
        while block := stream.read(1 << 20):
            digest.update(block)
    return digest.hexdigest()
