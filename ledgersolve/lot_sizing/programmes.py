"""The best schedule of every item under given prices, each item by the programme that carries it.

``ItemProgrammes`` puts the programmes together: the Wagner-Whitin recursion for what it carries; for the
rest first that recursion as a relaxation (a schedule that keeps the limits anyway is the best one), then, for
the items whose schedule breaks a limit, the programme over breakpoints of the cumulative quantity (``levels``),
or over whole steps of it (``grid``) where rules meet; and for what none carries a lower bound, named in
``relaxed``: the programme over breakpoints without the most lot for items with a least lot too, else the recursion.
"""

from dataclasses import replace

import numpy as np

from ledgersolve.lot_sizing import grid, levels, wagner_whitin
from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.grid import GridProgramme
from ledgersolve.lot_sizing.levels import LevelProgramme
from ledgersolve.lot_sizing.wagner_whitin import Schedules, WagnerWhitin, needs


class ItemProgrammes:
    """The programmes of all items of a case, ready to be run again and again under other prices.

    Attributes
    ----------
    exact
        Shape (N,): the cost of the item's schedule is the least of all its schedules; elsewhere it is a lower
        bound and the schedule may break a limit.
    dear
        Numbers of the items that need more than the recursion.
    """

    def __init__(self, case: Case) -> None:
        self.case = case
        everything = np.arange(case.n)
        carried, by_level = wagner_whitin.carries(case), levels.carries(case)
        by_step = grid.carries(case) & ~carried & ~by_level
        self.exact: Flags = np.asarray(carried | by_level | by_step)
        self.whitin = WagnerWhitin(case, everything)
        both = (case.least_lot > 0) & np.isfinite(case.most_lot) & ~self.exact
        freed = replace(case, most_lot=np.where(both, np.inf, case.most_lot))
        self.level = LevelProgramme(freed, np.flatnonzero(levels.carries(freed) & ~carried & ~by_step))
        self.grid = GridProgramme(case, np.flatnonzero(by_step))
        self.dear: Ints = np.concatenate([self.level.items, self.grid.items])
        self.understated = self._recursion_relaxes() & ~carried

    def schedule(self, setup_cost: Floats, unit_cost: Floats, *, quick: bool = False) -> Schedules:
        """Give the best schedule of every item; ``setup_cost`` and ``unit_cost`` have shape (N, T).

        ``quick`` leaves the dearer programmes out: the costs of their items are then lower bounds, as are those
        of items beyond all; ``Schedules.sound`` tells which schedules are nevertheless the best.
        """
        first = self.whitin.schedule(setup_cost, unit_cost)
        sound = keeps_limits(self.case, first) & ~self.understated
        if quick:
            return replace(first, sound=sound)
        for programme in (self.level, self.grid):
            hard = programme.items
            wanted = ~sound[hard]
            if wanted.any():
                second = programme.schedule(setup_cost[hard], unit_cost[hard], wanted)
                which = hard[wanted]
                first.made[which], first.lost[which] = second.made[wanted], second.lost[wanted]
                first.cost[which] = second.cost[wanted]
        sound[self.dear] |= self.exact[self.dear] | keeps_limits(self.case, first)[self.dear]
        return replace(first, sound=sound)

    def best(self) -> Schedules:
        """Give the best schedule of every item under the case's own costs."""
        return self.schedule(self.case.setup_cost, self.case.unit_cost)

    def relaxed(self) -> tuple[str, ...]:
        """Features that the figures of items beyond all programmes leave out, in the workbook's words."""
        case, out = self.case, ~self.exact
        named = (
            ("least lot", case.least_lot > 0), ("most lot", np.isfinite(case.most_lot)),
            ("lot multiple", case.lot_multiple > 0), ("most stock", np.isfinite(case.most_stock)),
            ("lost sales beside other limits", ~np.isnan(case.lost_cost)),
        )
        return tuple(name for name, has in named if (has & out).any())

    def _recursion_relaxes(self) -> Flags:
        """Items whose recursion may charge less than their schedule costs, even if no limit is broken."""
        case, need = self.case, needs(self.case)
        falls = (np.maximum(need.raw, 0.0) != need.stair).any(axis=1)
        short = need.raw[:, 0] > case.demand[:, 0]
        unordered = (np.diff(need.stair, axis=1, prepend=0.0) > case.demand * (1 + 1e-12)).any(axis=1)
        late, lost = ~np.isnan(case.backlog_cost), ~np.isnan(case.lost_cost)
        return np.asarray(late & (falls | short) | lost & unordered)


def keeps_limits(case: Case, schedules: Schedules) -> Flags:
    """Whether each item's schedule keeps its lot limits and its most stock, shape (N,)."""
    made = schedules.made
    tiny = 1e-9 * (1.0 + made.max(axis=1, initial=0.0))[:, None]
    least = (made >= case.least_lot[:, None] - tiny) | (made <= 0)
    most = made <= case.most_lot[:, None] + tiny
    multiple = np.where(case.lot_multiple > 0, case.lot_multiple, 1.0)[:, None]
    whole = (np.abs(made - multiple * np.round(made / multiple)) <= tiny) | (case.lot_multiple == 0)[:, None]
    flows = case.receipts + made + schedules.lost - case.demand
    net = case.opening_stock[:, None] + np.cumsum(flows, axis=1)
    room = np.maximum(net, case.least_stock()) <= case.most_stock[:, None] + tiny
    return np.asarray((least & most & whole & room).all(axis=1))
