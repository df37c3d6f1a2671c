"""The doorbell and the choice between events and a timer."""

import logging
from pathlib import Path

import pytest

from ledgersolve.service.doorbell import Doorbell, file_system, is_remote

TABLE = r"""22 1 254:0 / / rw,relatime shared:1 - ext4 /dev/vda rw
30 22 0:26 / /srv rw,relatime shared:2 master:1 - xfs /dev/vdb rw
31 30 0:50 / /srv/plan\040data rw,relatime - cifs //server/plan rw
32 22 0:51 / /home/ann rw - nfs4 server:/home rw
33 22 0:52 / /mnt/ssh rw - fuse.sshfs ann@server:/ rw
34 31 0:53 / /srv/plan\040data/local rw - ext4 /dev/vdc rw
35 22 0:54 / /mnt/c rw - 9p drvfs rw
"""


@pytest.mark.parametrize(("folder", "kind", "remote"), [
    ("/srv/local", "xfs", False), ("/srv/plan data/x", "cifs", True), ("/home/ann/plan", "nfs4", True),
    ("/mnt/ssh/x", "fuse.sshfs", True), ("/srv/plan data/local/x", "ext4", False), ("/mnt/c/plan", "9p", True),
    ("/var", "ext4", False),
])  # fmt: skip
def test_the_file_system_decides_how_to_watch(tmp_path, folder, kind, remote):
    """The deepest mount above the folder counts; network and host folders are watched by a timer."""
    table = tmp_path / "mountinfo"
    table.write_text(TABLE)
    assert file_system(Path(folder), table) == kind
    assert is_remote(Path(folder), table) is remote


def test_where_the_system_tells_nothing_events_are_used(tmp_path):
    """Without a mount table the folder counts as local."""
    assert not is_remote(tmp_path, tmp_path / "none")


@pytest.mark.parametrize("polling", [False, True])
def test_it_rings_on_a_drop_and_on_one_in_a_new_sub_folder(tmp_path, polling):
    """Events wake the waiting process; silence does not."""
    bell = Doorbell(tmp_path, polling=polling, seconds=0.05)
    bell.keep_alive()
    try:
        assert not bell.wait(0.3)
        (tmp_path / "a.xlsx").write_bytes(b"x")
        assert bell.wait(20.0)
        (tmp_path / "team").mkdir()
        bell.wait(20.0)
        while bell.wait(0.5):
            continue
        (tmp_path / "team" / "b.xlsx").write_bytes(b"x")
        assert bell.wait(20.0)
    finally:
        bell.silence()


def test_a_dead_observer_is_built_anew(tmp_path, monkeypatch):
    """The watched folder is removed and made again: the observer lives on deaf until it is looked after."""
    monkeypatch.setattr("ledgersolve.service.doorbell._TRY_SECONDS", 0.0)
    inbox = tmp_path / "Inbox"
    inbox.mkdir()
    bell = Doorbell(inbox, polling=False, seconds=1.0)
    bell.keep_alive()
    inbox.rmdir()
    inbox.mkdir()
    try:
        for emitter in bell._observer.emitters:
            emitter.join(20.0)
        bell.keep_alive()
        while bell.wait(0.3):
            continue
        (inbox / "a.xlsx").write_bytes(b"x")
        assert bell.wait(20.0)
    finally:
        bell.silence()


def test_an_observer_that_cannot_be_built_is_not_tried_all_the_time(tmp_path):
    """A step a second must not mean an attempt a second; after an outage the first attempt is at once."""
    bell = Doorbell(tmp_path / "gone", polling=False, seconds=1.0)
    bell.keep_alive()
    (tmp_path / "gone").mkdir()
    bell.keep_alive()
    assert bell._observer is None
    bell.silence()
    bell.keep_alive()
    assert bell._observer is not None
    bell.silence()


def test_a_folder_that_cannot_be_watched_costs_only_promptness(tmp_path):
    """No observer, no error: scans go on."""
    bell = Doorbell(tmp_path / "gone", polling=False, seconds=1.0)
    bell.keep_alive()
    assert not bell.wait(0.01)
    bell.silence()


def test_an_observer_that_is_stopped_logs_no_error(tmp_path, caplog):
    """Stopping in mid-look is no trouble; real errors of the observer still reach the log."""
    log = logging.getLogger("watchdog.observers.inotify")
    log.error("InotifyEmitter.queue_events() called when the thread is inactive")
    log.error("something else")
    assert [record.getMessage() for record in caplog.records] == ["something else"]
