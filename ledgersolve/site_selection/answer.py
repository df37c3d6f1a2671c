"""What an engine hands back before the audit has costed it."""

from dataclasses import dataclass

from ledgersolve.site_selection.case import Floats
from ledgersolve.site_selection.plan import Plan


@dataclass(frozen=True)
class Answer:
    """The end of an engine's run.

    ``bound`` is a proven lower bound on the cost of every plan (-inf where none is known), ``impossible``
    says that no plan exists, proven. ``notes`` are sentences for the run record. ``prices`` (one a customer)
    are those of the best bound that ``price_bound`` can check.
    """

    plan: Plan | None
    bound: float
    impossible: bool = False
    notes: tuple[str, ...] = ()
    prices: Floats | None = None
