"""Questions 3 and 6: today against the plan, and what binds."""

from collections.abc import Callable, Iterator
from dataclasses import replace

import numpy as np

from ledgersolve.findings import Answered, Column
from ledgersolve.site_selection.asker import Asker, codes, money
from ledgersolve.site_selection.case import Case, Floats
from ledgersolve.site_selection.plan import Plan

FULL = 0.999
"""A site counts as full from this share of its capacity."""
MOST_FULL = 5
"""Full sites that are asked about."""


def today_against_plan(case: Case, plan: Plan, today: Plan, today_cost: float, cost: float) -> Answered:
    """Sites that open, close and stay; customers and volume that move; distances before and after."""
    opens = np.flatnonzero(plan.open & ~today.open).tolist()
    closes = np.flatnonzero(today.open & ~plan.open).tolist()
    stays = np.flatnonzero(today.open & plan.open).tolist()
    moved, volume = _moves(case, plan, today)
    total = float(case.demand.sum())
    rows: list[tuple[str | float | None, ...]] = [
        ("Cost", today_cost, cost, case.currency),
        ("Open sites", float(today.open.sum()), float(plan.open.sum()), "sites"),
    ]
    for label, unit, of in _service_figures(case):
        rows.append((label, of(today), of(plan), unit))
    share = f" ({100 * volume / total:.0f} % of demand)" if total > 0 else ""
    less = today_cost - cost
    words = (f"The plan costs {money(case, abs(less))} {'less' if less >= 0 else 'more'} than today's network. "
             f"Opens: {codes(case, opens)}. Closes: {codes(case, closes)}. Stays: {codes(case, stays)}. "
             f"{moved} customers get another site, with {volume:,.0f} {case.demand_unit}{share}.")
    columns = (Column("Figure"), Column("Today", "number"), Column("Plan", "number"), Column("Unit"))
    return Answered("What changes against today?", words, columns, tuple(rows), headline=True)


def _moves(case: Case, plan: Plan, today: Plan) -> tuple[int, float]:
    """Customers that get at least some of their demand from another site, and how much."""
    key = {(int(j), int(i)): float(s) for j, i, s in zip(today.site, today.customer, today.share, strict=True)}
    moved: Floats = np.zeros(case.n)
    for j, i, share in zip(plan.site.tolist(), plan.customer.tolist(), plan.share.tolist(), strict=True):
        moved[i] += max(0.0, share - key.get((j, i), 0.0))
    return int((moved > 1e-6).sum()), float(moved @ case.demand)


def _service_figures(case: Case) -> list[tuple[str, str, Callable[[Plan], float]]]:
    """Figures that need distances: label, unit, and how a plan gives them; none without distances."""
    distance = case.distance
    if distance is None or not case.demand.sum() > 0:
        return []

    def volumes(plan: Plan) -> tuple[Floats, Floats]:
        return plan.share * case.demand[plan.customer], distance[plan.site, plan.customer]

    def mean(plan: Plan) -> float:
        volume, far = volumes(plan)
        known = np.isfinite(far)
        return float((volume[known] * far[known]).sum() / max(volume[known].sum(), 1e-12))

    def longest(plan: Plan) -> float:
        volume, far = volumes(plan)
        return float(np.nanmax(np.where(volume > 0, far, 0.0), initial=0.0))

    figures: list[tuple[str, str, Callable[[Plan], float]]] = [
        ("Mean distance per unit", case.distance_unit, mean),
        ("Longest distance", case.distance_unit, longest),
    ]
    if case.share_distance is not None:
        near = case.share_distance

        def within(plan: Plan) -> float:
            volume, far = volumes(plan)
            return 100 * float(volume[far <= near].sum() / case.demand.sum())

        figures.append((f"Demand within {near:g} {case.distance_unit}", "%", within))
    return figures


def what_binds(asker: Asker) -> Answered:
    """Full sites, counts and promises at their limit, and what a looser rule would save, re-solved."""
    case = asker.case
    rows: list[tuple[str | float | None, ...]] = []
    for rule, loosened, changed in _looser(case, asker.base):
        answer = asker.ask(changed)
        saved = None if answer.high is None else max(0.0, asker.base_cost - answer.high)
        most = None if answer.low is None else max(0.0, asker.base_cost - answer.low)
        sure = "not answered in the time given" if not answer.known else (
            "exact" if answer.exact else "a proven range")
        rows.append((rule, loosened, saved, most, sure))
    useful = [row for row in rows if isinstance(row[2], float) and row[2] > 1e-6 * asker.base_cost]
    words = "Nothing binds: no rule or capacity holds the plan back." if not rows else (
        "Rules are at their limit, and loosening any one of them a little saves nothing.")
    if useful:
        best = max(useful, key=lambda row: float(str(row[2])))
        words = f"Most is saved by this: {best[0]}, {best[1]}: {money(case, float(str(best[2])))} less."
    columns = (Column("What is at its limit"), Column("Loosened to"), Column("Saves at least", "money"),
               Column("and at most", "money"), Column("How sure"))
    return Answered("What holds the plan back?", words, columns, tuple(rows))


def _looser(case: Case, plan: Plan) -> Iterator[tuple[str, str, Case]]:
    load = np.bincount(plan.site, weights=plan.share * case.demand[plan.customer], minlength=case.m)
    full = np.flatnonzero(plan.open & np.isfinite(case.capacity) & (load >= FULL * case.capacity) & (load > 0))
    for j in full[np.argsort(-load[full], kind="stable")][:MOST_FULL]:
        capacity = case.capacity.copy()
        capacity[j] *= 1.1
        yield (f"{case.sites[j]} is full", f"a tenth more capacity ({capacity[j]:,.0f} {case.demand_unit})",
               replace(case, capacity=capacity, variants=()))
    count = int(plan.open.sum())
    if case.most_sites is not None and count >= case.most_sites:
        yield (f"{case.most_sites} sites at most", "one more site", replace(
            case, most_sites=case.most_sites + 1, variants=()))
    if case.fewest_sites and count <= case.fewest_sites:
        yield (f"{case.fewest_sites} sites at least", "one site fewer", replace(
            case, fewest_sites=case.fewest_sites - 1, variants=()))
    if case.distance is not None and np.isfinite(case.promised()).any():
        longest = None if case.longest_distance is None else 1.1 * case.longest_distance
        yield ("the longest distances promised", "a tenth more", replace(
            case, longest_distance=longest, customer_longest=1.1 * case.customer_longest, variants=()))
    if case.share_within:
        lower = max(0.0, case.share_within - 0.05)
        yield (f"{100 * case.share_within:.0f} % of demand within {case.share_distance:g} {case.distance_unit}",
               f"{100 * lower:.0f} %", replace(case, share_within=lower, variants=()))
    if bool(case.single_source.any()):
        yield ("one site for each customer", "customers may be split", replace(
            case, single_source=np.zeros(case.n, dtype=bool), variants=()))
    if bool((case.least_volume[plan.open] > 0).any()):
        yield ("least volumes", "none", replace(case, least_volume=np.zeros(case.m), variants=()))
