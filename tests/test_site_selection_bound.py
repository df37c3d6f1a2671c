"""The price bound of site selection: by hand, for each feature alone, and against a program written apart."""

import itertools
import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import linprog

from ledgersolve.site_selection.bound import flip_bounds, price_bound
from ledgersolve.site_selection.case import CLOSED, OPEN, Case, plain_case
from tests.site_reference import brute_force
from tests.site_strategies import FEATURES, random_case

INF = np.inf


def two_sites(**changes: object) -> Case:
    """Two sites at 10, either serving two customers for 3 and 5."""
    return plain_case([10, 10], [[3, 5], [3, 5]], **changes)


def near(figure: float) -> object:
    """A bound by hand: rounding may take a little off and never adds."""
    return pytest.approx(figure - 5e-10, abs=5.1e-10)


@pytest.mark.parametrize(
    ("prices", "bound"),
    [
        ([8.0, 10.0], 18.0),  # each site saves 5 + 5 = 10, what it costs: both terms 0
        ([9.0, 10.0], 17.0),  # each saves 11 and earns 1: 19 - 2
        ([9.0, 4.0], 17.0),  # 4 is below 5: each saves 6 and costs 4, and one must open: 13 + 4
        ([2.0, 4.0], 16.0),  # nothing is saved, one must open: 6 + 10
        ([-5.0, 0.0], 5.0),
        ([0.0, 0.0], 10.0),
    ],
)
def test_prices_by_hand(prices: list[float], bound: float) -> None:
    """Sum of prices, less what sites earn on them; where somebody must be served one site opens at least."""
    assert price_bound(two_sites(), np.array(prices)) == near(bound)


def test_where_all_may_stay_unmet_no_site_need_open() -> None:
    """With an unmet cost of 100 the prices 2 and 4 prove 6 only."""
    assert price_bound(two_sites(unmet_cost=100.0), np.array([2.0, 4.0])) == near(6.0)


def test_a_price_counts_up_to_the_cost_of_unmet_demand() -> None:
    """2 units unmet at 7 cost 14: a price of 500 is cut to it, one of 13 is not."""
    case = plain_case([100], [[1]], [2], unmet_cost=7.0)
    assert price_bound(case, np.array([500.0])) == near(14.0)
    assert price_bound(case, np.array([13.0])) == near(13.0)


def test_customers_that_need_nothing_do_not_count() -> None:
    """Per unit, the price of a customer without demand is left out; on whole-demand costs it counts."""
    case = plain_case([10], [[3, 5]], [1, 0])
    assert price_bound(case, np.array([4.0, 99.0])) == near(4 + 10 - 1)
    whole = plain_case([10], [[3, 5]], [1, 0], cost_is_whole=True)
    assert price_bound(whole, np.array([4.0, 7.0])) == near(11 + 10 - 1 - 2)


def test_a_capacity_is_filled_with_what_is_worth_most_a_unit() -> None:
    """Worth 50, 30, 10 in 10, 5 and 20 units; room for 17: 30 + 50 + 2/20 of 10 = 81 of a site at 100.

    Listed out of order; the rate decides (6, 5 and 0.5 a unit), not the worth.
    """
    demand = [20.0, 10.0, 5.0]
    case = plain_case([100], [[0.5, 1, 2]], demand, capacity=np.array([17.0]))
    prices = np.array([20.0, 60.0, 40.0])
    assert price_bound(case, prices) == near(120 + 100 - 81)


@pytest.mark.parametrize(("room", "saved"), [(0.0, 0.0), (5.0, 30.0), (15.0, 80.0), (34.0, 89.5), (35.0, 90.0)])
def test_more_room_saves_more(room: float, saved: float) -> None:
    """From no room to room for all: what fits is saved and the last one in part."""
    case = plain_case([100], [[0.5, 1, 2]], [20.0, 10, 5], capacity=np.array([room]))
    assert price_bound(case, np.array([20.0, 60, 40])) == near(120 + 100 - saved)


def test_customers_without_volume_need_no_room() -> None:
    """On whole-demand costs a customer with demand 0 is served beside a full capacity: 4 and 3/6 of 8."""
    case = plain_case([10], [[1, 2]], [0, 6], cost_is_whole=True, capacity=np.array([3.0]))
    assert price_bound(case, np.array([5.0, 10.0])) == near(15 + 10 - 4 - 4)


def test_a_lane_saves_only_the_share_it_carries() -> None:
    """A lane for 3 of 12 units saves a quarter of 20, and takes a quarter of the units from a capacity."""
    most = np.array([[3.0, INF]])
    case = plain_case([50], [[1, 1]], [12, 4], lane_most=most)
    prices = np.array([32.0, 10.0])
    assert price_bound(case, prices) == near(42 + 50 - 5 - 6)
    full = plain_case([50], [[1, 1]], [12, 4], lane_most=most, capacity=np.array([5.0]))
    assert price_bound(full, prices) == near(42 + 50 - 5 - 6 * 2 / 4)


