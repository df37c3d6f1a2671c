"""Every command and every example of the README runs."""

import os
import re
import shlex
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from tests.books import site_book

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text("utf-8")


def blocks(language: str) -> list[str]:
    """Fenced blocks of a language, in order."""
    return re.findall(rf"```{language}\n(.*?)```", README, flags=re.DOTALL)


def commands() -> list[str]:
    """Lines of all shell blocks, and the commands named in running text."""
    lines = [line for block in blocks("sh") for line in block.splitlines() if line.strip()]
    inline = re.findall(r"`(\.venv/bin/ledgersolve [^`]*)`", README)
    return list(dict.fromkeys(lines + inline))


def run(words: list[str], cwd: Path) -> subprocess.CompletedProcess[str]:
    """Run one command with the interpreter under test in place of the README's environment."""
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    return subprocess.run([sys.executable, "-m", "ledgersolve", *words], cwd=cwd, env=environment,
                          capture_output=True, text=True, timeout=280)


def test_the_readme_is_short_enough_and_starts_with_the_job() -> None:
    """Under 160 lines; the first paragraph says what it is for."""
    assert len(README.splitlines()) < 160
    assert README.split("\n\n")[1].startswith("Supply-chain analysts decide")


def test_each_command_is_known_to_these_tests() -> None:
    """A new command in the README needs a test here."""
    assert commands() == [
        "python3 -m venv .venv && .venv/bin/pip install -q -e '.[test]'",
        ".venv/bin/ledgersolve demo",
        ".venv/bin/pytest",
        ".venv/bin/ledgersolve template 'site selection' depots.xlsx",
        ".venv/bin/ledgersolve watch /srv/planning",
        ".venv/bin/ledgersolve check depots.xlsx",
        ".venv/bin/ledgersolve solve depots.xlsx",
    ]
    # the first and third are what the gate itself does; the others run below


def test_template_check_and_solve_one_after_the_other(tmp_path) -> None:
    """The commands of the first workbook work as written, in order."""
    written = [shlex.split(line)[1:] for line in commands() if "depots.xlsx" in line]
    template, check, solve = written
    assert run(template, tmp_path).returncode == 0
    assert run(check, tmp_path).returncode == 3  # an empty template is not filled in yet
    sites, customers = [{"Site": "A", "Fixed cost": 5}], [{"Customer": "x", "Demand": 2}]
    site_book(tmp_path / "depots.xlsx", sites, customers, lane_costs=[[3]], settings={"Questions": "no"})
    assert run(check, tmp_path).returncode == 0
    done = run(solve, tmp_path)
    assert done.returncode == 0, done.stderr
    assert (tmp_path / "depots solved.xlsx").exists()


def test_serving_a_folder_once(tmp_path) -> None:
    """The served folder gets the layout that the README names; a drop comes back."""
    folder = tmp_path / "planning"
    assert run(["watch", str(folder), "--once"], tmp_path).returncode == 0
    sites, customers = [{"Site": "A", "Fixed cost": 5}], [{"Customer": "x", "Demand": 2}]
    site_book(folder / "Inbox" / "drop.xlsx", sites, customers, lane_costs=[[3]], settings={"Questions": "no"})
    done = run(["watch", str(folder), "--once"], tmp_path)
    assert done.returncode == 0, done.stderr
    assert [path.name.split(" [")[0] for path in (folder / "Returned").iterdir()] == ["drop"]
    assert not list((folder / "Inbox").iterdir())
    for name in ("Status.html", ".ledgersolve"):
        assert (folder / name).exists()
    told = run(["status", str(folder)], tmp_path)
    assert told.returncode == 1, "no service looks after it any more"
    assert "drop" in told.stdout


@pytest.mark.slow
def test_the_demo_says_where_the_results_are(tmp_path) -> None:
    """Every demo workbook comes back exactly once."""
    done = run(["demo"], tmp_path)
    assert done.returncode == 0, done.stderr
    assert "Returned" in done.stdout
    drops = {path.stem for path in (ROOT / "inbox_demo").glob("*.xlsx")}
    returned = [path.name.split(" [")[0] for path in (tmp_path / "ledgersolve_demo" / "Returned").iterdir()]
    assert sorted(returned) == sorted(drops)


def test_the_python_example_runs(tmp_path, monkeypatch, capsys) -> None:
    """The example for programs works as it stands."""
    monkeypatch.chdir(tmp_path)
    sites, customers = [{"Site": "A", "Fixed cost": 5}], [{"Customer": "x", "Demand": 2}]
    site_book(tmp_path / "depots.xlsx", sites, customers, lane_costs=[[3]], settings={"Questions": "no"})
    (example,) = blocks("python")
    exec(compile(example, "README", "exec"), {})
    assert "solved proven best 11" in capsys.readouterr().out


def test_links_and_pictures_lead_somewhere() -> None:
    """Every relative link of the README and of the contributor guide names a file of the project."""
    for page in ("README.md", "DEVELOPERS.md"):
        text = (ROOT / page).read_text("utf-8")
        for target in re.findall(r"\]\((?!https?:)([^)#]+)", text):
            assert (ROOT / target).exists(), f"{page} links to {target}"


@pytest.mark.slow
def test_the_wheel_works_without_the_source_tree(tmp_path) -> None:
    """Built and unpacked alone, the package makes templates and finds the demo workbooks."""
    if shutil.which("git") is None:
        pytest.skip("git is not installed")
    built = subprocess.run(
        [sys.executable, "-m", "pip", "wheel", "-q", "--no-deps", "-w", str(tmp_path), str(ROOT)],
        capture_output=True, text=True,
    )
    assert built.returncode == 0, built.stderr
    (wheel,) = tmp_path.glob("*.whl")
    alone = tmp_path / "alone"
    shutil.unpack_archive(wheel, alone, "zip")
    code = (
        "import ledgersolve, ledgersolve.cli; from ledgersolve.shipped import shipped; "
        "print(ledgersolve.__file__); print(len(list(shipped('inbox_demo').glob('*.xlsx')))); "
        "print(len(list(shipped('templates_xlsx').glob('*.xlsx'))))"
    )
    done = subprocess.run([sys.executable, "-c", code], cwd=alone, env={**os.environ, "PYTHONPATH": str(alone)},
                          capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    place, demos, templates = done.stdout.split()[-3:]
    assert Path(place).is_relative_to(alone)
    assert (int(demos), int(templates)) == (len(list((ROOT / "inbox_demo").glob("*.xlsx"))), 2)
