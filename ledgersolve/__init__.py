"""LedgerSolve: planning workbooks in, decisions out.

``solve_workbook`` and ``check_workbook`` are the whole face for programs; they answer with the same words
as ``ledgersolve solve --json``. Nothing heavy is loaded before one of them is asked for.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from ledgersolve.answer import Answer, Outcome, VariantAnswer
    from ledgersolve.job import check_workbook, solve_workbook
    from ledgersolve.mip import Verdict
    from ledgersolve.workbook.problems import Problem

__version__ = "0.1.0"

__all__ = [
    "Answer",
    "Outcome",
    "Problem",
    "VariantAnswer",
    "Verdict",
    "__version__",
    "check_workbook",
    "solve_workbook",
]

_HOMES = {
    "Answer": "ledgersolve.answer",
    "Outcome": "ledgersolve.answer",
    "Problem": "ledgersolve.workbook.problems",
    "VariantAnswer": "ledgersolve.answer",
    "Verdict": "ledgersolve.mip",
    "check_workbook": "ledgersolve.job",
    "solve_workbook": "ledgersolve.job",
}


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'ledgersolve' has no attribute {name!r}")
