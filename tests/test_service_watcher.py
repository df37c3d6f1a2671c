"""The watch process step by step: what analysts and operators rely on."""

import errno
import json
import os
import threading
import time
from pathlib import Path

from ledgersolve.service import settle
from ledgersolve.service.board import status
from ledgersolve.service.disk import Disk
from ledgersolve.service.layout import Layout, prepare
from ledgersolve.service.protocol import Protocol
from ledgersolve.service.verify import verify
from tests.service_share import (
    FaultyDisk,
    Plan,
    child_at_once,
    drop,
    faults_after_recovery,
    names,
    quick_watcher,
    returned,
    run_until_empty,
)


def test_names_of_people_all_come_back(tmp_path, quick):
    """Every odd but legal name ends in one returned file of its own."""
    odd = [
        "a" * 250 + ".xlsx", "u\u0308.xlsx", "\u00fc.xlsx", "Plan.xlsx", "plan.xlsx", "dot. .xlsx", "CON.xlsx",
        "-x.xlsx", "=x.xlsx", "line\nfeed.xlsx", "esc\x1b[31m.xlsx", os.fsdecode(b"raw\xff\xfe.xlsx"),
        "\u202egnp.xlsx", ".xlsx", "no ending", "plan (conflicted copy).xlsx", "plan [AB12CD34] solved.xlsx",
        "'; drop.xlsx",
    ]  # fmt: skip
    prepare(tmp_path, Disk())
    for name in odd:
        source = tmp_path / "source"
        source.write_bytes(drop(tmp_path, "x.xlsx", content=name.encode("utf-8", "replace").decode()).read_bytes())
        (tmp_path / "Inbox" / "x.xlsx").unlink()
        source.rename(tmp_path / "Inbox" / name)
    watcher = quick_watcher(tmp_path)
    assert run_until_empty(watcher)
    assert len(names(tmp_path / "Returned")) == len(odd)
    assert faults_after_recovery(tmp_path, odd) == []
    for name in names(tmp_path / "Returned"):
        name.encode("utf-8")


def test_the_same_name_a_hundred_times_is_a_hundred_jobs(tmp_path, quick):
    """A later drop of a name is a later job; nothing is overwritten or skipped."""
    watcher = quick_watcher(tmp_path)
    for number in range(100):
        drop(tmp_path, "plan.xlsx", content=str(number))
        while (tmp_path / "Inbox" / "plan.xlsx").exists():
            watcher.step()
    assert run_until_empty(watcher)
    assert len(names(tmp_path / "Returned")) == 100
    assert faults_after_recovery(tmp_path, ["plan.xlsx"] * 100) == []


class Vanishing(Disk):
    """Takes a drop away right before a look or a change of it, as an analyst does who thinks again."""

    def __init__(self, number: int) -> None:
        self.left, self.taken = number, False

    def _maybe(self, path: Path) -> None:
        if path.name == "plan.xlsx" and path.parent.name == "Inbox" and not self.taken:
            self.left -= 1
            if self.left < 0:
                self.taken = True
                path.unlink()

    def may_read(self, path: Path) -> bool:
        self._maybe(path)
        return super().may_read(path)

    def open_to_read(self, path: Path) -> int:
        self._maybe(path)
        return super().open_to_read(path)

    def rename(self, source: Path, target: Path) -> None:
        self._maybe(source)
        super().rename(source, target)


def test_a_drop_taken_away_again_leaves_no_trace(tmp_path, quick, caplog):
    """Deleted before it is looked at, read or moved: no job, no alert, no storm of errors; others come back."""
    for number in range(10):
        folder = tmp_path / str(number)
        disk = Vanishing(number)
        watcher = quick_watcher(folder, disk)
        drop(folder, "plan.xlsx")
        drop(folder, "good.xlsx")
        assert run_until_empty(watcher)
        assert returned(folder) == ["good solved.xlsx"] if disk.taken else ["good solved.xlsx", "plan solved.xlsx"]
        assert watcher.picture()["alerts"] == []
        assert names(folder / ".ledgersolve" / "jobs") == []
        assert verify(folder, settled=True) == []
        if not disk.taken:
            break
    assert number > 2, "the drop must have been looked at several times"
    assert not disk.taken, "the last folder shows that all moments were gone through"
    assert [record for record in caplog.records if record.levelname in ("ERROR", "CRITICAL")] == []


