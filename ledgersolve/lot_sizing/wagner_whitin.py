"""Exact dynamic programmes for items taken one at a time, all items at once in numpy.

Wagner & Whitin (1958): an item without capacity of its own is best made only when nothing of it is in
stock, so that a plan is a chain of intervals, each served by one lot. The forward recursion below keeps
unit cost, holding cost and setup cost of every period apart, hence it stays exact where costs invite
speculation (making early because it is cheap now); with backlog a lot serves demand on both sides of
its period (Zangwill 1966), with lost sales each demand of an interval is lost where that is cheaper than
serving it (Aksen, Altinkemer & Chand 2003).

Opening stock, safety stock, closing stock and receipts enter by netting: the least that must have been
made by each period's end is a rising stair of cumulative needs, and the stock the stair itself leaves
is paid whatever is made.

What leaves this path is told by ``carries``: limits that bind (least lot, most lot, lot multiple, most
stock), and, for an item that may be late, receipts larger than need or an opening stock below the safety
stock (only ordered demand can be late). These go to the programme over cumulative quantities (``levels``).
Beyond both are lost sales together with any of those, and a least lot with a most lot: for these the
recursion gives a lower bound, and the wrapper the plan.

Time grows with T squared an item, in numpy's inner loop: 1000 items x 104 periods and 1 item x 5000
periods stay far below a second, so that the O(T log T) forms (Federgruen & Tzur 1991; Wagelmans, van
Hoesel & Kolen 1992), which need rising costs or a sequential queue, would bring nothing.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints

Places = NDArray[np.int32]


@dataclass(frozen=True)
class Schedules:
    """One schedule an item, the best under the costs it was asked for.

    ``made`` and ``lost`` have shape (n, T) in units; ``cost`` shape (n,) in money, inf for an item that no
    schedule can serve (its rows of ``made`` and ``lost`` are then 0). ``sound``, shape (n,), tells the schedules
    that keep every limit of their item and cost what ``cost`` says; None where nobody looked.
    """

    made: Floats
    lost: Floats
    cost: Floats
    sound: Flags | None = None


@dataclass(frozen=True)
class Needs:
    """What the horizon asks of each item, after netting; shape (N, T), units.

    ``raw`` is what must have been made (or lost) by each period's end for stock to be at its least there
    with nothing late; it falls where receipts exceed demand. ``stair`` is its rising hull, never below 0.
    """

    raw: Floats
    stair: Floats


def needs(case: Case) -> Needs:
    """Net demand, safety and closing stock against opening stock and receipts, cumulated."""
    raw = np.cumsum(case.demand - case.receipts, axis=1) + case.least_stock() - case.opening_stock[:, None]
    tiny = 1e-9 * (1.0 + np.cumsum(case.demand + case.receipts, axis=1) + case.opening_stock[:, None])
    raw = np.where(np.abs(raw) <= tiny, 0.0, raw)
    return Needs(raw, np.maximum.accumulate(np.maximum(raw, 0.0), axis=1))


def carries(case: Case) -> Flags:
    """Whether the recursion of this module is exact for each item taken alone, shape (N,)."""
    need = needs(case)
    steps = np.diff(need.stair, axis=1, prepend=0.0)
    smallest = np.where(steps > 0, steps, np.inf).min(axis=1, initial=np.inf)
    may_lose, may_be_late = ~np.isnan(case.lost_cost), ~np.isnan(case.backlog_cost)
    total = need.stair[:, -1]
    fullest = (case.least_stock() + total[:, None] - need.raw).max(axis=1)
    steady = (np.maximum(need.raw, 0.0) == need.stair).all(axis=1)
    ordered = steps <= case.demand * (1 + 1e-12)
    return np.asarray(
        (case.lot_multiple == 0)
        & (np.where(may_lose, case.least_lot == 0, case.least_lot <= smallest))
        & (case.most_lot >= total)
        & (case.most_stock >= fullest)
        & ((steady & ordered[:, 0]) | ~may_be_late)
        & (ordered.all(axis=1) | ~may_lose)
    )


class WagnerWhitin:
    """The recursion for a set of items of a case, ready to be run again and again under other prices.

    Parameters
    ----------
    case
        The case; least lot, lot multiple, most lot and most stock of the items are not looked at.
    items
        Numbers of the items.
    """

    def __init__(self, case: Case, items: Ints) -> None:
        need = needs(case)
        holding = case.holding_cost[items]
        raw, stair = need.raw[items], need.stair[items]
        self.items = items
        self.late_cost = case.backlog_cost[items]
        self.lost_cost = case.lost_cost[items]
        raw, stair, holding, paid = _steady(raw, stair, holding, ~np.isnan(self.late_cost))
        self.fixed = (paid * (case.least_stock()[items] + stair - raw)).sum(axis=1)
        self.stair = np.ascontiguousarray(stair.T)
        self.before = np.vstack([np.zeros(items.size), self.stair[:-1]])
        self.steps = self.stair - self.before
        self.held = np.ascontiguousarray(holding.T)
        self.to_end = np.cumsum(self.held[::-1], axis=0)[::-1]
        self.held_stair = (self.held * self.stair).sum(axis=0)
        self.allowed = np.ascontiguousarray(case.setup_allowed[items].T)
        self.plain = np.isnan(self.late_cost) & np.isnan(self.lost_cost)

    def schedule(self, setup_cost: Floats, unit_cost: Floats) -> Schedules:
        """Give the best schedule of every item; ``setup_cost`` and ``unit_cost`` have shape (n, T)."""
        setups = np.where(self.allowed, setup_cost.T, np.inf)
        units = np.ascontiguousarray(unit_cost.T)
        made, lost = np.zeros_like(units), np.zeros_like(units)
        cost = np.zeros(self.items.size)
        for part, run in ((self.plain, self._plain), (~self.plain, self._with_service)):
            chosen = np.flatnonzero(part)
            if chosen.size:
                everything = chosen.size == self.items.size
                which: Ints | slice = slice(None) if everything else chosen
                made[:, which], lost[:, which], cost[which] = run(which, setups[:, which], units[:, which])
        return Schedules(made.T, lost.T, cost + self.fixed)

    def _plain(self, which: Ints | slice, setups: Floats, units: Floats) -> tuple[Floats, Floats, Floats]:
        """Every need met on time: each lot is a line in the cumulative need it reaches.

        Holding is charged to the end of the horizon with the lot and given back with the stair.
        """
        stair, before, steps = self.stair[:, which], self.before[:, which], self.steps[:, which]
        slope = units + self.to_end[:, which]
        periods, n = stair.shape
        best = np.full((periods, n), np.inf)
        lot = np.full((periods, n), -1, dtype=np.int32)
        reached = np.zeros(n)
        for t in range(periods):
            line = slope[t] * stair[t:]
            line += reached + setups[t] - slope[t] * before[t]
            better = line < best[t:]
            np.copyto(best[t:], line, where=better)
            np.copyto(lot[t:], np.int32(t), where=better)
            idle = (steps[t] == 0) & (reached <= best[t])
            best[t] = np.where(idle, reached, best[t])
            lot[t] = np.where(idle, -1, lot[t])
            reached = best[t]
        made = _lots(lot, stair, before, np.isfinite(reached))
        return made, np.zeros_like(made), reached - self.held_stair[which]

    def _with_service(
        self, which: Ints | slice, setups: Floats, units: Floats
    ) -> tuple[Floats, Floats, Floats]:
        """Needs may be met late, or lost: each need of an interval takes the cheaper of lot and loss."""
        steps = self.steps[:, which]
        periods, n = steps.shape
        loss = np.where(np.isnan(self.lost_cost[which]), np.inf, self.lost_cost[which])
        late = np.where(np.isnan(self.late_cost[which]), np.inf, self.late_cost[which])
        carried = np.vstack([np.zeros(n), np.cumsum(self.held[:, which], axis=0)])
        reach = np.full((periods + 1, n), np.inf)
        reach[0] = 0.0
        lot = np.full((periods, n), -1, dtype=np.int32)
        start = np.zeros((periods, n), dtype=np.int32)
        for t in range(periods):
            opened, start[t] = _interval_start(reach, steps, units[t], late, loss, t)
            served = np.minimum(units[t] + carried[t:-1] - carried[t], loss)
            line = opened + setups[t] + np.cumsum(_times(steps[t:], served), axis=0)
            better = line < reach[t + 1 :]
            np.copyto(reach[t + 1 :], line, where=better)
            np.copyto(lot[t:], np.int32(t), where=better)
            skipped = reach[t] + _times(steps[t], loss)
            idle = skipped <= reach[t + 1]
            reach[t + 1] = np.where(idle, skipped, reach[t + 1])
            lot[t] = np.where(idle, -1, lot[t])
        source = _sources(lot, start)
        made, lost = self._served(which, source, units, carried, np.isfinite(reach[-1]))
        return made, lost, reach[-1]

    def _served(
        self, which: Ints | slice, source: Ints, units: Floats, carried: Floats, possible: Flags
    ) -> tuple[Floats, Floats]:
        """Quantities of the lots; a need is lost without a lot to look to, or if that is dearer."""
        steps = np.where(possible, self.steps[:, which], 0.0)
        periods, n = steps.shape
        loss = np.where(np.isnan(self.lost_cost[which]), np.inf, self.lost_cost[which])
        late = np.where(np.isnan(self.late_cost[which]), np.inf, self.late_cost[which])
        now, item = np.arange(periods)[:, None], np.arange(n)
        lot = np.maximum(source, 0)
        wait = np.where(lot > now, late * np.maximum(lot - now, 1), carried[now, item] - carried[lot, item])
        serve = (source >= 0) & (units[lot, item] + wait <= loss)
        made = np.zeros((periods, n))
        np.add.at(made, (lot[serve], np.broadcast_to(item, serve.shape)[serve]), steps[serve])
        return made, np.where(serve, 0.0, steps)


def _steady(
    raw: Floats, stair: Floats, holding: Floats, may_be_late: Flags
) -> tuple[Floats, Floats, Floats, Floats]:
    """Give needs under which the recursion is exact, or a valid relaxation where ``carries`` says no.

    An item that may be late and whose needs fall again is given the rising stair below its needs, and
    holds for nothing where the two differ: no plan costs less under that than it does in the case.
    """
    falling = may_be_late & (np.maximum(raw, 0.0) != stair).any(axis=1)
    below = np.maximum(np.minimum.accumulate(raw[:, ::-1], axis=1)[:, ::-1], 0.0)
    stair = np.where(falling[:, None], below, stair)
    holding = np.where(falling[:, None] & (below != np.maximum(raw, 0.0)), 0.0, holding)
    return raw, stair, holding, holding


def _times(quantity: Floats, price: Floats) -> Floats:
    """Money for a quantity; nothing costs nothing even where the price is unlimited."""
    with np.errstate(invalid="ignore"):
        return np.where(quantity > 0, quantity * price, 0.0)


def _interval_start(
    reach: Floats, steps: Floats, unit: Floats, late: Floats, loss: Floats, t: int
) -> tuple[Floats, Places]:
    """Cheapest way to have all needs before some j met and those from j to t-1 wait for the lot in t."""
    if t == 0 or not np.isfinite(late).any():
        return reach[t], np.full(steps.shape[1], t, dtype=np.int32)
    with np.errstate(invalid="ignore"):
        waiting = np.minimum(unit + late * np.arange(t, 0, -1)[:, None], loss)
    waits = np.cumsum(_times(steps[:t], waiting)[::-1], axis=0)[::-1]
    total = np.vstack([reach[:t] + waits, reach[t][None]])
    first = total.argmin(axis=0)
    return np.take_along_axis(total, first[None], axis=0)[0], first.astype(np.int32)


def _lots(lot: Places, stair: Floats, before: Floats, possible: Flags) -> Floats:
    """Walk the chain back: a lot in t that reaches the need of k makes stair[k] - before[t]."""
    periods, n = lot.shape
    made = np.zeros((periods, n))
    end = np.where(possible, periods - 1, -1)
    item = np.arange(n)
    for t in range(periods - 1, -1, -1):
        here = end == t
        if not here.any():
            continue
        at = lot[t]
        served = here & (at >= 0)
        made[at[served], item[served]] = stair[t][served] - before[at[served], item[served]]
        end = np.where(served, at - 1, np.where(here, t - 1, end))
    return made


def _sources(lot: Places, start: Places) -> Ints:
    """Give for each period's need the lot it looks to (-1 none), walking the chain of intervals back."""
    periods, n = lot.shape
    source = np.full((periods, n), -1, dtype=np.int64)
    item = np.arange(n)
    at = np.full(n, -1, dtype=np.int64)
    first = np.full(n, periods, dtype=np.int64)
    for t in range(periods - 1, -1, -1):
        fresh = first > t
        at = np.where(fresh, lot[t], at)
        first = np.where(fresh, np.where(at >= 0, start[np.maximum(at, 0), item], t), first)
        source[t] = at
    return source
