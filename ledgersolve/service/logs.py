"""The service's log: one JSON object a line, turned over by size; a full disk never stops the service."""

import json
import logging
import sys
from logging.handlers import RotatingFileHandler
from pathlib import Path

from ledgersolve.service.config import ServiceSettings

_OLDER = 5


class JsonLines(logging.Formatter):
    """One ASCII line a record, so that no name in it can forge another record."""

    def format(self, record: logging.LogRecord) -> str:
        """Lay the record out."""
        line = {
            "at": self.formatTime(record, "%Y-%m-%dT%H:%M:%S%z"),
            "level": record.levelname,
            "from": record.name,
            "says": record.getMessage(),
        }
        if record.exc_info:
            line["trace"] = self.formatException(record.exc_info)
        return json.dumps(line)


class _Patient(RotatingFileHandler):
    """Goes on where a record could not be written: the log is the least important thing here."""

    def handleError(self, record: logging.LogRecord) -> None:  # noqa: N802 - the name is the library's
        """Let the record go."""


def set_up_log(settings: ServiceSettings) -> None:
    """Send the package's log where the settings say; to standard error where that cannot be opened."""
    package = logging.getLogger("ledgersolve")
    package.setLevel(settings.log_level)
    if settings.log_file is None:
        return
    try:
        package.addHandler(_file_handler(settings.log_file, settings.log_mb << 20))
    except OSError as error:
        handler = logging.StreamHandler(sys.stderr)
        handler.setFormatter(JsonLines())
        package.addHandler(handler)
        package.error("the log file %s cannot be written (%s)", settings.log_file, error)


def _file_handler(file: Path, most_bytes: int) -> logging.Handler:
    handler = _Patient(file, maxBytes=most_bytes, backupCount=_OLDER, encoding="ascii")
    handler.setFormatter(JsonLines())
    return handler
