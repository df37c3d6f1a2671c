"""Questions 3 and 6: today against the plan, and what binds."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.findings import NOT_ANSWERED, Answered, Column
from ledgersolve.site_selection.asker import Asker, Found, codes, listed, money, site_part
from ledgersolve.site_selection.case import CLOSED, FREE, OPEN, Case, Floats, Ints
from ledgersolve.site_selection.extra_cost import MOST_NAMED, Extra, extra
from ledgersolve.site_selection.plan import Plan
from ledgersolve.workbook.figures import unit_words

FULL = 0.999
"""A site counts as full from this share of its capacity."""
MOST_FULL = 5
"""Full sites that are asked about."""

Row = tuple[str | float | None, ...]


def today_against_plan(case: Case, plan: Plan, today: Plan, today_cost: float, cost: float) -> Answered:
    """Sites that open, close and stay; customers and volume that move; distances before and after."""
    opens = np.flatnonzero(plan.open & ~today.open).tolist()
    closes = np.flatnonzero(today.open & ~plan.open).tolist()
    stays = np.flatnonzero(today.open & plan.open).tolist()
    moved, volume = _moves(case, plan, today)
    total = float(case.demand.sum())
    sites = [site_part(case, one) for one in (today, plan)]
    rows: list[tuple[str | float | None, ...]] = [
        ("Cost", today_cost, cost, case.currency),
        ("of which for sites", *sites, case.currency),
        ("of which for service", today_cost - sites[0], cost - sites[1], case.currency),
        ("Open sites", float(today.open.sum()), float(plan.open.sum()), "sites"),
    ]
    for label, unit, of in _service_figures(case):
        rows.append((label, of(today), of(plan), unit))
    share = f" ({100 * volume / total:.0f} % of demand)" if total > 0 else ""
    less = today_cost - cost
    words = (f"The plan costs {money(case, abs(less))} {'less' if less >= 0 else 'more'} than today's network. "
             f"Opens: {codes(case, opens)}. Closes: {codes(case, closes)}. Stays: {codes(case, stays)}. "
             f"{'1 customer gets' if moved == 1 else f'{moved} customers get'} another site, with {volume:,.0f} "
             f"{case.demand_unit}{share}.")
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
    for near in _steps_of_distance(case):
        def within(plan: Plan, near: float = near) -> float:
            volume, far = volumes(plan)
            return 100 * float(volume[far <= near].sum() / case.demand.sum())

        figures.append((f"Demand within {near:g} {case.distance_unit}", "%", within))
    return figures


def _steps_of_distance(case: Case) -> list[float]:
    """Distances within which demand is counted: the workbook's own, or else the like of 50, 100, 200."""
    if case.share_distance is not None:
        return [case.share_distance]
    if case.distance is None or not np.isfinite(case.distance).any():
        return []
    nearest = np.where(np.isfinite(case.distance), case.distance, np.inf).min(axis=0)
    middle = float(np.median(nearest[np.isfinite(nearest)], axis=0)) if np.isfinite(nearest).any() else 0.0
    if not middle > 0:
        return []
    power = 10.0 ** np.floor(np.log10(middle))
    first = next(step for step in (power, 2 * power, 5 * power, 10 * power) if step >= middle)
    return [first, 2 * first, 4 * first]


def what_binds(asker: Asker) -> Answered:
    """Full sites, counts and promises at their limit, and what a looser rule would save, re-solved."""
    case = asker.case
    asked = list(_looser(case, asker.base))
    asker.asks = len(asked)
    base = extra(asker, Found(None, asker.base_cost, asker.base))
    told = [_saving(rule, loosened, base.floor,
                    extra(asker, asker.ask(changed, ("looser", rule, loosened)), within=False))
            for rule, loosened, changed in asked]
    rows: tuple[Row, ...] = tuple((one.rule, one.loosened, one.least, one.most, one.words()) for one in told)
    columns = (Column("What is at its limit"), Column("Loosened to"), Column("Saves at least", "money"),
               Column("and at most", "money"), Column("How sure"))
    return Answered("What holds the plan back?", _binding_words(case, asker.base, told), columns, rows)


@dataclass(frozen=True)
class _Saving:
    """What a looser rule saves; the plan as it is keeps it, so that nothing less than 0 is saved.

    ``least`` and ``most`` are None where nothing is known but that.
    """

    rule: str
    loosened: str
    least: float | None
    most: float | None

    @property
    def name(self) -> str:
        """Rule and what it is loosened to."""
        return f"{self.rule} ({self.loosened})"

    @property
    def exact(self) -> bool:
        return self.least is not None and self.least == self.most

    def words(self) -> str:
        if self.exact:
            return "exact"
        if self.most is not None:
            return "a proven range" if self.least else "not known yet: between nothing and that"
        return NOT_ANSWERED if self.least is None else "at least that; the most is not known yet"


