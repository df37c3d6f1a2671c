"""Answers about a choice of sites agree with every site set tried by hand."""

import itertools
from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.mip import Limits, Solved
from ledgersolve.site_selection.alternatives import promising, runner_up, why_closed, why_open
from ledgersolve.site_selection.asker import Asker, spoken
from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.binding import today_against_plan, what_binds
from ledgersolve.site_selection.case import CLOSED, OPEN, Case, Variant, plain_case
from ledgersolve.site_selection.counts import how_many
from ledgersolve.site_selection.firmness import changed, demand_off, how_firm
from ledgersolve.site_selection.neighbours import cost_neighbours
from ledgersolve.site_selection.plan import Plan
from ledgersolve.site_selection.questions import QUESTIONS, answer_questions
from ledgersolve.site_selection.solve import solve
from ledgersolve.site_selection.variants_regret import variants_regret

LIMITS = Limits(seconds=60)


def random_case(seed: int, m: int = 5, n: int = 8) -> Case:
    """Sites and customers on a line, with fixed costs that make two or three sites best."""
    rng = np.random.default_rng(seed)
    sites, customers = rng.uniform(0, 100, m), rng.uniform(0, 100, n)
    demand = rng.integers(1, 9, n).astype(float)
    lanes = np.abs(sites[:, None] - customers).round(2)
    return plain_case(rng.integers(60, 160, m), lanes, demand, handling_cost=rng.uniform(0, 2, m).round(2))


def every_set(case: Case) -> dict[frozenset[int], float]:
    """Cost of every set of open sites, each customer at its cheapest open one."""
    costs = {}
    unit = case.lane_cost + case.handling_cost[:, None]
    for size in range(1, case.m + 1):
        for chosen in itertools.combinations(range(case.m), size):
            service = float((unit[list(chosen)].min(axis=0) * case.demand).sum())
            costs[frozenset(chosen)] = float(case.fixed_cost[list(chosen)].sum()) + service
    return costs


def asked(case: Case) -> tuple[Asker, frozenset[int], dict[frozenset[int], float]]:
    """An asker about the best plan, its set, and all sets."""
    solved = solve(case, LIMITS)
    assert solved.plan is not None
    assert solved.cost is not None
    asker = Asker(case, solved.plan, solved.cost, LIMITS.start(), solved.bound)
    return asker, frozenset(np.flatnonzero(solved.plan.open).tolist()), every_set(case)


@pytest.mark.parametrize("seed", range(6))
def test_doing_without_a_site(seed) -> None:
    """The cost of doing without a site is the best of all sets that lack it."""
    case = random_case(seed)
    asker, best, sets = asked(case)
    answer = why_open(asker)
    assert len(answer.rows) == len(best)
    for row in answer.rows:
        j = case.sites.index(row[0])
        extra = min(cost for chosen, cost in sets.items() if j not in chosen) - sets[best]
        assert row[2] == pytest.approx(extra, abs=1e-6)
        assert row[3] == pytest.approx(extra, abs=1e-6)


@pytest.mark.parametrize("seed", range(6))
def test_insisting_on_a_site_and_the_fixed_cost_at_which_it_pays(seed) -> None:
    """At the fixed cost told, insisting on the site costs nothing more; a little dearer, it does."""
    case = random_case(seed)
    asker, best, sets = asked(case)
    for row in why_closed(asker).rows:
        j = case.sites.index(row[0])
        extra = min(cost for chosen, cost in sets.items() if j in chosen) - sets[best]
        assert row[2] == pytest.approx(extra, abs=1e-6)
        if row[5] is not None:
            fixed = case.fixed_cost.copy()
            fixed[j] = row[5]
            again = every_set(replace(case, fixed_cost=fixed))
            with_it = min(cost for chosen, cost in again.items() if j in chosen)
            assert with_it == pytest.approx(min(again.values()), abs=1e-6)


@pytest.mark.parametrize("seed", range(6))
def test_sets_next_to_the_plan_give_figures_that_no_answer_exceeds(seed) -> None:
    """With capacities and no time for more than given sites: each figure is a set's cost, and the least of them."""
    case = replace(random_case(seed), capacity=np.full(5, 30.0), most_sites=3)
    plan, cost = planned(case)
    asker = Asker(case, plan, cost, LIMITS.start())
    free = list(range(case.m))
    cost_neighbours(asker, free)
    assert asker.plans
    for told, other in asker.plans:
        assert audit(case, other).ok
        assert audit(case, other).total == pytest.approx(told)
        assert told >= cost - 1e-6
    for j in free:
        high = asker.known_flip(j).high
        truth = solve(asker.flipped(case, j), LIMITS)
        assert high is None or high >= truth.cost - 1e-6


