"""A plan recomputed from the checked rows alone: its cost by parts, and every rule of the workbook.

Shares no code with lanes, models, bounds or searches: each formula is written out again from the contract, so
that a mistake there cannot hide here. Rules hold within a relative 1e-6 of the figure required.
"""

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike

from ledgersolve.findings import Audit, Check, CostPart
from ledgersolve.site_selection.case import CLOSED, OPEN, Case, Floats
from ledgersolve.site_selection.plan import Plan

TOLERANCE = 1e-6
NAMED_FAULTS = 10
"""At most so many broken rows of one rule are listed one by one."""

Words = Callable[[int], str]


def audit(case: Case, plan: Plan) -> Audit:
    """Recompute a plan: cost parts in money per period covered, and one check a rule (more where broken).

    Raises
    ------
    ValueError
        The plan is not shaped for the case, so that nothing can be recomputed.
    """
    _fitting(case, plan)
    checks = [
        *_deliveries(case, plan), *_service(case, plan), *_unmet(case, plan), *_promises(case, plan),
        *_share_within(case, plan), *_single_sourcing(case, plan), *_capacities(case, plan),
        *_least_volumes(case, plan), *_lane_most(case, plan), *_rules(case, plan), *_counts(case, plan),
        *_groups(case, plan),
    ]
    return Audit(_parts(case, plan), tuple(checks))


def _fitting(case: Case, plan: Plan) -> None:
    m, n = len(case.sites), len(case.customers)
    size = plan.site.shape
    shaped = (
        plan.open.shape == (m,) and plan.unmet.shape == (n,)
        and plan.customer.shape == size and plan.share.shape == size and len(size) == 1
    )
    if not shaped:
        raise ValueError("the plan's arrays do not fit the case")
    known = (plan.site >= 0) & (plan.site < m) & (plan.customer >= 0) & (plan.customer < n)
    if not (known.all() and np.isfinite(plan.share).all() and np.isfinite(plan.unmet).all()):
        raise ValueError("the plan names an unknown site or customer, or a share that is not a number")


def _parts(case: Case, plan: Plan) -> tuple[CostPart, ...]:
    started = plan.open & ~case.today
    ended = case.today & ~plan.open
    units = plan.share * case.demand[plan.customer]
    rate = case.lane_cost[plan.site, plan.customer]
    rate = np.where(np.isfinite(rate), rate, 0.0)  # a lane that does not exist fails its check instead
    lanes = float((rate * (plan.share if case.cost_is_whole else units)).sum())
    unmet = 0.0 if case.unmet_cost is None else case.unmet_cost * float((plan.unmet * case.demand).sum())
    return (
        CostPart("Fixed cost of open sites", float(case.fixed_cost[plan.open].sum())),
        CostPart("Opening cost", float(case.opening_cost[started].sum())),
        CostPart("Closing cost", float(case.closing_cost[ended].sum())),
        CostPart("Lane cost", lanes),
        CostPart("Handling cost", float((case.handling_cost[plan.site] * units).sum())),
        CostPart("Unmet demand cost", unmet),
    )


def _deliveries(case: Case, plan: Plan) -> list[Check]:
    """Deliveries are positive, come from open sites, on lanes that exist, and no lane is named twice."""
    lane = _lane_names(case, plan)
    shut = np.where(plan.open[plan.site], 0.0, 1.0)
    missing = np.where(np.isfinite(case.lane_cost[plan.site, plan.customer]), 0.0, 1.0)
    _, first = np.unique(plan.site * len(case.customers) + plan.customer, return_index=True)
    again = np.ones(plan.site.size)
    again[first] = 0.0
    small = np.where(plan.share > 0, 0.0, 1.0)
    everyone = _all(plan.site.size, "delivery", "deliveries")
    return [
        *_each("Open site", everyone, shut, lane, "from an open site", "the site is closed"),
        *_each("Lane", everyone, missing, lane, "a lane that exists and is allowed", "no such lane"),
        *_each("Lane named once", everyone, again, lane, "once", "again"),
        *_each("Delivered share", everyone, small, lane, "above 0", _figures(plan.share)),
    ]


def _service(case: Case, plan: Plan) -> list[Check]:
    """What is delivered and what stays unmet make up each customer's demand."""
    total = np.bincount(plan.customer, weights=plan.share, minlength=len(case.customers)) + plan.unmet
    wanted = np.full(len(case.customers), True) if case.cost_is_whole else case.demand > 0
    off = np.where(wanted, np.abs(total - 1.0), np.maximum(total - 1.0, 0.0))
    everyone = _all(len(case.customers), "customer")
    required = "delivered and unmet together the whole demand"
    got = _figures(100 * total, " %")
    return _each("Demand", everyone, _beyond(off, 1.0), _customer(case), required, got)


