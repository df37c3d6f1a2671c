"""Former answers: the same workbook dropped again gets the same returned workbook, byte for byte.

An entry is decided by put-if-absent, so that two machines that solve the same workbook at the same time
still return one answer. It is the payload under its own hash (a second name of the returned file, which
costs no space) and a small file that says which input it answers. Entries are only an economy: a payload
whose bytes are not those of its hash is passed over.
"""

import hashlib
import json
import os
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from ledgersolve.service.disk import Disk
from ledgersolve.service.layout import Layout, discard, put_if_absent
from ledgersolve.service.states import sha256_of


@dataclass(frozen=True)
class Former:
    """An earlier answer to the same input."""

    payload: Path
    sha256: str
    outcome: str
    suffix: str
    words: dict[str, Any] = field(default_factory=dict)


def find(disk: Disk, layout: Layout, input_sha256: str, version: str, name: str) -> Former | None:
    """The answer that counts for this input, or None."""
    for key in _keys(input_sha256, version, name):
        former = _read(disk, layout, key)
        if former is not None:
            return former
    return None


def remember(
    disk: Disk, layout: Layout, input_sha256: str, version: str, name: str, answered: Former
) -> Former:
    """Enter an answer, unless there is one for this input already; gives the one that counts.

    Where the workbook has no title of its own its returned file speaks of it by its name, and the entry
    holds for files of that name only.
    """
    general, named = _keys(input_sha256, version, name)
    key = named if _speaks_of(answered.words.get("title"), name) else general
    kept = layout.answers / f"{answered.sha256}.payload"
    content = {
        "sha256": answered.sha256,
        "outcome": answered.outcome,
        "suffix": answered.suffix,
        "words": answered.words,
    }
    try:
        disk.link(answered.payload, kept)
    except FileExistsError:
        if sha256_of(disk, kept) != answered.sha256:
            return answered
    put_if_absent(disk, layout, layout.answers / f"{key}.json", json.dumps(content).encode("ascii"))
    return _read(disk, layout, key) or answered


def _keys(input_sha256: str, version: str, name: str) -> tuple[str, str]:
    """Key for every file with this content, and for those of this name."""
    general = hashlib.sha256(f"{version}\0{input_sha256}".encode()).hexdigest()
    named = hashlib.sha256(b"\0".join((general.encode(), os.fsencode(name)))).hexdigest()
    return general, named


def _speaks_of(title: Any, name: str) -> bool:
    return not isinstance(title, str) or title in (name, name[: name.rfind(".")])


def _read(disk: Disk, layout: Layout, key: str) -> Former | None:
    entry = layout.answers / f"{key}.json"
    try:
        found = json.loads(disk.read(entry))
        former = Former(
            layout.answers / f"{found['sha256']}.payload",
            str(found["sha256"]),
            str(found["outcome"]),
            str(found["suffix"]),
            dict(found["words"]),
        )
        sound = sha256_of(disk, former.payload) == former.sha256
    except FileNotFoundError:
        return None
    except (ValueError, KeyError, TypeError):
        sound = False
    if not sound:
        discard(disk, entry)
        return None
    return former