def _saving(rule: str, loosened: str, floor: float | None, above: Extra) -> _Saving:
    """Turn a cost above the plan into a saving; what a better plan under the rules as they are saves is none.

    ``floor`` is what every plan under the rules as they are costs at least above the plan (0 or less, None =
    not known).
    """
    lowest = above.low if above.low is not None else above.floor
    if lowest is not None and lowest >= 0:
        return _Saving(rule, loosened, 0.0, 0.0)  # no plan under the looser rule is below the plan's cost
    beaten = above.high is not None and floor is not None and above.high < floor
    least = (floor or 0.0) - (above.high or 0.0) if beaten else None
    return _Saving(rule, loosened, least, None if lowest is None else -lowest)


def _binding_words(case: Case, plan: Plan, told: list[_Saving]) -> str:
    if not told:
        return ("No rule of these kinds is at its limit in this plan: capacities, counts, distances, shares, single "
                "sources, lane limits, least volumes, sites set to open or closed.")
    sentences = []
    exact = [one for one in told if one.exact]
    useful = [(one.least, one) for one in told if one.least is not None and one.least > 0]
    if useful:
        most, best = max(useful, key=lambda pair: pair[0])
        surely = all(one is best or (one.most is not None and one.most <= most) for one in told)
        sentences.append(f"{'Most' if surely else 'Most, as far as is known,'} is saved by this: {best.rule}, "
                         f"{best.loosened}: {money(case, most, 'nearest' if best.exact else 'down')} less"
                         f"{'' if best.exact else ' at least'}.")
    elif len(exact) == len(told):
        sentences.append(f"Nothing is saved by this: {told[0].name}." if len(told) == 1 else
                         "Nothing is saved by any of these rules loosened alone.")
    elif exact:
        sentences.append(f"Nothing is saved by this: {listed([one.name for one in exact])}.")
    ranges = [one for one in told if not one.exact and one.most is not None]
    if ranges:
        named = "; ".join(f"{one.rule}, {one.loosened}: "
                          f"{money(case, one.most or 0.0, 'up')} at most" for one in ranges[:MOST_NAMED])
        more = f"; and so for {len(ranges) - MOST_NAMED} more" if len(ranges) > MOST_NAMED else ""
        sentences.append(f"How much is saved is not known exactly: {named}{more}.")
    missing = [one.name for one in told if one.least is None and one.most is None]
    if missing:
        sentences.append(f"{NOT_ANSWERED.capitalize()}: {listed(missing)}.")
    others = _full(case, plan).size - MOST_FULL
    if others > 0:
        sentences.append(f"{others} more full {'site was' if others == 1 else 'sites were'} not asked about.")
    return " ".join(sentences)


def _full(case: Case, plan: Plan) -> Ints:
    """Full sites, the largest load first."""
    load = np.bincount(plan.site, weights=plan.share * case.demand[plan.customer], minlength=case.m)
    full = np.flatnonzero(plan.open & np.isfinite(case.capacity) & (load >= FULL * case.capacity) & (load > 0))
    return full[np.argsort(-load[full], kind="stable")]


def _looser(case: Case, plan: Plan) -> Iterator[tuple[str, str, Case]]:
    for j in _full(case, plan)[:MOST_FULL]:
        more, tenth = case.capacity.copy(), case.capacity.copy()
        more[j] += 1.0
        tenth[j] *= 1.1
        yield (f"{case.sites[j]} is full", f"one {unit_words(1.0, case.demand_unit)} more", replace(
            case, capacity=more, variants=()))
        units = unit_words(float(tenth[j]), case.demand_unit)
        yield (f"{case.sites[j]} is full", f"a tenth more capacity: {tenth[j]:,.0f} {units}", replace(
            case, capacity=tenth, variants=()))
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
    for rule, word in ((CLOSED, "closed"), (OPEN, "open")):
        if bool((case.rule == rule).any()):
            freed = np.where(case.rule == rule, FREE, case.rule).astype(np.int64)
            yield (f"{int((case.rule == rule).sum())} sites set to {word}", "free", replace(
                case, rule=freed, variants=()))
    if case.lane_most is not None and bool(np.isfinite(case.lane_most).any()):
        yield ("the most that lanes carry", "no limit", replace(case, lane_most=None, variants=()))
    if bool((case.least_volume[plan.open] > 0).any()):
        yield ("least volumes", "none", replace(case, least_volume=np.zeros(case.m), variants=()))
