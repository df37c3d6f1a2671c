"""Whether the holder of a lease still lives."""

import errno
import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from ledgersolve.service.disk import Disk
from ledgersolve.service.holder import describe, is_gone, is_of_dead_process, process_words
from ledgersolve.service.layout import Layout, prepare
from ledgersolve.service.leases import LeaseWatch
from ledgersolve.service.protocol import Protocol
from tests.service_share import drop


class Scene:
    """One leased job, an onlooker and a clock."""

    def __init__(self, folder: Path, holder: dict) -> None:
        prepare(folder, Disk())
        self.now = 0.0
        self.protocol = Protocol(Layout(folder), Disk(), holder)
        self.watch = LeaseWatch(Disk(), 30.0, lambda: self.now)
        self.job = self.protocol.claim(drop(folder, "plan.xlsx"))
        self.generation = self.protocol.lease(self.protocol.view(self.job))

    def left_behind(self, after: float) -> bool:
        """What the onlooker says some seconds later."""
        self.now += after
        return self.watch.left_behind(self.protocol.view(self.job))


@pytest.fixture
def scene(tmp_path: Path) -> Scene:
    """A holder of another machine."""
    return Scene(tmp_path, {"host": "elsewhere"})


def test_a_job_nobody_holds_may_be_taken(scene):
    """Without a lease, and after one was given back or failed."""
    assert not scene.left_behind(0.0)
    scene.protocol.release(scene.job, scene.generation)
    assert scene.left_behind(0.0)
    second = scene.protocol.lease(scene.protocol.view(scene.job))
    assert not scene.left_behind(0.0)
    scene.protocol.fail(scene.job, second, "crash")
    assert scene.left_behind(0.0)


def test_a_silent_holder_is_given_up_after_the_patience_since_our_first_look(scene):
    """Six beats of silence on our own clock; dates of files play no part."""
    beat = scene.protocol.home(scene.job) / f"beat.{scene.generation}"
    os.utime(beat, (0, 0))
    assert not scene.left_behind(0.0)
    os.utime(beat, (4e9, 4e9))
    assert not scene.left_behind(29.0)
    assert scene.left_behind(1.5)


def test_a_living_holder_is_never_given_up(scene):
    """Every change of the beat starts the watching anew."""
    for _ in range(10):
        assert not scene.left_behind(25.0)
        scene.protocol.beat(scene.job, scene.generation)


def test_a_new_generation_is_watched_anew(scene):
    """The patience spent on one holder does not count against the next."""
    scene.left_behind(0.0)
    scene.protocol.lease(scene.protocol.view(scene.job))
    assert not scene.left_behind(31.0)
    assert scene.left_behind(31.0)


def test_after_an_outage_watching_starts_over(scene):
    """A share that was away shows no beats; that speaks against nobody."""
    scene.left_behind(0.0)
    scene.watch.forget()
    assert not scene.left_behind(100.0)


def test_a_holder_of_this_machine_that_runs_no_more_is_not_waited_for(tmp_path):
    """A process known to be dead has left its job behind at the first look."""
    process = subprocess.Popen([sys.executable, "-c", ""])
    process.wait()
    dead = describe() | {"pid": process.pid}
    assert Scene(tmp_path, dead).left_behind(0.0)


def test_only_what_can_be_known_is_called_gone():
    """The own process lives; one of another boot, or with no such words, cannot be told."""
    here = describe()
    assert not is_gone(here)
    assert not is_gone(here | {"place": "another boot", "pid": 999_999_999})
    assert not is_gone({"host": "x", "pid": 999_999_999})
    if "place" in here:
        assert is_gone(here | {"started": "1"})


def test_a_system_that_does_not_tell_proves_nobody_dead(monkeypatch):
    """No file descriptor left, or a hidden process: neither lease nor private folder of a living one is touched."""
    here, mine = describe(), process_words()
    if "place" not in here:
        pytest.skip("this system does not tell of processes")
    gone = f"999999999-{mine.partition('-')[2]}"
    assert is_of_dead_process(gone) and not is_of_dead_process(mine)
    real = Path.read_text

    def failing(self, *args, **kwargs):
        if self.name == "stat":
            raise OSError(errno.EMFILE, "Too many open files")
        return real(self, *args, **kwargs)

    monkeypatch.setattr(Path, "read_text", failing)
    assert not is_of_dead_process(gone) and not is_of_dead_process(mine) and not is_gone(here)
    assert not is_gone(describe())


def test_a_lease_that_cannot_be_read_is_waited_for(scene):
    """Garbage in a lease means patience, not theft."""
    lease = scene.protocol.home(scene.job) / f"lease.{scene.generation}"
    lease.write_bytes(b"\xff not json")
    assert not scene.left_behind(0.0)
    lease.write_text(json.dumps([1]))
    scene.watch.forget()
    assert not scene.left_behind(0.0)
