"""Sets of sites next to the plan's, costed quickly where re-solving for every site takes too long."""

from collections.abc import Iterator, Sequence

import numpy as np

from ledgersolve.site_selection.asker import Asker, only
from ledgersolve.site_selection.case import Case, Flags

IN_PLACE_OPEN, IN_PLACE_CLOSED = 3, 1
"""Sites tried in place of an open one, and open ones left out for a closed one, those most like it."""


def cost_neighbours(asker: Asker, sites: Sequence[int]) -> None:
    """Cost sets in which one of the sites is flipped; what they cost, no exact answer exceeds."""
    if not _short_of_time(asker, len(sites)):
        return
    chosen = {one.tobytes(): one for one in _sets(asker, sites)}
    asker.asks = len(chosen) + len(sites)
    for key, one in chosen.items():
        asker.ask_within(only(asker.case, one), ("set", key))


def _short_of_time(asker: Asker, asks: int) -> bool:
    """Whether re-solving takes longer than there is time, going by the plan's own solve; it does with volumes."""
    case = asker.case
    volumes = np.isfinite(case.capacity).any() or (case.least_volume > 0).any() or case.lane_most is not None
    slow = bool(volumes) or bool(case.single_source.any()) or case.share_within is not None
    return slow and (asker.whole <= 0 or asks * asker.whole > asker.clock.left())


def _sets(asker: Asker, sites: Sequence[int]) -> Iterator[Flags]:
    """Flip each site: alone, and in place of those of the other kind whose lanes cost most nearly the same."""
    case, base = asker.case, asker.base.open
    for j in sites:
        others = np.flatnonzero((base != base[j]) & (case.rule == 0))
        with np.errstate(invalid="ignore"):
            apart = np.abs(case.lane_cost[others] - case.lane_cost[j])
        apart = np.where(np.isfinite(apart), apart, 0.0).sum(axis=1)
        most = IN_PLACE_OPEN if base[j] else IN_PLACE_CLOSED
        for other in (None, *others[np.argsort(apart, kind="stable")][:most].tolist()):
            chosen = base.copy()
            chosen[[j] if other is None else [j, other]] ^= True
            if _allowed(case, chosen):
                yield chosen


def _allowed(case: Case, chosen: Flags) -> bool:
    """Whether counts and groups allow a set."""
    groups = case.group[chosen & (case.group >= 0)]
    most = case.m if case.most_sites is None else case.most_sites
    return (case.fewest_sites or 0) <= int(chosen.sum()) <= most and np.unique(groups).size == groups.size
