"""The service's log."""

import json
import logging

import pytest

from ledgersolve.service.logs import JsonLines, set_up_log
from tests.service_share import names, quick_settings


@pytest.fixture
def package_log():
    """The package's logger, put back afterwards."""
    package = logging.getLogger("ledgersolve")
    before, level = list(package.handlers), package.level
    yield package
    for handler in set(package.handlers) - set(before):
        package.removeHandler(handler)
        handler.close()
    package.setLevel(level)


def test_a_name_cannot_forge_a_line():
    """Line ends, control and undecodable characters in a name stay inside one ASCII line of JSON."""
    record = logging.makeLogRecord({"msg": "%s returned", "args": ("a\n{\"level\": \"x\"}\x1b[2J\udcff\u2028é",)})
    line = JsonLines().format(record)
    assert line.isascii() and "\n" not in line and "\x1b" not in line
    assert json.loads(line)["says"].endswith("é returned")


def test_the_log_is_turned_over_by_size(tmp_path, package_log):
    """One current file and five older ones, none much above the size."""
    log = tmp_path / "service.log"
    set_up_log(quick_settings(log_file=log, log_mb=1))
    for _ in range(900):
        package_log.info("x" * 10_000)
    assert len(names(tmp_path)) == 6
    assert max(path.stat().st_size for path in tmp_path.iterdir()) <= 1 << 20


def test_a_log_that_cannot_be_opened_goes_to_standard_error(tmp_path, package_log, capsys):
    """The service starts all the same and says why."""
    set_up_log(quick_settings(log_file=tmp_path / "no" / "service.log"))
    package_log.info("still here")
    told = [json.loads(line)["says"] for line in capsys.readouterr().err.splitlines()]
    assert "cannot be written" in told[0] and told[1] == "still here"
