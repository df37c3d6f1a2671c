"""The administrator's files say what the program does."""

import re
import tomllib
from pathlib import Path

import ledgersolve.service
from ledgersolve.service.config import ServiceSettings

FOLDER = Path(ledgersolve.service.__file__).parent / "packaging"


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
    text = (FOLDER / "ledgersolve.service").read_text("utf-8")
    for line in filter(None, text.splitlines()):
        assert re.match(r"(#|\[\w+\]$|[A-Z]\w+=)", line), line
    for setting in ("Restart=always", "NoNewPrivileges=yes", "ProtectSystem=strict", "MemoryMax="):
        assert setting in text
    assert "ledgersolve watch /srv/planning" in text


def test_the_pages_name_files_and_commands_that_exist():
    """The page for administrators speaks of the files beside it, and of settings that there are."""
    page = (FOLDER / "ADMINISTRATION.md").read_text("utf-8")
    for name in ("ledgersolve.service", "Containerfile", "WINDOWS.md", "service.toml"):
        assert name in page
        assert (FOLDER / name).is_file()
    for setting in re.findall(r"`(\w+_\w+)`", page):
        assert setting in ServiceSettings.model_fields, setting
