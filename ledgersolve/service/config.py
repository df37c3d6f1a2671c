"""Settings of the service: one TOML file, environment variables over it, the command line over both."""

import importlib.util
import logging
import os
import re
import tomllib
from collections.abc import Collection, Iterator
from datetime import time
from difflib import get_close_matches
from pathlib import Path
from typing import Any, Literal
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

from pydantic import Field, ValidationError, field_validator
from pydantic.fields import FieldInfo
from pydantic_settings import (
    BaseSettings,
    EnvSettingsSource,
    PydanticBaseSettingsSource,
    SettingsConfigDict,
    TomlConfigSettingsSource,
)

from ledgersolve.service.machine import processors

logger = logging.getLogger(__name__)
LEAST_MEMORY_MB = 512
"""Address space below which also small workbooks fail: they take up to 350 MB of it."""
_PREFIX = "LEDGERSOLVE_"
_FILE_VARIABLE = f"{_PREFIX}SETTINGS"
_DAYS = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")
_ADDRESS = re.compile(r"(tcp|tls|ucx|ws|wss)://(\[[0-9A-Fa-f:.]+\]|[\w.-]+):\d{1,5}/?")
_LIMITS = {
    "greater_than_equal": ("at least", "ge"), "greater_than": ("more than", "gt"),
    "less_than_equal": ("at most", "le"), "less_than": ("less than", "lt"),
}
_EXPECTED = {
    "int": "a whole number", "float": "a number", "bool": "true or false", "string": "a text in quotes",
    "path": "a path in quotes", "tuple": 'a list such as ["22:00-06:00"]', "finite": "a number",
}


class SettingsError(ValueError):
    """Settings that cannot be used; the text says which and why."""


class _Environment(EnvSettingsSource):
    """The variables; a list may be written as JSON or with commas."""

    def decode_complex_value(self, field_name: str, field: FieldInfo, value: Any) -> Any:
        """What is no JSON goes to the field's own validator as it stands."""
        try:
            return super().decode_complex_value(field_name, field, value)
        except ValueError:
            return value


