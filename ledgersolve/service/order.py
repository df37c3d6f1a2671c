"""What a supervisor is asked to do and what it reports; both travel to other machines of a cluster."""

from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Literal

End = Literal[
    "finished",  # there is a workbook to return
    "crashed",  # a failed attempt: the child died, hung or gave no sound result
    "unsettled",  # the input still changes: nothing was tried
    "stopped",  # asked to end, or another process took over: nothing was tried
    "share lost",  # the served folder could not be reached for long: nothing was tried
]


@dataclass(frozen=True)
class ChildLimits:
    """What one child process may use."""

    longest_seconds: float = 90000.0
    reading_seconds: float = 120.0
    grace_seconds: float = 30.0
    memory_bytes: int = 4 << 30
    file_bytes: int = 1 << 30
    nice: int = 10


@dataclass(frozen=True)
class Order:
    """One job for a supervisor, on this machine or another one that sees the served folder at the same path.

    Parameters
    ----------
    folder, mark
        The served folder and its mark; nothing is delivered to a share with another one.
    job, generation
        The lease under which it is done.
    input
        The claimed workbook.
    handler
        ``module:function`` that answers one workbook; see ``ledgersolve.job.handle``.
    most_bytes
        Largest input that is read.
    quiet_seconds
        Time after which an input that may still be written to is looked at again.
    private_root
        Where the private folder of the job is made; the machine's own temporary folder where empty.
    version
        Program version; former answers of other versions do not count.
    """

    folder: Path
    mark: str
    job: str
    generation: int
    input: Path
    handler: str = "ledgersolve.job:handle"
    limits: ChildLimits = field(default_factory=ChildLimits)
    most_bytes: int = 100 << 20
    quiet_seconds: float = 2.0
    private_root: str = ""
    version: str = ""


@dataclass(frozen=True)
class Report:
    """How a supervised job ended.

    ``finished`` is the returned workbook in the share's ``tmp``, complete and on the disk, with its
    ``sha256``; ``words`` the machine-readable answer, cut to what the status page shows.
    """

    end: End
    reason: str = ""
    finished: Path | None = None
    sha256: str = ""
    outcome: str = ""
    suffix: str = ".xlsx"
    input_sha256: str = ""
    size: int = 0
    seconds: float = 0.0
    words: dict[str, Any] = field(default_factory=dict)
