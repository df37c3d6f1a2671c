"""What a report is made from: the reading, the case, what solving and auditing gave, and the facts of the run.

A report asks of the reading only what stands in ``Workbook`` and does not know how it was read.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field
from datetime import datetime
from typing import Generic, Protocol, TypeVar

from ledgersolve.findings import Answered, Audit, Conflict
from ledgersolve.lot_sizing.case import Case as LotCase
from ledgersolve.lot_sizing.plan import Plan as LotPlan
from ledgersolve.mip import Solved
from ledgersolve.site_selection.case import Case as SiteCase
from ledgersolve.site_selection.case import Variant
from ledgersolve.site_selection.plan import Plan as SitePlan
from ledgersolve.workbook.origins import Origins
from ledgersolve.workbook.problems import Problem

CaseT = TypeVar("CaseT", SiteCase, LotCase)
PlanT = TypeVar("PlanT", SitePlan, LotPlan)


class TakenDefault(Protocol):
    """A default that was taken: in a settings row or in ``cells`` empty cells of a column."""

    @property
    def sheet(self) -> str:
        """Sheet."""
    @property
    def title(self) -> str:
        """Column or setting."""
    @property
    def value(self) -> str:
        """The default, in words."""
    @property
    def cells(self) -> int:
        """Number of empty cells."""


class Steering(Protocol):
    """Settings of the run, not of the case."""

    @property
    def time_limit(self) -> float:
        """Seconds."""
    @property
    def accepted_gap(self) -> float:
        """Relative gap as a fraction."""


class Workbook(Protocol):
    """What the report needs of a read workbook."""

    @property
    def title(self) -> str:
        """Title of the workbook."""
    @property
    def currency(self) -> str:
        """ISO 4217 code."""
    @property
    def problems(self) -> tuple[Problem, ...]:
        """Errors and notices."""
    @property
    def run(self) -> Steering:
        """Settings of the run."""
    @property
    def origins(self) -> Origins:
        """Cells behind the figures."""
    @property
    def settings(self) -> tuple[tuple[str, str], ...]:
        """Every setting with the value used."""
    @property
    def defaults(self) -> Sequence[TakenDefault]:
        """Defaults taken."""
    @property
    def road_cost(self) -> float | None:
        """Cost per unit and distance, where lanes were costed from distances."""
    @property
    def road_factor(self) -> float:
        """Road distance over straight line."""


@dataclass(frozen=True)
class RunFacts:
    """Facts of one run, without host names or paths.

    ``versions`` are pairs of program and version, ours first; ``seconds`` pairs of step and duration;
    ``more`` further rows of the run record (label, words).
    """

    file_name: str
    sha256: str
    when: datetime
    versions: tuple[tuple[str, str], ...] = ()
    seconds: tuple[tuple[str, float], ...] = ()
    more: tuple[tuple[str, str], ...] = ()


@dataclass(frozen=True)
class VariantResult:
    """A variant solved beside the workbook's own case; ``audit`` is None where there is no plan."""

    variant: Variant
    solved: Solved[SitePlan]
    audit: Audit | None


@dataclass(frozen=True)
class Today(Generic[PlanT]):
    """Today's network or plan, costed; ``audit`` is None where it cannot be run at all, and ``why`` may say why."""

    solved: Solved[PlanT]
    audit: Audit | None
    why: str = ""


@dataclass(frozen=True)
class SiteReport:
    """A solved site-selection workbook; ``solved.plan`` and ``audit`` are there."""

    workbook: Workbook
    case: SiteCase
    solved: Solved[SitePlan]
    audit: Audit
    run: RunFacts
    today: Today[SitePlan] | None = None
    variants: tuple[VariantResult, ...] = ()
    answers: tuple[Answered, ...] = ()

    @property
    def plan(self) -> SitePlan:
        """The plan."""
        return _there(self.solved.plan)


@dataclass(frozen=True)
class LotReport:
    """A solved lot-sizing workbook; ``solved.plan`` and ``audit`` are there."""

    workbook: Workbook
    case: LotCase
    solved: Solved[LotPlan]
    audit: Audit
    run: RunFacts
    today: Today[LotPlan] | None = None
    answers: tuple[Answered, ...] = ()

    @property
    def plan(self) -> LotPlan:
        """The plan."""
        return _there(self.solved.plan)


@dataclass(frozen=True)
class NoPlan:
    """A workbook that was read well and has no plan to show.

    ``what`` is ``no plan exists``, ``none found`` or ``failed``; ``words`` add what is known (for
    ``failed``: what went wrong, in the analyst's words). ``bound`` is proven, or None. ``closest`` are tables
    of the plan that comes closest, of four columns at most.
    """

    workbook: Workbook
    what: str
    run: RunFacts
    words: str = ""
    conflicts: tuple[Conflict, ...] = ()
    bound: float | None = None
    stages: Sequence[tuple[str, float]] = field(default=())
    closest: tuple[Answered, ...] = ()


def _there(plan: PlanT | None) -> PlanT:
    if plan is None:
        raise ValueError("a report on a plan needs one")
    return plan
