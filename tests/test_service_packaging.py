"""The administrator's files say what the program does."""

import re
import shutil
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

import ledgersolve.service
from ledgersolve.service.config import ServiceSettings
from ledgersolve.service.names import MOST_BYTES
from ledgersolve.service.states import new_job
from ledgersolve.service.watch import serve
from tests.faults.service_inputs import good
from tests.service_share import HANDLERS, ROOT, drop, names, quick_settings

FOLDER = Path(ledgersolve.service.__file__).parent / "packaging"
UNIT = FOLDER / "ledgersolve.service"


def test_the_settings_file_shows_every_setting_with_its_default():
    """Uncommented as it is, the file gives the defaults; no setting is missing, none is made up."""
    lines = (FOLDER / "service.toml").read_text("utf-8").splitlines()
    shown = tomllib.loads("\n".join(line[1:] for line in lines if re.match(r"#\w+ = ", line)))
    assert set(shown) == set(ServiceSettings.model_fields)
    chosen_by_itself = {"workers", "polling", "scan_seconds", "quiet_seconds", "private_folder", "log_file"}
    defaults = ServiceSettings()
    for name in set(shown) - chosen_by_itself:
        told = getattr(defaults, name)
        assert shown[name] == (list(told) if isinstance(told, tuple) else told), name
    assert ServiceSettings(**shown)


def test_the_unit_starts_the_command_and_hardens_it():
    """Every line of the unit is a section, a comment or a setting; the limits that matter are there."""
    text = UNIT.read_text("utf-8")
    for line in filter(None, text.splitlines()):
        assert re.match(r"(#|\[\w+\]$|[A-Z]\w+=)", line), line
    for setting in ("Restart=always", "NoNewPrivileges=yes", "ProtectSystem=strict", "MemoryMax="):
        assert setting in text
    assert "RestartPreventExitStatus=2" in text, "a wrong setting would be tried again every five seconds for ever"
    logs = re.search(r"^LogsDirectory=(\w+)$", text, re.MULTILINE)[1]
    assert f'log_file = "/var/log/{logs}/' in (FOLDER / "service.toml").read_text("utf-8")
    assert "ledgersolve watch /srv/planning" in text


def test_the_unit_is_one_that_systemd_takes(tmp_path):
    """The system's own checker has nothing to say, once the program is where the unit says."""
    if shutil.which("systemd-analyze") is None:
        pytest.skip("systemd is not installed")
    unit = tmp_path / "ledgersolve.service"
    unit.write_text(UNIT.read_text("utf-8").replace("/opt/ledgersolve/bin/ledgersolve", "/bin/true"))
    checked = subprocess.run(["systemd-analyze", "verify", str(unit)], capture_output=True, text=True, check=False)
    assert (checked.returncode, checked.stderr) == (0, "")


@pytest.mark.slow
def test_the_unit_allows_every_system_call_that_a_served_workbook_takes(tmp_path):
    """A workbook served under a tracer: each of its calls is within the filter of the unit."""
    if shutil.which("systemd-analyze") is None or shutil.which("strace") is None:
        pytest.skip("systemd and strace are needed")
    if subprocess.run(["strace", "-qq", "-o", "/dev/null", "true"], capture_output=True, check=False).returncode:
        pytest.skip("processes may not be traced here")
    (tmp_path / "served" / "Inbox").mkdir(parents=True)
    good(tmp_path / "served" / "Inbox" / "plan.xlsx")
    traced = ["strace", "-f", "-qq", "-o", str(tmp_path / "calls"), sys.executable, "-m", "ledgersolve", "watch"]
    done = subprocess.run([*traced, str(tmp_path / "served"), "--once"], capture_output=True, cwd=ROOT, check=False)
    assert done.returncode == 0, done.stderr
    assert any(name.endswith("solved.xlsx") for name in names(tmp_path / "served" / "Returned"))
    used = set(re.findall(r"^\d+ +(\w+)\(", (tmp_path / "calls").read_text("utf-8", "replace"), re.MULTILINE))
    assert {"openat", "link", "rename"} <= used | {"linkat", "renameat"}
    assert used - _allowed_calls() == set()


