"""Laying out a folder, its mark, and what makes it unfit."""

import errno
import os
import threading
from pathlib import Path

import pytest

from ledgersolve.service.disk import Disk
from ledgersolve.service.layout import Layout, ShareError, UnfitFolderError, guard, prepare, read_mark, self_test
from tests.service_share import FaultyDisk, Plan, names


class Failing(Plan):
    """Every call of one name fails."""

    def __init__(self, name: str, code: int) -> None:
        self.name, self.code = name, code

    def before(self, number, name, arguments):
        if name == self.name:
            raise OSError(self.code, os.strerror(self.code))


def test_a_folder_is_laid_out_on_first_use_and_kept_afterwards(tmp_path):
    """The mark is made once; a second start finds the same one."""
    first = prepare(tmp_path, Disk())
    assert prepare(tmp_path, Disk()) == first
    assert names(tmp_path) == [".ledgersolve", "Inbox", "Returned"]
    assert names(tmp_path / ".ledgersolve") == ["answers", "done", "hosts", "jobs", "share-id", "tmp"]


def test_two_first_starts_agree_on_one_mark(tmp_path):
    """Eight processes that lay out the same folder at once see the same mark."""
    marks: list[str] = []
    threads = [threading.Thread(target=lambda: marks.append(prepare(tmp_path, Disk()))) for _ in range(8)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(marks) == 8 and len(set(marks)) == 1


def test_a_missing_folder_is_not_made_up(tmp_path):
    """A share that is not mounted may not turn into a local folder."""
    with pytest.raises(UnfitFolderError, match="not a folder"):
        prepare(tmp_path / "gone", Disk())


def test_an_expected_mark_must_be_there_before_anything_is_made(tmp_path):
    """With a mark in the settings, an empty mount point stays empty and another share is refused."""
    with pytest.raises(ShareError):
        prepare(tmp_path, Disk(), "wanted")
    assert names(tmp_path) == []
    prepare(tmp_path, Disk())
    with pytest.raises(ShareError, match="another share"):
        prepare(tmp_path, Disk(), "wanted")


def test_the_guard_sees_another_share_and_no_share(tmp_path):
    """A changed mark, a missing one and an unreadable one all stop the service."""
    mark = prepare(tmp_path, Disk())
    layout = Layout(tmp_path)
    guard(layout, Disk(), mark)
    layout.share_id.write_text("other")
    with pytest.raises(ShareError, match="another share"):
        guard(layout, Disk(), mark)
    layout.share_id.unlink()
    with pytest.raises(ShareError):
        read_mark(layout, Disk())


def test_the_self_test_passes_and_leaves_nothing(tmp_path):
    """The real renames and links are tried on the real folders, under hidden names."""
    prepare(tmp_path, Disk())
    self_test(Layout(tmp_path), Disk())
    assert names(tmp_path / "Inbox") == names(tmp_path / "Returned") == names(tmp_path / ".ledgersolve/tmp") == []


@pytest.mark.parametrize(("call", "code", "words"), [
    ("link", errno.EPERM, "no hard links"), ("link", errno.ENOTSUP, "no hard links"),
    ("rename", errno.EXDEV, "same file system"),
])  # fmt: skip
def test_a_folder_without_what_the_protocol_rests_on_is_refused(tmp_path, call, code, words):
    """No hard links, or parts on several file systems: said at the start, in words that help."""
    prepare(tmp_path, Disk())
    with pytest.raises(UnfitFolderError, match=words):
        self_test(Layout(tmp_path), FaultyDisk(Failing(call, code)))
    assert names(tmp_path / "Inbox") == []


def test_a_link_that_replaces_is_refused(tmp_path):
    """Where a link overwrites its target two answers could not be told apart."""

    class Replacing(Disk):
        def link(self, source: Path, target: Path) -> None:
            if target.exists():
                target.unlink()
            super().link(source, target)

    prepare(tmp_path, Disk())
    with pytest.raises(UnfitFolderError, match="replace an existing file"):
        self_test(Layout(tmp_path), Replacing())