def test_a_returned_file_dropped_back_is_one_more_job_and_no_loop(tmp_path, quick):
    """Whoever drops the answer gets an answer to it, under a name that does not grow; nothing goes round."""
    watcher = quick_watcher(tmp_path)
    drop(tmp_path, "plan.xlsx")
    assert run_until_empty(watcher)
    (answer,) = (tmp_path / "Returned").iterdir()
    (tmp_path / "Inbox" / answer.name).write_bytes(answer.read_bytes())
    while names(tmp_path / "Inbox"):
        watcher.step()
        watcher.wait()
    assert run_until_empty(watcher)
    assert returned(tmp_path) == ["plan solved.xlsx", "plan solved.xlsx"]
    assert names(tmp_path / "Inbox") == []
    assert faults_after_recovery(tmp_path, ["plan.xlsx", answer.name]) == []


def test_a_drop_replaced_in_mid_solve_is_two_jobs_each_from_its_own_input(tmp_path, quick, monkeypatch):
    """While the first is being solved the second one arrives under the same name."""

    def replacing(request, *rest):
        if b"first" in Path(request["source"]).read_bytes():
            drop(tmp_path, "plan.xlsx", content="second")
        return child_at_once(request, *rest)

    monkeypatch.setattr("ledgersolve.service.supervise.run_child", replacing)
    watcher = quick_watcher(tmp_path)
    drop(tmp_path, "plan.xlsx", content="first")
    assert run_until_empty(watcher)
    assert faults_after_recovery(tmp_path, ["plan.xlsx"] * 2) == []


def test_one_of_two_processes_gets_each_file(tmp_path, quick):
    """Three hundred files claimed by four threads at once: each is in exactly one job."""
    prepare(tmp_path, Disk())
    paths = [drop(tmp_path, f"{number}.xlsx") for number in range(300)]
    claims: list[str | None] = []

    def claim_all(order: list[Path]) -> None:
        clerk = Protocol(Layout(tmp_path), Disk(), {})
        claims.extend(clerk.claim(path) for path in order)

    orders = (paths, paths[::-1], paths[150:] + paths[:150], paths)
    threads = [threading.Thread(target=claim_all, args=(order,)) for order in orders]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len([job for job in claims if job is not None]) == 300
    assert len(list((tmp_path / ".ledgersolve/jobs").glob("*/in/*"))) == 300


def test_what_was_taken_is_shown_until_it_is_back(tmp_path, quick):
    """Out of Inbox and not running: after a failed attempt, given back, paused, and when the service stopped."""
    watcher = quick_watcher(tmp_path, beat_seconds=100.0)
    clerk = watcher.desk.protocol
    job = clerk.claim(drop(tmp_path, "north/plan.xlsx"))
    clerk.fail(job, clerk.lease(clerk.view(job), {"owner": "north"}), "it was ended by the system (SIGSEGV)")
    watcher.desk.wait_for(job, 100.0)
    watcher.step()
    (told,) = watcher.picture()["waiting"]
    assert told == {
        "name": "plan.xlsx", "owner": "north", "job": job, "why": "taken; attempt 1 of 3 failed, starts again"
    }
    clerk.release(job, clerk.lease(clerk.view(job), {"owner": "north"}))
    (tmp_path / "PAUSE").touch()
    watcher.desk.not_before.clear()
    watcher._next_scan = 0.0
    watcher.step()
    assert [one["why"] for one in watcher.picture()["waiting"]] == [
        "taken and given back, starts again: held back by PAUSE"
    ]
    path = drop(tmp_path, "next.xlsx")
    watcher._next_scan = 0.0
    watcher.step()
    watcher.leave()
    left = {one["name"]: one["why"] for one in status(tmp_path)["waiting"]}
    assert left == {
        "plan.xlsx": "taken and given back, starts again: waits for the service to start",
        "next.xlsx": "waits for the service to start",
    }
    assert path.exists() and status(tmp_path)["waiting_count"] == 2


def test_a_job_that_another_process_holds_names_it(tmp_path, quick):
    """No lease of ours, no sign that it is left behind: taken by that machine."""
    watcher = quick_watcher(tmp_path, beat_seconds=100.0)
    other = Protocol(Layout(tmp_path), Disk(), {"host": "planner2"})
    job = other.claim(drop(tmp_path, "plan.xlsx"))
    other.lease(other.view(job), {"owner": "north"})
    watcher.step()
    (told,) = watcher.picture()["waiting"]
    assert told["why"].startswith("taken by planner2") and told["owner"] == "north"


def test_the_owner_is_told_with_each_returned_workbook(tmp_path, quick):
    """Two of one name from two sub-folders, one of them taken over from a process that died: none is mixed up."""
    watcher = quick_watcher(tmp_path, beat_seconds=0.001)
    other = Protocol(Layout(tmp_path), Disk(), {"host": "other"})
    job = other.claim(drop(tmp_path, "north/plan.xlsx", content="1"))
    other.lease(other.view(job), {"owner": "north"})
    drop(tmp_path, "south/plan.xlsx", content="2")
    assert run_until_empty(watcher)
    watcher.write_board()
    told = status(tmp_path)["returned"]
    assert {one["owner"]: one["job"] == job for one in told} == {"north": True, "south": False}


