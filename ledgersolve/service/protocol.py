"""One rename in, one answer, one rename out: how no drop is lost and none is answered twice.

The state of a drop is what is on the disk; the folder is the journal. ``J`` is a job's id.

=========  ==================================  =====================================================
state      on the disk                         entered by
=========  ==================================  =====================================================
dropped    ``Inbox/NAME``                      the analyst
claimed    ``jobs/J/in/NAME``                  step 1: rename(``Inbox/NAME``, ``jobs/J/in/NAME``)
leased     ``jobs/J/lease.G`` and ``beat.G``   put-if-absent of ``lease.G``, G = 1, 2, 3 ...
answered   ``jobs/J/payload.G`` (the complete  step 2: put-if-absent of ``answer.json``; a loser throws
           returned workbook), then            its payload away and publishes the winner's
           ``jobs/J/answer.json``
published  ``Returned/NAME [id] ...``, and     step 3: rename(``payload.G``, ``Returned/...``);
           ``payload.G`` gone                  "answer there, its payload gone" is the mark itself
done       ``done/J/``                         rename(``jobs/J``, ``done/J``)
=========  ==================================  =====================================================

Safety rests on the three atomic steps alone. Leases only save work: with every lease ignored two
processes may solve the same workbook, and one answer is thrown away. No step looks at a wall clock.

Invariants
----------
I1  Every dropped file is at all times in exactly one of ``Inbox``, ``jobs/*/in`` and ``done/*/in``.
I2  A job has at most one ``answer.json``, and it is never replaced.
I3  A returned file's bytes have the SHA-256 named in ``answer.json``.
I4  For each job exactly one file is ever published.
I5  No state changes because of wall time, or because something is absent.
I6  Every name under ``jobs`` that two processes could write is put-if-absent or holds the generation.

Rules that follow
-----------------
- An error from a rename or a link is not believed: its answer may have been lost on the way. The unique
  destination is looked at by a fresh listing. Nothing is ever undone.
- Folders are collected by ``rmdir`` only, which fails where an input is inside after all.
- A file is brought to the disk before it is linked or renamed, its folder after it.
"""

import errno
import json
import secrets
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from ledgersolve.service.disk import Disk
from ledgersolve.service.layout import Layout, discard, put_if_absent
from ledgersolve.service.names import ending, returned_name
from ledgersolve.service.states import ANSWER, JobView, Reply, State, new_job, read_job, sha256_of


