"""Exact dynamic programme over cumulative quantities, for items that leave the Wagner-Whitin recursion.

The state is how much of the item has been made by the end of a period. Between its lots an item's
cumulative quantity stands still, and once the periods with lots are fixed the cost is convex and
piecewise linear in the levels; so some best plan has every level at a breakpoint (a cumulative need, a
limit of the stock), or a whole number of least lots (most lots) away from one. That finite set, with a
running minimum over the level a lot starts from, carries what the interval recursion cannot: most stock,
receipts beyond need with backlog, least lots, most lots (one of the two), and lot multiples, which are a
grid of levels. The argument is that of Florian & Klein (1971) for constant capacities and of Okhrin &
Richter (2011) for least lots.

Time is T times the number of levels an item: T + 1 levels without lot limits, about T times the lots of
the horizon with them. ``carries`` says no where that exceeds ``MOST_LEVELS``, and to lost sales.
"""

from dataclasses import dataclass

import numpy as np

from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.wagner_whitin import Schedules, needs

MOST_LEVELS = 6000
"""Largest number of levels an item may have on this path."""

_CHUNK = 3_000_000
"""Figures (periods x levels x items) worked on at once: bounds memory, and keeps them in cache."""


def carries(case: Case) -> Flags:
    """Whether this programme is exact for each item taken alone, shape (N,), before levels are counted."""
    least, most = _lot_limits(case)
    total = np.maximum(needs(case).raw, 0.0).max(axis=1)
    both = (least > 0) & (most < total + least) & (case.lot_multiple == 0)
    return np.asarray(np.isnan(case.lost_cost) & ~both & (_count(case) <= MOST_LEVELS))


def _lot_limits(case: Case) -> tuple[Floats, Floats]:
    """Least and most lot, those of items with a multiple in whole multiples."""
    multiple = np.where(case.lot_multiple > 0, case.lot_multiple, 1.0)
    up = np.maximum(np.ceil(case.least_lot / multiple - 1e-9), 1.0) * multiple
    down = np.where(np.isfinite(case.most_lot), np.floor(case.most_lot / multiple + 1e-9) * multiple, np.inf)
    grid = case.lot_multiple > 0
    return np.where(grid, up, case.least_lot), np.where(grid, down, case.most_lot)


def _count(case: Case) -> Ints:
    """Most levels an item can have."""
    least, most = _lot_limits(case)
    top = np.maximum(needs(case).raw, 0.0).max(axis=1) + least
    limits = 1 + np.isfinite(case.most_stock)
    step = np.where(least > 0, least, np.where(most < top, most, np.inf))
    with np.errstate(divide="ignore", invalid="ignore"):
        chained = (limits * case.t + 2) * (1 + np.where(np.isfinite(step), top / step, 0.0))
        counted = np.where(case.lot_multiple > 0, top / case.lot_multiple + 2, chained)
    return np.asarray(np.where(np.isfinite(counted), np.minimum(counted, 1e15), 1e15), dtype=np.int64)


@dataclass(frozen=True)
class _Chunk:
    """Some items with their levels side by side, shape (L, n) with the top level repeated below.

    ``high`` and ``low`` number the first and last level a lot up to a level can start from (-1 where there is
    none); ``low`` is None where no most lot binds.
    """

    items: Ints
    levels: Floats
    high: Ints
    low: Ints | None

    def only(self, wanted: Flags) -> "_Chunk":
        """Give the chunk of some of its items."""
        if wanted.all():
            return self
        low = None if self.low is None else self.low[:, wanted]
        return _Chunk(self.items[wanted], self.levels[:, wanted], self.high[:, wanted], low)