def _unmet(case: Case, plan: Plan) -> list[Check]:
    everyone = _all(len(case.customers), "customer")
    got = _figures(100 * plan.unmet, " % unmet")
    if case.unmet_cost is None:
        off = _beyond(np.abs(plan.unmet), 1.0)
        return _each("Unmet demand", everyone, off, _customer(case), "none", got)
    most = np.where(case.demand > 0, 1.0, 0.0)
    off = _beyond(np.maximum(-plan.unmet, plan.unmet - most), 1.0)
    return _each("Unmet demand", everyone, off, _customer(case), "from none to all of the demand", got)


def _promises(case: Case, plan: Plan) -> list[Check]:
    """No customer is served from farther away than promised."""
    general = np.inf if case.longest_distance is None else case.longest_distance
    promises = np.where(np.isnan(case.customer_longest), general, case.customer_longest)
    if not np.isfinite(promises).any():
        return []
    promise = promises[plan.customer]
    known = np.full(plan.site.size, np.nan)
    if case.distance is not None:
        known = case.distance[plan.site, plan.customer]
    beyond = np.where(np.isnan(known) & np.isfinite(promise), np.inf, 0.0)
    np.subtract(known, promise, out=beyond, where=~np.isnan(known) & np.isfinite(promise))
    everyone = _all(int(np.isfinite(promise).sum()), "delivery under a promise", "deliveries under a promise")
    unit = f" {case.distance_unit}"
    required = _figures(promise, unit, "at most ")
    off = _beyond(beyond, np.where(np.isfinite(promise), promise, 1.0))
    return _each("Longest distance", everyone, off, _lane_names(case, plan), required, _figures(known, unit))


def _share_within(case: Case, plan: Plan) -> list[Check]:
    """Enough of all demand is served from near by; unmet demand counts as not served."""
    if case.share_within is None or case.share_distance is None:
        return []
    total = float(case.demand.sum())
    close = np.zeros(plan.site.size, dtype=bool)
    if case.distance is not None:
        close = case.distance[plan.site, plan.customer] <= case.share_distance * (1.0 + TOLERANCE)
    within = float((plan.share * case.demand[plan.customer])[close].sum())
    share = within / total if total > 0 else 1.0
    off = _beyond(np.array([case.share_within - share]), 1.0)
    reach = f"{_figure(case.share_distance)} {case.distance_unit}"
    required = f"at least {_figure(100 * case.share_within)} % within {reach}"
    subject = f"all demand ({_figure(total)} {case.demand_unit})"
    got = f"{_figure(100 * share)} %"
    return [Check("Share within distance", subject, required, got, float(off[0]), ok=bool(off[0] == 0))]


def _single_sourcing(case: Case, plan: Plan) -> list[Check]:
    if not case.single_source.any():
        return []
    sources = np.bincount(plan.customer, minlength=len(case.customers))
    extra = np.where(case.single_source, np.maximum(sources - 1.0, 0.0), 0.0)
    everyone = _all(
        int(case.single_source.sum()), "customer with a single source", "customers with a single source")
    return _each("Single source", everyone, extra, _customer(case), "one site", _figures(sources, " sites"))


def _capacities(case: Case, plan: Plan) -> list[Check]:
    capped = np.isfinite(case.capacity)
    if not capped.any():
        return []
    volume = _site_volume(case, plan)
    limit = np.where(capped, case.capacity, 0.0)
    over = _beyond(np.where(capped, volume - limit, 0.0), limit)
    everyone = _all(int(capped.sum()), "site with a capacity", "sites with a capacity")
    required = _figures(case.capacity, _unit(case), "at most ")
    return _each("Capacity", everyone, over, _site(case), required, _figures(volume, _unit(case)))


def _least_volumes(case: Case, plan: Plan) -> list[Check]:
    asked = (case.least_volume > 0) & plan.open
    if not (case.least_volume > 0).any():
        return []
    volume = _site_volume(case, plan)
    under = _beyond(np.where(asked, case.least_volume - volume, 0.0), case.least_volume)
    everyone = _all(
        int(asked.sum()), "open site with a least volume", "open sites with a least volume")
    required = _figures(case.least_volume, _unit(case), "at least ")
    return _each("Least volume", everyone, under, _site(case), required, _figures(volume, _unit(case)))


