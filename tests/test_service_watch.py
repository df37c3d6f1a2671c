"""The watch process as a whole: started, stopped, killed, and what it says when it cannot serve."""

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from ledgersolve import __version__
from ledgersolve.service.board import health, status
from ledgersolve.service.disk import Disk
from ledgersolve.service.layout import prepare
from ledgersolve.service.verify import verify
from ledgersolve.service.watch import serve
from tests.service_share import (
    HANDLERS,
    ROOT,
    drop,
    names,
    quick_settings,
    quick_watcher,
    returned,
    run_until_empty,
)


def test_a_folder_is_emptied_once(tmp_path, monkeypatch):
    """Solved, to fix and a file that is no workbook at all come back; queues of teams are served, too."""
    monkeypatch.setenv("PYTHONPATH", str(HANDLERS))
    drop(tmp_path, "good.xlsx")
    drop(tmp_path, "north/bad.xlsx", "fix")
    drop(tmp_path, "<b>&.xlsm", "chatter")
    code = serve(tmp_path, once=True, settings=quick_settings(workers=2), handler="handlers:solve")
    assert code == 0
    assert returned(tmp_path) == ["_b_& solved.xlsx", "bad to fix.xlsx", "good solved.xlsx"]
    assert verify(tmp_path, settled=True) == []
    state = status(tmp_path)
    assert state["state"] == "stopped" and len(state["returned"]) == 3
    assert health(tmp_path) == 1


def test_a_workbook_that_stops_the_program_comes_back_after_three_attempts(tmp_path, monkeypatch):
    """A crash in the solver costs three attempts and no other job anything; the operator is told."""
    monkeypatch.setenv("PYTHONPATH", str(HANDLERS))
    drop(tmp_path, "poison.xlsx", "crash")
    drop(tmp_path, "good.xlsx")
    assert serve(tmp_path, once=True, settings=quick_settings(), handler="handlers:solve") == 0
    assert returned(tmp_path) == ["good solved.xlsx", "poison failed.xlsx"]
    (alert,) = status(tmp_path)["alerts"]
    assert "SIGSEGV" in alert["why"] and alert["name"] == "poison.xlsx"
    assert len(list((tmp_path / ".ledgersolve/done").glob("*/failed.*"))) == 3


@pytest.mark.parametrize(("tries", "outcome"), [(3, "solved"), (4, "failed")])
def test_a_machine_that_gets_in_the_way_costs_attempts_not_the_answer(tmp_path, monkeypatch, tries, outcome):
    """A full disk at the first two tries is tried again; at the third the workbook comes back with the reason."""
    monkeypatch.setenv("PYTHONPATH", str(HANDLERS))
    (tmp_path / "private").mkdir()
    drop(tmp_path / "served", "plan.xlsx", f"passing {tries}")
    settings = quick_settings(private_folder=tmp_path / "private")
    assert serve(tmp_path / "served", once=True, settings=settings, handler="handlers:solve") == 0
    assert returned(tmp_path / "served") == [f"plan {outcome}.xlsx"]
    if outcome == "failed":
        assert "got in the way (full)" in status(tmp_path / "served")["alerts"][0]["why"]


def _service(folder: Path) -> subprocess.Popen:
    code = (
        "import sys; from pathlib import Path; from ledgersolve.service.watch import serve;"
        "from tests.service_share import quick_settings;"
        "sys.exit(serve(Path(sys.argv[1]), settings=quick_settings(workers=2, beat_seconds=1.0),"
        " handler='handlers:solve'))"
    )
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join((str(ROOT), str(HANDLERS)))}
    return subprocess.Popen([sys.executable, "-c", code, str(folder)], env=environment)


def _wait_for(reached, seconds=60.0):
    until = time.monotonic() + seconds
    while not reached():
        assert time.monotonic() < until
        time.sleep(0.02)


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT, signal.SIGKILL])
def test_a_service_stopped_in_mid_solve_loses_nothing(tmp_path, number):
    """By a signal in good order the lease is given back and the code is 0; killed, the next start takes over."""
    prepare(tmp_path, Disk())
    service = _service(tmp_path)
    drop(tmp_path, "slow.xlsx", "slow 600")
    drop(tmp_path, "good.xlsx")
    progress = tmp_path / ".ledgersolve" / "jobs"
    _wait_for(lambda: list(progress.glob("*/progress.1")) and returned(tmp_path))
    service.send_signal(number)
    code = service.wait(60)
    assert code == (0 if number != signal.SIGKILL else -signal.SIGKILL)
    assert bool(list(progress.glob("*/released.1"))) == (number != signal.SIGKILL)
    (held,) = progress.glob("*/in/slow.xlsx")
    held.write_bytes(drop(tmp_path, "x.xlsx", "fix").read_bytes())  # solved at once the next time
    (tmp_path / "Inbox" / "x.xlsx").unlink()
    again = _service(tmp_path)
    _wait_for(lambda: len(returned(tmp_path)) == 2)
    again.terminate()
    assert again.wait(60) == 0
    assert returned(tmp_path) == ["good solved.xlsx", "slow to fix.xlsx"]