def test_a_drop_while_paused_is_told_as_held_back_soon(tmp_path, quick):
    """The page follows within its pace, not at the next turn of a quarter minute."""
    watcher = quick_watcher(tmp_path)
    now = [1000.0]
    watcher.clock = lambda: now[0]
    (tmp_path / "PAUSE").touch()
    for _ in range(4):
        watcher.step()
        now[0] += 3.0
    drop(tmp_path, "plan.xlsx")
    for _ in range(2):
        watcher.step()
        now[0] += 3.0
    assert [one["why"] for one in status(tmp_path)["waiting"]] == ["held back by PAUSE"]


def test_quiet_hours_hold_new_work(tmp_path, quick):
    """A window that covers the whole day starts nothing."""
    watcher = quick_watcher(tmp_path, quiet_hours=("00:00-00:00",))
    path = drop(tmp_path, "plan.xlsx")
    watcher.step()
    watcher.step()
    assert path.exists() and watcher.state == "quiet hours"


def test_too_little_space_holds_new_work(tmp_path, quick):
    """Below the floor nothing is taken in; what is there stays where it is."""
    watcher = quick_watcher(tmp_path, free_mb=1 << 30)
    path = drop(tmp_path, "plan.xlsx")
    watcher.step()
    watcher.step()
    assert path.exists() and watcher.state == "held" and "free" in watcher.why


def test_a_clock_that_jumps_changes_nothing(tmp_path, quick, monkeypatch):
    """Ten years ahead, ten years back, at every step: all are answered once."""
    jumps = iter(range(10_000))
    monkeypatch.setattr("time.time", lambda: 1.8e9 + (-1) ** next(jumps) * 3.15e8)
    for number in range(5):
        drop(tmp_path, f"{number}.xlsx")
    watcher = quick_watcher(tmp_path)
    assert run_until_empty(watcher)
    assert faults_after_recovery(tmp_path, [f"{number}.xlsx" for number in range(5)]) == []


def test_a_returned_file_that_is_taken_at_once_is_not_made_again(tmp_path, quick):
    """The analyst moves results away as they come; nothing is returned a second time."""
    watcher = quick_watcher(tmp_path)
    taken = 0
    for number in range(10):
        drop(tmp_path, f"{number}.xlsx")
    while not (watcher.is_empty() and taken):
        watcher.step()
        for path in (tmp_path / "Returned").glob("*.xlsx"):
            path.unlink()
            taken += 1
        watcher.wait()
    for _ in range(20):
        watcher.step()
    assert taken == 10 and names(tmp_path / "Returned") == []


def test_a_file_held_open_elsewhere_waits_and_is_then_taken(tmp_path, quick, monkeypatch):
    """The system refuses the rename while a program has the file: waiting, told, and tried again."""

    class Held(Plan):
        open = True

        def before(self, number, name, arguments):
            if name == "rename" and self.open and arguments[0].name == "plan.xlsx":
                raise PermissionError(errno.EACCES, "sharing violation")

    # long enough beside a step that the page is seen while the drop is held back
    monkeypatch.setattr(settle, "_FIRST_WAIT", 0.3)
    monkeypatch.setattr(settle, "_LONGEST_WAIT", 0.3)
    plan = Held()
    watcher = quick_watcher(tmp_path, FaultyDisk(plan))
    drop(tmp_path, "plan.xlsx")
    drop(tmp_path, "other.xlsx")
    told = set()
    for _ in range(100):
        watcher.step()
        told |= {found.why for found in watcher.drops if found.name == "plan.xlsx"}
        watcher.wait()
    assert returned(tmp_path) == ["other solved.xlsx"]
    assert any("cannot be read or moved" in why for why in told)
    plan.open = False
    assert run_until_empty(watcher)
    assert faults_after_recovery(tmp_path, ["plan.xlsx", "other.xlsx"]) == []


def test_a_damaged_answer_alerts_and_stops_nobody_else(tmp_path, quick):
    """A job with a garbled answer is left alone for the administrator; others go on."""
    watcher = quick_watcher(tmp_path)
    clerk = watcher.desk.protocol
    job = clerk.claim(drop(tmp_path, "plan.xlsx"))
    (clerk.home(job) / "answer.json").write_text("{")
    drop(tmp_path, "other.xlsx")
    assert run_until_empty(watcher)
    assert returned(tmp_path) == ["other solved.xlsx"]
    (alert,) = watcher.picture()["alerts"]
    assert alert["name"] == "plan.xlsx" and "damaged" in alert["why"]
    assert clerk.view(job).input.exists()


