"""What reading a workbook gives: a case or problems, and what the run record and the ledger need."""

from dataclasses import dataclass, field
from enum import StrEnum

from ledgersolve.lot_sizing.case import Case as LotCase
from ledgersolve.site_selection.case import Case as SiteCase
from ledgersolve.workbook.origins import Origins
from ledgersolve.workbook.problems import Problem, any_errors


class Job(StrEnum):
    """The jobs a workbook can ask for."""

    SITE_SELECTION = "site selection"
    LOT_SIZING = "lot sizing"


@dataclass(frozen=True)
class Default:
    """A default that was taken: in a settings row or in empty cells of a column."""

    sheet: str
    title: str
    value: str
    cells: int


@dataclass(frozen=True)
class RunSettings:
    """Settings that steer the run, not the model. ``accepted_gap`` is a fraction."""

    time_limit: float = 300.0
    accepted_gap: float = 1e-4
    questions: bool = True
    questions_share: float = 0.2


@dataclass(frozen=True)
class Reading:
    """The outcome of reading one workbook.

    ``case`` is None exactly when ``problems`` holds an error. ``settings`` lists every setting with the
    value used, as text, in contract order; ``defaults`` those (and columns) that were not given.
    ``job`` and ``title`` are known as far as the Settings sheet could be read.
    ``road_cost`` is the cost per unit and distance with its road factor, where lanes were costed from
    distances or coordinates: the ledger shows the formula.
    """

    job: Job | None
    title: str
    currency: str
    case: SiteCase | LotCase | None
    problems: tuple[Problem, ...]
    run: RunSettings = RunSettings()
    origins: Origins = field(default_factory=Origins)
    settings: tuple[tuple[str, str], ...] = ()
    defaults: tuple[Default, ...] = ()
    road_cost: float | None = None
    road_factor: float = 1.0

    def __post_init__(self) -> None:
        if (self.case is None) != any_errors(list(self.problems)):
            raise ValueError("a reading has a case exactly when no problem is an error")
