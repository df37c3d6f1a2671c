"""What makes the stock form strong: plant location, or (l,S) inequalities.

Plant location (Krarup & Bilde 1977) splits each lot into the needs that it serves. Units are matched first
in, first out, so that opening stock serves the first needs. An item that may be late, or may lose demand
while stock must rise at the end, keeps its later receipts as sources beside its lots: which need they serve
is then not known beforehand.
"""

from dataclasses import dataclass

import numpy as np

from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.tight import Tight
from ledgersolve.mip import LinearModel

INEQUALITY_ENTRIES = 2_000_000
"""Most coefficients spent on (l,S) inequalities; their horizon is cut to stay below."""


@dataclass(frozen=True)
class _Nodes:
    """What an item needs, and what it is given without making it.

    ``due``, ``amount``, ``waits``: the needs; ``given_at``, ``given``: supply that is there anyway.
    """

    due: Ints
    amount: Floats
    waits: Flags
    loses: Flags
    given_at: Ints
    given: Floats


def netted(case: Case) -> Flags:
    """Shape (N,): items whose receipts can be netted: which need they serve is known beforehand."""
    rising = case.closing_stock > case.safety_stock
    loses = np.isfinite(case.lost_cost)
    return np.asarray(~np.isfinite(case.backlog_cost) & ~(loses & rising))


def most_lost(case: Case, tight: Tight) -> Floats:
    """Shape (N, T): demand that may be lost; of netted items only what is still needed of it."""
    return np.where(netted(case)[:, None], np.minimum(case.demand, tight.step), case.demand)


def plant_location_size(case: Case, tight: Tight) -> int:
    """Give the number of plant-location variables."""
    sources = (tight.most_made > 0).astype(np.int64)
    needs = np.where(netted(case)[:, None], tight.step > 0, case.demand > 0).astype(np.int64)
    on_time = (np.cumsum(sources, axis=1) * needs).sum(axis=1)
    anywhere = sources.sum(axis=1) * needs.sum(axis=1)
    return int(np.where(np.isfinite(case.backlog_cost), anywhere, on_time).sum())


def add_plant_location(
    case: Case, tight: Tight, model: LinearModel, made: Ints, setup: Ints, late: Ints, lost: Ints
) -> None:
    """Add the reformulation; ``made`` .. ``lost`` are the variables of the stock form, shape (N, T)."""
    simple = netted(case)
    for item in range(case.n):
        nodes = _netted_nodes(case, tight, item) if simple[item] else _open_nodes(case, tight, item)
        if nodes.amount.size:
            _Split(case, tight, model, item, nodes, bool(simple[item])).add(made, setup, late, lost)


def _netted_nodes(case: Case, tight: Tight, item: int) -> _Nodes:
    due = np.flatnonzero(tight.step[item] > 0)
    loses = np.full(due.size, np.isfinite(case.lost_cost[item]))
    nothing = np.zeros(0)
    no = np.zeros(due.size, dtype=bool)
    return _Nodes(due, tight.step[item, due], no, loses, nothing.astype(np.int64), nothing)


def _open_nodes(case: Case, tight: Tight, item: int) -> _Nodes:
    """Needs and supplies kept apart: safety stock at the start and a rise of stock at the end never wait."""
    t = case.t
    least = case.least_stock()[item]
    rise = float(least[-1] - least[-2]) if t > 1 else 0.0
    at_hand = float(case.opening_stock[item] + case.receipts[item, 0])
    must, at_hand = float(tight.must[item]), max(at_hand - float(least[0]), 0.0)
    open_demand = case.demand[item].copy()
    if not (np.isfinite(case.lost_cost[item]) and rise > 0):
        served = np.minimum(np.cumsum(open_demand), at_hand)
        open_demand -= np.diff(served, prepend=0.0)
        at_hand -= float(served[-1])
    given = case.receipts[item].copy()
    given[0] = at_hand
    given[-1] += max(-rise, 0.0)
    due = np.concatenate([[0], np.arange(t), [t - 1]])
    amount = np.concatenate([[must], open_demand, [max(rise, 0.0)]])
    soft = np.concatenate([[False], np.full(t, True), [False]])
    keep = amount > 0
    waits, loses = np.isfinite(case.backlog_cost[item]), np.isfinite(case.lost_cost[item])
    there = np.flatnonzero(given > 0)
    return _Nodes(due[keep], amount[keep], soft[keep] & waits, soft[keep] & loses, there, given[there])


