"""Settings: file, environment, command line."""

import pytest

from ledgersolve.service.config import SettingsError, load_settings, parse_window


def test_the_command_line_wins_over_environment_over_file(tmp_path, monkeypatch):
    """Three sources, each over the one before; what none names takes its default."""
    file = tmp_path / "service.toml"
    file.write_text("workers = 3\nattempts = 5\nquiet_hours = ['Mon-Fri 08:00-12:00']\nfree_mb = 7\n")
    monkeypatch.setenv("LEDGERSOLVE_ATTEMPTS", "6")
    monkeypatch.setenv("LEDGERSOLVE_FREE_MB", "8")
    settings = load_settings(file, free_mb=9, workers=None)
    assert (settings.workers, settings.attempts, settings.free_mb, settings.keep_days) == (3, 6, 9, 90.0)
    assert settings.quiet_hours == ("Mon-Fri 08:00-12:00",)


def test_the_environment_may_name_the_file(tmp_path, monkeypatch):
    """As in a unit file or a container."""
    file = tmp_path / "service.toml"
    file.write_text("nice = 3\n")
    monkeypatch.setenv("LEDGERSOLVE_SETTINGS", str(file))
    assert load_settings().nice == 3


@pytest.mark.parametrize(("text", "words"), [
    ("workers = 0", "workers cannot be 0"), ("wokers = 2", "no setting wokers"),
    ("quiet_hours = ['8-12']", "write it like"), ("time_zone = 'Mars/Base'", "no time zone is called Mars/Base"),
    ("log_level = 'LOUD'", "log_level cannot be 'LOUD'"), ("keep_days = -1", "keep_days"),
    ("workers =", "cannot be read"),
])  # fmt: skip
def test_a_wrong_setting_is_refused_in_words(tmp_path, text, words):
    """Unknown names and impossible values stop the start instead of being passed over."""
    file = tmp_path / "service.toml"
    file.write_text(text)
    with pytest.raises(SettingsError, match=words):
        load_settings(file)


def test_a_missing_file_is_an_error(tmp_path):
    """A mistyped path must not mean all defaults."""
    with pytest.raises(SettingsError, match="not there"):
        load_settings(tmp_path / "no.toml")


@pytest.mark.parametrize(("window", "days"), [
    ("08:00-12:00", {0, 1, 2, 3, 4, 5, 6}), ("Mon-Fri 08:00-12:00", {0, 1, 2, 3, 4}), ("sat 08:00-12:00", {5}),
    ("Fri-Mon 08:00-12:00", {4, 5, 6, 0}),
])  # fmt: skip
def test_windows_name_days(window, days):
    """No day, one day, or a range that may run over the weekend."""
    assert parse_window(window)[0] == days
