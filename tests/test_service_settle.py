"""When a drop may be taken."""

import os
import socket
import struct
import zipfile
from io import BytesIO
from pathlib import Path

import pytest

from ledgersolve.service.disk import Disk
from ledgersolve.service.settle import ALERT_AFTER, DEEPEST, Patience, Settler, account
from ledgersolve.service.whole import Shape, nobody_writes, shape
from tests.service_share import package

PATIENCE = Patience(quiet=2.0, sure_quiet=0.3, long_quiet=120.0, open_elsewhere=900.0)


class Clock:
    """A clock that a test moves."""

    def __init__(self) -> None:
        self.now = 1000.0

    def __call__(self) -> float:
        return self.now


@pytest.fixture
def clock() -> Clock:
    """A clock that stands."""
    return Clock()


@pytest.fixture
def settler(tmp_path: Path, clock: Clock) -> Settler:
    """A settler on an empty Inbox that trusts time alone."""
    return Settler(Disk(), tmp_path, PATIENCE, clock, sure=False)


def one(settler: Settler):
    """The one drop that a look shows."""
    (found,) = settler.look()
    return found


def test_a_complete_file_is_taken_after_the_quiet_time(tmp_path, settler, clock):
    """Two looks at least the quiet time apart must find it unchanged."""
    (tmp_path / "plan.xlsx").write_bytes(package())
    assert not one(settler).ready
    clock.now += 1.9
    assert not one(settler).ready
    clock.now += 0.2
    assert one(settler).ready


def test_where_the_system_rules_out_writers_the_wait_is_short(tmp_path, clock):
    """A file nobody has open is taken after a third of a second, one that is held open is not."""
    settler = Settler(Disk(), tmp_path, PATIENCE, clock)
    (tmp_path / "plan.xlsx").write_bytes(package())
    settler.look()
    clock.now += 0.4
    if not nobody_writes(Disk(), tmp_path / "plan.xlsx"):
        pytest.skip("this file system does not tell whether a file is open for writing")
    with (tmp_path / "plan.xlsx").open("ab"):
        assert not one(settler).ready
    assert one(settler).ready


def test_every_change_starts_the_wait_anew(tmp_path, settler, clock):
    """A rewrite of the same size with the old date, as a copy program leaves it, is still a change."""
    path = tmp_path / "plan.xlsx"
    path.write_bytes(package(content="1"))
    before = path.stat()
    settler.look()
    clock.now += 1.5
    path.write_bytes(package(content="2"))
    os.utime(path, ns=(before.st_atime_ns, before.st_mtime_ns))
    settler.look()
    clock.now += 1.5
    assert not one(settler).ready
    clock.now += 0.6
    assert one(settler).ready


def test_a_copy_that_kept_an_old_date_is_not_taken_at_once(tmp_path, settler, clock):
    """The file's own date plays no part."""
    path = tmp_path / "plan.xlsx"
    path.write_bytes(package()[:-10])
    os.utime(path, (0, 0))
    settler.look()
    clock.now += 5.0
    assert not one(settler).ready


@pytest.mark.parametrize(
    "content", [b"", b"\0" * 5000, package()[:-1], package()[:40], b"PK", package() + b"x"],
    ids=["placeholder", "preallocated", "cut", "half", "two bytes", "trailing byte"],
)
def test_incomplete_files_wait_the_long_time_then_go(tmp_path, settler, clock, content):
    """Placeholder, preallocated, half and trailing copies wait two minutes and are then returned as damaged."""
    (tmp_path / "plan.xlsx").write_bytes(content)
    settler.look()
    clock.now += 119.0
    found = one(settler)
    assert not found.ready and "s" in found.why
    clock.now += 1.5
    assert one(settler).ready


@pytest.mark.parametrize(
    "content", [bytes.fromhex("D0CF11E0A1B11AE1") + b"x" * 600, b"<html></html>", b"a;b\n1;2\n"],
    ids=["encrypted", "html", "csv"],
)
def test_files_of_other_kinds_do_not_wait_long(tmp_path, settler, clock, content):
    """An encrypted, HTML or CSV file never becomes a workbook: it goes after the quiet time."""
    (tmp_path / "plan.xlsx").write_bytes(content)
    settler.look()
    clock.now += 2.1
    assert one(settler).ready


def test_a_placeholder_filled_later_is_taken_whole(tmp_path, settler, clock):
    """An empty file that is filled after thirty seconds is never taken empty."""
    path = tmp_path / "plan.xlsx"
    path.touch()
    for _ in range(30):
        assert not one(settler).ready
        clock.now += 1.0
    path.write_bytes(package())
    settler.look()
    clock.now += 2.1
    assert one(settler).ready


