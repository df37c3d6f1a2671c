"""The elastic model: each rule of a case can be given slack at a price, to find the least needed.

All costs are zero here; only slack is paid for, one a unit (of demand, of distance, a site). The least total
is the smallest change of that kind. (Elastic programming; Chinneck & Dravnieks 1991.)
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from ledgersolve.mip import Clock, LinearResult
from ledgersolve.site_selection.case import CLOSED, FREE, Case, Floats, Ints
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.model import SiteModel, build

LARGE = 150_000
"""Lanes from which on whole-number conditions are left out at first: the slack is then a lower limit, and the run
with them is there to find what is enough."""
TINY = 1e-7


@dataclass(frozen=True)
class Loosened:
    """Least slack of one kind. ``amounts`` has one figure for each of ``where`` (sites or customers).

    ``enough``: a plan exists once the amounts are given. ``least`` is what every plan asks for together, proven;
    of kinds loosened together it is the amount where the sum of all is the least, and else 0.
    """

    kind: str
    where: Ints
    amounts: Floats
    enough: bool
    least: float

    @property
    def total(self) -> float:
        """Slack in all."""
        return float(self.amounts.sum())

    @property
    def exact(self) -> bool:
        """Whether the amounts are enough, and no plan needs less."""
        return self.enough and self.least >= self.total * (1 - 1e-6) - TINY


@dataclass
class _Elastic:
    """A model under construction: rows with slack, and what the slack variables stand for."""

    case: Case
    lanes: Lanes
    built: SiteModel
    exact: bool
    slacks: list[tuple[str, Ints, Ints]]
    too_far: Floats | None = None

    def slack(self, kind: str, where: Ints, *, whole: bool = False) -> Ints:
        """Add one slack variable for each of ``where``, at a price of one."""
        numbers = self.built.model.add_variables(where.size, cost=1.0, whole=whole and self.exact)
        self.slacks.append((kind, where, numbers))
        return numbers

    def units(self, j: int) -> tuple[Ints, Floats]:
        """Variables and units of the deliveries of site j."""
        on = np.flatnonzero(self.built.site == j)
        return self.built.x[on], self.lanes.demand[self.built.customer[on]]


Kind = str
KINDS: tuple[Kind, ...] = (
    "capacity", "least volume", "most sites", "fewest sites", "closed", "open", "promise", "share within",
    "single source", "lane most", "unmet",
)


def loosen(case: Case, clock: Clock) -> list[Loosened]:
    """Give the least slack of every kind that alone makes a plan possible (kinds the case has)."""
    kinds = [kind for kind in KINDS if kind != "unmet" and _applies(case, kind)]
    found = []
    for number, kind in enumerate(kinds):
        share = clock.left() / (len(kinds) - number + 2)
        part = _least(case, (kind,), share, clock)
        found += [loosened for loosened in part or [] if loosened.total > TINY or kind in _YES_NO]
    return found


def loosen_all(case: Case, clock: Clock) -> list[Loosened]:
    """Give the least slack of all kinds together, for cases that no single rule mends.

    Rules that hold or do not, without an amount between, are given up only where the others are not enough.
    """
    kinds = tuple(kind for kind in KINDS if kind != "unmet" and _applies(case, kind))
    measured = tuple(kind for kind in kinds if kind not in _YES_NO)
    found = _least(case, measured, clock.left() / 3, clock)
    if found is None and len(measured) < len(kinds):
        found = _least(case, kinds, clock.left() / 2, clock)
    return [part for part in found or [] if part.total > TINY or part.kind in _YES_NO]


@dataclass(frozen=True)
class Bent:
    """A plan of the elastic model, and the slack that it takes besides demand left unmet."""

    built: SiteModel
    lanes: Lanes
    result: LinearResult
    loosened: tuple[Loosened, ...] = ()


def least_unmet(case: Case, seconds: float, clock: Clock) -> Bent | None:
    """Solve for the least demand that stays unmet when all other rules hold; None if they cannot."""
    elastic = _model(case, ("unmet",))
    result = elastic.built.model.solve(seconds, cancelled=clock.limits.cancelled)
    return None if result.values is None else Bent(elastic.built, elastic.lanes, result)


def least_bent(case: Case, seconds: float, clock: Clock) -> Bent | None:
    """Solve for the least slack of all kinds together, demand left unmet among them."""
    kinds = tuple(kind for kind in KINDS if _applies(case, kind))
    measured = tuple(kind for kind in kinds if kind not in _YES_NO)
    for tried in dict.fromkeys((measured, kinds)):
        elastic = _model(case, tried)
        result = elastic.built.model.solve(seconds / 2, cancelled=clock.limits.cancelled)
        if result.values is not None:
            found = _loosened(elastic, tried, result, 0.0)
            return Bent(elastic.built, elastic.lanes, result,
                        tuple(part for part in found if part.total > TINY or part.kind in _YES_NO))
    return None


_YES_NO = ("single source", "lane most")


def _applies(case: Case, kind: Kind) -> bool:
    tests: dict[Kind, bool] = {
        "capacity": bool(np.isfinite(case.capacity).any()),
        "least volume": bool((case.least_volume > 0).any()),
        "most sites": case.most_sites is not None and case.most_sites < case.m,
        "fewest sites": bool(case.fewest_sites),
        "closed": bool((case.rule == CLOSED).any()),
        "open": bool((case.rule == 1).any()),
        "promise": case.distance is not None and bool(np.isfinite(case.promised()).any()),
        "share within": bool(case.share_within),
        "single source": bool(case.single_source.any()),
        "lane most": case.lane_most is not None,
        "unmet": True,
    }
    return tests[kind]


def _least(case: Case, kinds: tuple[Kind, ...], seconds: float, clock: Clock) -> list[Loosened] | None:
    elastic = _model(case, kinds)
    result = elastic.built.model.solve(max(seconds / 2, 0.2), cancelled=clock.limits.cancelled)
    if result.status == "infeasible":
        return None
    least = max(float(result.bound), 0.0)
    if not elastic.exact:
        whole = _model(case, kinds, large=True)
        again = whole.built.model.solve(max(seconds / 2, 0.2), cancelled=clock.limits.cancelled)
        if again.status == "infeasible":
            return None
        least = max(least, float(again.bound))
        if again.values is not None:
            elastic, result = whole, again
    if result.values is None:
        return None
    return _loosened(elastic, kinds, result, least)


def _loosened(elastic: _Elastic, kinds: tuple[Kind, ...], result: LinearResult, least: float) -> list[Loosened]:
    """Read the slack of every kind from a solved model; ``least`` is proven for all of them together."""
    if result.values is None:
        return []
    enough = elastic.exact
    joint = least >= float(result.objective) * (1 - 1e-6) - TINY
    found = []
    for kind, where, numbers in elastic.slacks:
        amounts = _too_far(elastic, where, result.values) if kind == "promise" else result.values[numbers]
        used = amounts > TINY
        low = least if len(elastic.slacks) == 1 else float(amounts[used].sum()) if joint else 0.0
        found.append(Loosened(kind, where[used], amounts[used], enough, low))
    nowhere = np.zeros(0, dtype=np.int64)
    found += [Loosened(kind, nowhere, np.zeros(0), enough, 0.0) for kind in kinds if kind in _YES_NO]
    return found


def _too_far(elastic: _Elastic, customers: Ints, values: Floats) -> Floats:
    """How far each customer's longest delivery goes beyond its promise; a split one weighs as its longest part."""
    beyond = np.zeros(elastic.case.n)
    if elastic.too_far is not None:
        there = values[elastic.built.x] > TINY
        np.maximum.at(beyond, elastic.built.customer[there], elastic.too_far[there])
    return beyond[customers]