def test_handling_and_units_are_in_the_cost_of_a_lane() -> None:
    """4 units at 2 and 1 handling cost 12 a customer: a price of 20 saves 8."""
    case = plain_case([10], [[2]], [4], handling_cost=np.array([1.0]))
    assert price_bound(case, np.array([20.0])) == near(20 + 10 - 8)


def test_opening_and_closing_costs() -> None:
    """S1 runs today: kept it costs 10, closed 4; S2 opened costs 10 + 5. Prices of 0 prove 10: keep S1."""
    today = {"today": np.array([True, False]), "closing_cost": np.array([4.0, 9.0]),
             "opening_cost": np.array([7.0, 5.0])}
    assert price_bound(two_sites(**today), np.zeros(2)) == near(10.0)
    shut = two_sites(rule=np.array([CLOSED, 0]), **today)
    assert price_bound(shut, np.zeros(2)) == near(4 + 15.0)


def test_rounding_is_taken_off_every_figure_in_the_bound() -> None:
    """A millionth of a millionth of: prices 8 + 10, savings 6 + 10, site costs 6 + 15, closing cost 4."""
    case = plain_case(
        [10, 10], [[3, 9], [3, 5]], today=np.array([True, False]), closing_cost=np.array([4.0, 9.0]),
        opening_cost=np.array([7.0, 5.0]),
    )
    # S1: 10 - 4 - (5 + 1) = 0, S2: 10 + 5 - (5 + 5) = 5; one must open
    bound = price_bound(case, np.array([8.0, 10.0]))
    assert 22.0 - bound == pytest.approx(1e-12 * (18 + 16 + 21 + 4), rel=1e-3)


def test_figures_below_nothing_add_to_the_allowance() -> None:
    """Price -8, no savings, site costs 10 - 40 and 100, closing cost 40: S1 stays, 2 - 30 + 40 = 12."""
    case = plain_case(
        [10, 100], [[3, 20], [3, 15]], today=np.array([True, False]), closing_cost=np.array([40.0, 0]),
    )
    bound = price_bound(case, np.array([-8.0, 10.0]))
    assert 12.0 - bound == pytest.approx(1e-12 * (18 + 0 + 130 + 40), rel=0.02)


@pytest.mark.parametrize(
    ("changes", "bound"),
    [
        ({"rule": np.array([OPEN, OPEN])}, 20.0), ({"rule": np.array([CLOSED, 0])}, 10.0),
        ({"fewest_sites": 2}, 20.0), ({"most_sites": 0}, INF), ({"most_sites": 1, "fewest_sites": 2}, INF),
        ({"rule": np.array([CLOSED, CLOSED])}, INF),
        ({"group": np.array([0, 0]), "fewest_sites": 2}, INF),
        ({"rule": np.array([OPEN, OPEN]), "group": np.array([0, 0])}, INF),
        ({"rule": np.array([OPEN, 0]), "group": np.array([0, 0])}, 10.0),
        ({"rule": np.array([OPEN, OPEN]), "most_sites": 1}, INF),
    ],
)
def test_only_allowed_sets_of_sites_count(changes: dict[str, object], bound: float) -> None:
    """Rules, groups and counts hold in the bound; where no set is allowed it is infinite."""
    found = price_bound(two_sites(**changes), np.zeros(2))
    assert found == (INF if math.isinf(bound) else near(bound))


def test_of_a_group_one_site_earns() -> None:
    """Both sites earn 1 at prices 9 and 10; in one group, or with at most one site, only one does."""
    prices = np.array([9.0, 10.0])
    assert price_bound(two_sites(group=np.array([0, 0])), prices) == near(18.0)
    assert price_bound(two_sites(group=np.array([0, 1])), prices) == near(17.0)
    assert price_bound(two_sites(most_sites=1), prices) == near(18.0)


def test_groups_count_whatever_their_number() -> None:
    """A group numbered 1 alone is a group; sites outside groups never stand in each other's way."""
    prices = np.array([9.0, 10.0])
    assert price_bound(two_sites(group=np.array([1, 1])), prices) == near(18.0)
    clash = two_sites(group=np.array([1, 1]), rule=np.array([OPEN, OPEN]))
    assert price_bound(clash, np.zeros(2)) == INF
    case = plain_case(
        [10, 10, 10], [[3], [3], [3]], rule=np.array([OPEN, OPEN, 0]), group=np.array([-1, -1, 0]))
    assert price_bound(case, np.zeros(1)) == near(20.0)