class LevelProgramme:
    """The programme for a set of items of a case, ready to be run again and again under other prices.

    Every item must be one that ``carries`` (lost sales are not looked at).
    """

    def __init__(self, case: Case, items: Ints) -> None:
        self.items = items
        need = needs(case)
        self.raw = need.raw[items].T
        self.least = case.least_stock()[items].T
        self.held = case.holding_cost[items].T
        self.late = np.where(np.isnan(case.backlog_cost[items]), np.inf, case.backlog_cost[items])
        self.most_stock = case.most_stock[items]
        self.allowed = case.setup_allowed[items].T
        self.must = np.where(
            np.isfinite(self.late), np.maximum(self.raw[0] - case.demand[items, 0], 0.0), 0.0
        )
        least, most = _lot_limits(case)
        self.least_lot, self.most_lot = least[items], most[items]
        self.multiple = case.lot_multiple[items]
        self.scale = 1e-9 * (1.0 + np.abs(self.raw).max(axis=0, initial=0.0))
        self.chunks = self._chunked([self._levels(k) for k in range(items.size)])

    def schedule(self, setup_cost: Floats, unit_cost: Floats, wanted: Flags | None = None) -> Schedules:
        """Give the best schedule of every item; ``setup_cost`` and ``unit_cost`` have shape (n, T).

        ``wanted``, shape (n,), leaves items out; their cost is then 0 and nothing of them is made.
        """
        setups = np.where(self.allowed, setup_cost.T, np.inf)
        units = unit_cost.T
        made, cost = np.zeros(setups.shape), np.zeros(self.items.size)
        for whole in self.chunks:
            chunk = whole if wanted is None else whole.only(wanted[whole.items])
            k = chunk.items
            if k.size:
                made[:, k], cost[k] = self._run(chunk, setups[:, k], units[:, k])
        return Schedules(made.T, np.zeros_like(made.T), cost)

    # ------------------------------------------------------------------ levels

    def _levels(self, k: int) -> Floats:
        """Give the levels of an item in rising order, 0 first."""
        raw, least_lot, most_lot = self.raw[:, k], self.least_lot[k], self.most_lot[k]
        top = max(float(raw.max()), 0.0) + least_lot
        if self.multiple[k] > 0:
            return np.asarray(np.arange(np.floor(top / self.multiple[k] + 1e-9) + 1) * self.multiple[k])
        anchors = np.concatenate([[0.0, self.must[k]], raw, raw + self.most_stock[k] - self.least[:, k]])
        anchors = anchors[np.isfinite(anchors)]
        step = least_lot if least_lot > 0 else most_lot
        if 0 < step < top:
            reach = int(np.ceil((top + np.abs(anchors).max()) / step))
            anchors = (anchors[:, None] + step * np.arange(-reach, reach + 1)).ravel()
        tiny = self.scale[k]
        found = np.unique(np.clip(anchors[(anchors > -tiny) & (anchors <= top + tiny)], 0.0, top))
        return np.asarray(found[np.concatenate([[True], np.diff(found) > tiny])])

    def _chunked(self, levels: list[Floats]) -> list[_Chunk]:
        order = sorted(range(len(levels)), key=lambda k: levels[k].size)
        chunks, start = [], 0
        while start < len(order):
            end = start + 1
            while end < len(order) and (end + 1 - start) * levels[order[end]].size * len(self.raw) <= _CHUNK:
                end += 1
            chunks.append(self._chunk(np.array(order[start:end]), [levels[k] for k in order[start:end]]))
            start = end
        return chunks

    def _chunk(self, which: Ints, levels: list[Floats]) -> _Chunk:
        height = max(part.size for part in levels)
        table = np.empty((height, which.size))
        high, low = np.empty(table.shape, dtype=np.int64), np.empty(table.shape, dtype=np.int64)
        for column, (k, part) in enumerate(zip(which.tolist(), levels, strict=True)):
            table[:, column] = np.concatenate([part, np.full(height - part.size, part[-1])])
            tiny, values = self.scale[k], table[:, column]
            smallest = max(self.least_lot[k], tiny) - tiny / 2
            high[:, column] = np.searchsorted(part, values - smallest, "right") - 1
            low[:, column] = np.searchsorted(part, values - self.most_lot[k] - tiny, "left")
        return _Chunk(which, table, high, low if low.any() else None)

    # ------------------------------------------------------------------ recursion

    def _run(self, chunk: _Chunk, setups: Floats, units: Floats) -> tuple[Floats, Floats]:
        """Forward over the periods; then back, finding again the level each lot started from.

        Levels below every item's need of a period are left out from then on.
        """
        periods = len(setups)
        best = np.empty((periods + 1, *chunk.levels.shape))
        best[0] = np.inf
        best[0, 0] = 0.0
        lowest = np.concatenate([[0], self._lowest(chunk)])
        for t in range(periods):
            low = lowest[t]
            bought = units[t] * chunk.levels[low:]
            lot = _start(best[t, low:] - bought, chunk.high[low:], chunk.low, low)
            lot += setups[t] + bought
            np.minimum(best[t, low:], lot, out=lot)
            best[t + 1, : lowest[t + 1]] = np.inf
            best[t + 1, lowest[t + 1] :] = lot[lowest[t + 1] - low :] + self._stock_cost(chunk, t, lowest[t + 1])
        return self._back(chunk, best, setups, units)

    def _lowest(self, chunk: _Chunk) -> Ints:
        """Give for each period the first level that some item can end it with."""
        late = np.isfinite(self.late[chunk.items])
        raw = np.where(late, 0.0, self.raw[:, chunk.items] - self.scale[chunk.items])
        first = np.stack([(chunk.levels < need).sum(axis=0) for need in raw]).min(axis=1)
        return np.minimum(np.maximum.accumulate(first), len(chunk.levels) - 1)

    def _stock_cost(self, chunk: _Chunk, t: int, low: int) -> Floats:
        """Holding and backlog cost of each level from ``low`` at the end of a period; inf beyond limits."""
        k, levels = chunk.items, chunk.levels[low:]
        over = levels - self.raw[t, k]
        tiny, least = self.scale[k], self.least[t, k]
        cost = self.held[t, k] * (least + np.maximum(over, 0.0))
        if np.isfinite(self.late[k]).any() and t < len(self.raw) - 1:
            with np.errstate(invalid="ignore"):
                cost += np.where(over < -tiny, -over * self.late[k], 0.0)
        else:
            cost[over < -tiny] = np.inf
        if np.isfinite(self.most_stock[k]).any():
            cost[np.maximum(over, 0.0) > self.most_stock[k] - least + tiny] = np.inf
        if t == 0 and self.must[k].any():
            cost[levels < self.must[k] - tiny] = np.inf
        return np.asarray(cost)

    def _back(self, chunk: _Chunk, best: Floats, setups: Floats, units: Floats) -> tuple[Floats, Floats]:
        periods, n = setups.shape
        column = np.arange(n)
        made = np.zeros((periods, n))
        at = best[periods].argmin(axis=0)
        cost = best[periods, at, column]
        number = np.arange(len(chunk.levels))[:, None]
        for t in range(periods - 1, -1, -1):
            end = int(chunk.high[at, column].max()) + 1
            start = best[t, :end] - units[t] * chunk.levels[:end]
            start[number[:end] > chunk.high[at, column]] = np.inf
            if chunk.low is not None:
                start[number[:end] < chunk.low[at, column]] = np.inf
            level = chunk.levels[at, column]
            if end > 0:
                source = start.argmin(axis=0)
                with_lot = start[source, column] + setups[t] + units[t] * level
                lot = np.isfinite(cost) & (with_lot < best[t, at, column])
                made[t] = np.where(lot, level - chunk.levels[source, column], 0.0)
                at = np.where(lot, source, at)
        return made, cost


def _start(value: Floats, high: Ints, low: Ints | None, first: int) -> Floats:
    """Least value over the levels low..high of each entry; inf where there is none.

    ``value`` and ``high`` begin with level ``first``.
    """
    column = np.arange(value.shape[1])
    if low is None:
        least = np.minimum.accumulate(value, axis=0)
        end = high - first
        found = least[np.maximum(end, 0), column]
        found[end < 0] = np.inf
        return found
    end, begin = high - first, np.maximum(low[first:] - first, 0)
    width = np.maximum(end - begin + 1, 0)
    answer = np.full(value.shape, np.inf)
    power, table = 0, value
    while True:
        here = (width >> power) == 1
        if here.any():
            one = np.take_along_axis(table, np.where(here, begin, 0), axis=0)
            two = np.take_along_axis(table, np.where(here, end + 1 - (1 << power), 0), axis=0)
            answer = np.where(here, np.minimum(one, two), answer)
        if int(width.max()) >> (power + 1) == 0:
            return answer
        ahead = np.full(table.shape, np.inf)
        ahead[: -(1 << power)] = table[1 << power :]
        table, power = np.minimum(table, ahead), power + 1
