"""Dynamic programme over whole steps of quantity, for items with rules that meet: any rule, one item at a time.

The state is what has been made or lost of the item by the end of a period, in whole steps. Where every quantity
of the item (demand, receipts, stocks, lot limits) is a whole number of steps, some best plan is one too: with the
periods of its lots fixed an item alone is a flow in a network, and flows with whole limits have whole best
answers (Dantzig & Fulkerson 1954). So the programme is exact for what the others leave: least and most lots
together, and lost sales beside limits of lots and of stock. With a coarser step it gives good schedules, no bounds.

A lot may cost more per unit the larger it is (overtime, or time that is not there): its cost is then given piece
by piece. Least values over windows of lot sizes are found in one pass a piece (van Herk 1992).
"""

import math
from dataclasses import dataclass

import numpy as np

from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.tight import lot_limits
from ledgersolve.lot_sizing.wagner_whitin import Schedules, needs

MOST_STEPS = 20_000
"""Largest number of steps an item may have for the programme to be used as exact."""

DECIMALS = 1000.0
"""Quantities that are whole in thousandths of a unit have a common step."""


def common_steps(case: Case) -> Floats:
    """Shape (N,): the largest step of which every quantity of the item is a whole number; 0 where there is none."""
    limits = np.stack(
        [case.opening_stock, case.safety_stock, case.closing_stock, case.most_stock, case.least_lot, case.most_lot,
         case.lot_multiple], axis=1,
    )
    figures = np.concatenate([case.demand, case.receipts, np.where(np.isfinite(limits), limits, 0.0)], axis=1)
    scaled = figures * DECIMALS
    sound = ((np.round(scaled) / DECIMALS == figures) & (scaled < 1e15)).all(axis=1)
    counts = np.round(np.where(sound[:, None], scaled, 0.0)).astype(np.int64)
    return np.asarray(np.gcd.reduce(counts, axis=1, initial=0) / DECIMALS)


def carries(case: Case) -> Flags:
    """Whether the programme is exact for each item alone and small enough, shape (N,)."""
    step = common_steps(case)
    return np.asarray((step > 0) & (_tops(case, np.where(step > 0, step, 1.0)) <= MOST_STEPS))


def _tops(case: Case, step: Floats) -> Floats:
    """Shape (N,): steps that a cheapest plan can make or lose in all: the needs, and a last least lot."""
    least = np.where((case.least_lot > 0) | (case.lot_multiple > 0), lot_limits(case)[0], 0.0)
    total = np.maximum(needs(case).raw, 0.0).max(axis=1, initial=0.0)
    return np.asarray(np.ceil(total / step - 1e-9) + np.ceil(least / step - 1e-9))


@dataclass(frozen=True)
class Pieces:
    """Cost of a lot piece by piece, convex: up to ``ends`` (J, T) units it is ``base`` + ``slope`` x units.

    The last piece ends at inf. ``base`` is inf where no lot may be made.
    """

    ends: Floats
    base: Floats
    slope: Floats