class ServiceSettings(BaseSettings):
    """Everything an administrator may set. Seconds, unless the name says otherwise.

    A variable ``LEDGERSOLVE_<NAME>`` in the environment wins over the file.
    """

    model_config = SettingsConfigDict(env_prefix=_PREFIX, extra="forbid", frozen=True)

    workers: int = Field(default_factory=processors, ge=1, le=1024)
    """Workbooks solved at a time, and one more that is small; the processors of the machine where not set."""
    small_seconds: float = Field(60.0, ge=0)
    """One more place is kept for workbooks that are expected back within this time."""
    age_seconds: float = Field(900.0, gt=0)
    """A workbook that waited this long goes before smaller ones of the same owner."""

    polling: bool | None = None
    """Whether to look on a timer only; chosen by the file system where not set."""
    scan_seconds: float | None = Field(None, gt=0)
    """Time between two scans; 5 on local disks, 15 on network folders where not set."""
    quiet_seconds: float | None = Field(None, ge=0)
    """How long a file must stay unchanged; 2 on local disks, 10 on network folders where not set."""
    sure_quiet_seconds: float = Field(0.3, ge=0)
    """The same where the system itself confirms that nobody has the file open for writing."""
    long_quiet_seconds: float = Field(120.0, ge=0)
    """How long an incomplete file must stay unchanged before it is returned as damaged."""
    open_elsewhere_seconds: float = Field(900.0, ge=0)
    """How long a spreadsheet program's mark beside a file is honoured."""
    beat_seconds: float = Field(5.0, gt=0)
    """Time between two signs of life of a lease; it is taken over after six without one."""

    longest_job_seconds: float = Field(90000.0, gt=0, le=1e6)
    """Most wall time for a workbook, whatever its own limit says."""
    reading_seconds: float = Field(120.0, gt=0)
    """Most wall time for reading and checking, before the workbook's own limit is known."""
    grace_seconds: float = Field(30.0, gt=0)
    """Time after the limit for writing the results, then the job is killed."""
    memory_mb: int = Field(0, ge=0)
    """Most memory of one job, at least 512; 0 means a fair share of the machine (or of the cgroup's limit)."""
    file_mb: int = Field(100, gt=0)
    """Largest workbook that is taken."""
    nice: int = Field(10, ge=0, le=19)
    """How far jobs stand back behind other programs of the machine."""
    attempts: int = Field(3, ge=1, le=20)
    """Failed attempts after which a workbook is returned as one that stops the program."""
    lost_leases: int = Field(10, ge=1)
    """The same for attempts whose whole service vanished without a word."""

    free_mb: int = Field(500, ge=0)
    """Free space below which nothing new is taken in."""
    keep_days: float = Field(90.0, ge=0)
    """How long originals and former answers are kept, in days of service."""
    keep_at_least: int = Field(200, ge=0)
    """Originals kept whatever their age."""
    quiet_hours: tuple[str, ...] = ()
    """Windows in which nothing new is started, such as ``"Mon-Fri 08:00-12:00"`` or ``"22:00-06:00"``."""
    time_zone: str = ""
    """Name of the time zone of the quiet hours; the machine's own where empty."""
    share_id: str = ""
    """Serve only the share with this mark (the content of .ledgersolve/share-id)."""

    private_folder: Path | None = None
    """Where jobs work; the system's folder for temporary files where not set."""
    log_file: Path | None = None
    """Log file of the service; standard error where not set."""
    log_mb: int = Field(10, gt=0)
    """Size at which the log file is turned over; five older ones are kept."""
    log_level: Literal["DEBUG", "INFO", "WARNING", "ERROR"] = "INFO"

    @field_validator("memory_mb")
    @classmethod
    def _enough(cls, megabytes: int) -> int:
        if 0 < megabytes < LEAST_MEMORY_MB:
            raise ValueError(
                f"{megabytes} MB are too few for any workbook; write at least {LEAST_MEMORY_MB}, "
                "or 0 for a fair share of the machine"
            )
        return megabytes

    @field_validator("quiet_hours", mode="before")
    @classmethod
    def _listed(cls, given: Any) -> Any:
        if isinstance(given, str):
            return tuple(filter(None, (window.strip() for window in given.split(","))))
        return given

    @field_validator("quiet_hours")
    @classmethod
    def _readable(cls, windows: tuple[str, ...]) -> tuple[str, ...]:
        for window in windows:
            parse_window(window)
        return windows

    @field_validator("time_zone")
    @classmethod
    def _known(cls, name: str) -> str:
        try:
            ZoneInfo(name or "UTC")
        except (ZoneInfoNotFoundError, ValueError, OSError) as error:
            raise ValueError(f"no time zone is called {name}; write one like Europe/Paris") from error
        return name


def load_settings(file: Path | None = None, **overrides: Any) -> ServiceSettings:
    """Read the settings; an override of None counts as not given.

    Without ``file`` the one named by ``LEDGERSOLVE_SETTINGS`` is read, if any.

    Raises
    ------
    SettingsError
        The file is not there or no TOML, or a setting is unknown or impossible; the text says which, where
        it stands, and what is expected.
    """
    named = file or (Path(os.environ[_FILE_VARIABLE]) if os.environ.get(_FILE_VARIABLE) else None)
    if named is not None and not named.is_file():
        raise SettingsError(f"The settings file {named} is not there.")
    given = {name: value for name, value in overrides.items() if value is not None}

    class FromFile(ServiceSettings):
        @classmethod
        def settings_customise_sources(
            cls,
            settings_cls: type[BaseSettings],
            init_settings: PydanticBaseSettingsSource,
            env_settings: PydanticBaseSettingsSource,
            dotenv_settings: PydanticBaseSettingsSource,
            file_secret_settings: PydanticBaseSettingsSource,
        ) -> tuple[PydanticBaseSettingsSource, ...]:
            variables = _Environment(settings_cls, env_prefix=getattr(env_settings, "env_prefix", _PREFIX))
            toml = TomlConfigSettingsSource(settings_cls, named)
            return init_settings, variables, toml, dotenv_settings, file_secret_settings

    strays = list(_stray_variables())
    if strays:
        raise SettingsError("\n".join(strays))
    try:
        return FromFile(**given)
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise SettingsError(
            f"The settings file {named} cannot be read: {error}. "
            "Text stands in quotes; a Windows path in single ones: 'C:\\folder'."
        ) from error
    except OSError as error:
        raise SettingsError(f"The settings file {named} cannot be read: {error.strerror or error}.") from error
    except ValidationError as error:
        raise SettingsError("\n".join(_words(fault, named, given) for fault in error.errors())) from error