def test_answers_of_a_newer_version_are_understood(tmp_path, quick):
    """Old and new version on one share: an answer with unknown keys is published all the same."""
    watcher = quick_watcher(tmp_path)
    drop(tmp_path, "plan.xlsx")
    clerk = watcher.desk.protocol
    real = clerk.publish
    clerk.publish = lambda view: (_ for _ in ()).throw(OSError(errno.EIO, "later"))
    for _ in range(5):
        watcher.step()
    (answer,) = (tmp_path / ".ledgersolve/jobs").glob("*/answer.json")
    answer.write_text(json.dumps(json.loads(answer.read_text()) | {"colour": "green"}))
    clerk.publish = real
    assert run_until_empty(watcher)
    assert faults_after_recovery(tmp_path, ["plan.xlsx"]) == []


def test_status_files_deleted_while_running_come_back(tmp_path, quick):
    """Page, data and signs of life are made anew; they mean nothing to the work."""
    watcher = quick_watcher(tmp_path)
    drop(tmp_path, "plan.xlsx")
    watcher.step()
    watcher.write_board()
    for path in (tmp_path / "Status.html", tmp_path / "status.json", *(tmp_path / ".ledgersolve/hosts").iterdir()):
        path.unlink()
    assert run_until_empty(watcher)
    watcher.write_board()
    assert (tmp_path / "Status.html").exists() and len(names(tmp_path / ".ledgersolve/hosts")) == 1


def test_a_job_whose_holders_vanish_again_and_again_is_answered(tmp_path, quick):
    """A workbook that takes the whole service down each time leaves no word; in the end it goes back, too."""
    watcher = quick_watcher(tmp_path, lost_leases=4)
    clerk = watcher.desk.protocol
    job = clerk.claim(drop(tmp_path, "plan.xlsx"))
    for _ in range(4):
        clerk.lease(clerk.view(job))
    time.sleep(0.01)
    assert run_until_empty(watcher)
    assert returned(tmp_path) == ["plan failed.xlsx"]


def test_a_job_that_another_process_took_since_the_scan_is_left_to_it(tmp_path, quick):
    """Between looking and starting another watch process may have leased the job: its lease is respected."""
    watcher = quick_watcher(tmp_path, beat_seconds=100.0)
    other = Protocol(Layout(tmp_path), Disk(), {"host": "other"})
    job = other.claim(drop(tmp_path, "plan.xlsx"))
    watcher.turns.places = lambda running, workers: "none"
    watcher.step()
    assert len(watcher.line) == 1
    other.lease(other.view(job))
    del watcher.turns.places
    watcher._start_more()
    assert not watcher.desk.trays and other.view(job).generation == 1


def test_a_folder_for_jobs_that_is_full_at_the_start_is_waited_for(tmp_path, quick, monkeypatch):
    """A full disk passes: the service starts, holds new work, and goes on once there is room."""
    full = ["No space left."]
    monkeypatch.setattr("ledgersolve.service.intake.private_trouble", lambda root: full[0])
    watcher = quick_watcher(tmp_path)
    drop(tmp_path, "plan.xlsx")
    for _ in range(3):
        watcher.step()
        watcher.wait()
    assert watcher.state == "held" and names(tmp_path / "Inbox") == ["plan.xlsx"]
    full[0] = ""
    assert run_until_empty(watcher)


def test_a_folder_for_jobs_that_goes_away_holds_new_work(tmp_path):
    """A job that finds no place to work goes back without an attempt, and the next look takes nothing new."""
    work = tmp_path / "work"
    work.mkdir()
    watcher = quick_watcher(tmp_path / "served", private_folder=work)
    work.rmdir()
    watcher.intake._next_probe = 1e99
    drop(tmp_path / "served", "plan.xlsx")
    for _ in range(20):
        watcher.step()
        watcher.wait()
    assert watcher.state == "held" and str(work) in watcher.why
    (job,) = (tmp_path / "served/.ledgersolve/jobs").iterdir()
    assert len(list(job.glob("lease.*"))) == len(list(job.glob("released.*"))) == 1
    assert not list(job.glob("failed.*"))


def test_the_log_tells_once_what_needs_the_administrator(tmp_path, quick, caplog):
    """Not at every look, and again when it comes back."""
    watcher = quick_watcher(tmp_path)
    link = tmp_path / "Inbox" / "north" / "link.xlsx"
    link.parent.mkdir()
    for _ in range(2):
        link.symlink_to("/etc/hostname")
        for _ in range(3):
            watcher._scan()
        link.unlink()
        watcher._scan()
    told = [record.getMessage() for record in caplog.records if "needs the administrator" in record.getMessage()]
    assert told == ["needs the administrator: link.xlsx of north: a link, not a file; it is never read"] * 2