@pytest.mark.parametrize("seed", range(4))
def test_the_curve_over_the_number_of_sites(seed) -> None:
    """Each count shows the best set of that size, split into site and service cost."""
    case = random_case(seed)
    asker, _, sets = asked(case)
    rows = how_many(asker).rows
    assert [row[0] for row in rows] == sorted(row[0] for row in rows)
    for row in rows:
        least = min(cost for chosen, cost in sets.items() if len(chosen) == row[0])
        assert row[3] == pytest.approx(least, rel=1e-9)
        assert row[1] + row[2] == pytest.approx(row[3], rel=1e-9)


@pytest.mark.parametrize("seed", range(8))
def test_the_runner_up_is_the_second_best_set(seed) -> None:
    """The best plan with one other site, and the best with two, both proven; one in place of one counts as one."""
    case = random_case(seed)
    asker, best, sets = asked(case)
    one, two = runner_up(asker).rows
    second = min(cost for chosen, cost in sets.items() if chosen != best) - sets[best]
    apart = min(cost for chosen, cost in sets.items()
                if max(len(chosen - best), len(best - chosen)) >= 2) - sets[best]
    for row, extra in ((one, second), (two, apart)):
        assert row[1:3] == (pytest.approx(extra, abs=1e-6), pytest.approx(extra, abs=1e-6))
        assert row[5].startswith("proven")


@pytest.mark.parametrize("seed", range(3))
def test_regret_when_demand_is_off(seed) -> None:
    """Keeping the sites costs what the sets say it costs."""
    case = random_case(seed)
    asker, best, _ = asked(case)
    for row in demand_off(asker).rows:
        sets = every_set(replace(case, demand=case.demand * (1 + row[0])))
        assert row[1] == pytest.approx(sets[best])
        assert row[2] == pytest.approx(min(sets.values()))
        assert row[3] == pytest.approx(sets[best] - min(sets.values()), abs=1e-6)


@pytest.mark.parametrize("seed", range(3))
def test_the_range_over_which_the_sites_stay_best(seed) -> None:
    """Inside the range the set is best in every step; the next step outside it is not."""
    case = random_case(seed)
    asker, best, _ = asked(case)
    for row, lever in zip(how_firm(asker).rows, ("demand", "lane rates", "fixed costs"), strict=True):
        low, high = round(100 * row[1]), round(100 * row[2])
        for percent in range(-50, 55, 5):
            sets = every_set(changed(case, lever, percent))
            is_best = sets[best] <= min(sets.values()) * (1 + 1e-4)
            assert is_best == (low <= percent <= high)


def test_a_full_site_is_asked_about() -> None:
    """S1 is full at 10; one more tenth of capacity saves one unit's detour of 5."""
    case = plain_case([0, 0], [[1, 1], [6, 6]], [8, 8], capacity=np.array([10.0, 20.0]))
    asker = Asker(case, *planned(case), LIMITS.start(), planned(case)[1])
    one, tenth = what_binds(asker).rows
    assert (one[0], one[1], tenth[0]) == ("S1 is full", "one unit more", "S1 is full")
    assert one[2] == pytest.approx(5)
    assert tenth[2] == pytest.approx(5)


def planned(case: Case) -> tuple[Plan, float]:
    """Plan and cost of a case that has one."""
    solved = solve(case, LIMITS)
    assert solved.plan is not None
    assert solved.cost is not None
    return solved.plan, solved.cost


def test_a_count_at_its_limit_is_asked_about() -> None:
    """With one site allowed, a second would save 40 of service for 5."""
    case = plain_case([5, 5], [[1, 41], [41, 1]], [1, 1], most_sites=1)
    rows = what_binds(Asker(case, *planned(case), LIMITS.start(), planned(case)[1])).rows
    assert rows[0][2] == pytest.approx(35)


def test_what_more_search_saves_is_no_saving_of_a_looser_rule() -> None:
    """As if the plan cost 82 over a bound of 40: two sites cost 12, so that 28 at least are due to the rule."""
    case = plain_case([5, 5], [[1, 41], [41, 1]], [1, 1], most_sites=1)
    poor, _ = planned(replace(case, rule=np.array([OPEN, CLOSED])))
    row = what_binds(Asker(case, poor, 82.0, LIMITS.start(), 40.0)).rows[0]
    assert row[2:4] == (pytest.approx(28), pytest.approx(70))
    unknown = what_binds(Asker(case, poor, 82.0, LIMITS.start())).rows[0]
    assert unknown[2:4] == (None, pytest.approx(70))


