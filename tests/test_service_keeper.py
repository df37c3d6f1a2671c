"""Housekeeping: what is removed, when, and what never is."""

import os
from pathlib import Path

import pytest

from ledgersolve.service.disk import Disk
from ledgersolve.service.keeper import Keeper
from ledgersolve.service.layout import Layout
from ledgersolve.service.states import State, read_job
from ledgersolve.service.verify import verify
from tests.service_share import drop, hasten, names, quick_watcher, run_until_empty

HOUR = 3600.0


class Scene:
    """A folder with some done jobs and a keeper whose clock a test moves."""

    def __init__(self, folder: Path, drops: int, **options) -> None:
        self.now = 0.0
        self.folder = folder
        for number in range(drops):
            drop(folder, f"plan {number}.xlsx")
        watcher = quick_watcher(folder)
        assert run_until_empty(watcher)
        self.layout = Layout(folder)
        self.protocol = watcher.desk.protocol
        self.keeper = self.fresh(**options)

    def fresh(self, **options) -> Keeper:
        """A keeper of a process that just started."""
        return Keeper(self.layout, Disk(), self.protocol, clock=lambda: self.now, **options)

    def serve(self, keeper: Keeper, days: float) -> None:
        """Let a keeper do its rounds over so many days of service."""
        for _ in range(round(days * 24)):
            self.now += HOUR
            keeper.step()

    def done(self) -> list[str]:
        """Jobs whose originals are kept."""
        return names(self.layout.done)


@pytest.fixture(autouse=True)
def _quick(monkeypatch):
    hasten(monkeypatch.setattr)


def test_originals_are_kept_for_days_of_service_then_deleted(tmp_path):
    """After the days have passed, counted while the service ran, only the newest few stay."""
    scene = Scene(tmp_path, 5, keep_days=3.0, keep_at_least=2)
    scene.serve(scene.keeper, 2.9)
    assert len(scene.done()) == 5
    before = scene.done()
    scene.serve(scene.keeper, 0.4)
    assert scene.done() == before[-2:]
    assert names(scene.layout.answers) == []


def test_a_wrong_clock_deletes_nothing(tmp_path, monkeypatch):
    """Dates ten years ahead or back have no say; only time served counts."""
    scene = Scene(tmp_path, 3, keep_days=3.0, keep_at_least=0)
    scene.serve(scene.keeper, 0.1)
    for years in (10, -10):
        monkeypatch.setattr("time.time", lambda years=years: 1.8e9 + years * 3.15e7)
        for path in scene.layout.done.rglob("*"):
            os.utime(path, (1.0, 1.0))
        scene.serve(scene.keeper, 0.2)
    assert len(scene.done()) == 3


def test_several_services_do_not_count_the_same_hours_twice(tmp_path):
    """Two processes that serve for two days have served two days."""
    scene = Scene(tmp_path, 2, keep_days=3.0, keep_at_least=0)
    other = scene.fresh(keep_days=3.0, keep_at_least=0)
    for _ in range(48):
        scene.now += HOUR
        scene.keeper.step()
        other.step()
    assert len(scene.done()) == 2


def test_hours_go_on_after_a_restart(tmp_path):
    """Two days, a restart, and two days more are four days."""
    scene = Scene(tmp_path, 2, keep_days=3.0, keep_at_least=0)
    scene.serve(scene.keeper, 2.0)
    again = scene.fresh(keep_days=3.0, keep_at_least=0)
    scene.serve(again, 0.8)
    assert len(scene.done()) == 2
    scene.serve(again, 0.5)
    assert scene.done() == []


def test_an_original_whose_answer_cannot_be_published_is_never_deleted(tmp_path, monkeypatch):
    """A done job that still holds its payload is kept, whatever its age."""
    scene = Scene(tmp_path, 1, keep_days=0.1, keep_at_least=0)
    (job,) = scene.done()
    home = scene.layout.done / job
    (returned,) = (tmp_path / "Returned").iterdir()
    returned.rename(home / "payload.1")
    monkeypatch.setattr(scene.protocol, "publish", lambda view: None)
    scene.serve(scene.keeper, 1.0)
    assert scene.done() == [job]


def test_any_process_publishes_what_stayed_behind(tmp_path):
    """The process that finished the job may be gone: the hourly round of another one finds the payload."""
    scene = Scene(tmp_path, 1)
    (job,) = scene.done()
    (returned,) = (tmp_path / "Returned").iterdir()
    returned.rename(scene.layout.done / job / "payload.1")
    scene.serve(scene.fresh(), 0.1)
    assert verify(tmp_path, settled=True) == []


def test_an_answer_that_showed_up_late_is_published(tmp_path):
    """A network folder may show a payload late; a while after the job was done it is looked for again."""
    scene = Scene(tmp_path, 1)
    (job,) = scene.done()
    (returned,) = (tmp_path / "Returned").iterdir()
    returned.rename(scene.layout.done / job / "payload.1")
    scene.keeper.finished(job)
    scene.keeper.step()
    assert read_job(Disk(), job, scene.layout.done / job).state is State.ANSWERED
    scene.now += 100.0
    scene.keeper.step()
    assert verify(tmp_path, settled=True) == []


def test_left_over_files_go_after_a_day_unchanged(tmp_path):
    """A file in tmp is removed once it stood unchanged for a day of our own time."""
    scene = Scene(tmp_path, 0)
    left = scene.layout.tmp / "answer-1-x"
    left.write_bytes(b"x")
    os.utime(left, (1.0, 1.0))
    scene.serve(scene.keeper, 0.9)
    assert left.exists()
    os.utime(left, (2.0, 2.0))
    scene.serve(scene.keeper, 0.9)
    assert left.exists()
    scene.serve(scene.keeper, 0.3)
    assert not left.exists()


def test_after_an_outage_the_day_starts_over(tmp_path):
    """What was seen before an outage does not count."""
    scene = Scene(tmp_path, 0)
    left = scene.layout.tmp / "answer-1-x"
    left.write_bytes(b"x")
    scene.serve(scene.keeper, 0.9)
    scene.keeper.forget()
    scene.serve(scene.keeper, 0.9)
    assert left.exists()


def test_damaged_tables_mean_longer_keeping(tmp_path):
    """A table that cannot be read starts over; nothing is deleted early for it."""
    scene = Scene(tmp_path, 2, keep_days=1.0, keep_at_least=0)
    scene.serve(scene.keeper, 0.9)
    (tmp_path / ".ledgersolve/kept.json").write_text("[1, 2")
    scene.serve(scene.keeper, 0.9)
    assert len(scene.done()) == 2
