"""What a workbook holds."""

from ledgersolve.contract.read import read_workbook
from ledgersolve.contract.reading import Default, Job, Reading, RunSettings

__all__ = ["Default", "Job", "Reading", "RunSettings", "read_workbook"]
