"""Mounts, rights, lost events, clocks, clusters and loads: nothing lost, nothing answered twice, nothing half.

The short forms run in the gate; ``-m long`` runs the long ones.
"""

import os
import shutil
import subprocess
import tempfile
from pathlib import Path

import pytest

from tests.faults.programs import program


@pytest.mark.slow
def test_mounts_that_fill_up_turn_read_only_or_go_away_lose_nothing():
    """A disk of 1 MB, a read-only Returned, an unmounted, a swapped and a split share."""
    if os.getuid() != 0 or shutil.which("unshare") is None:
        pytest.skip("mounts of one's own need root")
    probe = ["unshare", "-m", "mount", "-t", "tmpfs", "x", "/mnt"]
    if subprocess.run(probe, capture_output=True, check=False).returncode:
        pytest.skip("file systems may not be mounted here")
    result = program("service_mounts", before=("unshare", "-m"))
    assert len(result) == 5
    assert not any(result.values()), result


@pytest.mark.slow
def test_drops_that_may_not_be_read_or_moved_wait_and_are_told():
    """Unreadable, somebody else's, in a closed folder, immutable: told once each, and returned when let go."""
    if os.getuid() != 0:
        pytest.skip("other accounts' files need root")
    probe = Path(tempfile.mkdtemp()) / "probe"
    probe.touch()
    if subprocess.run(["chattr", "+i", str(probe)], capture_output=True, check=False).returncode:
        pytest.skip("files cannot be made immutable here")
    subprocess.run(["chattr", "-i", str(probe)], check=True)
    result = program("service_rights")
    assert len(result) == 4
    assert not any(result.values()), result


@pytest.mark.slow
def test_lost_file_events_lose_no_drop():
    """The system's queue of events runs over while forty drops come: the scans find them all."""
    result = program("service_overflow")
    assert result["overflowed"], "the queue did not run over, so nothing was proven"
    assert result["returned"] == 40 and result["faults"] == []


@pytest.mark.long
def test_a_clock_ten_years_off_changes_nothing(told):
    """Ahead, behind, stepped in mid-solve and over a restart: no state, lease or original follows the date."""
    if shutil.which("cc") is None:
        pytest.skip("no C compiler for the library that moves the clock")
    result = program("service_clocks")
    told(result)
    assert len(set(result["years told"])) == 3, "the clock was not moved"
    assert result["returned"] == result["originals"] == 12
    assert (result["code"], result["faults"], result["attempts"]) == (0, [], 0)


@pytest.mark.long
def test_a_cluster_survives_a_new_scheduler(told):
    """The scheduler is killed in mid-solve and comes back after seconds: all are answered, no solver is left."""
    pytest.importorskip("distributed", reason="the cluster extra is not installed")
    result = program("service_scheduler")
    told(result)
    assert result["restarts"] == 1 and result["returned"] == 6
    assert result["faults"] == [] and result["left"] == 0


@pytest.mark.slow
def test_a_cluster_survives_the_death_of_a_worker():
    """A real scheduler and two workers; one is killed in mid-solve: all are answered once, no solver is left."""
    pytest.importorskip("distributed", reason="the cluster extra is not installed")
    result = program("service_cluster")
    assert result["killed"] == 1 and len(result["returned"]) == 6
    assert result["faults"] == [] and result["left"] == 0


@pytest.mark.long
def test_an_empty_folder_costs_next_to_nothing(told):
    """Under 1 % of a core and under 150 MB."""
    result = program("service_load", "idle")
    told(result)
    assert result["cpu percent of a core"] < 1.0 and result["memory MB"] < 150


@pytest.mark.long
@pytest.mark.timeout(7200)
def test_a_small_drop_is_not_behind_long_ones(told):
    """A drop of one second behind fifty of a minute is back within its own time and ten seconds."""
    result = program("service_load", "behind")
    told(result)
    assert 0.0 < result["back after"] < result["own seconds"] + 10.0


@pytest.mark.long
@pytest.mark.timeout(7200)
def test_ten_thousand_drops_come_back(told):
    """All are returned, and a scan of ten times as many takes about ten times as long, not a hundred."""
    result = program("service_load", "10000", seconds=7000)
    told(result)
    assert result["returned"] == 10_000 and result["faults"] == []
    assert result["scan seconds at 10000"] < 40 * max(0.002, result["scan seconds at 1000"])
