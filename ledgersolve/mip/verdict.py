"""The five verdicts a run can end with."""

from enum import StrEnum

PROVEN_GAP = 1e-4
"""Largest relative gap (0.01 %) at which a plan may be called proven best."""


class Verdict(StrEnum):
    """How a run ended, in the words every result uses."""

    PROVEN_BEST = "proven best"
    WITHIN_GAP = "within gap"
    BEST_FOUND = "best found"
    NO_PLAN_EXISTS = "no plan exists"
    NONE_FOUND = "none found"

    @property
    def has_plan(self) -> bool:
        """Whether a plan comes with this verdict."""
        return self in (Verdict.PROVEN_BEST, Verdict.WITHIN_GAP, Verdict.BEST_FOUND)
