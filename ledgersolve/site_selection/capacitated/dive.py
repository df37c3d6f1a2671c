"""Plans from the relaxation: open the site most often open, let prices follow, until all sites are decided."""

import numpy as np

from ledgersolve.mip import Clock
from ledgersolve.site_selection.capacitated.best import Best
from ledgersolve.site_selection.capacitated.choice import Pool, State
from ledgersolve.site_selection.capacitated.lagrangian import Climb, Effort, Relaxation
from ledgersolve.site_selection.case import Flags

ON_THE_WAY = Effort(steps=18, length=0.4, patience=5)

AT_ONCE = 0.1
"""Part of the sites still to open that are opened together."""

HOPEFUL = 0.03
"""A dive ends when it leads to plans dearer than the best one by more than this part."""

RARELY = 0.005
"""A site open to less than this on average is closed."""


def dive(relaxation: Relaxation, best: Best, climb: Climb, clock: Clock) -> Flags | None:
    """Try the set of sites that diving from a climb leads to and give it; None where it leads nowhere."""
    while True:
        free = np.flatnonzero(climb.state == 0)
        if free.size == 0:
            return _tried(best, climb.state)
        average = climb.average[free]
        count = max(1, int(AT_ONCE * np.ceil(average.sum())))
        state = climb.state.copy()
        state[free[average < RARELY]] = -1
        state[free[np.argsort(-average, kind="stable")[:count]]] = 1
        pool = Pool(relaxation.lanes, relaxation.items.reach, state)
        if pool.impossible:
            return None
        if not (pool.state == 0).any():
            return _tried(best, pool.state)
        climb = relaxation.climb(
            relaxation.items.only(pool.state >= 0), climb.prices, pool.state, ON_THE_WAY, clock,
            upper=(1.0 + HOPEFUL) * best.cost,
        )
        if climb.bound >= (1.0 + HOPEFUL) * best.cost or clock.over():
            return None


def _tried(best: Best, state: State) -> Flags:
    opened: Flags = state == 1
    best.try_set(opened)
    return opened