def test_pause_holds_new_work_and_keeps_drops(tmp_path, quick):
    """A file PAUSE: nothing is claimed and the page says why; without it work goes on."""
    watcher = quick_watcher(tmp_path)
    (tmp_path / "PAUSE").touch()
    path = drop(tmp_path, "plan.xlsx")
    for _ in range(20):
        watcher.step()
        watcher.wait()
    assert path.exists() and watcher.state == "paused"
    assert serve(tmp_path, once=True, settings=quick_settings()) == 1
    assert path.exists()
    (tmp_path / "PAUSE").unlink()
    assert run_until_empty(watcher)
    assert len(names(tmp_path / "Returned")) == 1


def test_what_cannot_be_taken_does_not_keep_once_from_ending(tmp_path, quick):
    """A link in Inbox is told and left; the code says that something is left."""
    prepare(tmp_path, Disk())
    (tmp_path / "Inbox" / "link.xlsx").symlink_to("/etc/hostname")
    (tmp_path / "Inbox" / "loop.xlsx").symlink_to(tmp_path / "Inbox" / "loop.xlsx")
    assert serve(tmp_path, once=True, settings=quick_settings()) == 1
    assert names(tmp_path / "Inbox") == ["link.xlsx", "loop.xlsx"]
    assert [alert["name"] for alert in status(tmp_path)["alerts"]] == ["link.xlsx", "loop.xlsx"]


def test_a_share_that_is_not_there_at_the_start_ends_once_with_words(tmp_path, caplog):
    """With an expected mark and no share the run ends with 1 and nothing is created."""
    assert serve(tmp_path, once=True, settings=quick_settings(share_id="wanted")) == 1
    assert names(tmp_path) == []
    (tmp_path / "file").touch()
    assert serve(tmp_path / "file", once=True, settings=quick_settings()) == 2


def test_a_folder_for_jobs_that_is_not_there_is_told_at_the_start(tmp_path, capsys):
    """Nothing is taken that could not be worked on; the sentence names the folder and the setting."""
    served = tmp_path / "served"
    path = drop(served, "plan.xlsx")
    settings = quick_settings(private_folder=tmp_path / "no" / "such")
    assert serve(served, once=True, settings=settings) == 2
    assert path.exists()
    told = capsys.readouterr().err
    assert f"Jobs cannot work in {tmp_path}/no/such" in told and "private_folder" in told and "Traceback" not in told


def test_a_wrong_address_of_a_cluster_is_told_at_the_start(tmp_path, capsys):
    """Also where nothing waits: code 2 and a sentence, nothing is laid out."""
    assert serve(tmp_path, once=True, cluster="nonsense", settings=quick_settings()) == 2
    assert "'nonsense' is no scheduler's address" in capsys.readouterr().err
    assert names(tmp_path) == []


def test_a_workbook_open_elsewhere_does_not_keep_once_from_ending(tmp_path, quick, capsys):
    """It is left where it is, named with its reason, and the code says so."""
    drop(tmp_path, "plan.xlsx")
    (tmp_path / "Inbox" / "~$plan.xlsx").write_bytes(b"Ann")
    assert serve(tmp_path, once=True, settings=quick_settings(open_elsewhere_seconds=900.0)) == 1
    assert names(tmp_path / "Inbox") == ["plan.xlsx", "~$plan.xlsx"]
    assert "left in Inbox: plan.xlsx" in (told := capsys.readouterr().err) and "open in a spreadsheet program" in told


def test_the_log_tells_version_limits_and_every_change_of_state(tmp_path, quick, capsys):
    """What an administrator asks for later: which version, how much at a time, when it was paused."""
    drop(tmp_path, "plan.xlsx")
    (tmp_path / "PAUSE").touch()
    assert serve(tmp_path, once=True, settings=quick_settings(quiet_hours=("02:00-02:01",))) == 1
    told = capsys.readouterr().err
    assert f"LedgerSolve {__version__} serves {tmp_path}: 1 place and one more" in told
    assert "quiet hours: 02:00-02:01; originals are kept for 90 days" in told
    assert "paused: There is a file PAUSE" in told and "stopped: The service was stopped" in told


def test_a_log_that_cannot_be_written_stops_nothing(tmp_path, quick):
    """A full log disk, and a folder that is not there: the work is done all the same."""
    for number, log in enumerate((Path("/dev/full"), tmp_path / "no" / "such" / "x.log")):
        drop(tmp_path, f"{number}.xlsx", content=str(number))
        code = serve(
            tmp_path, once=True, settings=quick_settings(log_file=log, log_level="DEBUG"), handler="handlers:solve"
        )
        assert code == 0
    assert len(names(tmp_path / "Returned")) == 2
