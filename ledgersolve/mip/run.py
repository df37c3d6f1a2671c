"""What every engine shares: limits, the clock, the progress stream and the honest end of a run."""

import logging
import math
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Generic, TypeVar

import numpy as np
from numpy.typing import NDArray

from ledgersolve.mip.verdict import PROVEN_GAP, Verdict

logger = logging.getLogger(__name__)
PlanT = TypeVar("PlanT")


@dataclass(frozen=True)
class Progress:
    """One step of a running solve; ``best`` and ``bound`` are None until known."""

    stage: str
    best: float | None
    bound: float | None
    seconds: float


@dataclass(frozen=True)
class Stage:
    """A finished part of a run, for the run record."""

    name: str
    seconds: float
    best: float | None = None
    bound: float | None = None
    note: str = ""


def _never() -> bool:
    return False


def _quiet(_: Progress) -> None:
    return None


@dataclass(frozen=True)
class Limits:
    """How long a run may take and when it may stop early.

    Parameters
    ----------
    seconds
        Wall time for the whole run.
    gap
        Accepted relative gap as a fraction: stop once (cost - bound) / cost is at most this.
    cancelled
        Asked often; True ends the run with the best plan so far.
    progress
        Receives the progress stream.
    """

    seconds: float = 300.0
    gap: float = PROVEN_GAP
    cancelled: Callable[[], bool] = _never
    progress: Callable[[Progress], None] = _quiet

    def __post_init__(self) -> None:
        if not 0 < self.seconds <= 1e6:
            raise ValueError(f"seconds must be above 0, not {self.seconds!r}")
        if not 0 <= self.gap <= 1:
            raise ValueError(f"gap must be a fraction from 0 to 1, not {self.gap!r}")

    def start(self) -> "Clock":
        """Start the clock of a run under these limits."""
        return Clock(self)


@dataclass
class Clock:
    """The running clock of one solve: time left, cancelling, progress and the stages so far.

    ``best`` and ``bound`` hold the best known figures; they only ever improve.
    """

    limits: Limits
    started: float = field(default_factory=time.monotonic)
    stages: list[Stage] = field(default_factory=list)
    best: float = math.inf
    bound: float = -math.inf
    _stage_started: float = field(default_factory=time.monotonic)

    def elapsed(self) -> float:
        """Seconds since the start."""
        return time.monotonic() - self.started

    def left(self) -> float:
        """Seconds left, never below 0; 0 once cancelled."""
        if self.limits.cancelled():
            return 0.0
        return max(0.0, self.limits.seconds - self.elapsed())

    def over(self) -> bool:
        """Whether the run must end now."""
        return self.left() <= 0.0

    def close_enough(self) -> bool:
        """Whether best and bound are within the accepted gap (or proven)."""
        return relative_gap(self.best, self.bound) <= max(self.limits.gap, 1e-9)

    def note(self, stage: str, best: float | None = None, bound: float | None = None) -> None:
        """Take in new figures and pass them to the progress stream."""
        if best is not None and best < self.best:
            self.best = best
        if bound is not None and bound > self.bound:
            self.bound = bound
        self.limits.progress(Progress(stage, _known(self.best), _known(self.bound), self.elapsed()))

    def end_stage(self, name: str, note: str = "") -> None:
        """Close the stage that ran since the last one ended."""
        now = time.monotonic()
        stage = Stage(name, now - self._stage_started, _known(self.best), _known(self.bound), note)
        self._stage_started = now
        self.stages.append(stage)
        logger.debug("stage %s", stage)
        self.note(name)


@dataclass(frozen=True)
class Solved(Generic[PlanT]):
    """The end of a run: the verdict, the plan if there is one, cost and bound, and how it went.

    ``cost`` is None exactly when ``plan`` is None. ``bound`` is a proven lower bound on the cost of
    every plan, or None where none is known. ``notes`` are sentences for the run record (which method
    treated which feature, which path was taken). ``prices`` are what the job's ``price_bound`` turns into
    a checkable bound: one a customer (site selection), one a resource and period (lot sizing).
    """

    verdict: Verdict
    plan: PlanT | None
    cost: float | None
    bound: float | None
    stages: tuple[Stage, ...] = ()
    notes: tuple[str, ...] = ()
    prices: NDArray[np.float64] | None = None

    def __post_init__(self) -> None:
        if (self.plan is None) != (self.cost is None) or self.verdict.has_plan != (self.plan is not None):
            raise ValueError(f"verdict {self.verdict!r} does not go with plan and cost")

    @property
    def gap(self) -> float | None:
        """Relative gap as a fraction, or None where cost or bound is not known."""
        if self.cost is None or self.bound is None:
            return None
        return relative_gap(self.cost, self.bound)


def relative_gap(cost: float, bound: float) -> float:
    """(cost - bound) / cost; 0 where the bound reaches the cost, inf where either is unknown."""
    if not (math.isfinite(cost) and math.isfinite(bound)):
        return math.inf
    if bound >= cost:
        return 0.0
    return (cost - bound) / abs(cost) if cost != 0 else math.inf


def judge(cost: float, bound: float, accepted_gap: float) -> Verdict:
    """Verdict for a plan of this cost under this proven bound; never better than the figures."""
    gap = relative_gap(cost, bound)
    if gap <= PROVEN_GAP:
        return Verdict.PROVEN_BEST
    return Verdict.WITHIN_GAP if gap <= accepted_gap else Verdict.BEST_FOUND


def _known(value: float) -> float | None:
    return value if math.isfinite(value) else None
