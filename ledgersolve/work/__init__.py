"""From a case to all that its sheets are made of: solved, audited, compared with today, varied, questioned.

One module a job, and the table ``TRADES`` that names them: a third job is one more entry. Every plan is
recomputed by its audit before anyone sees it.
"""

import time
from importlib import import_module

from ledgersolve.contract.reading import Job, Reading
from ledgersolve.mip import Limits
from ledgersolve.work.shared import AuditError, Budget, Worked, confirmed

__all__ = ["AuditError", "Budget", "Worked", "confirmed", "work"]

TRADES = {
    Job.SITE_SELECTION: "ledgersolve.work.sites",
    Job.LOT_SIZING: "ledgersolve.work.lots",
}
"""Where the work of a job is described; only the one that is asked for is loaded."""


def work(reading: Reading, limits: Limits) -> Worked:
    """Solve what a workbook asks for, within the limits."""
    if reading.job is None or reading.case is None:
        raise ValueError("only a reading without errors can be solved")
    worked: Worked = import_module(TRADES[reading.job]).work(reading, reading.case, Budget(limits, time.monotonic()))
    return worked