def _model(case: Case, kinds: tuple[Kind, ...], *, large: bool = False) -> _Elastic:
    """Build the model with slack of some kinds; whole-number conditions also where it is ``large``, if so asked."""
    loose = _without(case, kinds)
    lanes = Lanes.of(loose)
    # with every cost gone, only slack is paid for
    free = replace(
        lanes, cost=np.where(np.isfinite(lanes.cost), 0.0, np.inf), site_cost=np.zeros(case.m), offset=0.0,
        unmet_cost=np.where(np.isfinite(lanes.unmet_cost), 0.0, np.inf),
        **_without_rows(lanes, kinds),
    )
    if "unmet" in kinds:
        free = replace(free, unmet_cost=np.where(np.isfinite(lanes.unmet_cost), 0.0, case.demand))
    exact = large or int(np.isfinite(free.cost).sum()) <= LARGE
    elastic = _Elastic(case, lanes, build(free, relaxed=not exact), exact, [])
    for kind in kinds:
        if kind in _ROWS:
            _ROWS[kind](elastic)
    return elastic


def _without(case: Case, kinds: tuple[Kind, ...]) -> Case:
    """Give the case without the rules that decide single lanes and sites."""
    rule = case.rule.copy()
    if "closed" in kinds:
        rule[rule == CLOSED] = FREE
    if "open" in kinds:
        rule[rule == 1] = FREE
    changed = replace(case, rule=rule, variants=())
    if "promise" in kinds:
        changed = replace(changed, longest_distance=None, customer_longest=np.full(case.n, np.nan))
    if "single source" in kinds:
        changed = replace(changed, single_source=np.zeros(case.n, dtype=bool))
    return replace(changed, lane_most=None) if "lane most" in kinds else changed


def _without_rows(lanes: Lanes, kinds: tuple[Kind, ...]) -> dict[str, Any]:
    rows: dict[Kind, dict[str, Any]] = {
        "capacity": {"capacity": np.full(lanes.m, np.inf)},
        "least volume": {"least": np.zeros(lanes.m)},
        "most sites": {"most": lanes.m},
        "fewest sites": {"fewest": 0},
        "share within": {"near": None, "near_least": 0.0},
    }
    return {name: value for kind in kinds for name, value in rows.get(kind, {}).items()}


