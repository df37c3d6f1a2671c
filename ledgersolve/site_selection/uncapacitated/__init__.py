"""Cases in which volumes do not matter: Lagrangian bound, local search, shrinking, branching on sites."""

from ledgersolve.site_selection.uncapacitated.engine import solve_uncapacitated

__all__ = ["solve_uncapacitated"]
