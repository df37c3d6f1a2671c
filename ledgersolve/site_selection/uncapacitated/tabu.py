"""Tabu search: the best move of the whole neighbourhood, even if it costs, and a short memory of sites moved.

It gets out of the local optima where a plan has one site too many and every single move costs (Glover 1989; on
this problem Michel & Van Hentenryck 2004, here with swaps too). All openings, closings and swaps are valued
at once.
"""

import numpy as np

from ledgersolve.mip import Clock
from ledgersolve.site_selection.case import Flags, Floats, Ints
from ledgersolve.site_selection.uncapacitated.core import Core

LARGEST = 3_000_000
"""Most lanes of a core, for one look at the whole neighbourhood to stay cheap."""
OPEN_FOR, CLOSED_FOR = (2, 6), (5, 15)
"""A site stays as it was moved for a number of moves drawn from these ranges."""


class Tabu:
    """A walk over sets of open sites; it can go on where it stopped.

    ``base`` (n,) is what leaving a customer unserved costs, or a penalty.
    """

    def __init__(self, core: Core, base: Floats, opened: Flags, random: np.random.Generator) -> None:
        self.core, self.random = core, random
        self.cost = np.minimum(core.cost, base)
        self.opened = opened.copy()
        self.free_at = np.zeros(core.m, dtype=np.int64)
        self.moves = 0
        served = self.cost[self.opened].min(axis=0, initial=float(self.cost.max()))
        self.now = self.best = core.offset + float(core.fixed[self.opened].sum() + served.sum())

    @staticmethod
    def fits(core: Core) -> bool:
        """Whether the core is small enough."""
        return core.m >= 2 and core.m * core.n <= LARGEST

    def run(self, seconds: float, most_moves: int, clock: Clock) -> Flags | None:
        """Walk; the best set met if it beats all earlier ones of this walk, else None."""
        end = clock.elapsed() + seconds
        found = None
        for move in range(most_moves):
            if move % 8 == 0 and (clock.over() or clock.elapsed() > end):
                break
            if not self.opened.any() or not self._move():
                break
            if self.now < self.best - 1e-9 * abs(self.best):
                self.best, found = self.now, self.opened.copy()
        return found

    def _move(self) -> bool:
        """Make the best move that is not tabu, or that leads to a new best; False if there is none."""
        rows = np.flatnonzero(self.opened)
        first, second, source = self._two_best(rows)
        here = self.core.offset + float(self.core.fixed[rows].sum() + first.sum())
        adding = self.core.fixed - np.maximum(first - self.cost, 0.0).sum(axis=1)
        closing = np.bincount(source, weights=second - first, minlength=rows.size) - self.core.fixed[rows]
        swapping = adding[:, None] + closing[None, :] - self._corrections(rows, first, second, source)
        self._forbid(rows, adding, closing, swapping)
        waiting = self.free_at > self.moves
        wall = self.best - here - 1e-9 * abs(self.best)
        _hide(swapping, waiting[:, None] | waiting[rows][None, :], wall)
        _hide(adding, waiting, wall)
        _hide(closing, waiting[rows], wall)
        return self._make(rows, adding, closing, swapping, here)

    def _make(self, rows: Ints, adding: Floats, closing: Floats, swapping: Floats, here: float) -> bool:
        picks = [int(adding.argmin()), int(closing.argmin()), int(swapping.argmin())]
        worth = [float(adding[picks[0]]), float(closing[picks[1]]), float(swapping.flat[picks[2]])]
        kind = int(np.argmin(worth))
        self.moves += 1
        if not np.isfinite(worth[kind]):
            self.now = here
            return bool((self.free_at > self.moves).any())
        row, column = divmod(picks[2], rows.size)
        if kind != 1:
            self._put(picks[0] if kind == 0 else row, True, OPEN_FOR)
        if kind != 0:
            self._put(int(rows[picks[1] if kind == 1 else column]), False, CLOSED_FOR)
        self.now = here + worth[kind]
        return True

    def _put(self, site: int, opened: bool, rest: tuple[int, int]) -> None:
        self.opened[site] = opened
        self.free_at[site] = self.moves + int(self.random.integers(*rest))

    def _two_best(self, rows: Ints) -> tuple[Floats, Floats, Ints]:
        """Cheapest and second cheapest cost of each customer, and the position in ``rows`` of the first."""
        table = self.cost[rows]
        if rows.size == 1:
            return table[0], self.cost.max(axis=0), np.zeros(self.core.n, dtype=np.int64)
        two = np.argpartition(table, 1, axis=0)[:2]
        costs = np.take_along_axis(table, two, axis=0)
        turned = costs[0] > costs[1]
        return costs.min(axis=0), costs.max(axis=0), np.where(turned, two[1], two[0])

    def _corrections(self, rows: Ints, first: Floats, second: Floats, source: Ints) -> Floats:
        """Shape (m, open): what the site to open saves on customers of the site to close."""
        order = np.argsort(source, kind="stable")
        saved = self.cost[:, order]
        np.maximum(saved, first[order], out=saved)
        np.subtract(second[order], saved, out=saved)
        np.maximum(saved, 0.0, out=saved)
        sizes = np.bincount(source, minlength=rows.size)
        busy = np.flatnonzero(sizes)
        table = np.zeros((self.core.m, rows.size))
        table[:, busy] = np.add.reduceat(saved, (np.cumsum(sizes) - sizes)[busy], axis=1)
        return table

    def _forbid(self, rows: Ints, adding: Floats, closing: Floats, swapping: Floats) -> None:
        """Set moves against rules, groups and counts to inf, in place."""
        selection = self.core.selection
        never = self.opened | selection.shut
        adding[never] = np.inf
        swapping[never] = np.inf
        forced = selection.forced[rows]
        closing[forced] = np.inf
        swapping[:, forced] = np.inf
        if rows.size >= selection.most:
            adding[:] = np.inf
        if rows.size <= max(selection.fewest, 1):
            closing[:] = np.inf
        group = selection.group
        for column, k in enumerate(rows.tolist()):
            if group[k] >= 0:
                mates = np.flatnonzero((group == group[k]) & ~self.opened)
                adding[mates] = np.inf
                others = np.arange(rows.size) != column
                swapping[np.ix_(mates, others)] = np.inf


def _hide(worth: Floats, waiting: Flags, wall: float) -> None:
    """Set moves of sites that must wait to inf, unless they lead to a new best."""
    worth[waiting & (worth >= wall)] = np.inf
