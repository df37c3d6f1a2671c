"""The protocol's steps, each with the errors and races it must bear."""

import errno
import os
from pathlib import Path

import pytest

from ledgersolve.service.disk import Disk
from ledgersolve.service.layout import Layout, prepare, put_if_absent
from ledgersolve.service.protocol import Handover, Protocol
from ledgersolve.service.states import Reply, State, new_job, sha256_of, short_id
from ledgersolve.service.verify import verify
from tests.service_share import FaultyDisk, Plan, drop, names


class FailOnce(Plan):
    """The next call of one name fails once: before it took effect, or (lost) after it."""

    def __init__(self, name: str, code: int, lost: bool) -> None:
        self.name, self.code, self.lost, self.done = name, code, lost, False

    def _fail(self, name, lost):
        if name == self.name and lost == self.lost and not self.done:
            self.done = True
            raise OSError(self.code, os.strerror(self.code))

    def before(self, number, name, arguments):
        self._fail(name, False)

    def after(self, number, name, arguments):
        self._fail(name, True)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A served folder."""
    prepare(tmp_path, Disk())
    return tmp_path


def clerk(folder: Path, plan: Plan | None = None) -> Protocol:
    """One process's hand on the folder."""
    return Protocol(Layout(folder), FaultyDisk(plan), {"host": "test"})


def finished(protocol: Protocol, generation: int, content: bytes, name: str = "plan [X] solved.xlsx") -> Handover:
    """A finished workbook in tmp, with what is to be answered."""
    path = protocol.layout.new_tmp("answer")
    path.write_bytes(content)
    return Handover(Reply(generation, sha256_of(Disk(), path), name, "solved"), path)


def through(protocol: Protocol, job: str, content: bytes = b"answer") -> Path | None:
    """Lease, answer, publish and finish a claimed job."""
    view = protocol.view(job)
    generation = protocol.lease(view)
    protocol.answer(job, finished(protocol, generation, content, f"plan [{short_id(job)}] solved.xlsx"))
    view = protocol.view(job)
    published = protocol.publish(view)
    protocol.finish(view)
    return published


def test_a_drop_goes_all_the_way(folder):
    """One rename in, one answer, one rename out: the original is kept, the answer returned, nothing left."""
    protocol = clerk(folder)
    job = protocol.claim(drop(folder, "plan.xlsx"))
    assert protocol.view(job).state is State.CLAIMED
    published = through(protocol, job)
    assert published.read_bytes() == b"answer"
    assert [path.name for path in (folder / ".ledgersolve/done" / job / "in").iterdir()] == ["plan.xlsx"]
    assert verify(folder, settled=True) == []


@pytest.mark.parametrize("lost", [False, True])
@pytest.mark.parametrize("call", ["make_folder", "rename", "sync_folder", "sync_file"])
def test_a_claim_survives_a_failing_call(folder, call, lost):
    """Whatever call fails, the drop is in Inbox or in one job, and a second process takes it from there."""
    protocol = clerk(folder, FailOnce(call, errno.EIO, lost))
    path = drop(folder, "plan.xlsx")
    try:
        protocol.claim(path)
    except OSError as error:
        assert error.errno == errno.EIO
    other = clerk(folder)
    jobs = [other.view(job) for job in names(folder / ".ledgersolve/jobs")]
    claimed = [view for view in jobs if view.input is not None]
    assert path.exists() + len(claimed) == 1
    if path.exists():
        other.claim(path)


def test_only_one_of_two_claims_wins(folder):
    """The second process finds the drop gone, takes nothing, and leaves no folder behind."""
    path = drop(folder, "plan.xlsx")
    assert clerk(folder).claim(path) is not None
    assert clerk(folder).claim(path) is None
    assert len(names(folder / ".ledgersolve/jobs")) == 1


def test_a_claim_that_is_refused_leaves_the_drop(folder):
    """A file that is open elsewhere (the rename is refused) stays where it is, without an empty job."""
    path = drop(folder, "plan.xlsx")
    with pytest.raises(PermissionError):
        clerk(folder, FailOnce("rename", errno.EACCES, lost=False)).claim(path)
    assert path.exists()
    assert names(folder / ".ledgersolve/jobs") == []


def test_each_generation_has_one_holder(folder):
    """Of two processes that saw the same state one gets the lease."""
    one, two = clerk(folder), clerk(folder)
    job = one.claim(drop(folder, "plan.xlsx"))
    view = one.view(job)
    assert one.lease(view) == 1
    assert two.lease(view) is None
    assert two.lease(two.view(job)) == 2


