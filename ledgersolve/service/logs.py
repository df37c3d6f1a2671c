"""The service's log: text on standard error, or JSON in a file that is turned over; a full disk stops nothing."""

import json
import logging
import sys
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from logging.handlers import RotatingFileHandler
from pathlib import Path

from ledgersolve.service.config import ServiceSettings
from ledgersolve.service.names import show

_OLDER = 5
_TIME = "%Y-%m-%dT%H:%M:%S%z"


class JsonLines(logging.Formatter):
    """One ASCII line a record, so that no name in it can forge another record."""

    def format(self, record: logging.LogRecord) -> str:
        """Lay the record out."""
        line = {
            "at": self.formatTime(record, _TIME),
            "level": record.levelname,
            "from": record.name,
            "says": record.getMessage(),
        }
        if record.exc_info:
            line["trace"] = self.formatException(record.exc_info)
        return json.dumps(line)


class TextLines(logging.Formatter):
    """Lines for people: what belongs to one record is indented, and nothing in it can steer a terminal."""

    def __init__(self) -> None:
        super().__init__("%(asctime)s %(levelname)s %(message)s", _TIME)

    def format(self, record: logging.LogRecord) -> str:
        """Lay the record out."""
        return "\n    ".join(map(show, super().format(record).splitlines()))


class _Patient(RotatingFileHandler):
    """Goes on where a record could not be written: the log is the least important thing here."""

    def handleError(self, record: logging.LogRecord) -> None:  # noqa: N802 - the name is the library's
        """Let the record go."""


@contextmanager
def service_log(settings: ServiceSettings) -> Iterator[None]:
    """Send the package's log where the settings say, for as long as the service runs.

    Without ``log_file`` every record is text on standard error. With it every record is JSON in the file,
    and standard error has the errors alone. A file that cannot be opened is told, and counts as none.
    """
    package = logging.getLogger("ledgersolve")
    verbose = logging.getLogger().level == logging.DEBUG
    before = package.level, package.propagate
    package.setLevel(logging.DEBUG if verbose else settings.log_level)
    package.propagate = False
    handlers = list(_handlers(settings, verbose))
    for handler in handlers:
        package.addHandler(handler)
    if settings.log_file is not None and len(handlers) == 1:
        package.error("the log file %s cannot be written; the log goes here", settings.log_file)
    try:
        yield
    finally:
        for handler in handlers:
            package.removeHandler(handler)
            with suppress(OSError):  # what could not be written fails once more here
                handler.close()
        package.level, package.propagate = before


def _handlers(settings: ServiceSettings, verbose: bool) -> Iterator[logging.Handler]:
    screen = logging.StreamHandler(sys.stderr)
    screen.setFormatter(TextLines())
    yield screen
    if settings.log_file is None:
        return
    try:
        file = _file_handler(settings.log_file, settings.log_mb << 20)
    except OSError:
        return
    screen.setLevel(logging.DEBUG if verbose else logging.ERROR)
    yield file


def _file_handler(file: Path, most_bytes: int) -> logging.Handler:
    handler = _Patient(file, maxBytes=most_bytes, backupCount=_OLDER, encoding="ascii")
    handler.setFormatter(JsonLines())
    return handler
