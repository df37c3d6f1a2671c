"""LedgerSolve: planning workbooks in, decisions out."""

__version__ = "0.1.0"
