"""When nothing new is started."""

from datetime import datetime
from zoneinfo import ZoneInfo

import pytest

from ledgersolve.service.disk import Disk
from ledgersolve.service.intake import Intake, pause_file, quiet_until
from ledgersolve.service.layout import Layout, prepare
from tests.service_share import FaultyDisk, Plan, names

ZONE = ZoneInfo("Europe/Paris")


@pytest.mark.parametrize(("now", "until"), [
    ((2026, 3, 2, 9, 0), (2026, 3, 2, 12, 0)),  # a Monday
    ((2026, 3, 2, 12, 0), None),
    ((2026, 3, 1, 9, 0), None),  # a Sunday
    ((2026, 3, 6, 23, 0), (2026, 3, 7, 6, 0)),  # Friday night, into Saturday
    ((2026, 3, 7, 5, 59), (2026, 3, 7, 6, 0)),
    ((2026, 3, 7, 23, 0), None),
])  # fmt: skip
def test_quiet_hours_hold_new_work(now, until):
    """Within a window its end is told; a window over midnight belongs to the day on which it starts."""
    windows = ["Mon-Fri 08:00-12:00", "Fri 22:00-06:00"]
    wanted = None if until is None else datetime(*until, tzinfo=ZONE)
    assert quiet_until(windows, datetime(*now, tzinfo=ZONE)) == wanted


def test_quiet_hours_follow_the_clocks_of_the_zone():
    """On the night the clocks go forward (29 March 2026, Paris) the window still ends at 6 local time."""
    until = quiet_until(["22:00-06:00"], datetime(2026, 3, 29, 1, 30, tzinfo=ZONE))
    assert until.isoformat() == "2026-03-29T06:00:00+02:00"


def test_a_pause_file_pauses(tmp_path):
    """PAUSE or PAUSE.txt, in any case; nothing else. The words name the file that is there."""
    prepare(tmp_path, Disk())
    assert not pause_file(Disk(), tmp_path)
    (tmp_path / "paused").touch()
    assert not pause_file(Disk(), tmp_path)
    (tmp_path / "Pause.TXT").touch()
    assert pause_file(Disk(), tmp_path) == "Pause.TXT"
    state, why = Intake(Layout(tmp_path), Disk(), 0).state()
    assert state == "paused" and "a file Pause.TXT" in why


def test_a_folder_of_jobs_that_is_gone_holds_new_work(tmp_path):
    """It is tried once a minute, and at once when a job met trouble; the words name it and the setting."""
    now = [0.0]
    prepare(tmp_path, Disk())
    root = tmp_path / "work"
    root.mkdir()
    intake = Intake(Layout(tmp_path), Disk(), 0, private_root=root, clock=lambda: now[0])
    assert intake.state() == ("at work", "")
    root.rmdir()
    assert intake.state() == ("at work", "")
    state, why = intake.state(doubts=True)
    assert state == "held" and str(root) in why and "private_folder" in why
    root.mkdir()
    assert intake.state() == ("at work", "")


def test_returned_is_tried_once_a_minute_and_at_once_while_it_fails(tmp_path):
    """A Returned that takes no files holds new work; the first look after it does lets it go on."""

    class Full(Plan):
        broken, tries = False, 0

        def before(self, number, name, arguments):
            if name == "write_stream":
                self.tries += 1
                if self.broken:
                    raise OSError(30, "Read-only file system")

    now, plan = [0.0], Full()
    prepare(tmp_path, Disk())
    intake = Intake(Layout(tmp_path), FaultyDisk(plan), 0, clock=lambda: now[0])
    for _ in range(10):
        assert intake.state() == ("at work", "")
    assert plan.tries == 1 and names(tmp_path / "Returned") == []
    plan.broken = True
    now[0] = 61.0
    assert intake.state()[0] == "held" and "Read-only" in intake.state()[1]
    plan.broken = False
    assert intake.state() == ("at work", "")


def test_space_is_asked_for_floor_and_input(tmp_path, monkeypatch):
    """The floor, or five times the input where that is more."""
    prepare(tmp_path, Disk())
    monkeypatch.setattr(Disk, "free_bytes", lambda self, folder: 1000)
    assert Intake(Layout(tmp_path), Disk(), 1000).has_space(200)
    assert not Intake(Layout(tmp_path), Disk(), 1000).has_space(201)
    assert Intake(Layout(tmp_path), Disk(), 1001).state()[0] == "held"