def test_a_site_that_costs_a_little_stays_shut() -> None:
    """At prices 9 and 8.5 each site saves 9.5 of its 10: where one must open, the other does not, groups or not."""
    prices = np.array([9.0, 8.5])
    assert price_bound(two_sites(group=np.array([0, 1])), prices) == near(17.5 + 0.5)
    assert price_bound(two_sites(), prices) == near(17.5 + 0.5)


@pytest.mark.parametrize("prices", [[1.0], [1.0, 2.0, 3.0], [[1.0, 2.0]], [1.0, np.nan], [np.inf, 1.0]])
def test_prices_that_do_not_fit_are_refused(prices: list[float]) -> None:
    """One finite price a customer, or a plain refusal."""
    with pytest.raises(ValueError, match="2 finite prices expected, one a customer"):
        price_bound(two_sites(), np.array(prices))


@pytest.mark.parametrize("feature", ["none", *FEATURES, "mixed"])
def test_against_trying_every_set_of_sites(feature: str) -> None:
    """The bound is what a textbook program gives for the same prices: one small programme a site, every set."""
    for seed in range(6):
        random = np.random.default_rng(seed)
        chosen = {name for name in FEATURES if random.random() < 0.4} if feature == "mixed" else {feature}
        case = random_case(random, 3, 4, chosen)
        prices, share = random.uniform(-5, 60, 4), float(random.choice([0.0, 0.5, 3.0]))
        expected = reference(case, prices, share)
        found = price_bound(case, prices, share)
        assert found == (expected if math.isinf(expected) else pytest.approx(expected, rel=1e-7, abs=1e-6))


def reference(case: Case, prices: np.ndarray, share: float) -> float:
    """Weak duality written out: prices, and the least of site costs and savings over the allowed sets."""
    near_least = share * case.demand.sum() * (case.share_within or 0.0) if case.share_distance is not None else 0.0
    needs = np.ones(case.n, bool) if case.cost_is_whole else case.demand > 0
    unmet = np.full(case.n, INF)
    if case.unmet_cost is not None:
        unmet = np.where(case.demand > 0, case.unmet_cost * case.demand, INF)
    price = np.where(needs, np.minimum(prices, unmet), 0.0)
    least_count = max(case.fewest_sites or 0, int((needs & np.isinf(unmet)).any()))
    saved = [site_programme(case, j, (price, share), needs, np.isinf(unmet)) for j in range(case.m)]
    best = INF
    for chosen in itertools.product([False, True], repeat=case.m):
        groups = [g for g, is_open in zip(case.group.tolist(), chosen, strict=True) if is_open and g >= 0]
        broken = any((r == OPEN and not c) or (r == CLOSED and c)
                     for r, c in zip(case.rule.tolist(), chosen, strict=True))
        most = case.m if case.most_sites is None else case.most_sites
        if broken or len(set(groups)) < len(groups) or not least_count <= sum(chosen) <= most:
            continue
        cost = 0.0
        for j, is_open in enumerate(chosen):
            if is_open:
                cost += case.fixed_cost[j] + (0.0 if case.today[j] else case.opening_cost[j]) + saved[j]
            elif case.today[j]:
                cost += case.closing_cost[j]
        best = min(best, float(cost))
    return float(price.sum()) + float(near_least) + best


def site_programme(
    case: Case, j: int, prices: tuple[np.ndarray, float], needs: np.ndarray, must: np.ndarray
) -> float:
    """Least of sum (cost - price) x over shares within the lanes' limits and the site's volumes.

    A site that cannot reach its least volume is filled as far as it goes: it can be in no plan anyway.
    """
    price, share = prices
    cost, upper = np.zeros(case.n), np.zeros(case.n)
    for i in np.flatnonzero(needs):
        longest = case.customer_longest[i]
        if np.isnan(longest):
            longest = INF if case.longest_distance is None else case.longest_distance
        far = case.distance is not None and case.distance[j, i] > longest
        if not np.isfinite(case.lane_cost[j, i]) or far:
            continue
        size = case.demand[i]
        cost[i] = case.lane_cost[j, i] * (1.0 if case.cost_is_whole else size) + case.handling_cost[j] * size
        upper[i] = 1.0
        if case.share_within and case.share_distance is not None and case.distance is not None:
            cost[i] -= share * size if case.distance[j, i] <= case.share_distance else 0.0
        if case.lane_most is not None and size > 0:
            upper[i] = min(1.0, case.lane_most[j, i] / size)
        if case.single_source[i] and must[i] and upper[i] < 1.0:
            upper[i] = 0.0
    capacity = min(float(case.capacity[j]), 1e9)
    least = min(float(case.least_volume[j]), capacity, float(case.demand @ upper))
    bounds = [(0.0, most) for most in upper]
    found = linprog(np.where(upper > 0, cost - price, 0.0), A_ub=np.vstack([case.demand, -case.demand]),
                    b_ub=[capacity, -least], bounds=bounds)
    return float(found.fun)


