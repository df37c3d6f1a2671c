"""Joint replenishment: when groups of items run, so that items and runs together cost least.

At fixed prices a family (or a rented resource) is paid once for all its members in a period. For a given set
of periods in which a group runs, every member's best plan is one Wagner-Whitin recursion; a choice is
improved by switching single periods on or off, and by moving a run to a neighbouring period. One forward and
one backward recursion an item give the cost of every such move at once: a plan without a lot in t has a lot
that spans t, one with a lot in u passes through it. Moves are made for all groups side by side, and
repeated from disturbed choices (iterated local search; Federgruen & Tzur 1994 search the same space).
"""

import numpy as np

from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.wagner_whitin import needs
from ledgersolve.mip import Clock

LEVELS = (0.1, 0.3, 0.5, 0.7)
"""A search starts from the periods that run at least this often in the ascent, the best level a group."""

REACH = 3
"""Periods by which a run is moved at most."""

SURPLUS = 2.0
"""Periods for which what a least lot makes beyond its needs is taken to stay in stock."""

_ROUNDS = 200


class JointSearch:
    """Search over the periods in which groups of items run.

    Parameters
    ----------
    group
        Shape (N,): number of each item's group, -1 for items that take no part.
    price
        Shape (G, T): cost of a running group.
    setups, units
        Shape (N, T): costs of the items at the prices of the hour; inf where no setup is allowed.

    Needs are met on time here: items that may be late or lose demand are judged as if they did neither. What
    a least lot makes beyond its needs costs some holding.
    """

    def __init__(self, case: Case, group: Ints, price: Floats, setups: Floats, units: Floats) -> None:
        members = np.flatnonzero(group >= 0)
        need = needs(case)
        stair = np.ascontiguousarray(need.stair[members].T)
        before = np.vstack([np.zeros(members.size), stair[:-1]])
        to_end = np.cumsum(case.holding_cost[members].T[::-1], axis=0)[::-1]
        slope = units[members].T + to_end
        periods = case.t
        self.price = price
        self.group = group[members]
        self.setups = np.ascontiguousarray(setups[members].T)
        self.idle = stair == before
        self.lots = slope[:, None, :] * (stair[None, :, :] - before[:, None, :])
        self.lots[np.tril_indices(periods, -1)] = np.inf
        self.lots += SURPLUS * _surplus(case, members, stair, before)
        base = case.least_stock()[members] - need.raw[members]
        self.given = -(case.holding_cost[members] * base).sum(axis=1)

    def chosen(self, often: Floats, clock: Clock, seconds: float, seed: int = 0) -> tuple[Flags, Floats]:
        """Search from the periods in which groups run often (G, T); gives runs (G, T) and costs (G,)."""
        starts = [often >= level for level in LEVELS] + [np.ones(often.shape, dtype=bool)]
        costs = np.stack([self.costs(start) for start in starts])
        choice = np.stack(starts)[costs.argmin(axis=0), np.arange(len(often))]
        return self.searched(choice, clock, seconds, seed)

    def searched(self, choice: Flags, clock: Clock, seconds: float, seed: int = 0) -> tuple[Flags, Floats]:
        """Improve a choice until no move helps; then disturb and improve again, as long as there is time."""
        rng = np.random.default_rng(seed)
        until = clock.elapsed() + seconds
        best, cost = self.descended(choice, clock)
        while clock.elapsed() < until and not clock.over() and len(best):
            tried, value = self.descended(best ^ (rng.random(best.shape) < 3.0 / best.shape[1]), clock)
            better = value < _below(cost)
            best = np.where(better[:, None], tried, best)
            cost = np.where(better, value, cost)
        return best, cost

    def descended(self, choice: Flags, clock: Clock) -> tuple[Flags, Floats]:
        """Make the best move of every group, until none helps or time is over."""
        choice = choice.copy()
        cost = self.costs(choice)
        for _ in range(_ROUNDS):
            if clock.over():
                break
            moves = self._moves(choice)
            value = np.stack([move[0] for move in moves])
            kind, period = np.unravel_index(
                value.transpose(0, 2, 1).reshape(-1, len(cost)).argmin(axis=0), (len(moves), value.shape[2])
            )
            group = np.arange(len(cost))
            better = np.flatnonzero(value[kind, group, period] < _below(cost))
            if not better.size:
                break
            tried = choice.copy()
            tried[better, period[better]] ^= True
            shift = np.array([move[1] for move in moves])[kind[better]]
            moved = better[shift != 0]
            tried[moved, period[moved] + shift[shift != 0]] ^= True
            now = self.costs(tried)
            kept = now < cost
            choice[kept], cost = tried[kept], np.minimum(cost, now)
        return choice, cost

    def costs(self, choice: Flags) -> Floats:
        """Cost of each group under a choice (G, T); shape (G,)."""
        ahead, _ = self._forward(choice)
        return np.asarray(self._by_group(ahead[-1] - self.given) + (choice * self.price).sum(axis=1))

    def _by_group(self, by_item: Floats) -> Floats:
        """Sum over the members of each group: (..., n) to (..., G)."""
        total = np.zeros((*by_item.shape[:-1], len(self.price)))
        np.add.at(total.T, self.group, by_item.T)
        return total

    def _forward(self, choice: Flags) -> tuple[Floats, Floats]:
        """Least cost to have the needs before each period met, and setup costs under the choice."""
        setups = np.where(choice[self.group].T, self.setups, np.inf)
        periods, n = setups.shape
        ahead = np.full((periods + 1, n), np.inf)
        ahead[0] = 0.0
        for t in range(periods):
            ahead[t + 1] = (ahead[: t + 1] + setups[: t + 1] + self.lots[: t + 1, t]).min(axis=0)
            ahead[t + 1] = np.where(self.idle[t], np.minimum(ahead[t], ahead[t + 1]), ahead[t + 1])
        return ahead, setups

    def _backward(self, setups: Floats) -> tuple[Floats, Floats]:
        """Least cost to meet the needs from each period on, and that of a lot in each period with what follows."""
        periods, n = setups.shape
        behind = np.zeros((periods + 1, n))
        lot = np.empty((periods, n))
        for t in range(periods - 1, -1, -1):
            lot[t] = (self.lots[t, t:] + behind[t + 1 :]).min(axis=0)
            behind[t] = setups[t] + lot[t]
            behind[t] = np.where(self.idle[t], np.minimum(behind[t + 1], behind[t]), behind[t])
        return behind, lot

    def _moves(self, choice: Flags) -> list[tuple[Floats, int]]:
        """Costs of groups (G, T) after each move, with the move: 0 switches t, d moves a run from t to t + d.

        Those of shifts are upper limits: lots between the two periods are not looked at.
        """
        ahead, setups = self._forward(choice)
        behind, lot = self._backward(setups)
        now = ahead[-1]
        through = ahead[:-1] + self.setups + lot
        reach = np.minimum.accumulate(ahead[:-1, None] + setups[:, None] + self.lots, axis=0)
        spans = np.minimum.accumulate((reach + behind[1:])[:, ::-1], axis=1)[:, ::-1]
        without = np.where(self.idle, ahead[:-1] + behind[1:], np.inf)
        periods = np.arange(len(through))
        later = periods[1:]
        without[1:] = np.minimum(without[1:], spans[later - 1, later])
        runs = (choice * self.price).sum(axis=1)[:, None]
        signed = np.where(choice, -self.price, self.price)
        by_item = np.where(choice[self.group].T, without, np.minimum(now, through))
        moves = [(self._by_group(by_item - self.given).T + runs + signed, 0)]
        for shift in (*range(-REACH, 0), *range(1, REACH + 1)):
            target = periods + shift
            inside = (target >= 0) & (target < len(periods))
            at, to = periods[inside], target[inside]
            if shift > 0:
                direct = np.full((at.size, now.size), np.inf)
                early = at > 0
                direct[early] = reach[at[early] - 1, to[early] - 1] + (self.setups + lot)[to[early]]
            else:
                tail = np.minimum.accumulate((self.lots + behind[1:])[:, ::-1], axis=1)[:, ::-1]
                direct = ahead[to] + self.setups[to] + tail[to, at]
            value = np.full((len(self.price), len(periods)), np.inf)
            cost = self._by_group(np.minimum(without[at], direct) - self.given).T
            open_to = choice[:, at] & ~choice[:, to]
            gain = self.price[:, to] - self.price[:, at]
            value[:, at] = np.where(open_to, cost + runs + gain, np.inf)
            moves.append((value, shift))
        return moves


def _surplus(case: Case, members: Ints, stair: Floats, before: Floats) -> Floats:
    """Holding cost for one period of what a lot from t to the needs of k lacks to its least size, (T, T, n)."""
    least = case.least_lot[members]
    if not least.any():
        return np.zeros((1, 1, members.size))
    lot = stair[None, :, :] - before[:, None, :]
    lacks = np.where(lot > 0, np.maximum(least - lot, 0.0), 0.0)
    return np.asarray(lacks * case.holding_cost[members].T[None, :, :])


def _below(cost: Floats) -> Floats:
    """What counts as less than a cost."""
    size = np.where(np.isfinite(cost), np.abs(cost), 0.0)
    return cost - 1e-9 * size
