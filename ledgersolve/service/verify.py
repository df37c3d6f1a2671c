"""The protocol's invariants checked on the disk alone; tests call this after every fault."""

import re
from collections import Counter
from pathlib import Path

from ledgersolve.service.disk import Disk
from ledgersolve.service.layout import SELFTEST, Layout
from ledgersolve.service.names import is_temporary
from ledgersolve.service.states import ANSWER, JobView, State, read_job, sha256_of, short_id

_ALLOWED = re.compile(r"in|answer\.json|(lease|beat|released|failed|payload|progress|stop)\.[1-9][0-9]*")


def verify(folder: Path, *, settled: bool = False) -> list[str]:
    """Everything that contradicts the invariants, in words; empty where all is well.

    Parameters
    ----------
    folder
        A served folder with no service running on it.
    settled
        Also require that nothing is left to do: no drop, no job, each job's file returned. A returned
        file that the analyst took away counts as missing, so leave Returned alone before.
    """
    disk = Disk()
    layout = Layout(folder)
    at_work = [read_job(disk, job, layout.jobs / job) for job in disk.names(layout.jobs)]
    done = [read_job(disk, job, layout.done / job) for job in disk.names(layout.done)]
    faults = []
    for view in filter(None, at_work):
        faults += _of_any_job(disk, view)
    for view in filter(None, done):
        faults += _of_any_job(disk, view)
        if view.input is None:
            faults.append(f"I1: {view.job} is done and does not hold its one input")
        if view.state is not State.PUBLISHED:
            faults.append(f"I4: {view.job} is done and {view.state}")
    views = [view for view in (*at_work, *done) if view is not None]
    faults += [f"I1: job {job} is both at work and done" for job, count in _counts(views) if count > 1]
    faults += _of_returned(disk, layout, views)
    if settled:
        inbox = [entry for entry in disk.entries(layout.inbox) if not entry.is_folder]
        faults += [f"not settled: Inbox/{entry.name}" for entry in inbox if not is_temporary(entry.name)]
        faults += [f"not settled: job {view.job} is {view.state}" for view in at_work if view is not None]
        returned = Counter(_marks(disk.names(layout.returned)))
        missing = [view.job for view in views if not returned[short_id(view.job)]]
        faults += [f"I4: {job} has nothing in Returned" for job in missing]
    return faults


def _counts(views: list[JobView]) -> list[tuple[str, int]]:
    return list(Counter(view.job for view in views).items())


def _marks(names: list[str]) -> list[str]:
    """The short ids that stand in returned names."""
    return [match[-1][:8] for name in names if (match := re.findall(r"\[([0-9A-Z]{8,13})\]", name))]


def _of_any_job(disk: Disk, view: JobView) -> list[str]:
    faults = []
    strange = [name for name in disk.names(view.home) if not _ALLOWED.fullmatch(name)]
    faults += [f"I6: {view.job} holds {name}" for name in strange]
    if view.state is State.BROKEN:
        faults.append(f"I1/I2: {view.job} has an unreadable answer or not one input")
    if not view.payloads <= view.leases:
        faults.append(f"I6: {view.job} has a payload of a generation that nobody held")
    if view.reply is None:
        return faults
    if view.reply.generation not in view.leases:
        faults.append(f"I2: {ANSWER} of {view.job} names a generation that nobody held")
    if view.state is State.ANSWERED:
        payload = view.home / f"payload.{view.reply.generation}"
        if sha256_of(disk, payload) != view.reply.sha256:
            faults.append(f"I3: the payload of {view.job} is not the one its answer names")
    if view.input is not None and view.reply.input_sha256 not in ("", sha256_of(disk, view.input)):
        faults.append(f"I3: {view.job} was answered from other bytes than its input")
    return faults


def _of_returned(disk: Disk, layout: Layout, views: list[JobView]) -> list[str]:
    faults = []
    by_mark = {short_id(view.job): view for view in views}
    found = Counter[str]()
    for entry in disk.entries(layout.returned):
        if entry.name.startswith(SELFTEST):
            continue
        marks = _marks([entry.name])
        view = by_mark.get(marks[0]) if marks else None
        if view is None:
            faults.append(f"I4: Returned/{entry.name} belongs to no job")
            continue
        found[view.job] += 1
        if view.reply is None or view.state is State.ANSWERED:
            faults.append(f"I4: Returned/{entry.name} was published while its job is {view.state}")
        elif sha256_of(disk, entry.path) != view.reply.sha256:
            faults.append(f"I3: Returned/{entry.name} is not what its answer names")
    return faults + [f"I4: {job} was returned {count} times" for job, count in found.items() if count > 1]
