"""The calls on the served folder."""

import errno
import os
from pathlib import Path

import pytest

from ledgersolve.service.disk import Disk
from tests.service_share import names


def test_a_new_file_is_never_written_over_another(tmp_path):
    """Neither over a file nor through a link."""
    (tmp_path / "a").write_bytes(b"old")
    (tmp_path / "b").symlink_to(tmp_path / "c")
    for name in ("a", "b"):
        with pytest.raises(FileExistsError):
            Disk().write_new(tmp_path / name, b"new")
    assert (tmp_path / "a").read_bytes() == b"old" and names(tmp_path) == ["a", "b"]


def test_reading_does_not_follow_or_block(tmp_path):
    """A link is refused as a link, a pipe as no file."""
    (tmp_path / "a").symlink_to("/etc/hostname")
    os.mkfifo(tmp_path / "b")
    for name, code in (("a", errno.ELOOP), ("b", errno.EINVAL)):
        with pytest.raises(OSError) as caught:
            Disk().read(tmp_path / name)
        assert caught.value.errno == code


def test_a_link_never_replaces(tmp_path):
    """The put-if-absent fails where the target exists."""
    for name in "ab":
        (tmp_path / name).write_bytes(name.encode())
    with pytest.raises(FileExistsError):
        Disk().link(tmp_path / "a", tmp_path / "b")
    assert (tmp_path / "b").read_bytes() == b"b"


def test_a_folder_that_holds_something_stays(tmp_path):
    """Removing a folder is rmdir and nothing else."""
    (tmp_path / "a").mkdir()
    (tmp_path / "a" / "x").touch()
    with pytest.raises(OSError):
        Disk().remove_folder(tmp_path / "a")
    assert names(tmp_path / "a") == ["x"]


def test_a_short_write_is_finished(tmp_path, monkeypatch):
    """A system that takes a few bytes at a time gets them all."""
    real = os.write
    monkeypatch.setattr(os, "write", lambda descriptor, content: real(descriptor, bytes(content)[:3]))
    Disk().write_new(tmp_path / "a", b"0123456789")
    assert (tmp_path / "a").read_bytes() == b"0123456789"


@pytest.mark.parametrize(("folder_mode", "umask", "mode"), [
    (0o2775, 0o022, 0o664), (0o2770, 0o022, 0o660), (0o2775, 0o007, 0o660), (0o2770, 0o077, 0o660),
    (0o755, 0o022, 0o644), (0o700, 0o022, 0o600), (0o3771, 0o022, 0o660),
])  # fmt: skip
def test_returned_files_have_the_rights_of_their_folder(tmp_path, monkeypatch, folder_mode, umask, mode):
    """Group and rights of the folder they go to, others no more than the umask leaves; never executable or set-id."""
    monkeypatch.setattr("ledgersolve.service.disk._UMASK", umask)
    folder, path = tmp_path / "Returned", tmp_path / "a"
    folder.mkdir()
    folder.chmod(folder_mode)
    path.write_bytes(b"x")
    path.chmod(0o6755)
    Disk().open_up(path, folder)
    status = path.stat()
    assert status.st_mode & 0o7777 == mode and status.st_gid == folder.stat().st_gid


def test_everything_written_is_brought_to_the_disk_first(tmp_path, monkeypatch):
    """Power loss: each file is synced before it is linked or renamed, each folder after it."""
    order = []
    real = os.fsync
    for name in ("link", "rename"):
        plain = getattr(Disk, name)

        def noted(self, source: Path, target: Path, name=name, plain=plain):
            plain(self, source, target)
            order.append((name, str(target)))

        monkeypatch.setattr(Disk, name, noted)

    def synced(descriptor: int) -> None:
        real(descriptor)
        order.append(("sync", str(Path(f"/proc/self/fd/{descriptor}").readlink())))

    if not Path("/proc/self/fd").is_dir():
        pytest.skip("this system does not name open files")
    monkeypatch.setattr(os, "fsync", synced)
    _two_jobs(tmp_path, monkeypatch)
    for job in (tmp_path / ".ledgersolve" / "done").iterdir():
        home = f"{tmp_path}/.ledgersolve/jobs/{job.name}"
        (name,) = names(job / "in")
        (returned,) = (path for path in (tmp_path / "Returned").iterdir() if job.name.split("-")[1][:8] in path.name)
        wanted = [
            ("rename", f"{home}/in/{name}"), ("sync", f"{home}/in"), ("sync", f"{tmp_path}/Inbox"),
            ("sync", f"{home}/in/{name}"), ("link", f"{home}/payload.1"), ("sync", home),
            ("link", f"{home}/answer.json"), ("sync", home), ("rename", str(returned)),
            ("sync", f"{tmp_path}/Returned"), ("sync", home), ("rename", str(job)),
            ("sync", f"{tmp_path}/.ledgersolve/done"), ("sync", f"{tmp_path}/.ledgersolve/jobs"),
        ]  # fmt: skip
        left = iter(order)
        missing = [step for step in wanted if step not in left]  # in this order, others between
        assert missing == []
        payload = order.index(("link", f"{home}/payload.1"))
        assert any(kind == "sync" and "/tmp/answer-" in path for kind, path in order[:payload])


def _two_jobs(folder: Path, monkeypatch) -> None:
    from tests.service_share import drop, hasten, quick_watcher, run_until_empty

    hasten(monkeypatch.setattr)
    for name in ("a.xlsx", "b.xlsx"):
        drop(folder, name)
    assert run_until_empty(quick_watcher(folder))
