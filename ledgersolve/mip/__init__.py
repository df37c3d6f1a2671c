"""The thin layer on OR-Tools' MIP wrapper: limits, progress, verdicts, models from arrays."""

from ledgersolve.mip.model import LinearModel, LinearResult
from ledgersolve.mip.run import Clock, Limits, Progress, Solved, Stage, judge, relative_gap
from ledgersolve.mip.verdict import PROVEN_GAP, Verdict

__all__ = [
    "PROVEN_GAP",
    "Clock",
    "Limits",
    "LinearModel",
    "LinearResult",
    "Progress",
    "Solved",
    "Stage",
    "Verdict",
    "judge",
    "relative_gap",
]