class Protocol:
    """The steps, as one process takes them. Every method may raise OSError: then try again later.

    Parameters
    ----------
    layout, disk
        The served folder.
    holder
        Words that name this process and no other; they stand in its leases.
    """

    def __init__(self, layout: Layout, disk: Disk, holder: dict[str, Any]) -> None:
        self.layout = layout
        self.disk = disk
        self.holder = {**holder, "nonce": secrets.token_hex(16)}

    def home(self, job: str) -> Path:
        """The folder of a job that is not done."""
        return self.layout.jobs / job

    # ---- step 1 ------------------------------------------------------------------------------------

    def claim(self, drop: Path) -> str | None:
        """Move a drop into a new job; None where it is not there any more (another process was faster).

        Raises
        ------
        OSError
            The drop could not be moved (it is open in another program, or protected), or it was moved and
        could not be brought to the disk: then the job is there and found by the next scan.
        """
        job = new_job()
        home = self.home(job)
        inside = home / "in"
        self._make(home)
        self._make(inside)
        target = inside / drop.name
        try:
            self.disk.rename(drop, target)
        except OSError as error:
            if not self._arrived(target):
                self.collect(job)
                if isinstance(error, FileNotFoundError):
                    return None
                raise
        for folder in (inside, drop.parent):
            self.disk.sync_folder(folder)
        self.disk.sync_file(target)
        return job

    def _arrived(self, target: Path) -> bool:
        try:
            return target.name in self.disk.names(target.parent)
        except FileNotFoundError:
            return False

    def _make(self, folder: Path) -> None:
        try:
            self.disk.make_folder(folder)
        except OSError:
            if folder.name not in self.disk.names(folder.parent):
                raise
        self.disk.sync_folder(folder.parent)

    def view(self, job: str) -> JobView | None:
        """A job by a fresh listing; None where its folder is gone (another process finished it)."""
        return read_job(self.disk, job, self.home(job))

    # ---- leases: they save work, nothing rests on them ---------------------------------------------

    def lease(self, view: JobView, words: dict[str, Any] | None = None) -> int | None:
        """Take the next generation of a job; None where another process has it."""
        generation = view.generation + 1
        content = json.dumps({**self.holder, **(words or {})}, sort_keys=True).encode("ascii")
        target = view.home / f"lease.{generation}"
        try:
            ours = put_if_absent(self.disk, self.layout, target, content)
        except FileNotFoundError:
            return None
        if not ours:
            return None
        self.disk.sync_folder(view.home)
        self.beat(view.job, generation)
        return generation

    def lease_words(self, view: JobView) -> dict[str, Any]:
        """What the holder of the newest lease wrote: its host, the owner of the drop; empty where unknown."""
        try:
            words = json.loads(self.disk.read(view.home / f"lease.{view.generation}"))
        except (OSError, ValueError):
            return {}
        return words if isinstance(words, dict) else {}

    def beat(self, job: str, generation: int) -> None:
        """Show that the holder lives; others watch the content change on their own clock."""
        self.disk.refresh(self.home(job) / f"beat.{generation}", secrets.token_hex(8).encode("ascii"))

    def release(self, job: str, generation: int) -> None:
        """Give a job back in good order; the attempt does not count."""
        self._note(self.home(job) / f"released.{generation}", {})

    def fail(self, job: str, generation: int, reason: str) -> None:
        """Note that an attempt failed: the child crashed, was killed or gave no sound result."""
        self._note(self.home(job) / f"failed.{generation}", {"reason": reason})

    def _note(self, target: Path, words: dict[str, Any]) -> None:
        try:
            put_if_absent(self.disk, self.layout, target, json.dumps(words).encode("ascii"))
            self.disk.sync_folder(target.parent)
        except FileNotFoundError:
            return  # another process finished the job meanwhile

    def reasons(self, view: JobView) -> list[str]:
        """Why the attempts so far failed, oldest first."""
        found = []
        for generation in sorted(view.failed):
            try:
                words = json.loads(self.disk.read(view.home / f"failed.{generation}"))
                found.append(str(words.get("reason", "")))
            except (OSError, ValueError, AttributeError):
                found.append("")
        return found

    # ---- step 2 ------------------------------------------------------------------------------------

    def answer(self, job: str, handover: "Handover") -> Reply | None:
        """Make the finished workbook the answer, unless there is one; returns the answer that counts.

        None where the job is done already. Only the holder of the generation may call this. Once
        ``answer.json`` was tried the payload is never put in place again: it may be published by then.
        """
        home = self.home(job)
        reply = handover.reply
        payload = home / f"payload.{reply.generation}"
        try:
            if not handover.delivered:
                self._deliver(handover.finished, payload, reply.sha256)
                handover.delivered = True
            put_if_absent(self.disk, self.layout, home / ANSWER, reply.as_bytes())
            self.disk.sync_folder(home)
        except FileNotFoundError:
            if self.view(job) is not None:
                raise
        discard(self.disk, handover.finished)
        view = self.view(job)
        if view is None:
            return None
        if view.reply is None:
            raise OSError(errno.EIO, f"the answer of job {job} cannot be read")
        if view.reply.generation != reply.generation:
            discard(self.disk, payload)
        return view.reply

    def _deliver(self, finished: Path, payload: Path, sha256: str) -> None:
        """Put the payload in place; it may be there already from a try whose end was not seen."""
        self.disk.open_up(finished, self.layout.returned)
        self.disk.sync_file(finished)
        try:
            self.disk.link(finished, payload)
        except OSError:
            if payload.name not in self.disk.names(payload.parent):
                raise
        self.disk.sync_folder(payload.parent)
        if sha256_of(self.disk, payload) != sha256:
            discard(self.disk, payload)
            raise OSError(errno.EIO, f"{payload.name} did not arrive whole")

    # ---- step 3 ------------------------------------------------------------------------------------

    def publish(self, view: JobView) -> Path | None:
        """Move the answer's payload to Returned; its path there, or None where it was moved before.

        The move is tried whatever the listing showed: a listing may be old, and moving what is gone does
        no harm.

        Raises
        ------
        OSError
            The payload is still here: Returned is full, protected or out of reach.
        """
        reply = view.reply
        if reply is None:
            return None
        payload = view.home / f"payload.{reply.generation}"
        target = self.layout.returned / reply.name
        if _is_there(self.disk, target):
            target = target.with_name(_name_with_whole_id(view, reply))
        try:
            self.disk.rename(payload, target)
        except OSError:
            if payload.name in self.disk.names(view.home):
                raise
            return None
        self.disk.sync_folder(self.layout.returned)
        self.disk.sync_folder(view.home)
        return target

    def finish(self, view: JobView) -> bool:
        """Move a published job to ``done``; False where it is not published or gone already."""
        now = self.view(view.job)
        if now is None or now.state is not State.PUBLISHED or now.reply is None:
            return False
        for loser in now.payloads - {now.reply.generation}:
            discard(self.disk, now.home / f"payload.{loser}")
        target = self.layout.done / view.job
        try:
            self.disk.rename(now.home, target)
        except OSError:
            if not _is_there(self.disk, target):
                raise
        self.disk.sync_folder(self.layout.done)
        self.disk.sync_folder(self.layout.jobs)
        return True

    # ---- collecting --------------------------------------------------------------------------------

    def collect(self, job: str) -> bool:
        """Remove a job without an input, by ``rmdir`` only; False where something is in it after all."""
        home = self.home(job)
        for folder in (home / "in", home):
            try:
                self.disk.remove_folder(folder)
            except FileNotFoundError:
                continue
            except OSError:
                return False
        return True


@dataclass
class Handover:
    """A finished workbook on its way to become an answer: ``finished`` is a complete file in ``tmp``."""

    reply: Reply
    finished: Path
    delivered: bool = False


def _name_with_whole_id(view: JobView, reply: Reply) -> str:
    drop = reply.name if view.input is None else view.input.name
    return returned_name(drop, view.job.rpartition("-")[2], reply.outcome, ending(reply.name))


def _is_there(disk: Disk, path: Path) -> bool:
    try:
        disk.status(path)
    except FileNotFoundError:
        return False
    return True