@dataclass
class _Split:
    """The split of one item's lots, and of what it is given, over its needs."""

    case: Case
    tight: Tight
    model: LinearModel
    item: int
    nodes: _Nodes
    simple: bool

    def add(self, made: Ints, setup: Ints, late: Ints, lost: Ints) -> None:
        nodes, model, most = self.nodes, self.model, self.tight.most_made[self.item]
        lots = np.flatnonzero(most > 0)
        source, need = np.nonzero((lots[:, None] <= nodes.due[None, :]) | nodes.waits[None, :])
        amount = np.minimum(nodes.amount[need], most[lots[source]])
        flow = model.add_variables(source.size)
        rows = np.arange(source.size)
        model.add_rows(
            rows.size, np.tile(rows, 2), np.concatenate([flow, setup[self.item, lots[source]]]),
            np.concatenate([np.ones(rows.size), -amount]), upper=0.0,
        )
        exact = self.simple and self.tight.surplus[self.item] == 0
        model.add_rows(
            lots.size, np.concatenate([np.arange(lots.size), source]),
            np.concatenate([made[self.item, lots], flow]), np.repeat([1.0, -1.0], [lots.size, flow.size]),
            lower=0.0, upper=0.0 if exact else np.inf,
        )
        gift, served, free = self._gifts()
        self._needs(need, flow, served, free, lost)
        if nodes.waits.any():
            starts = np.concatenate([lots[source], nodes.given_at[gift]])
            ends = np.concatenate([nodes.due[need], nodes.due[served]])
            self._late(starts, ends, np.concatenate([flow, free]), late)

    def _gifts(self) -> tuple[Ints, Ints, Ints]:
        """Flows from what is given: number of the supply, number of the need, variable."""
        nodes = self.nodes
        gift, served = np.nonzero((nodes.given_at[:, None] <= nodes.due[None, :]) | nodes.waits[None, :])
        free = self.model.add_variables(gift.size)
        if nodes.given.size:
            self.model.add_rows(nodes.given.size, gift, free, 1.0, upper=nodes.given)
        return gift, served, free

    def _needs(self, need: Ints, flow: Ints, served: Ints, free: Ints, lost: Ints) -> None:
        """Every need is served or, where it may be, lost."""
        nodes = self.nodes
        loses = np.flatnonzero(nodes.loses)
        rows = np.concatenate([need, served, loses])
        variables = np.concatenate([flow, free, lost[self.item, nodes.due[loses]]])
        upper = np.where(nodes.loses, np.inf, nodes.amount)
        self.model.add_rows(nodes.amount.size, rows, variables, 1.0, lower=nodes.amount, upper=upper)

    def _late(self, starts: Ints, ends: Ints, flow: Ints, late: Ints) -> None:
        """late[t] - late[t-1] = what is due in t and served later, less what t serves that was due before."""
        t = self.case.t
        behind = np.flatnonzero(starts > ends)
        now = np.arange(t)
        rows = np.concatenate([now, now[1:], ends[behind], starts[behind]])
        variables = np.concatenate([late[self.item], late[self.item, :-1], flow[behind], flow[behind]])
        signs = np.repeat([1.0, -1.0, -1.0, 1.0], [t, t - 1, behind.size, behind.size])
        self.model.add_rows(t, rows, variables, signs, lower=0.0, upper=0.0)


def add_inequalities(
    case: Case, tight: Tight, model: LinearModel, setup: Ints, stock: Ints, late: Ints, lost: Ints
) -> None:
    """Add (l,S) inequalities of consecutive periods k..l for every item.

    Netted items (Pochet & Wolsey 1994): stock above ``base`` before k, plus what each setup in k..l can add
    to the needs from its period to l, plus what is lost, covers the needs of k..l. Items that may be late:
    one setup in k..l, what is late after l or lost, receipts, or stock before k. The horizon l - k is cut so
    that the model keeps within ``INEQUALITY_ENTRIES``.
    """
    reach = _reach(case)
    simple = netted(case)
    for item in range(case.n):
        for k in range(case.t):
            last = min(case.t, k + reach)
            if simple[item]:
                _on_time_rows(tight, model, item, k, last, setup, stock, lost)
            else:
                _late_rows(case, tight, model, item, k, last, setup, stock, late, lost)


def _reach(case: Case) -> int:
    """Periods that an inequality may span."""
    reach = case.t
    while reach > 2 and case.n * case.t * reach * (reach + 3) // 2 > INEQUALITY_ENTRIES:
        reach -= 1
    return reach


def _on_time_rows(
    tight: Tight, model: LinearModel, item: int, k: int, last: int, setup: Ints, stock: Ints, lost: Ints
) -> None:
    step, span = tight.step[item, k:last], last - k
    need = np.cumsum(step)
    ends = np.flatnonzero(step > 0)
    if not ends.size:
        return
    start, end = np.nonzero(np.arange(span)[:, None] <= ends[None, :])
    before = np.concatenate([[0.0], need])
    cover = np.minimum(need[ends[end]] - before[start], tight.most_made[item, k + start])
    rows, variables, factors = [end], [setup[item, k + start]], [cover]
    lower = need[ends].copy()
    if k:
        rows.append(np.arange(ends.size))
        variables.append(np.full(ends.size, stock[item, k - 1]))
        factors.append(np.ones(ends.size))
        lower += tight.base[item, k - 1]
    if lost[item, 0] >= 0:
        rows.append(end)
        variables.append(lost[item, k + start])
        factors.append(np.ones(end.size))
    model.add_rows(
        ends.size, np.concatenate(rows), np.concatenate(variables), np.concatenate(factors), lower=lower
    )


def _late_rows(
    case: Case, tight: Tight, model: LinearModel, item: int, k: int, last: int,
    setup: Ints, stock: Ints, late: Ints, lost: Ints,
) -> None:
    least = case.least_stock()[item]
    in_hand = float(case.opening_stock[item]) if k == 0 else 0.0
    rest = np.cumsum((case.demand - case.receipts)[item, k:last]) + least[k:last] - in_hand
    ends = np.flatnonzero(rest > (0.0 if k == 0 else least[k - 1]))
    if not ends.size:
        return
    start, end = np.nonzero(np.arange(last - k)[:, None] <= ends[None, :])
    need = rest[ends] - (least[k - 1] if k else 0.0)
    cover = np.minimum(need[end], tight.most_made[item, k + start])
    rows, variables, factors = [end], [setup[item, k + start]], [cover]
    lower = rest[ends].copy()
    if k:
        rows.append(np.arange(ends.size))
        variables.append(np.full(ends.size, stock[item, k - 1]))
        factors.append(np.ones(ends.size))
    for numbers, row, column in ((late, np.arange(ends.size), k + ends), (lost, end, k + start)):
        if numbers[item, 0] >= 0:
            rows.append(row)
            variables.append(numbers[item, column])
            factors.append(np.ones(row.size))
    model.add_rows(
        ends.size, np.concatenate(rows), np.concatenate(variables), np.concatenate(factors), lower=lower
    )