def _capacity_rows(elastic: _Elastic) -> None:
    sites = np.flatnonzero(np.isfinite(elastic.lanes.capacity)).astype(np.int64)
    extra = elastic.slack("capacity", sites)
    for number, j in enumerate(sites):
        x, units = elastic.units(int(j))
        variables = np.concatenate([x, [elastic.built.y[j], extra[number]]])
        entries = np.concatenate([units, [-elastic.lanes.capacity[j], -1.0]])
        elastic.built.model.add_row(variables, entries, upper=0.0)
    if sites.size:  # extra capacity only where a site is open: the whole demand is more than enough
        _only_if_open(elastic, sites, extra, float(elastic.case.demand.sum()))


def _only_if_open(elastic: _Elastic, sites: Ints, extra: Ints, most: float) -> None:
    rows = np.arange(sites.size)
    variables = np.concatenate([extra, elastic.built.y[sites]])
    entries = np.concatenate([np.ones(sites.size), np.full(sites.size, -most)])
    elastic.built.model.add_rows(sites.size, np.tile(rows, 2), variables, entries, upper=0.0)


def _least_rows(elastic: _Elastic) -> None:
    sites = np.flatnonzero(elastic.lanes.least > 0).astype(np.int64)
    lacking = elastic.slack("least volume", sites)
    for number, j in enumerate(sites):
        x, units = elastic.units(int(j))
        variables = np.concatenate([x, [elastic.built.y[j], lacking[number]]])
        entries = np.concatenate([units, [-elastic.lanes.least[j], 1.0]])
        elastic.built.model.add_row(variables, entries, lower=0.0)


def _most_row(elastic: _Elastic) -> None:
    more = elastic.slack("most sites", np.zeros(1, dtype=np.int64), whole=True)
    variables = np.append(elastic.built.y, more)
    entries = np.append(np.ones(elastic.case.m), -1.0)
    elastic.built.model.add_row(variables, entries, upper=float(elastic.lanes.most))


def _fewest_row(elastic: _Elastic) -> None:
    fewer = elastic.slack("fewest sites", np.zeros(1, dtype=np.int64), whole=True)
    variables = np.append(elastic.built.y, fewer)
    elastic.built.model.add_row(variables, np.ones(variables.size), lower=float(elastic.lanes.fewest))


def _closed_rows(elastic: _Elastic) -> None:
    sites = np.flatnonzero(elastic.case.rule == CLOSED).astype(np.int64)
    opened = elastic.slack("closed", sites)
    _paired(elastic, elastic.built.y[sites], opened, -1.0, 0.0)


def _open_rows(elastic: _Elastic) -> None:
    sites = np.flatnonzero(elastic.case.rule == 1).astype(np.int64)
    left_out = elastic.slack("open", sites)
    rows = np.arange(sites.size)
    variables = np.concatenate([elastic.built.y[sites], left_out])
    elastic.built.model.add_rows(sites.size, np.tile(rows, 2), variables, 1.0, lower=1.0)


def _paired(elastic: _Elastic, first: Ints, second: Ints, factor: float, upper: float) -> None:
    """Add the rows first + factor x second <= upper."""
    rows = np.arange(first.size)
    entries = np.concatenate([np.ones(first.size), np.full(first.size, factor)])
    elastic.built.model.add_rows(
        first.size, np.tile(rows, 2), np.concatenate([first, second]), entries, upper=upper
    )


def _promise_rows(elastic: _Elastic) -> None:
    """Each customer's promise may be loosened by so many kilometres (or miles) as its lanes need."""
    case, built = elastic.case, elastic.built
    distance = case.distance
    if distance is None:
        return
    promised = case.promised()
    over = np.maximum(0.0, distance[built.site, built.customer] - promised[built.customer])
    elastic.too_far = over
    far = np.flatnonzero(over > 0)
    customers, place = np.unique(built.customer[far], return_inverse=True)
    beyond = elastic.slack("promise", customers.astype(np.int64))
    _paired_scaled(elastic, built.x[far], beyond[place], over[far])


def _paired_scaled(elastic: _Elastic, x: Ints, slack: Ints, over: Floats) -> None:
    """Add the rows over x share <= slack; exact for unsplit customers, a lower limit for split ones."""
    rows = np.arange(x.size)
    entries = np.concatenate([over, np.full(x.size, -1.0)])
    elastic.built.model.add_rows(x.size, np.tile(rows, 2), np.concatenate([x, slack]), entries, upper=0.0)


def _share_row(elastic: _Elastic) -> None:
    lanes, built = elastic.lanes, elastic.built
    if lanes.near is None:
        return
    lacking = elastic.slack("share within", np.zeros(1, dtype=np.int64))
    on = np.flatnonzero(lanes.near[built.site, built.customer])
    variables = np.append(built.x[on], lacking)
    entries = np.append(lanes.demand[built.customer[on]], 1.0)
    built.model.add_row(variables, entries, lower=lanes.near_least)


_ROWS: dict[Kind, Callable[[_Elastic], None]] = {
    "capacity": _capacity_rows,
    "least volume": _least_rows,
    "most sites": _most_row,
    "fewest sites": _fewest_row,
    "closed": _closed_rows,
    "open": _open_rows,
    "promise": _promise_rows,
    "share within": _share_row,
}
