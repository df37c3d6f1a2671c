"""The command line: exit codes, JSON and nothing else, templates, refusals."""

import json
import subprocess
import sys

import pytest

from tests.books import site_book

SITES = [{"Site": "A", "Fixed cost": 10}]
CUSTOMERS = [{"Customer": "x", "Demand": 4}]


def run(*words: object, cwd=None):
    """Run the command as a program would."""
    command = [sys.executable, "-m", "ledgersolve", *map(str, words)]
    return subprocess.run(command, capture_output=True, text=True, cwd=cwd, timeout=120)


@pytest.fixture
def good(tmp_path):
    """A workbook that is solved at once."""
    return site_book(tmp_path / "good.xlsx", SITES, CUSTOMERS, lane_costs=[[2]], settings={"Questions": "no"})


@pytest.fixture
def bad(tmp_path):
    """A workbook with one fault."""
    return site_book(tmp_path / "bad.xlsx", SITES, [{"Customer": "x", "Demand": "?"}], lane_costs=[[2]])


def test_solving_prints_one_object_and_nothing_else(good, tmp_path) -> None:
    """Standard output is JSON from the first to the last byte; exit code 0."""
    done = run("solve", good, "--into", tmp_path / "out", "--json")
    assert done.returncode == 0, done.stderr
    told = json.loads(done.stdout)
    assert told["total_cost"] == pytest.approx(18)
    assert (tmp_path / "out" / "good solved.xlsx").exists()


def test_several_files_print_a_list_and_the_worst_exit_code(good, bad) -> None:
    """One good and one faulty workbook: a list of two, exit code 3."""
    done = run("solve", good, bad, "--json")
    assert done.returncode == 3
    assert [answer["outcome"] for answer in json.loads(done.stdout)] == ["solved", "to fix"]


def test_checking_finds_the_fault_without_solving(good, bad) -> None:
    """The faulty cell is told in words on the terminal; a fit workbook gives 0."""
    done = run("check", bad)
    assert done.returncode == 3
    assert "B2" in done.stdout
    assert run("check", good, "--json").returncode == 0


def test_wrong_usage_is_two(tmp_path) -> None:
    """A file that is not there and an unknown job are mistakes of usage."""
    assert run("solve", tmp_path / "none.xlsx").returncode == 2
    assert run("template", "cooking").returncode == 2


def test_paths_that_cannot_be_answered_are_all_named(tmp_path) -> None:
    """A folder and a missing file: one line each, with what to do, and no workbook is touched."""
    done = run("solve", tmp_path, tmp_path / "none.xlsx")
    assert done.returncode == 2
    assert len(done.stderr.splitlines()) == 2
    assert "ledgersolve watch" in done.stderr and "is not there" in done.stderr


def test_faults_are_one_line_each_for_programs(bad) -> None:
    """Where output is no terminal a fault is one line with its place, not a folded table."""
    (line,) = [line for line in run("check", bad).stdout.splitlines() if "Customers B2" in line]
    assert line.strip().startswith("error: Customers B2 Demand: found")


def test_a_template_goes_where_it_is_asked_for(tmp_path) -> None:
    """A missing folder is made, a missing ending added, another ending and an unwritable place refused."""
    assert run("template", "Lot-Sizing", tmp_path / "new" / "lots").returncode == 0
    assert (tmp_path / "new" / "lots.xlsx").exists()
    assert run("template", "lot sizing", tmp_path / "lots.csv").returncode == 2
    done = run("template", "lot sizing", tmp_path / "new" / "lots.xlsx" / "x.xlsx")
    assert done.returncode == 2
    assert len(done.stderr.splitlines()) == 1
    assert "quotes" in run("template", "lot").stderr


def test_a_template_is_written_once(tmp_path) -> None:
    """The template appears under the name given and is not overwritten."""
    target = tmp_path / "empty.xlsx"
    assert run("template", "lot sizing", target).returncode == 0
    size = target.stat().st_size
    assert run("template", "lot sizing", target).returncode == 2
    assert target.stat().st_size == size
    assert run("check", target).returncode == 3


def test_the_commands_know_every_job(tmp_path) -> None:
    """The names that the command takes without loading a job are those of the jobs."""
    from ledgersolve.contract.reading import Job

    assert [run("template", job.value, tmp_path / job.name).returncode for job in Job] == [0] * len(Job)


def test_help_loads_no_engine() -> None:
    """Help answers without numpy, readers and solvers."""
    heavy = "any(name in sys.modules for name in ('numpy', 'pydantic', 'ortools'))"
    code = f"import sys, ledgersolve.cli; sys.exit({heavy})"
    assert subprocess.run([sys.executable, "-c", code]).returncode == 0


def test_version_and_help() -> None:
    """Both answer at once, without an error."""
    from ledgersolve import __version__

    assert run("--version").stdout.strip() == f"ledgersolve {__version__}"
    told = run("--help")
    assert told.returncode == 0
    for command in ("solve", "check", "watch", "template", "demo", "status"):
        assert command in told.stdout


def test_status_tells_by_words_and_code(tmp_path) -> None:
    """A folder that is not there, and one never served: a sentence, no usage box, the same code with --health."""
    for folder, code, words in ((tmp_path / "gone", 1, "is not there"), (tmp_path, 2, "never served")):
        told = run("status", folder)
        assert (told.returncode, words in told.stdout) == (code, True), told.stderr
        assert json.loads(run("status", folder, "--json").stdout)["well"] is False
        silent = run("status", folder, "--health")
        assert (silent.returncode, silent.stdout, silent.stderr) == (code, "", "")


def test_a_wrong_setting_or_address_is_one_sentence(tmp_path, monkeypatch) -> None:
    """From the environment or the command line: code 2, no traceback, nothing laid out."""
    told = run("watch", tmp_path, "--once", "--cluster", "nonsense")
    assert told.returncode == 2 and "write it like tcp://planner:8786" in told.stderr
    monkeypatch.setenv("LEDGERSOLVE_WOKERS", "1")
    for command in (("watch", tmp_path, "--once"), ("demo", tmp_path / "demo")):
        told = run(*command)
        assert told.returncode == 2 and "did you mean LEDGERSOLVE_WORKERS?" in told.stderr
        assert "Traceback" not in told.stderr
    assert list(tmp_path.iterdir()) == []
