"""A case taken apart into parts that share no resource and no family; costs and bounds of parts add up."""

from dataclasses import dataclass, replace

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from ledgersolve.lot_sizing.case import Case, Ints
from ledgersolve.lot_sizing.plan import Plan


@dataclass(frozen=True)
class Part:
    """Numbers of the items, resources and families of a part, and the part as a case of its own.

    ``shared`` is False for the one part that gathers every item without resource and family.
    """

    items: Ints
    resources: Ints
    families: Ints
    case: Case
    shared: bool


def parts_of(case: Case) -> tuple[Part, ...]:
    """Give the parts in the order of their first items; a resource or family nobody uses is in none."""
    n, r, f = case.n, len(case.resources), len(case.families)
    total = n + r + f
    links = (
        _pairs(np.arange(n), case.item_resource, n), _pairs(np.arange(n), case.item_family, n + r),
        _pairs(n + r + np.arange(f), case.family_resource, n),
    )
    ends = np.concatenate(links, axis=1)
    graph = coo_array((np.ones(ends.shape[1]), (ends[0], ends[1])), shape=(total, total))
    label = connected_components(graph, directed=False)[1]
    alone = (case.item_resource < 0) & (case.item_family < 0)
    label[:n][alone] = total
    found = []
    for mark in dict.fromkeys(label[:n].tolist()):
        items = np.flatnonzero(label[:n] == mark)
        resources = np.flatnonzero(label[n : n + r] == mark)
        families = np.flatnonzero(label[n + r :] == mark)
        found.append(
            Part(items, resources, families, take(case, items, resources, families), mark != total)
        )
    return tuple(found)


def take(case: Case, items: Ints, resources: Ints | None = None, families: Ints | None = None) -> Case:
    """Give the case of these items, with these resources and families (None: none of them)."""
    resources = np.zeros(0, dtype=np.int64) if resources is None else resources
    families = np.zeros(0, dtype=np.int64) if families is None else families
    by_item = {name: getattr(case, name)[items] for name in _ITEM_ARRAYS}
    by_item |= {name: tuple(getattr(case, name)[i] for i in items) for name in _ITEM_NAMES}
    return replace(
        case, **by_item,
        item_resource=_renumber(case.item_resource[items], resources, len(case.resources)),
        item_family=_renumber(case.item_family[items], families, len(case.families)),
        resources=tuple(case.resources[k] for k in resources), capacity=case.capacity[resources],
        overtime_limit=case.overtime_limit[resources], overtime_cost=case.overtime_cost[resources],
        use_cost=case.use_cost[resources],
        families=tuple(case.families[k] for k in families), family_cost=case.family_cost[families],
        family_time=case.family_time[families],
        family_resource=_renumber(case.family_resource[families], resources, len(case.resources)),
        today=None if case.today is None else case.today[items],
    )


def cut(plan: Plan, part: Part) -> Plan:
    """Give the share of a part in a plan of the whole case."""
    made, stock, late, lost = (
        figures[part.items] for figures in (plan.made, plan.stock, plan.late, plan.lost)
    )
    return Plan(made, stock, late, lost, plan.setup[part.items], plan.overtime[part.resources])


def joined(case: Case, parts: tuple[Part, ...], plans: tuple[Plan, ...]) -> Plan:
    """Put the plans of all parts together to a plan of the whole case."""
    blank = np.zeros((case.n, case.t))
    made, stock, late, lost = (blank.copy() for _ in range(4))
    setup = np.zeros((case.n, case.t), dtype=bool)
    overtime = np.zeros(case.capacity.shape)
    for part, plan in zip(parts, plans, strict=True):
        made[part.items], stock[part.items], late[part.items] = plan.made, plan.stock, plan.late
        lost[part.items], setup[part.items] = plan.lost, plan.setup
        overtime[part.resources] = plan.overtime
    return Plan(made, stock, late, lost, setup, overtime)


_ITEM_NAMES = ("items", "item_names", "units")
_ITEM_ARRAYS = (
    "demand", "receipts", "setup_cost", "unit_cost", "holding_cost", "setup_allowed", "opening_stock",
    "safety_stock", "closing_stock", "most_stock", "least_lot", "most_lot", "lot_multiple", "backlog_cost",
    "lost_cost", "time_per_unit", "setup_time",
)


def _pairs(ends: Ints, others: Ints, shift: int) -> Ints:
    known = others >= 0
    return np.vstack([ends[known], others[known] + shift])


def _renumber(numbers: Ints, kept: Ints, count: int) -> Ints:
    """New numbers of the things kept; -1 where there was none or it is not kept."""
    new = np.full(count + 1, -1, dtype=np.int64)
    new[kept] = np.arange(kept.size)
    return np.asarray(new[numbers], dtype=np.int64)