@pytest.mark.parametrize("seed", range(6))
def test_what_a_looser_rule_saves_is_what_every_set_says(seed) -> None:
    """Counts, closed and open sites: the saving is the difference of the best sets under both rules."""
    case = random_case(seed)
    rule = np.array([CLOSED, OPEN, 0, 0, CLOSED])
    case = replace(case, rule=rule, most_sites=2)

    def best(most: int, closed: set[int], opened: set[int]) -> float:
        return min(cost for chosen, cost in every_set(case).items()
                   if len(chosen) <= most and not chosen & closed and opened <= chosen)

    own = best(2, {0, 4}, {1})
    truth = {"one more site": best(3, {0, 4}, {1}), "free": None}
    asker, _, _ = asked(case)
    assert asker.base_cost == pytest.approx(own)
    free = {"2 sites set to closed": best(2, set(), {1}), "1 sites set to open": best(2, {0, 4}, set())}
    for row in what_binds(asker).rows:
        cost = free.get(row[0], truth.get(row[1]))
        assert row[2:4] == (pytest.approx(own - cost, abs=1e-6), pytest.approx(own - cost, abs=1e-6))


def test_regret_under_variants_is_that_of_every_set() -> None:
    """Keeping the sites under each variant against the best set; a variant that closes one of them is told."""
    case = random_case(3)
    asker, best, sets = asked(case)
    shut = case.sites[min(best)]
    case = replace(case, variants=(Variant("dear", lane_cost_factor=2.0), Variant("shut", closed=(shut,)),
                                   Variant("few", most_sites=1)))
    asker = Asker(case, asker.base, asker.base_cost, LIMITS.start())
    solved = [solve(case.under(variant), LIMITS) for variant in case.variants]
    dear, closed, few = variants_regret(asker, solved).rows
    twice = every_set(case.under(case.variants[0]))
    assert dear[1] == pytest.approx(twice[best])
    assert dear[3] == pytest.approx(twice[best] - min(twice.values()), abs=1e-6)
    assert closed[4] == f"not with these sites: it closes {shut}"
    assert closed[2] == pytest.approx(min(cost for chosen, cost in sets.items() if min(best) not in chosen))
    assert (few[3] is None) == (len(best) > 1)


def test_today_against_the_plan_counts_who_moves() -> None:
    """Today S1 serves both; the plan moves C2 with its 5 units to S2."""
    case = plain_case([5, 5], [[1, 41], [41, 1]], [4, 5], today=np.array([True, False]),
                      distance=np.array([[10.0, 90.0], [90.0, 20.0]]))
    plan, cost = planned(case)
    today, today_cost = planned(case.as_today())
    answer = today_against_plan(case, plan, today, today_cost, cost)
    assert "Opens: S2" in answer.words
    assert "1 customer gets another site, with 5 unit" in answer.words
    figures = {row[0]: row[1:3] for row in answer.rows}
    assert figures["Mean distance per unit"] == pytest.approx(((4 * 10 + 5 * 90) / 9, (4 * 10 + 5 * 20) / 9))
    assert figures["Longest distance"] == (90.0, 20.0)
    assert figures["of which for sites"] == (5.0, 10.0)
    assert figures["of which for service"] == (4 * 1 + 5 * 41, 4 * 1 + 5 * 1)
    assert figures["Demand within 20 km"] == (pytest.approx(400 / 9), 100.0)


def test_forced_and_closed_sites_are_not_asked_about() -> None:
    """Sites that the workbook decides are left as they are, and told so."""
    case = replace(random_case(1), rule=np.array([OPEN, CLOSED, 0, 0, 0]))
    asker, _, _ = asked(case)
    rows = {row[0]: row for row in why_open(asker).rows}
    assert rows["S1"][4] == "must be open by its rule"
    assert 1 not in promising(asker)


def test_no_time_gives_words_and_no_figures() -> None:
    """With the clock over, every figure stays empty and says why."""
    case = random_case(2)
    plan, cost = planned(case)
    over = Limits(seconds=1, cancelled=lambda: True)
    answers = answer_questions(case, Solved(solve(case, LIMITS).verdict, plan, cost, cost), over)
    assert len(answers) == len(QUESTIONS)
    told = {answer.question: answer for answer in answers}
    for row in told["Why each of these sites?"].rows:
        assert row[2] is None
        assert "not answered" in row[4]


def test_sentences_name_sites_as_people_do() -> None:
    """A site goes by its name; by its code where the name is long or would read as two."""
    case = random_case(1)
    names = ("Hamburg", "Halls, small", "x" * 41, "Leipzig: old", "Munich")
    case = replace(case, site_names=names)
    assert [spoken(case, j) for j in range(5)] == ["Hamburg", case.sites[1], case.sites[2], case.sites[3], "Munich"]
    asker, best, _ = asked(case)
    assert any(spoken(case, j) in why_open(asker).words for j in best)
