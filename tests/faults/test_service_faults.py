"""Faults of every kind against the folder service: nothing lost, nothing answered twice, nothing half.

The programs beside this module do the work in processes of their own, because they fork, are traced, or
need mounts of their own. The short forms run in the gate; ``-m long`` runs the long ones.
"""

import errno
import logging
import os
import shutil
import subprocess
import tempfile
from pathlib import Path
from random import Random

import pytest

from ledgersolve.service.leases import LeaseWatch
from tests.faults.programs import program
from tests.service_share import (
    CHANGES,
    LOOKS,
    ErrorAt,
    FaultyDisk,
    Plan,
    RandomErrors,
    StaleDisk,
    drop,
    faults_after_recovery,
    hasten,
    memory_root,
    quick_watcher,
    run_until_empty,
)

DROPS = ["plan a.xlsx", "plan b.xlsx"]


# ---- killed ------------------------------------------------------------------------------------------


@pytest.mark.slow
def test_a_kill_before_any_changing_call_loses_nothing():
    """SIGKILL before every second changing call of two jobs, half-written files included; then a clean start."""
    result = program("service_crash_points", "2")
    assert result["points"] > 40
    assert result["faults"] == []


def strace_or_skip() -> None:
    """Leave a test out where processes cannot be traced."""
    if shutil.which("strace") is None:
        pytest.skip("strace is not installed")
    probe = subprocess.run(["strace", "-qq", "-o", os.devnull, "true"], capture_output=True, check=False)
    if probe.returncode:
        pytest.skip("processes may not be traced here")


@pytest.mark.slow
def test_a_kill_at_system_calls_loses_nothing():
    """SIGKILL at every thirtieth system call that touches the folder, told by the system itself."""
    strace_or_skip()
    result = program("service_strace", "30")
    assert result["points"] >= 6
    assert result["faults"] == []


@pytest.mark.long
@pytest.mark.timeout(3600)
def test_a_kill_before_every_changing_call_loses_nothing(told):
    """The long form: all of them."""
    result = program("service_crash_points", seconds=3500)
    told(result)
    assert result["points"] > 80
    assert result["faults"] == []


@pytest.mark.long
@pytest.mark.timeout(3600)
@pytest.mark.parametrize("error", ["", "ENOSPC", "EIO"])
def test_a_kill_or_error_at_every_system_call_loses_nothing(error, told):
    """The long form: every call, killed or failed."""
    strace_or_skip()
    result = program("service_strace", "1", *filter(None, [error]), seconds=3500)
    told(result)
    assert result["points"] > 200
    assert result["faults"] == []


@pytest.mark.slow
@pytest.mark.parametrize(
    ("lease", "rate"), [("0.15", "0"), ("0", "0"), ("0.15", "0.1")], ids=["leases", "none", "errors"]
)
def test_a_storm_of_kills_and_stops_loses_nothing(lease, rate):
    """Four processes on one folder, killed and stopped at random; with leases, without, with failing calls."""
    result = program("service_storm", "60", lease, "7", rate)
    assert result["kills"] > 3 and result["drops"] >= 60
    assert result["faults"] == []


@pytest.mark.long
@pytest.mark.timeout(3600)
@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize(("lease", "rate"), [("0.15", "0"), ("0", "0"), ("0.15", "0.02"), ("0.15", "0.3")])
def test_a_long_storm_loses_nothing(lease, rate, seed, told):
    """Six hundred drops in each storm."""
    result = program("service_storm", "600", lease, str(seed), rate, seconds=1500)
    told(result)
    assert result["faults"] == []


# ---- failing calls -----------------------------------------------------------------------------------


def spoiled_run(plan: Plan, watched: tuple[str, ...] = CHANGES) -> tuple[list[str], int]:
    """Two jobs under a plan, then a clean start; faults, and how many calls there were."""
    folder = Path(tempfile.mkdtemp(dir=memory_root()))
    for name in DROPS:
        drop(folder, name)
    disk = FaultyDisk(Plan(), watched)
    watcher = quick_watcher(folder, disk)
    before = len(disk.calls)
    if isinstance(plan, ErrorAt):
        plan.number += before
    disk.plan = plan
    ended = run_until_empty(watcher, 150 if isinstance(plan, RandomErrors) else 400)
    faults = [] if ended or isinstance(plan, RandomErrors) else ["one error was enough to stop the service"]
    faults += faults_after_recovery(folder, DROPS)
    shutil.rmtree(folder)
    return faults, len(disk.calls) - before


