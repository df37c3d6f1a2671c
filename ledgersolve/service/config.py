"""Settings of the service: one TOML file, environment variables over it, the command line over both."""

import os
import tomllib
from datetime import time
from pathlib import Path
from typing import Any, Literal
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

from pydantic import Field, ValidationError, field_validator
from pydantic_settings import (
    BaseSettings,
    PydanticBaseSettingsSource,
    SettingsConfigDict,
    TomlConfigSettingsSource,
)

_FILE_VARIABLE = "LEDGERSOLVE_SETTINGS"
_DAYS = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")


class SettingsError(ValueError):
    """Settings that cannot be used; the text says which and why."""


class ServiceSettings(BaseSettings):
    """Everything an administrator may set. Seconds, unless the name says otherwise.

    A variable ``LEDGERSOLVE_<NAME>`` in the environment wins over the file.
    """

    model_config = SettingsConfigDict(env_prefix="LEDGERSOLVE_", extra="forbid", frozen=True)

    workers: int = Field(default_factory=lambda: max(1, os.cpu_count() or 1), ge=1, le=1024)
    """Workbooks solved at a time."""
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
    """Most memory of one job; 0 means a fair share of the machine."""
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
            raise ValueError(f"no time zone is called {name}") from error
        return name


def load_settings(file: Path | None = None, **overrides: Any) -> ServiceSettings:
    """Read the settings; an override of None counts as not given.

    Without ``file`` the one named by ``LEDGERSOLVE_SETTINGS`` is read, if any.

    Raises
    ------
    SettingsError
        The file is not there or no TOML, or a setting is unknown or impossible; the text says which.
    """
    named = file or (Path(os.environ[_FILE_VARIABLE]) if os.environ.get(_FILE_VARIABLE) else None)
    if named is not None and not named.is_file():
        raise SettingsError(f"The settings file {named} is not there.")

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
            toml = TomlConfigSettingsSource(settings_cls, named)
            return init_settings, env_settings, dotenv_settings, toml, file_secret_settings

    try:
        return FromFile(**{name: value for name, value in overrides.items() if value is not None})
    except tomllib.TOMLDecodeError as error:
        raise SettingsError(f"The settings file {named} cannot be read: {error}.") from error
    except ValidationError as error:
        raise SettingsError("\n".join(_words(fault) for fault in error.errors())) from error


def _words(fault: Any) -> str:
    """A fault of a setting in a sentence."""
    name = ".".join(str(part) for part in fault["loc"])
    if fault["type"] == "extra_forbidden":
        return f"There is no setting {name}."
    return f"The setting {name} cannot be {fault['input']!r}: {fault['msg'].removeprefix('Value error, ')}."


def parse_window(text: str) -> tuple[frozenset[int], time, time]:
    """Days (0 = Monday), start and end of a quiet window; an end before the start is on the next day."""
    days_text, _, hours = text.strip().rpartition(" ")
    first, dash, last = hours.partition("-")
    if not dash:
        raise ValueError(f"{text!r} is no window; write it like 'Mon-Fri 08:00-18:00' or '22:00-06:00'")
    try:
        return _days(days_text), time.fromisoformat(first), time.fromisoformat(last)
    except ValueError as error:
        raise ValueError(f"{text!r} is no window ({error}); write it like 'Mon-Fri 08:00-18:00'") from error


def _days(text: str) -> frozenset[int]:
    if not text.strip():
        return frozenset(range(7))
    first, _, last = text.strip().lower().partition("-")
    start = _DAYS.index(first[:3])
    end = _DAYS.index(last[:3]) if last else start
    return frozenset((start + step) % 7 for step in range((end - start) % 7 + 1))
