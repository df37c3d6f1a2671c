"""The best plan and the bound: what counts as better, as closed and as enough."""

import numpy as np
import pytest

from ledgersolve.mip import Limits
from ledgersolve.site_selection.uncapacitated.incumbent import Incumbent

COSTS = {(True, False): 100.0, (False, True): 90.0, (False, False): np.inf}


def incumbent(grain: float = 0.0, gap: float = 1e-4) -> Incumbent:
    """An incumbent over two sites with known costs."""
    clock = Limits(seconds=60.0, gap=gap).start()
    return Incumbent(2, lambda opened: COSTS[tuple(opened.tolist())], grain, clock)


def test_only_better_sets_are_taken() -> None:
    """Worse sets and sets that serve not everybody change nothing."""
    best = incumbent()
    assert not best.offer(np.array([False, False]))
    assert best.offer(np.array([True, False]))
    assert best.offer(np.array([False, True]))
    assert not best.offer(np.array([True, False]))
    assert best.cost == 90.0
    assert best.opened.tolist() == [False, True]


def test_the_bound_rises_and_never_passes_the_cost() -> None:
    """A bound above the best cost means that the best is the best there is."""
    best = incumbent()
    best.offer(np.array([True, False]))
    best.raise_bound(80.0, "bound")
    best.raise_bound(70.0, "bound")
    assert best.bound == 80.0
    best.raise_bound(120.0, "bound")
    assert best.bound == 100.0
    assert best.enough()


def test_costs_in_whole_money_leave_no_room_below_one() -> None:
    """With costs that differ by 1 at least, a bound of 99.5 closes a part under a plan of 100; else it does not."""
    whole, any_money = incumbent(grain=1.0), incumbent()
    for best in (whole, any_money):
        best.offer(np.array([True, False]))
    assert whole.cut() < 99.5 < any_money.cut()
    assert whole.closed_at(99.5) == 100.0
    assert any_money.closed_at(99.5) == 99.5


@pytest.mark.parametrize(("gap", "bound", "ends"), [(0.05, 95.0, True), (0.05, 94.0, False), (0.0, 99.999, False)])
def test_an_accepted_gap_is_enough_once_reached(gap: float, bound: float, ends: bool) -> None:
    """The run stops at the accepted gap, not before; with none accepted it goes on to the end."""
    best = incumbent(gap=gap)
    best.offer(np.array([True, False]))
    best.raise_bound(bound, "bound")
    assert best.enough() is ends


def test_without_a_plan_nothing_is_closed() -> None:
    """As long as no plan is known no bound is high enough."""
    assert incumbent().cut() == np.inf
    assert not incumbent().enough()
