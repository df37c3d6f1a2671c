"""The checkable bound: valid for any prices, as high as the bound of the engines, exact where it can be."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ledgersolve.mip import Limits
from ledgersolve.report.certificate import certify
from ledgersolve.site_selection.bound import price_bound
from ledgersolve.site_selection.case import CLOSED, OPEN, Case, plain_case
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.solve import solve


def random_case(seed: int) -> Case:
    """A small case with a random choice of features, feasible more often than not."""
    rng = np.random.default_rng(seed)
    m, n = int(rng.integers(2, 5)), int(rng.integers(2, 6))
    costs = rng.integers(1, 30, (m, n)).astype(float)
    costs[rng.random((m, n)) < 0.1] = np.inf
    demand = rng.integers(1, 9, n).astype(float)
    chosen = rng.random(8) < 0.4
    changes: dict[str, object] = {}
    if chosen[0]:
        changes["capacity"] = rng.integers(int(demand.sum() / 2), int(demand.sum()) + 2, m).astype(float)
    if chosen[1]:
        changes |= {"today": rng.random(m) < 0.5, "opening_cost": rng.integers(0, 20, m).astype(float),
                    "closing_cost": rng.integers(0, 20, m).astype(float)}
    if chosen[2]:
        changes["rule"] = rng.choice([0, 0, 0, OPEN, CLOSED], m).astype(np.int64)
    if chosen[3]:
        changes |= {"group": rng.integers(-1, 2, m).astype(np.int64), "group_names": ("a", "b")}
    if chosen[4]:
        changes["unmet_cost"] = float(rng.integers(5, 30))
    if chosen[5]:
        changes["most_sites"] = int(rng.integers(1, m + 1))
    if chosen[6]:
        changes["fewest_sites"] = int(rng.integers(1, m + 1)) if not chosen[5] else 1
    if chosen[7]:
        changes |= {"cost_is_whole": True, "handling_cost": rng.integers(0, 3, m).astype(float)}
    return plain_case(rng.integers(10, 80, m).astype(float), costs, demand, **changes)


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 10**6), scale=st.floats(0.1, 3.0))
def test_any_prices_give_a_bound(seed: int, scale: float) -> None:
    """No plan costs less than the certificate of any prices (checked against the proven best plan)."""
    case = random_case(seed)
    solved = solve(case, Limits(20.0))
    if solved.cost is None:
        return
    lanes = Lanes.of(case)
    typical = np.where(np.isfinite(lanes.cost), lanes.cost, np.nan)
    prices = scale * np.nan_to_num(np.nanmean(np.where(np.isnan(typical), 40.0, typical), axis=0))
    bound = certify(case, lanes, prices).bound
    assert bound <= solved.cost + 1e-6 * abs(solved.cost)


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 10**6))
def test_no_worse_than_the_bound_of_the_engines(seed: int) -> None:
    """With the same prices the sheet's bound reaches the engines' price bound: nothing is lost by writing it out.

    Where counts and groups pull against each other the charges of a sheet may fall short of a whole selection.
    """
    case = random_case(seed)
    lanes = Lanes.of(case)
    if lanes.impossible() is not None:
        return
    prices = np.where(np.isfinite(lanes.cost), lanes.cost, 60.0).max(axis=0)
    sheet, engine = certify(case, lanes, prices).bound, price_bound(case, prices)
    if np.isfinite(engine) and (case.group < 0).all():
        assert sheet >= engine - 1e-6 * (1 + abs(engine))


def test_a_capacity_price_loses_nothing() -> None:
    """The price of a unit of capacity gives the knapsack's own value: 10 units at 5, 3 and 1 with room for 15.

    By hand: the first item (10 units, worth 50) and half of the second (5 of 10 units, worth 15) fit: 65.
    """
    case = plain_case([0.0], [[0.0, 0.0, 0.0]], [10.0, 10.0, 10.0], capacity=np.array([15.0]), unmet_cost=100.0)
    certificate = certify(case, Lanes.of(case), np.array([50.0, 30.0, 10.0]))
    assert certificate.volume_price[0] == pytest.approx(3.0)
    assert certificate.volume_price[0] * 15.0 + certificate.gain[0] == pytest.approx(65.0)


def test_prices_stay_below_the_cost_of_unmet_demand() -> None:
    """A price above the unmet cost is cut to it, or the sum would not be a bound: 2 units at 7 unmet cost 14."""
    case = plain_case([100.0], [[1.0]], [2.0], unmet_cost=7.0)
    certificate = certify(case, Lanes.of(case), np.array([500.0]))
    assert certificate.price.tolist() == [14.0]
    assert certificate.bound == pytest.approx(14.0)


def test_the_example_of_the_proof_by_hand() -> None:
    """Two sites at 10, customers served for 3 and 5 from either: prices 8 and 10 prove the cost 18.

    Gains: each site (8-3) + (10-5) = 10, its term min(0, 10 - 10) = 0; the sum of prices is 18 = 10 + 3 + 5.
    """
    case = plain_case([10.0, 10.0], [[3.0, 5.0], [3.0, 5.0]])
    certificate = certify(case, Lanes.of(case), np.array([8.0, 10.0]))
    assert certificate.gain.tolist() == [10.0, 10.0]
    assert certificate.term.tolist() == [0.0, 0.0]
    assert certificate.bound == 18.0