@pytest.mark.parametrize("seed", range(60))
def test_no_plan_undercuts_the_bound_with_a_share_rule_and_least_volumes(seed: int) -> None:
    """Any prices, every feature beside a share rule: the bound stays at or below the best plan by trying all."""
    rng = np.random.default_rng([11, seed])
    features = {"share within", *(name for name in FEATURES if rng.random() < 0.4)}
    case = random_case(rng, 3, 4, features)
    best = brute_force(case)
    for share in (None, 0.0, float(rng.uniform(0, 20))):
        bound = price_bound(case, rng.uniform(-30, 60, case.n), share)
        assert bound <= best + 1e-6 * abs(best) or math.isinf(best)


@pytest.mark.parametrize("seed", range(30))
def test_the_share_price_found_is_the_best(seed: int) -> None:
    """No share price tried gives a higher bound than the one that is looked up."""
    rng = np.random.default_rng([12, seed])
    features = {"share within", *(name for name in FEATURES if rng.random() < 0.3)}
    case, prices = random_case(rng, 4, 6, features), rng.uniform(-30, 60, 6)
    found = price_bound(case, prices)
    for share in [0.0, *(10.0 ** rng.uniform(-3, 3, 30))]:
        assert price_bound(case, prices, share) <= found + 1e-5 * (1 + abs(found)) or math.isinf(found)


def test_the_share_rule_by_hand() -> None:
    """All of 10 units near, at 5 more a unit than from afar: prices of the far costs and a share price of 5 prove it.

    Near site: fixed 0, 8 a unit; far site: fixed 0, 3 a unit. Without a share price only 30 of the 80 is proven.
    """
    case = plain_case([0.0, 0.0], [[8.0], [3.0]], [10.0], distance=np.array([[10.0], [90.0]]), share_within=1.0,
                      share_distance=50.0)
    assert price_bound(case, np.array([30.0]), 0.0) == near(30.0)
    assert price_bound(case, np.array([30.0]), 5.0) == near(80.0)
    assert price_bound(case, np.array([30.0])) == pytest.approx(80.0, abs=1e-5)


def test_a_least_volume_is_filled_at_a_loss() -> None:
    """Prices of 10 against costs of 12 save nothing; a site that must move 6 of 8 units then adds 3/4 of 4 lost."""
    case = plain_case([1.0], [[12.0, 14.0]], [4.0, 4.0], cost_is_whole=True, least_volume=np.array([6.0]))
    assert price_bound(case, np.array([10.0, 10.0])) == near(20 + 1 + 2 + 4 * 2 / 4)


@pytest.mark.parametrize("share", [-1.0, np.nan, np.inf])
def test_a_share_price_below_nothing_is_refused(share: float) -> None:
    """A share price is finite and 0 or more, or the sum would be no bound."""
    with pytest.raises(ValueError, match="share price of 0 or more"):
        price_bound(two_sites(), np.zeros(2), share)


@pytest.mark.parametrize("seed", range(40))
def test_the_bound_of_a_flip_never_exceeds_the_bound_of_the_case_with_that_rule(seed: int) -> None:
    """Any prices, any set: with the site forced the other way, ``price_bound`` says at least as much."""
    rng = np.random.default_rng([9, seed])
    features = frozenset(name for name in FEATURES if rng.random() < 0.4)
    case = random_case(rng, 5, 6, features)
    prices = rng.uniform(0, 40, case.n) * (rng.random(case.n) < 0.8)
    opened = rng.random(case.m) < 0.5
    told = flip_bounds(case, prices, opened)
    for j in range(case.m):
        if case.rule[j] != 0:
            assert told[j] == INF or told[j] <= price_bound(case, prices) + 1e-6
            continue
        rule = case.rule.copy()
        rule[j] = CLOSED if opened[j] else OPEN
        assert told[j] <= price_bound(replace(case, rule=rule), prices) + 1e-6
        assert told[j] >= price_bound(case, prices) - 1e-6 or told[j] == INF


def test_the_bound_of_a_flip_by_hand() -> None:
    """Prices 9 and 10 earn 11 at each site of 10: without S1 the bound is 18, with it 17 as before."""
    told = flip_bounds(two_sites(), np.array([9.0, 10.0]), np.array([True, False]))
    assert told == pytest.approx([18.0, 17.0])