@pytest.mark.parametrize("mark", ["~$plan.xlsx", ".~lock.plan.xlsx#"])
def test_an_open_workbook_waits_and_an_old_mark_does_not_hold_it_for_ever(tmp_path, settler, clock, mark):
    """The mark of a spreadsheet program holds a drop for a quarter of an hour after it last changed."""
    (tmp_path / "plan.xlsx").write_bytes(package())
    (tmp_path / mark).write_bytes(b"Ann")
    settler.look()
    clock.now += 800.0
    assert one(settler).why == "open in a spreadsheet program"
    (tmp_path / mark).write_bytes(b"Ben ")
    settler.look()
    clock.now += 899.0
    assert not one(settler).ready
    clock.now += 2.0
    assert one(settler).ready


def test_saving_by_delete_and_rename_is_survived_at_every_moment(tmp_path, settler, clock):
    """A spreadsheet program writes a nameless file, deletes the old one, renames: only the end is taken."""
    path, temporary = tmp_path / "plan.xlsx", tmp_path / "A1B2C3D4"
    path.write_bytes(package(content="old"))
    settler.look()
    temporary.write_bytes(package(content="new"))
    clock.now += 1.0
    settler.look()
    path.unlink()
    clock.now += 1.0
    assert settler.look() == []
    temporary.rename(path)
    settler.look()
    clock.now += 1.0
    assert not one(settler).ready
    clock.now += 1.1
    assert one(settler).ready


def test_what_is_no_file_is_never_read(tmp_path, settler, clock):
    """Links, pipes and sockets named like workbooks block nothing and are told to the administrator."""
    (tmp_path / "a.xlsx").symlink_to("/etc/hostname")
    (tmp_path / "b.xlsx").symlink_to(tmp_path / "b.xlsx")
    os.mkfifo(tmp_path / "c.xlsx")
    server = socket.socket(socket.AF_UNIX)
    server.bind(str(tmp_path / "d.xlsx"))
    settler.look()
    clock.now += 500.0
    found = settler.look()
    server.close()
    assert len(found) == 4
    assert all(drop.alert and drop.blocked and not drop.ready for drop in found)


def test_a_refused_file_is_tried_again_ever_more_slowly_and_for_ever(tmp_path, settler, clock):
    """2 s, 4 s, ... up to five minutes; there is no last try."""
    path = tmp_path / "plan.xlsx"
    path.write_bytes(package())
    settler.look()
    clock.now += 3.0
    waits = []
    for _ in range(12):
        assert one(settler).ready
        settler.refused(path, PermissionError(13, "Permission denied"))
        began = clock.now
        while not one(settler).ready:
            clock.now += 1.0
        waits.append(clock.now - began)
    assert waits[:4] == [2.0, 4.0, 8.0, 16.0]
    assert waits[-1] == 300.0


def test_sub_folders_are_queues_of_their_owners(tmp_path, settler, clock):
    """A drop in a sub-folder belongs to the topmost one, a drop in Inbox itself to its file's account."""
    (tmp_path / "north" / "march").mkdir(parents=True)
    (tmp_path / "north" / "march" / "a.xlsx").write_bytes(package())
    (tmp_path / "b.xlsx").write_bytes(package())
    assert {drop.name: drop.owner for drop in settler.look()} == {
        "a.xlsx": "north", "b.xlsx": account((tmp_path / "b.xlsx").lstat()),
    }


def test_an_account_has_its_name_where_the_machine_knows_it(tmp_path):
    """People read a name; a number that no account has stays a number."""
    (tmp_path / "a").touch()
    root = os.stat_result((0o100644, 0, 0, 1, 0, 0, 0, 0, 0, 0))
    nobody_there = os.stat_result((0o100644, 0, 0, 1, 3_999_999_999, 0, 0, 0, 0, 0))
    assert account(root) == "account root"
    assert account(nobody_there) == "account 3999999999"


class Closed(Disk):
    """A disk on which some names are not for this account."""

    shut = ("north",)
    unreadable = ()
    unlisted = ()

    def may_change(self, folder):
        return folder.name not in self.shut

    def may_read(self, path):
        return path.name not in self.unreadable

    def entries(self, folder):
        if folder.name in self.unlisted:
            raise PermissionError(13, "Permission denied")
        return super().entries(folder)

    def open_to_read(self, path):
        if path.name in self.unreadable:
            raise PermissionError(13, "Permission denied")
        return super().open_to_read(path)


def test_drops_in_a_sub_folder_without_rights_are_told_at_once_and_all(tmp_path, clock):
    """Each of them, in every look, with the sub-folder and the remedy; drops elsewhere go on."""
    (tmp_path / "north").mkdir()
    for name in ("north/a.xlsx", "north/b.xlsx", "north/c.xlsx", "d.xlsx"):
        (tmp_path / name).write_bytes(package())
    settler = Settler(Closed(), tmp_path, PATIENCE, clock, sure=False)
    tries = 0
    for _ in range(20):
        drops = settler.look()
        stuck = [found for found in drops if found.alert]
        assert [found.name for found in stuck] == ["a.xlsx", "b.xlsx", "c.xlsx"]
        assert all("out of the sub-folder north" in found.why and "chmod g+rwx" in found.why for found in stuck)
        for found in stuck:
            if found.ready:  # rights may be told wrong: only the rename shows
                tries += 1
                settler.refused(found.path, PermissionError(13, "Permission denied"))
        clock.now += 1.0
    assert tries == 12 and all(found.blocked for found in settler.look() if found.alert)
    assert [found.name for found in settler.look() if found.ready] == ["d.xlsx"]


