"""Settings: file, environment, command line."""

import pytest

from ledgersolve.service.config import SettingsError, check_cluster, load_settings, parse_window


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
    ("workers = 0", "The setting workers in {} cannot be 0: it must be at least 1."),
    ("workers = 'many'", "The setting workers in {} cannot be 'many': it must be a whole number."),
    ("wokers = 2", "There is no setting wokers (in {}); did you mean workers?"),
    ("colour = 2", "There is no setting colour (in {})."),
    ("quiet_hours = ['8-12']", "'8-12' is no window of time; write it like 'Mon-Fri 08:00-18:00'"),
    ("quiet_hours = ['Xo-Fr 08:00-12:00']", "'Xo-Fr 08:00-12:00' is no window of time; write it like"),
    ("quiet_hours = 5", "The setting quiet_hours in {} cannot be 5: it must be a list such as"),
    ("time_zone = 'Mars/Base'", "no time zone is called Mars/Base; write one like Europe/Paris"),
    ("log_level = 'LOUD'", "cannot be 'LOUD': it must be one of 'DEBUG', 'INFO', 'WARNING' or 'ERROR'."),
    ("keep_days = -1", "The setting keep_days in {} cannot be -1: it must be at least 0."),
    ("memory_mb = 50", "50 MB are too few for any workbook; write at least 512"),
    ("workers =", "The settings file {} cannot be read"),
    ('log_file = "C:\\Users\\log"', "a Windows path in single ones"),
])  # fmt: skip
def test_a_wrong_setting_is_refused_in_words(tmp_path, text, words):
    """Unknown names and impossible values stop the start; the sentence names file, setting and remedy."""
    file = tmp_path / "service.toml"
    file.write_text(text)
    with pytest.raises(SettingsError) as refused:
        load_settings(file)
    assert words.format(file) in str(refused.value)
    for inside in ("Input should", "tuple.index", "parse string"):
        assert inside not in str(refused.value)


@pytest.mark.parametrize(("given", "windows"), [
    ("22:00-06:00", ("22:00-06:00",)),
    ("Mon-Fri 08:00-12:00, 22:00-06:00", ("Mon-Fri 08:00-12:00", "22:00-06:00")),
    ('["22:00-06:00"]', ("22:00-06:00",)), ("", ()),
])  # fmt: skip
def test_quiet_hours_in_the_environment_are_a_list_with_commas_or_json(monkeypatch, given, windows):
    """An administrator writes the variable as people write lists."""
    monkeypatch.setenv("LEDGERSOLVE_QUIET_HOURS", given)
    assert load_settings().quiet_hours == windows


@pytest.mark.parametrize(("variable", "value", "words"), [
    ("LEDGERSOLVE_QUIET_HOURS", "noon", "The variable LEDGERSOLVE_QUIET_HOURS cannot be used: 'noon' is no window"),
    ("LEDGERSOLVE_WORKERS", "x", "The variable LEDGERSOLVE_WORKERS cannot be 'x': it must be a whole number."),
    ("LEDGERSOLVE_WOKERS", "1", "LEDGERSOLVE_WOKERS names no setting; did you mean LEDGERSOLVE_WORKERS?"),
])  # fmt: skip
def test_a_wrong_variable_is_refused_in_words(monkeypatch, variable, value, words):
    """A bad value and a misspelled name in the environment give one sentence, no traceback."""
    monkeypatch.setenv(variable, value)
    with pytest.raises(SettingsError) as refused:
        load_settings()
    assert words in str(refused.value)


def test_a_variable_that_resembles_no_setting_is_only_logged(monkeypatch, caplog):
    """Another program of the house may use the same first word."""
    monkeypatch.setenv("LEDGERSOLVE_OTHER_THING", "1")
    load_settings()
    assert "LEDGERSOLVE_OTHER_THING names no setting" in caplog.text


def test_a_wrong_option_is_named_as_one():
    """What came from the command line is not blamed on a file."""
    with pytest.raises(SettingsError, match="The option --workers cannot be 0"):
        load_settings(workers=0)


@pytest.mark.parametrize("address", ["nonsense", "planner:8786", "tcp://planner", "tcp://a b:1", "file:///x:1"])
def test_what_is_no_address_of_a_scheduler_is_refused(address):
    """A mistyped address is told at the start, not when the first workbook comes."""
    with pytest.raises(SettingsError, match="write it like tcp://"):
        check_cluster(address)


def test_addresses_of_schedulers_pass_where_the_package_is_there(monkeypatch):
    """Names, numbers of either kind; without the extra the sentence says what to install."""
    for address in ("tcp://planner:8786", "tls://10.0.0.1:8786", "tcp://[::1]:8786"):
        check_cluster(address)
    monkeypatch.setattr("importlib.util.find_spec", lambda name: None)
    with pytest.raises(SettingsError, match=r"install ledgersolve\[cluster\]"):
        check_cluster("tcp://planner:8786")


def test_a_missing_file_is_an_error(tmp_path):
    """A mistyped path must not mean all defaults."""
    with pytest.raises(SettingsError, match="not there"):
        load_settings(tmp_path / "no.toml")


@pytest.mark.parametrize(("window", "days"), [
    ("08:00-12:00", {0, 1, 2, 3, 4, 5, 6}), ("Mon-Fri 08:00-12:00", {0, 1, 2, 3, 4}), ("sat 08:00-12:00", {5}),
    ("Mo-Fr 08:00-12:00", {0, 1, 2, 3, 4}), ("Saturday 08:00-12:00", {5}),
    ("Fri-Mon 08:00-12:00", {4, 5, 6, 0}),
])  # fmt: skip
def test_windows_name_days(window, days):
    """No day, one day, or a range that may run over the weekend."""
    assert parse_window(window)[0] == days
