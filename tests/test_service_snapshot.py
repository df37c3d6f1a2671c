"""The private copy of a claimed workbook."""

import hashlib
import os

import pytest

from ledgersolve.service.disk import Disk
from ledgersolve.service.snapshot import is_still, take_snapshot
from ledgersolve.service.whole import nobody_writes


def test_the_copy_is_whole_and_hashed(tmp_path):
    """Bytes, size and hash are those of the input."""
    content = os.urandom(3_000_000)
    (tmp_path / "a").write_bytes(content)
    taken = take_snapshot(Disk(), tmp_path / "a", tmp_path / "b", 4_000_000)
    assert taken.whole and taken.size == len(content)
    assert taken.path.read_bytes() == content
    assert taken.sha256 == hashlib.sha256(content).hexdigest()


def test_no_more_than_allowed_is_read(tmp_path):
    """A larger input is told with its size and not copied to its end."""
    (tmp_path / "a").write_bytes(bytes(3_000_000))
    taken = take_snapshot(Disk(), tmp_path / "a", tmp_path / "b", 1_500_000)
    assert not taken.whole and taken.size == 3_000_000
    assert taken.path.stat().st_size <= 1_500_000


@pytest.mark.parametrize("kind", ["link", "pipe", "folder", "loop"])
def test_what_is_no_file_is_refused_without_waiting(tmp_path, kind):
    """A link is not followed, a pipe does not block."""
    path = tmp_path / "a"
    if kind == "link":
        (tmp_path / "target").write_bytes(b"secret")
        path.symlink_to(tmp_path / "target")
    elif kind == "loop":
        path.symlink_to(path)
    elif kind == "pipe":
        os.mkfifo(path)
    else:
        path.mkdir()
    with pytest.raises(OSError):
        take_snapshot(Disk(), path, tmp_path / "b", 100)
    assert not (tmp_path / "b").exists()


@pytest.mark.parametrize("sure", [True, False])
def test_a_change_during_the_copy_is_seen(tmp_path, monkeypatch, sure):
    """Growing, or rewritten with the same size: the input did not stay."""
    path = tmp_path / "a"
    path.write_bytes(b"12345")
    if sure and not nobody_writes(Disk(), path):
        pytest.skip("this file system does not tell whether a file is open for writing")
    if not sure:
        monkeypatch.setattr("ledgersolve.service.snapshot.nobody_writes", lambda disk, path: False)
    waits = []
    assert is_still(Disk(), path, 7.0, waits.append)()
    assert waits == ([] if sure else [7.0])
    stayed = is_still(Disk(), path, 7.0, lambda seconds: path.write_bytes(b"123456"))
    if sure:
        path.write_bytes(b"123456")
    assert not stayed()


def test_a_writer_that_keeps_the_file_open_is_seen(tmp_path):
    """Unchanged so far but open for writing: not still, where the system can tell."""
    path = tmp_path / "a"
    path.write_bytes(b"12345")
    if not nobody_writes(Disk(), path):
        pytest.skip("this file system does not tell whether a file is open for writing")
    stayed = is_still(Disk(), path, 0.0)
    with path.open("ab"):
        assert not nobody_writes(Disk(), path)
        assert not stayed()