def _allowed_calls() -> set[str]:
    """System calls that the filters of the unit leave, its lines taken one after the other as systemd does."""
    told = subprocess.run(["systemd-analyze", "syscall-filter"], capture_output=True, text=True, check=True).stdout
    sets: dict[str, list[str]] = {}
    for line in re.sub(r"\x1b\[[0-9;]*m", "", told).splitlines():
        if line.startswith("@"):
            sets[line.strip()] = members = []
        elif line.strip() and not line.strip().startswith("#"):
            members.append(line.strip())

    def calls(name: str) -> set[str]:
        return set().union(*map(calls, sets[name])) if name in sets else {name}

    allowed: set[str] = set()
    for line in re.findall(r"^SystemCallFilter=(.*)", UNIT.read_text("utf-8"), re.MULTILINE):
        named = set().union(*map(calls, line.lstrip("~").split()))
        allowed = allowed - named if line.startswith("~") else allowed | named
    return allowed


def test_the_container_file_copies_all_that_the_package_is_built_from():
    """What pyproject.toml names for the wheel is copied, nothing else is, and the start command is the program's."""
    text = (FOLDER / "Containerfile").read_text("utf-8")
    copied = {name for line in re.findall(r"^COPY (.*)", text, re.MULTILINE) for name in line.split()[:-1]}
    project = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))
    wheel = project["tool"]["hatch"]["build"]["targets"]["wheel"]
    wanted = {"pyproject.toml", project["project"]["readme"], *project["project"]["license-files"],
              *wheel["packages"], *wheel["force-include"]}
    assert copied == wanted
    assert all((ROOT / name).exists() for name in copied)
    assert 'ENTRYPOINT ["ledgersolve"]\nCMD ["watch", "/served"]' in text
    assert "--format docker" in text, "other formats leave the health check out"


def test_the_pages_name_files_and_commands_that_exist():
    """The page for administrators speaks of the files beside it, and of settings that there are."""
    page = (FOLDER / "ADMINISTRATION.md").read_text("utf-8")
    for name in ("ledgersolve.service", "Containerfile", "WINDOWS.md", "service.toml"):
        assert name in page
        assert (FOLDER / name).is_file()
    for setting in re.findall(r"`(\w+_\w+)`", page):
        assert setting in ServiceSettings.model_fields, setting
    for codes in ("| 0 |", "| 1 |", "| 2 |", "| 3 |"):
        assert codes in page


def test_the_folders_of_the_page_serve_a_group_and_nobody_else(tmp_path, monkeypatch):
    """The modes that the page gives: the service takes and returns, results are the group's alone."""
    page = (FOLDER / "ADMINISTRATION.md").read_text("utf-8")
    for mode, name in re.findall(r"install -d -o ledgersolve -g planning -m (\d+) /srv/(\S+)", page):
        (tmp_path / name).mkdir()
        (tmp_path / name).chmod(int(mode, 8))
    served = tmp_path / "planning"
    assert names(served) == ["Inbox", "Returned"]
    monkeypatch.setenv("PYTHONPATH", str(HANDLERS))
    drop(served, "plan.xlsx")
    assert serve(served, once=True, settings=quick_settings(), handler="handlers:solve") == 0
    (returned,) = (served / "Returned").iterdir()
    assert returned.stat().st_mode & 0o7777 == 0o660
    assert (served / "status.json").stat().st_mode & 0o7777 == 0o640


def test_paths_on_windows_fit():
    """A folder of the length that the page allows leaves room for returned names, drops and the jobs' folders."""
    page = " ".join((FOLDER / "WINDOWS.md").read_text("utf-8").split())
    sentence = r"to (\d+) characters and names of drops to (\d+): the service adds up to (\d+) and (\d+)"
    folder, longest, returned, job = map(int, re.search(sentence, page).groups())
    assert returned == len("\\Returned\\") + MOST_BYTES
    assert job == len(f"\\.ledgersolve\\jobs\\{new_job()}\\in\\")
    assert max(folder + returned, folder + job + longest) <= 259
