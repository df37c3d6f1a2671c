"""Parts of a case: what shares nothing is apart, and what was taken apart fits together again."""

from dataclasses import replace

import numpy as np

from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.parts import cut, joined, parts_of
from ledgersolve.lot_sizing.plan import Plan


def shared_case() -> Case:
    """Six items: 0 and 2 on resource 1, 1 in a family timed on resource 2, 5 on it; 3 and 4 alone."""
    case = plain_case(np.arange(24.0).reshape(6, 4), np.arange(6.0), 1.0)
    return replace(
        case, resources=("A", "B", "C"), capacity=np.arange(12.0).reshape(3, 4),
        overtime_limit=np.arange(3.0), overtime_cost=np.ones(3), use_cost=np.arange(3.0),
        item_resource=np.array([1, -1, 1, -1, -1, 2]), item_family=np.array([-1, 1, -1, -1, -1, -1]),
        families=("F", "G"), family_cost=np.array([5.0, 6.0]), family_time=np.ones(2),
        family_resource=np.array([-1, 2]),
    )


def test_parts_share_nothing() -> None:
    """Items are together exactly when a chain of resources and families links them."""
    parts = parts_of(shared_case())
    assert [part.items.tolist() for part in parts] == [[0, 2], [1, 5], [3, 4]]
    assert [part.resources.tolist() for part in parts] == [[1], [2], []]
    assert [part.families.tolist() for part in parts] == [[], [1], []]
    assert [part.shared for part in parts] == [True, True, False]


def test_part_is_renumbered() -> None:
    """A part numbers its own resources and families from 0 and keeps its items' figures."""
    part = parts_of(shared_case())[1].case
    assert part.resources == ("C",)
    assert part.families == ("G",)
    assert part.item_resource.tolist() == [-1, 0]
    assert part.item_family.tolist() == [0, -1]
    assert part.family_resource.tolist() == [0]
    assert part.capacity.tolist() == [[8, 9, 10, 11]]
    assert part.demand[1].tolist() == [20, 21, 22, 23]
    assert part.items == ("I2", "I6")


def test_cut_and_joined_are_inverse() -> None:
    """A plan cut into the parts' shares and joined again is the plan."""
    case = shared_case()
    rng = np.random.default_rng(3)
    made, stock, late, lost = rng.random((4, 6, 4))
    overtime = rng.random((3, 4))
    overtime[0] = 0.0
    plan = Plan(made, stock, late, lost, made > 0.5, overtime)
    parts = parts_of(case)
    again = joined(case, parts, tuple(cut(plan, part) for part in parts))
    for name in ("made", "stock", "late", "lost", "setup", "overtime"):
        assert (getattr(again, name) == getattr(plan, name)).all()
