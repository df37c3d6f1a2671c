"""The programme over whole steps: exact for any rules of an item, sound with coarse steps, lots in pieces."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import plain_case
from ledgersolve.lot_sizing.grid import GridProgramme, ItemGrid, Pieces, carries, common_steps
from ledgersolve.lot_sizing.plan import plan_from_made
from tests.lot_textbook import random_case, walk_cost

RULES = (
    "opening", "receipts", "safety", "closing", "most stock", "least lot", "most lot", "multiple", "backlog", "lost",
    "unit cost", "setup allowed",
)


@pytest.mark.parametrize("seed", range(60))
def test_any_rules_against_a_walk_over_every_quantity(seed: int) -> None:
    """Whatever rules meet in an item, its cost is that of trying every quantity; no plan is found out too."""
    rng = np.random.default_rng([9, seed])
    case = random_case(rng, 1, int(rng.integers(2, 6)), frozenset(r for r in RULES if rng.random() < 0.5))
    assert common_steps(case)[0] > 0 or not case.demand.any()
    found = GridProgramme(case, np.arange(1)).schedule(case.setup_cost, case.unit_cost)
    wanted = walk_cost(case)
    if wanted is None:
        assert np.isinf(found.cost[0])
        return
    assert found.cost[0] == pytest.approx(wanted, rel=1e-9, abs=1e-9)
    plan = plan_from_made(case, found.made)
    assert audit(case, plan).ok
    assert audit(case, plan).total == pytest.approx(wanted, rel=1e-9, abs=1e-9)


def test_the_common_step() -> None:
    """The step is the largest that measures every quantity; thirds have none, and then nothing is called exact."""
    case = plain_case([[2.5, 5.0], [4.0, 6.0], [1.0 / 3.0, 1.0]], 10.0, 1.0, least_lot=np.array([0.5, 0.0, 0.0]))
    assert common_steps(case).tolist() == [0.5, 2.0, 0.0]
    assert carries(case).tolist() == [True, True, False]
    huge = replace(case, demand=np.array([[1e6, 1.0], [4.0, 6.0], [1.0, 1.0]]))
    assert carries(huge).tolist() == [False, True, True]


def test_lots_in_pieces_pay_more_for_more() -> None:
    """Units beyond a piece cost its dearer rate: the programme splits lots where one would overrun."""
    case = plain_case([[0.0, 12.0]], 0.0, 0.0)
    ends = np.array([[5.0, 8.0], [np.inf, np.inf]])
    base = np.array([[1.0, 2.0], [1.0 - 5 * 3.0, 2.0 - 8 * 7.0]])
    slope = np.array([[0.0, 0.0], [3.0, 7.0]])
    made, lost, cost = ItemGrid(case, 0, 1.0).schedule(Pieces(ends, base, slope))
    assert made.tolist() == [5.0, 7.0]
    assert lost.tolist() == [0.0, 0.0]
    assert cost == pytest.approx(3.0)


def test_coarse_steps_keep_the_rules() -> None:
    """With a step that does not measure demand the schedule is still one that keeps every rule."""
    rng = np.random.default_rng(3)
    case = plain_case(
        rng.integers(3, 20, (1, 12)), 40.0, 1.0, least_lot=np.array([20.0]), most_lot=np.array([60.0]),
        safety_stock=np.array([4.0]), opening_stock=np.array([9.0]), closing_stock=np.array([4.0]),
    )
    made, _, cost = ItemGrid(case, 0, 5.0).schedule(
        Pieces(np.full((1, 12), np.inf), case.setup_cost, case.unit_cost)
    )
    checked = audit(case, plan_from_made(case, made[None]))
    assert checked.ok
    assert checked.total <= cost + 1e-9