@pytest.mark.parametrize("code", [errno.ENOENT, errno.EEXIST, errno.EIO])
def test_a_lost_reply_to_a_lease_is_recognised(folder, code):
    """A lease whose link worked although an error came back is held: what stands there decides."""
    protocol = clerk(folder, FailOnce("link", code, lost=True))
    job = protocol.claim(drop(folder, "plan.xlsx"))
    assert protocol.lease(protocol.view(job)) == 1


def test_the_second_answer_is_thrown_away(folder):
    """A holder that was thought dead comes late: its payload goes, the first answer is published once."""
    one, two = clerk(folder), clerk(folder)
    job = one.claim(drop(folder, "plan.xlsx"))
    first, second = one.lease(one.view(job)), two.lease(two.view(job)) or two.lease(two.view(job))
    two.answer(job, finished(two, second, b"winner", f"plan [{short_id(job)}] solved.xlsx"))
    counts = one.answer(job, finished(one, first, b"loser"))
    assert counts.generation == second
    for protocol in (one, two):
        view = protocol.view(job)
        if view is not None:
            protocol.publish(view)
            protocol.finish(view)
    assert [path.read_bytes() for path in (folder / "Returned").iterdir()] == [b"winner"]
    assert verify(folder, settled=True) == []


def test_a_payload_is_never_put_back_after_it_was_published(folder):
    """Between answer and its confirmation another process publishes: the retry must not deliver again."""
    one, two = clerk(folder, FailOnce("sync_folder", errno.EIO, lost=False)), clerk(folder)
    job = two.claim(drop(folder, "plan.xlsx"))
    generation = one_generation = two.lease(two.view(job))
    handover = finished(one, one_generation, b"answer", f"plan [{short_id(job)}] solved.xlsx")
    one.disk.plan = FailOnce("remove", errno.EIO, lost=False)  # the finished file stays in tmp
    one.answer(job, handover)
    published = two.publish(two.view(job))
    one.answer(job, handover)
    assert two.view(job).state is State.PUBLISHED
    assert published.read_bytes() == b"answer" and generation == 1


@pytest.mark.parametrize("lost", [False, True])
@pytest.mark.parametrize("call", ["link", "sync_file", "sync_folder", "open_up", "write_stream", "remove"])
def test_an_answer_survives_a_failing_call(folder, call, lost):
    """Whatever call fails while answering, trying again with the same handover ends in one answer."""
    protocol = clerk(folder)
    job = protocol.claim(drop(folder, "plan.xlsx"))
    generation = protocol.lease(protocol.view(job))
    handover = finished(protocol, generation, b"answer", f"plan [{short_id(job)}] solved.xlsx")
    protocol.disk.plan = FailOnce(call, errno.ENOSPC, lost)
    try:
        protocol.answer(job, handover)
    except OSError:
        protocol.answer(job, handover)
    view = protocol.view(job)
    protocol.publish(view)
    protocol.finish(view)
    assert verify(folder, settled=True) == []


def test_a_payload_that_arrived_damaged_is_no_answer(folder):
    """The payload is read back; other bytes than were made are refused."""
    protocol = clerk(folder)
    job = protocol.claim(drop(folder, "plan.xlsx"))
    handover = finished(protocol, protocol.lease(protocol.view(job)), b"answer")
    handover.finished.write_bytes(b"answe?")
    with pytest.raises(OSError, match="did not arrive whole"):
        protocol.answer(job, handover)
    assert protocol.view(job).reply is None and not protocol.view(job).payloads


@pytest.mark.parametrize("lost", [False, True])
def test_publishing_survives_a_failing_rename(folder, lost):
    """A failing rename is told apart from a lost reply by what stands there; never two files, never none."""
    protocol = clerk(folder)
    job = protocol.claim(drop(folder, "plan.xlsx"))
    generation = protocol.lease(protocol.view(job))
    protocol.answer(job, finished(protocol, generation, b"answer", f"plan [{short_id(job)}] solved.xlsx"))
    protocol.disk.plan = FailOnce("rename", errno.EIO, lost)
    if lost:
        protocol.publish(protocol.view(job))
    else:
        with pytest.raises(OSError, match="Input/output"):
            protocol.publish(protocol.view(job))
        protocol.publish(protocol.view(job))
    protocol.finish(protocol.view(job))
    assert verify(folder, settled=True) == []


def test_a_file_of_the_same_name_is_never_overwritten(folder):
    """Should another file have the returned name, the answer gets the job's whole id."""
    protocol = clerk(folder)
    job = protocol.claim(drop(folder, "plan.xlsx"))
    taken = folder / "Returned" / f"plan [{short_id(job)}] solved.xlsx"
    taken.write_bytes(b"somebody's")
    published = through(protocol, job)
    assert taken.read_bytes() == b"somebody's"
    assert published.name == f"plan [{job.rpartition('-')[2]}] solved.xlsx"