def check_cluster(address: str) -> None:
    """Make sure that an address can be that of a scheduler, and that the package to reach it is there.

    Raises
    ------
    SettingsError
        Otherwise, with what to do.
    """
    if not _ADDRESS.fullmatch(address):
        raise SettingsError(f"--cluster {address!r} is no scheduler's address; write it like tcp://planner:8786.")
    if importlib.util.find_spec("distributed") is None:
        raise SettingsError("--cluster needs the package distributed: install ledgersolve[cluster].")


def _stray_variables() -> Iterator[str]:
    """Variables that look like misspelled settings, in a sentence each; others are only logged."""
    names = list(ServiceSettings.model_fields)
    known = {_FILE_VARIABLE, *(f"{_PREFIX}{name}".upper() for name in names)}
    for variable in sorted(os.environ):
        if not variable.upper().startswith(_PREFIX) or variable.upper() in known:
            continue
        near = _nearest(variable[len(_PREFIX) :].lower())
        if near:
            yield f"The variable {variable} names no setting; did you mean {_PREFIX}{near.upper()}?"
        else:
            logger.warning("the variable %s names no setting and is passed over", variable)


def _nearest(name: str) -> str:
    """The setting that a misspelled name means; empty where none is near."""
    return next(iter(get_close_matches(name, ServiceSettings.model_fields, 1, 0.75)), "")


def _words(fault: Any, file: Path | None, given: Collection[str]) -> str:
    """A fault of a setting in a sentence: where it stands, what it says, what is expected."""
    name = str(fault["loc"][0])
    if name in given:
        where = f"The option --{name.replace('_', '-')}"
    elif any(variable.upper() == f"{_PREFIX}{name}".upper() for variable in os.environ):
        where = f"The variable {_PREFIX}{name.upper()}"
    else:
        where = f"The setting {name} in {file}"
    if fault["type"] == "extra_forbidden":
        near = _nearest(name)
        return f"There is no setting {name} (in {file})" + (f"; did you mean {near}?" if near else ".")
    if fault["type"] == "value_error":
        return f"{where} cannot be used: {fault['ctx']['error']}."
    return f"{where} cannot be {fault['input']!r}: it must be {_expected(fault)}."


def _expected(fault: Any) -> str:
    kind, context = str(fault["type"]), fault.get("ctx") or {}
    if kind in _LIMITS:
        words, key = _LIMITS[kind]
        return f"{words} {context[key]:g}"
    if kind == "literal_error":
        return f"one of {context['expected']}"
    return _EXPECTED.get(kind.partition("_")[0], str(fault["msg"]))


def parse_window(text: str) -> tuple[frozenset[int], time, time]:
    """Days (0 = Monday), start and end of a quiet window; an end before the start is on the next day."""
    days_text, _, hours = text.strip().rpartition(" ")
    first, _, last = hours.partition("-")
    try:
        return _days(days_text), time.fromisoformat(first), time.fromisoformat(last)
    except ValueError as error:
        raise ValueError(
            f"{text!r} is no window of time; write it like 'Mon-Fri 08:00-18:00', 'Sat 06:00-12:00' or '22:00-06:00'"
        ) from error


def _days(text: str) -> frozenset[int]:
    if not text.strip():
        return frozenset(range(7))
    first, _, last = text.strip().lower().partition("-")
    start = _day(first)
    end = _day(last) if last else start
    return frozenset((start + step) % 7 for step in range((end - start) % 7 + 1))


def _day(text: str) -> int:
    """Number of a day by its English name or the first two letters of it."""
    name = text.strip()
    found = [number for number, day in enumerate(_DAYS) if len(name) > 1 and day[: len(name)] == name[:3]]
    if not found:
        raise ValueError(f"no day is called {name}")
    return found[0]