def _lane_most(case: Case, plan: Plan) -> list[Check]:
    if case.lane_most is None:
        return []
    most = case.lane_most[plan.site, plan.customer]
    units = plan.share * case.demand[plan.customer]
    finite = np.where(np.isfinite(most), most, 0.0)
    over = _beyond(np.where(np.isfinite(most), units - finite, 0.0), finite)
    everyone = _all(plan.site.size, "delivery", "deliveries")
    required = _figures(most, _unit(case), "at most ")
    got = _figures(units, _unit(case))
    return _each("Most on a lane", everyone, over, _lane_names(case, plan), required, got)


def _rules(case: Case, plan: Plan) -> list[Check]:
    wrong = ((case.rule == OPEN) & ~plan.open) | ((case.rule == CLOSED) & plan.open)
    ruled = int(((case.rule == OPEN) | (case.rule == CLOSED)).sum())
    if ruled == 0:
        return []

    def required(k: int) -> str:
        return "open" if case.rule[k] == OPEN else "closed"

    def got(k: int) -> str:
        return "open" if plan.open[k] else "closed"

    off = wrong.astype(np.float64)
    return _each("Site rule", _all(ruled, "site with a rule", "sites with a rule"), off, _site(case), required, got)


def _counts(case: Case, plan: Plan) -> list[Check]:
    running = int(plan.open.sum())
    got = f"{running} open"
    checks = []
    if case.fewest_sites is not None:
        off = float(max(0, case.fewest_sites - running))
        checks.append(Check("Fewest sites", "all sites", f"at least {case.fewest_sites}", got, off, off == 0))
    if case.most_sites is not None:
        off = float(max(0, running - case.most_sites))
        checks.append(Check("Most sites", "all sites", f"at most {case.most_sites}", got, off, off == 0))
    return checks


def _groups(case: Case, plan: Plan) -> list[Check]:
    grouped = case.group >= 0
    if not grouped.any():
        return []
    count = int(case.group.max()) + 1
    running = np.bincount(case.group[plan.open & grouped], minlength=count)

    def name(k: int) -> str:
        return f"group {case.group_names[k] if k < len(case.group_names) else k + 1}"

    off = np.maximum(running - 1.0, 0.0)
    got = _figures(running, " open")
    return _each("Group", _all(count, "group"), off, name, "at most one site open", got)


def _each(
    rule: str, everyone: str, excess: Floats, name: Words, required: str | Words, got: str | Words
) -> list[Check]:
    """One check that says all is well, or one for each of the worst broken rows and one for the rest.

    ``excess`` is by how much each row breaks the rule, 0 where it holds.
    """
    broken = np.flatnonzero(excess > 0)
    general = required if isinstance(required, str) else "each its own figure"
    if broken.size == 0:
        return [Check(rule, everyone, general, "holds", 0.0, ok=True)]
    worst = broken[np.argsort(-excess[broken], kind="stable")].tolist()
    checks = [
        Check(rule, name(k), _said(required, k), _said(got, k), float(excess[k]), ok=False)
        for k in worst[:NAMED_FAULTS]
    ]
    rest = worst[NAMED_FAULTS:]
    if rest:
        checks.append(Check(rule, f"{len(rest)} more", general, "broken", float(excess[rest[0]]), ok=False))
    return checks


def _said(words: str | Words, k: int) -> str:
    return words if isinstance(words, str) else words(k)


def _beyond(excess: Floats, scale: ArrayLike) -> Floats:
    """Excess that counts: 0 within the tolerance of the figure required."""
    return np.where(excess > TOLERANCE * np.asarray(scale), excess, 0.0)


def _site_volume(case: Case, plan: Plan) -> Floats:
    units = plan.share * case.demand[plan.customer]
    return np.bincount(plan.site, weights=units, minlength=len(case.sites)).astype(np.float64)


def _all(count: int, one: str, many: str = "") -> str:
    """``all 12 customers``, and ``the only customer`` where there is one."""
    return f"the only {one}" if count == 1 else f"all {count} {many or one + 's'}"


def _unit(case: Case) -> str:
    return f" {case.demand_unit}"


def _lane_names(case: Case, plan: Plan) -> Words:
    return lambda k: f"site {case.sites[plan.site[k]]} to customer {case.customers[plan.customer[k]]}"


def _customer(case: Case) -> Words:
    return lambda k: f"customer {case.customers[k]}"


def _site(case: Case) -> Words:
    return lambda k: f"site {case.sites[k]}"


def _figures(values: ArrayLike, after: str = "", before: str = "") -> Words:
    return lambda k: f"{before}{_figure(float(np.asarray(values)[k]))}{after}"


def _figure(value: float) -> str:
    return f"{value:,.6g}" if abs(value) < 1e6 else f"{value:,.0f}"