@pytest.fixture
def quick(monkeypatch):
    """No waits, no child processes, no log."""
    hasten(monkeypatch.setattr)
    logging.disable(logging.CRITICAL)
    yield
    logging.disable(logging.NOTSET)


@pytest.mark.slow
@pytest.mark.parametrize("lost", [False, True], ids=["failed", "reply lost"])
@pytest.mark.parametrize("code", [errno.ENOSPC, errno.EIO])
def test_an_error_at_any_changing_call_is_survived(quick, code, lost):
    """Each third changing call fails once, or succeeds with an error for a reply: the service itself goes on."""
    number, calls = 1, 1
    while number <= calls:
        faults, calls = spoiled_run(ErrorAt(number, code, lost))
        assert faults == [], f"call {number}"
        number += 3


@pytest.mark.long
@pytest.mark.timeout(3600)
@pytest.mark.parametrize("lost", [False, True], ids=["failed", "reply lost"])
@pytest.mark.parametrize("code", [
    errno.ENOSPC, errno.EIO, errno.EDQUOT, errno.ESTALE, errno.EACCES, errno.EROFS, errno.EHOSTDOWN, errno.ENOENT,
    errno.EEXIST,
])  # fmt: skip
def test_every_error_at_every_changing_call_is_survived(quick, code, lost, told):
    """The long form: all calls, all errors of bad disks and networks."""
    number, calls = 1, 1
    while number <= calls:
        faults, calls = spoiled_run(ErrorAt(number, code, lost))
        assert faults == [], f"call {number}"
        number += 1
    told({"calls": calls})


@pytest.mark.slow
@pytest.mark.parametrize("rate", [0.02, 0.3])
def test_a_share_that_fails_all_the_time_loses_nothing(quick, rate):
    """Looks fail, changes fail, replies get lost, again and again; then the share is well."""
    injected = 0
    for seed in range(5):
        plan = RandomErrors(seed, rate)
        faults, _ = spoiled_run(plan, (*LOOKS, *CHANGES))
        assert faults == [], f"seed {seed}"
        injected += plan.count
    assert injected > 0


@pytest.mark.long
@pytest.mark.timeout(3600)
@pytest.mark.parametrize("rate", [0.02, 0.1, 0.3])
def test_a_share_that_fails_for_long_loses_nothing(quick, rate, told):
    """The long form: a hundred and fifty folders."""
    injected = 0
    for seed in range(150):
        plan = RandomErrors(seed, rate)
        faults, _ = spoiled_run(plan, (*LOOKS, *CHANGES))
        assert faults == [], f"seed {seed}"
        injected += plan.count
    told({"injected errors": injected})


def stale_run(seed: int) -> list[str]:
    """Three processes that see old listings and ignore each other's leases, on thirty drops; faults."""
    folder = Path(tempfile.mkdtemp(dir=memory_root()))
    quick_watcher(folder)
    watchers = [quick_watcher(folder, StaleDisk(seed * 10 + number)) for number in range(3)]
    for watcher in watchers:
        watcher.leases = LeaseWatch(watcher.disk, 0.0)
    dropped = []
    random = Random(seed)
    for step in range(150):
        if step % 5 == 0:
            name = f"plan {step % 3}.xlsx"
            if not (folder / "Inbox" / name).exists():
                drop(folder, name, content=str(step))
                dropped.append(name)
        random.choice(watchers).step()
    faults = faults_after_recovery(folder, dropped)
    if faults:  # a payload that stayed behind is published by the next round of any process
        late = quick_watcher(folder)
        late.keeper._next_round = 0.0
        late.step()
        faults = faults_after_recovery(folder, dropped)
    shutil.rmtree(folder)
    return faults


@pytest.mark.slow
def test_old_listings_lose_nothing(quick):
    """A network folder shows names that are gone and hides names that are there."""
    for seed in range(6):
        assert stale_run(seed) == [], f"seed {seed}"


@pytest.mark.long
@pytest.mark.timeout(3600)
def test_old_listings_lose_nothing_for_long(quick):
    """The long form."""
    for seed in range(6, 200):
        assert stale_run(seed) == [], f"seed {seed}"
