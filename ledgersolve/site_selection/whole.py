"""The whole strong model through the wrapper: right for every feature, for small and medium cases."""

import numpy as np

from ledgersolve.mip import PROVEN_GAP, Clock
from ledgersolve.site_selection.answer import Answer
from ledgersolve.site_selection.deliveries import deliver, tidy, without_idle
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.model import SiteModel, build
from ledgersolve.site_selection.plan import Plan

SAFETY = 1e-9
"""Relative amount by which a solver's bound is lowered, for the rounding of its last digits."""


def solve_whole(lanes: Lanes, clock: Clock, hint: Plan | None = None) -> Answer:
    """Hand the whole case to the wrapper.

    Where the accepted gap is no wider than what may be called proven, the run goes on to the exact optimum:
    on cases of this size that last step costs little.
    """
    built = build(lanes)
    gap = clock.limits.gap if clock.limits.gap > PROVEN_GAP else 0.0
    start = None if hint is None else built.hint(hint.open, hint.site, hint.customer, hint.share)
    result = built.model.solve(clock.left(), gap=gap, hint=start, cancelled=clock.limits.cancelled)
    if result.status == "infeasible":
        return Answer(None, np.inf, impossible=True, notes=("the wrapper proved that no plan exists",))
    bound = result.bound - SAFETY * abs(result.bound)
    if result.values is None:
        return Answer(hint, bound)
    note = f"whole model: {built.model.variables} variables, {built.model.rows} rows, {result.nodes} nodes"
    return Answer(_plan(built, lanes, result.values, clock), bound, notes=(note,))


def _plan(built: SiteModel, lanes: Lanes, values: np.ndarray, clock: Clock) -> Plan:
    """Keep the sites (and single sources) the solver chose, and deliver exactly."""
    opened = built.read_open(values)
    source = built.read_sources(values, lanes.single)
    plan = deliver(lanes, opened, source, seconds=max(clock.left(), 5.0))
    if plan is None:
        unmet = np.zeros(lanes.n)
        unmet[built.unmet] = values[built.u]
        plan = tidy(lanes, opened, built.site, built.customer, values[built.x], unmet)
    return without_idle(lanes, plan)
