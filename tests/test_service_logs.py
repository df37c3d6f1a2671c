"""The service's log."""

import json
import logging
import re

from ledgersolve.service.logs import JsonLines, TextLines, service_log
from tests.service_share import names, quick_settings

package_log = logging.getLogger("ledgersolve")


def test_a_name_cannot_forge_a_line():
    """Line ends, control and undecodable characters in a name stay inside one ASCII line of JSON."""
    record = logging.makeLogRecord({"msg": "%s returned", "args": ("a\n{\"level\": \"x\"}\x1b[2J\udcff\u2028é",)})
    line = JsonLines().format(record)
    assert line.isascii() and "\n" not in line and "\x1b" not in line
    assert json.loads(line)["says"].endswith("é returned")


def test_text_lines_cannot_be_forged_and_carry_the_zone():
    """What belongs to a record is indented, controls are spelled out, the time says how far from UTC it is."""
    record = logging.makeLogRecord({"levelname": "INFO", "msg": "ended\n2026-01-01 ERROR forged\x1b[2J"})
    first, second = TextLines().format(record).splitlines()
    assert re.match(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d[+-]\d{4} INFO ended$", first)
    assert second == "    2026-01-01 ERROR forgedU+001B[2J"


def test_the_log_is_turned_over_by_size(tmp_path):
    """One current file and five older ones, none much above the size."""
    log = tmp_path / "service.log"
    with service_log(quick_settings(log_file=log, log_mb=1)):
        for _ in range(900):
            package_log.info("x" * 10_000)
    assert len(names(tmp_path)) == 6
    assert max(path.stat().st_size for path in tmp_path.iterdir()) <= 1 << 20


def test_each_record_goes_to_one_place(tmp_path, capsys):
    """Without a file: text on standard error. With one: JSON in it, and only errors on standard error, too."""
    with service_log(quick_settings()):
        package_log.info("one")
    assert capsys.readouterr().err.endswith(" INFO one\n")
    with service_log(quick_settings(log_file=tmp_path / "service.log")):
        package_log.info("two")
        package_log.error("three")
    lines = (tmp_path / "service.log").read_text().splitlines()
    assert [json.loads(line)["says"] for line in lines] == ["two", "three"]
    told = capsys.readouterr().err
    assert "two" not in told and told.count("three") == 1
    package_log.warning("afterwards")
    assert "afterwards" not in (tmp_path / "service.log").read_text()


def test_a_log_that_cannot_be_opened_goes_to_standard_error(tmp_path, capsys):
    """The service starts all the same, says why, and writes each line once."""
    with service_log(quick_settings(log_file=tmp_path / "no" / "service.log")):
        package_log.info("still here")
    first, second = capsys.readouterr().err.splitlines()
    assert "cannot be written" in first and second.endswith(" INFO still here")
