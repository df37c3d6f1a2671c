"""Engine for cases in which volumes matter: capacities, least volumes, lane limits, single sourcing, a share rule."""

from ledgersolve.site_selection.capacitated.engine import solve_capacitated

__all__ = ["solve_capacitated"]
