"""Groups of items that share nothing with the rest: each is a case of its own."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.plan import Plan
from ledgersolve.lot_sizing.tight import tight_limits


@dataclass(frozen=True)
class Group:
    """A group: its own case, and the numbers of its items and resources in the whole one.

    ``shared`` is False for the one group that gathers the items without any tie.
    """

    case: Case
    items: Ints
    resources: Ints
    shared: bool = True


def binding(case: Case) -> Flags:
    """Shape (R,): resources that can stand in the way of a plan, or whose use costs money.

    Capacity that is never reached, even if every item made the most it could in every period, binds nothing.
    """
    alone = replace(case, item_resource=np.full(case.n, -1, dtype=np.int64))
    most = tight_limits(alone).most_made
    need = np.zeros((len(case.resources), case.t))
    on = np.flatnonzero(case.item_resource >= 0)
    time = case.time_per_unit[on, None] * most[on] + case.setup_time[on, None] * (most[on] > 0)
    np.add.at(need, case.item_resource[on], time)
    placed = np.flatnonzero(case.family_resource >= 0)
    need_of_families = np.repeat(case.family_time[placed, None], case.t, axis=1)
    np.add.at(need, case.family_resource[placed], need_of_families)
    return np.asarray((case.use_cost > 0) | (need > case.capacity).any(axis=1))


def without_slack(case: Case) -> Case:
    """Give the case without the links to resources that bind nothing and families that change nothing."""
    bound = binding(case)
    tied = np.append(bound, False)
    family_resource = np.where(tied[case.family_resource], case.family_resource, -1)
    matters = (case.family_cost > 0) | (family_resource >= 0)
    return replace(
        case, item_resource=np.where(tied[case.item_resource], case.item_resource, -1),
        family_resource=family_resource,
        item_family=np.where(np.append(matters, False)[case.item_family], case.item_family, -1),
    )


def groups(case: Case) -> list[Group]:
    """Split a case, in the order of first items.

    Two items belong together when they share a resource or a family; items without any tie are gathered in
    one group.
    """
    slim = without_slack(case)
    n, r, f = slim.n, len(slim.resources), len(slim.families)
    on, kin = np.flatnonzero(slim.item_resource >= 0), np.flatnonzero(slim.item_family >= 0)
    placed = np.flatnonzero(slim.family_resource >= 0)
    starts = np.concatenate([on, kin, n + r + placed])
    ends = np.concatenate(
        [n + slim.item_resource[on], n + r + slim.item_family[kin], n + slim.family_resource[placed]]
    )
    size = n + r + f
    label = _components(starts, ends, size)[:n]
    alone = (slim.item_resource < 0) & (slim.item_family < 0)
    label[alone] = size
    marks = dict.fromkeys(label.tolist())
    return [part(slim, np.flatnonzero(label == mark), shared=mark != size) for mark in marks]


def _components(starts: Ints, ends: Ints, size: int) -> Ints:
    """Shape (size,): one number for all nodes that links join, the least node among them."""
    label = np.arange(size)
    while True:
        low = np.minimum(label[starts], label[ends])
        spread = label.copy()
        np.minimum.at(spread, starts, low)
        np.minimum.at(spread, ends, low)
        spread = spread[spread]
        if bool((spread == label).all()):
            return label
        label = spread


def part(case: Case, items: Ints, *, shared: bool = True) -> Group:
    """Give the case of some items alone, with the resources and families that they and their families use."""
    families = np.unique(case.item_family[items])
    families = families[families >= 0]
    resources = np.unique(np.concatenate([case.item_resource[items], case.family_resource[families]]))
    resources = resources[resources >= 0]
    fields: dict[str, Any] = {
        name: getattr(case, name)[items]
        for name in (
            "demand", "receipts", "setup_cost", "unit_cost", "holding_cost", "setup_allowed", "opening_stock",
            "safety_stock", "closing_stock", "most_stock", "least_lot", "most_lot", "lot_multiple",
            "backlog_cost", "lost_cost", "time_per_unit", "setup_time",
        )
    }
    for name in ("items", "item_names", "units"):
        fields[name] = tuple(getattr(case, name)[i] for i in items)
    for name in ("overtime_limit", "overtime_cost", "use_cost"):
        fields[name] = getattr(case, name)[resources]
    for name in ("family_cost", "family_time"):
        fields[name] = getattr(case, name)[families]
    own = replace(
        case, resources=tuple(case.resources[r] for r in resources),
        families=tuple(case.families[f] for f in families), today=None, compare_today=False,
        capacity=case.capacity[resources] if resources.size else np.zeros((0, case.t)),
        item_resource=_renumbered(case.item_resource[items], resources),
        item_family=_renumbered(case.item_family[items], families),
        family_resource=_renumbered(case.family_resource[families], resources), **fields,
    )
    return Group(own, items, resources, shared)


def joined(case: Case, parts: Sequence[Group], plans: Sequence[Plan]) -> Plan:
    """Put the plans of the groups together again."""
    shape = (case.n, case.t)
    whole = {name: np.zeros(shape) for name in ("made", "stock", "late", "lost")}
    overtime: Floats = np.zeros((len(case.resources), case.t))
    for group, plan in zip(parts, plans, strict=True):
        for name, figures in whole.items():
            figures[group.items] = getattr(plan, name)
        overtime[group.resources] = plan.overtime
    return Plan(**whole, setup=whole["made"] > 0, overtime=overtime)


def _renumbered(numbers: Ints, kept: Ints) -> Ints:
    found = np.searchsorted(kept, numbers)
    return np.where(numbers >= 0, found, -1).astype(np.int64)