class ItemGrid:
    """The programme of one item of a case on a grid of ``step`` units, to be run again and again."""

    def __init__(self, case: Case, item: int, step: float) -> None:
        raw = needs(case).raw[item]
        least = case.least_stock()[item]
        self.step = step
        self.top = int(_tops(case, np.full(case.n, step))[item])
        self.raw, self.least = raw, least
        self.held = case.holding_cost[item]
        self.late = float(case.backlog_cost[item])
        self.waits = math.isfinite(self.late)
        self.price_lost = float(case.lost_cost[item]) * step
        loses = math.isfinite(self.price_lost)
        self.loses = np.floor(case.demand[item] / step + 1e-9).astype(np.int64) * loses
        must = max(float(raw[0] - case.demand[item, 0]), 0.0) if self.waits else 0.0
        self.must = math.ceil(must / step - 1e-9)
        self.allowed = case.setup_allowed[item]
        self._limits(case, item)
        low = np.ceil(raw / step - 1e-9)
        if self.waits:
            low[:-1] = 0.0
        self.low = np.maximum(low, 0.0).astype(np.int64)
        most = np.minimum((raw - least + case.most_stock[item]) / step + 1e-9, self.top)
        self.high = np.floor(most).astype(np.int64)
        self.place = np.arange(self.top + 1) * step

    def _limits(self, case: Case, item: int) -> None:
        low, high = (float(limit[item]) for limit in lot_limits(case))
        self.multiple = max(1, round(float(case.lot_multiple[item]) / self.step))
        by = self.multiple
        self.least_lot = max(math.ceil(low / self.step / by - 1e-9), 1)
        high = high / self.step / by + 1e-9
        self.most_lot = math.floor(high) if math.isfinite(high) else self.top // by + 1

    def schedule(self, pieces: Pieces) -> tuple[Floats, Floats, float]:
        """Give what is made and lost, (T,) each in units, and the cost: inf where there is no schedule."""
        periods = len(self.raw)
        before: list[Floats] = []
        after: list[Floats] = []
        value = np.full(self.top + 1, np.inf)
        value[0] = 0.0
        for t in range(periods):
            before.append(value)
            lot = self._with_lot(value, pieces, t)
            after.append(lot)
            value = self._with_loss(lot, t) + self._stock_cost(t)
        end = int(value.argmin())
        cost = float(value[end])
        nothing = np.zeros(periods)
        if not math.isfinite(cost):
            return nothing, nothing.copy(), cost
        return (*self._back(end, before, after, pieces), cost)

    def _with_lot(self, value: Floats, pieces: Pieces, t: int) -> Floats:
        """Least value after the period's lot, if any."""
        best = value.copy()
        if self.allowed[t]:
            by = self.multiple
            for j, (start, end) in enumerate(self._windows(pieces, t)):
                base, slope = pieces.base[j, t], pieces.slope[j, t]
                if end >= start and math.isfinite(base):
                    bought = slope * self.place
                    found = _window_least(_folded(value - bought, by), start, end)
                    np.minimum(best, _unfolded(found, by, best.size) + (base + bought), out=best)
        if t == 0:
            best[: self.must] = np.inf
        return best

    def _windows(self, pieces: Pieces, t: int) -> list[tuple[int, int]]:
        """Give the lot sizes of each piece, in multiples: first and last."""
        unit = self.step * self.multiple
        windows, start = [], self.least_lot
        for end in pieces.ends[:, t].tolist():
            last = self.most_lot if math.isinf(end) else min(math.floor(end / unit + 1e-9), self.most_lot)
            windows.append((start, last))
            start = max(start, last + 1)
        return windows

    def _with_loss(self, value: Floats, t: int) -> Floats:
        if not self.loses[t]:
            return value
        bought = self.price_lost / self.step * self.place
        return _window_least(value - bought, 0, int(self.loses[t])) + bought

    def _stock_cost(self, t: int) -> Floats:
        """Holding and backlog cost of each level at the end of a period; inf beyond limits."""
        over = self.place - self.raw[t]
        cost = np.maximum(self.held[t] * over, (-self.late if self.waits else 0.0) * over)
        cost += self.held[t] * self.least[t]
        cost[: self.low[t]] = np.inf
        cost[max(int(self.high[t]) + 1, 0) :] = np.inf
        return np.asarray(cost)

    def _back(
        self, end: int, before: list[Floats], after: list[Floats], pieces: Pieces
    ) -> tuple[Floats, Floats]:
        """Walk back from the last level, finding again what was lost and made."""
        made, lost = np.zeros(len(before)), np.zeros(len(before))
        at = end
        for t in range(len(before) - 1, -1, -1):
            reach = min(int(self.loses[t]), at)
            if reach:
                tried = after[t][at - reach : at + 1][::-1] + self.price_lost * np.arange(reach + 1)
                gone = int(tried.argmin())
                lost[t], at = gone * self.step, at - gone
            if after[t][at] < before[t][at]:
                lot = self._lot(at, before[t], pieces, t)
                made[t], at = lot * self.step, at - lot
        return made, lost

    def _lot(self, at: int, before: Floats, pieces: Pieces, t: int) -> int:
        """Give the best lot that ends at a level, in steps."""
        best, found = math.inf, 0
        by = self.multiple
        for j, (start, end) in enumerate(self._windows(pieces, t)):
            sizes = np.arange(start, min(end, at // by) + 1) * by
            if sizes.size:
                value = before[at - sizes] + (pieces.base[j, t] + pieces.slope[j, t] * self.step * sizes)
                k = int(value.argmin())
                if value[k] < best:
                    best, found = float(value[k]), int(sizes[k])
        return found


class GridProgramme:
    """The programme for a set of items of a case that it ``carries``, each on its common step."""

    def __init__(self, case: Case, items: Ints) -> None:
        self.items = items
        steps = common_steps(case)
        steps = np.where(steps > 0, steps, 1.0)
        self.grids = [ItemGrid(case, int(i), float(steps[i])) for i in items]

    def schedule(self, setup_cost: Floats, unit_cost: Floats, wanted: Flags | None = None) -> Schedules:
        """Give the best schedule of every item; ``setup_cost`` and ``unit_cost`` have shape (n, T).

        ``wanted``, shape (n,), leaves items out; their cost is then 0 and nothing of them is made.
        """
        made, lost, cost = np.zeros(setup_cost.shape), np.zeros(setup_cost.shape), np.zeros(self.items.size)
        endless = np.full((1, setup_cost.shape[1]), np.inf)
        for k, grid in enumerate(self.grids):
            if wanted is None or wanted[k]:
                pieces = Pieces(endless, setup_cost[k : k + 1], unit_cost[k : k + 1])
                made[k], lost[k], cost[k] = grid.schedule(pieces)
        return Schedules(made, lost, cost)


def _folded(value: Floats, by: int) -> Floats:
    """Shape (by, rows): levels that whole multiples lead from one to the other, side by side."""
    if by == 1:
        return value
    rows = -(-value.size // by)
    padded = np.full(rows * by, np.inf)
    padded[: value.size] = value
    return np.ascontiguousarray(padded.reshape(rows, by).T)


def _unfolded(value: Floats, by: int, size: int) -> Floats:
    return value if by == 1 else value.T.reshape(-1)[:size]


def _window_least(value: Floats, nearest: int, farthest: int) -> Floats:
    """For each k along the last axis the least of value[k - farthest .. k - nearest]; inf where there is none."""
    size = value.shape[-1]
    answer = np.full(value.shape, np.inf)
    if nearest >= size:
        return answer
    kept, width = size - nearest, farthest - nearest + 1
    if width >= kept:
        answer[..., nearest:] = np.minimum.accumulate(value[..., :kept], axis=-1)
        return answer
    blocks = -(-(kept + width - 1) // width)
    padded = np.full((*value.shape[:-1], blocks * width), np.inf)
    padded[..., width - 1 : width - 1 + kept] = value[..., :kept]
    cut = padded.reshape(*value.shape[:-1], blocks, width)
    ahead = np.minimum.accumulate(cut, axis=-1).reshape(padded.shape)
    behind = np.minimum.accumulate(cut[..., ::-1], axis=-1)[..., ::-1].reshape(padded.shape)
    answer[..., nearest:] = np.minimum(behind[..., :kept], ahead[..., width - 1 : width - 1 + kept])
    return answer