def test_a_sub_folder_that_cannot_be_listed_is_told(tmp_path, clock):
    """What is in it nobody knows; the folder itself is named."""
    (tmp_path / "north").mkdir()
    disk = Closed()
    disk.unlisted = ("north",)
    (found,) = Settler(disk, tmp_path, PATIENCE, clock).look()
    assert found.alert and found.name == "north" and "may not look into" in found.why


def test_a_file_without_rights_is_never_called_being_copied(tmp_path, clock):
    """Its words are right from the first look; the administrator is told once it stayed so for the quiet time."""
    (tmp_path / "plan.xlsx").write_bytes(package())
    disk = Closed()
    disk.unreadable = ("plan.xlsx",)
    settler = Settler(disk, tmp_path, PATIENCE, clock)
    found = one(settler)
    assert "may not read" in found.why and not found.alert
    clock.now += 2.0
    found = one(settler)
    assert found.alert and found.blocked and "may not read" in found.why
    disk.unreadable = ()
    (tmp_path / "plan.xlsx").chmod(0o660)  # changes the file's status: it is looked at anew
    settler.look()
    clock.now += 2.1
    assert one(settler).ready


def test_a_file_refused_again_and_again_stays_an_alert_while_it_is_tried(tmp_path, settler, clock):
    """The list for the administrator does not change with each try."""
    path = tmp_path / "plan.xlsx"
    path.write_bytes(package())
    settler.look()
    clock.now += 3.0
    counts = []
    for _ in range(ALERT_AFTER):
        counts.append(settler.refused(path, PermissionError(13, "Permission denied")))
        clock.now += 100.0
    assert counts == [1, 2, 3]
    found = one(settler)
    assert found.ready and found.alert and "cannot be read or moved" in found.why


def test_folders_too_deep_are_told_not_walked(tmp_path, settler):
    """A folder below the deepest level is shown to the administrator."""
    deep = tmp_path.joinpath(*"abcdefghi")
    deep.mkdir(parents=True)
    (deep / "x.xlsx").write_bytes(package())
    (found,) = settler.look()
    assert found.alert and "too deep" in found.why
    assert len(deep.relative_to(tmp_path).parts) == DEEPEST + 1


def test_after_an_outage_all_is_looked_at_anew(tmp_path, settler, clock):
    """What was seen before a share outage does not count."""
    (tmp_path / "plan.xlsx").write_bytes(package())
    settler.look()
    clock.now += 3.0
    settler.forget()
    assert not one(settler).ready


def nested() -> bytes:
    """A package that holds another whole package, stored."""
    made = BytesIO()
    with zipfile.ZipFile(made, "w") as archive:
        archive.writestr("embedded.xlsx", package("inner"))
        archive.writestr("sheet.xml", "x" * 200)
    return made.getvalue()


@pytest.mark.parametrize("content", [package(), nested()], ids=["plain", "with a workbook inside"])
def test_no_start_of_a_package_passes_for_the_whole(tmp_path, content):
    """Of all lengths only the full one is complete, also where a whole workbook is stored inside."""
    path = tmp_path / "x"
    complete = []
    for length in range(len(content) + 1):
        path.write_bytes(content[:length])
        if shape(Disk(), path, length) is Shape.COMPLETE:
            complete.append(length)
    assert complete == [len(content)]


def test_no_fill_level_of_a_preallocated_copy_passes(tmp_path):
    """A copy whose size is set first and whose bytes come later is incomplete until the last one."""
    content, path = nested(), tmp_path / "x"
    for filled in range(len(content.rstrip(b"\0"))):
        path.write_bytes(content[:filled] + b"\0" * (len(content) - filled))
        assert shape(Disk(), path, len(content)) is not Shape.COMPLETE


def test_the_64_bit_form_is_known(tmp_path):
    """A package with the 64-bit end records (as huge ones have) is complete, its start is not."""
    plain = package()
    end = plain.rfind(b"PK\x05\x06")
    count, length, offset = struct.unpack("<HII", plain[end + 10 : end + 20])
    record = b"PK\x06\x06" + struct.pack("<QHHIIQQQQ", 44, 45, 45, 0, 0, count, count, length, offset)
    locator = b"PK\x06\x07" + struct.pack("<IQI", 0, end, 1)
    last = b"PK\x05\x06" + struct.pack("<HHHHIIH", 0, 0, 0xFFFF, 0xFFFF, 0xFFFFFFFF, 0xFFFFFFFF, 0)
    content = plain[:end] + record + locator + last
    path = tmp_path / "x"
    path.write_bytes(content)
    assert len(zipfile.ZipFile(path).namelist()) == 2
    assert shape(Disk(), path, len(content)) is Shape.COMPLETE
    path.write_bytes(content[:-1])
    assert shape(Disk(), path, len(content) - 1) is Shape.PARTIAL