def test_a_returned_file_taken_away_at_once_is_not_returned_again(folder):
    """The analyst may take the file away before the job is done: absence of the payload is the mark."""
    protocol = clerk(folder)
    job = protocol.claim(drop(folder, "plan.xlsx"))
    generation = protocol.lease(protocol.view(job))
    protocol.answer(job, finished(protocol, generation, b"answer", f"plan [{short_id(job)}] solved.xlsx"))
    protocol.publish(protocol.view(job)).unlink()
    assert protocol.publish(protocol.view(job)) is None
    assert protocol.finish(protocol.view(job))
    assert names(folder / "Returned") == []


def test_finishing_twice_is_one_finishing(folder):
    """Two processes finish the same job; the second finds it done."""
    one, two = clerk(folder), clerk(folder)
    job = one.claim(drop(folder, "plan.xlsx"))
    generation = one.lease(one.view(job))
    one.answer(job, finished(one, generation, b"answer", f"plan [{short_id(job)}] solved.xlsx"))
    one.publish(one.view(job))
    view = two.view(job)
    assert one.finish(view)
    assert not two.finish(view)
    assert two.view(job) is None


def test_a_damaged_answer_is_left_alone(folder):
    """An answer that cannot be read is neither published nor replaced nor solved again."""
    protocol = clerk(folder)
    job = protocol.claim(drop(folder, "plan.xlsx"))
    protocol.lease(protocol.view(job))
    (protocol.home(job) / "answer.json").write_bytes(b'{"generation": 1, "sha')
    view = protocol.view(job)
    assert view.state is State.BROKEN
    assert protocol.publish(view) is None and not protocol.finish(view)
    with pytest.raises(OSError, match="cannot be read"):
        protocol.answer(job, finished(protocol, 1, b"other"))
    assert (protocol.home(job) / "answer.json").read_bytes() == b'{"generation": 1, "sha'


@pytest.mark.parametrize("words", [
    "[]", "null", '{"generation": "1"}', '{"generation": 1, "sha256": "x", "name": "../a", "outcome": "solved"}',
])  # fmt: skip
def test_an_answer_of_other_words_is_damaged_too(folder, words):
    """Anything but a whole answer with a plain name counts as damaged."""
    protocol = clerk(folder)
    job = protocol.claim(drop(folder, "plan.xlsx"))
    (protocol.home(job) / "answer.json").write_text(words)
    assert protocol.view(job).state is State.BROKEN


def test_collecting_never_takes_an_input(folder):
    """Removing a job that was thought empty fails where an input is inside after all."""
    protocol = clerk(folder)
    job = protocol.claim(drop(folder, "plan.xlsx"))
    assert not protocol.collect(job)
    assert protocol.view(job).input.exists()
    (folder / ".ledgersolve/jobs/empty/in").mkdir(parents=True)
    assert protocol.collect("empty")


def test_put_if_absent_has_one_winner(folder):
    """The first content stays, whole; the second process learns that it lost."""
    layout, disk = Layout(folder), Disk()
    target = layout.jobs / "x"
    assert put_if_absent(disk, layout, target, b"first")
    assert not put_if_absent(disk, layout, target, b"second")
    assert target.read_bytes() == b"first"
    assert names(layout.tmp) == []


def test_ids_are_unlike_each_other():
    """Ten thousand ids and their short forms differ, and sort by the time they were made."""
    ids = {new_job() for _ in range(10_000)}
    assert len(ids) == 10_000
    assert len({short_id(job) for job in ids}) == 10_000


def test_the_checker_sees_what_it_should(folder):
    """A checker without teeth would prove nothing: each kind of damage is told."""
    protocol = clerk(folder)
    job = protocol.claim(drop(folder, "plan.xlsx"))
    published = through(protocol, job)
    published.write_bytes(b"changed")
    assert any(fault.startswith("I3") for fault in verify(folder))
    published.write_bytes(b"answer")
    double = published.with_name(f"other [{short_id(job)}] solved.xlsx")
    double.write_bytes(b"answer")
    assert any(fault.startswith("I4") for fault in verify(folder))
    double.unlink()
    (folder / ".ledgersolve/done" / job / "in" / "plan.xlsx").unlink()
    assert any(fault.startswith("I1") for fault in verify(folder))
    published.unlink()
    assert any("nothing in Returned" in fault for fault in verify(folder, settled=True))
