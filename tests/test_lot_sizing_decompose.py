"""Decomposition from start to end: sound plans, bounds below the optimum, honest ends."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.decompose import solve_decomposed
from ledgersolve.lot_sizing.joint import JointSearch
from ledgersolve.mip import Limits, Verdict
from tests.bench.lot_cases import Recipe, generated
from tests.lot_oracle import random_shared, whole_big_m


@pytest.mark.parametrize(
    "features",
    [
        ("overtime",), ("overtime", "family", "use"), ("overtime", "least lot", "late"),
        ("overtime", "lost", "multiple", "receipts"), ("overtime", "most stock", "family", "closing"),
    ],
    ids="+".join,
)
def test_bound_and_plan_enclose_the_optimum(features: tuple[str, ...]) -> None:
    """The plan is sound and the proven optimum lies between bound and cost, whatever the features."""
    case = random_shared(np.random.default_rng(21), 4, 4, *features)
    case = replace(case, overtime_limit=np.full(2, 80.0))
    whole = whole_big_m(case)
    found = solve_decomposed(case, Limits(4.0))
    assert found.bound is not None
    if whole.status == "infeasible":
        assert found.plan is None
        return
    assert found.bound <= whole.objective + 1e-6
    assert found.plan is not None
    assert found.cost is not None
    assert audit(case, found.plan).ok
    assert audit(case, found.plan).total == pytest.approx(found.cost)
    assert found.cost >= whole.objective - 1e-4


def test_many_items_come_near_the_bound() -> None:
    """With many items against the periods, schedules picked by column are within 0.4 % of the bound."""
    case = generated(Recipe(80, 16, 1, 0.9), 5)
    found = solve_decomposed(case, Limits(60.0, 4e-3))
    assert found.gap is not None
    assert found.gap <= 4e-3
    assert found.verdict.has_plan


def test_an_item_that_cannot_be_made_is_proof() -> None:
    """Without a period in which a needed item may be made there is no plan, and the verdict says so."""
    case = generated(Recipe(4, 5, 1, 0.5), 1)
    allowed = case.setup_allowed.copy()
    allowed[2] = False
    assert solve_decomposed(replace(case, setup_allowed=allowed), Limits(5.0)).verdict is Verdict.NO_PLAN_EXISTS


def test_joint_moves_tell_their_cost() -> None:
    """Switching a period costs what the search foretells; a search never ends dearer than it began."""
    case = generated(Recipe(8, 10, 1, 0.5, families=4), 3)
    price = np.repeat(case.family_cost[:, None], 10, axis=1)
    search = JointSearch(case, case.item_family, price, case.setup_cost, case.unit_cost)
    rng = np.random.default_rng(2)
    choice = rng.random(price.shape) < 0.6
    choice[:, :2] = True
    foretold = search._moves(choice)[0][0]
    for t in range(2, 10):
        switched = choice.copy()
        switched[:, t] ^= True
        assert foretold[:, t] == pytest.approx(search.costs(switched))
    ended, cost = search.descended(choice, Limits(10.0).start())
    assert (cost <= search.costs(choice) + 1e-9).all()
    assert search.costs(ended) == pytest.approx(cost)


def test_the_record_names_what_the_bound_leaves_out() -> None:
    """Whole quantities leave nothing out; thirds with a most lot and lost sales are named, and so are families."""
    case = generated(Recipe(6, 6, 1, 0.8, families=3, overtime=1.0), 1)
    whole = solve_decomposed(case, Limits(3.0, 0.2)).notes
    assert any("every rule of the items exactly" in note for note in whole)
    assert any("Families" in note for note in whole)
    thirds = replace(
        case, demand=case.demand * 4.0 / 3.0, most_lot=np.full(6, 3.0 * case.demand.max()), lost_cost=np.full(6, 1e3),
        most_stock=np.full(6, 5.0 * case.demand.max()),
    )
    notes = solve_decomposed(thirds, Limits(3.0, 0.2)).notes
    assert any("leaves out most lot, most stock, lost sales" in note for note in notes)
