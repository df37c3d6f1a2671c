"""Why no plan exists: rows and rules of the workbook that cannot hold together, with what would mend it.

First what counting shows (a customer without a lane, capacity below demand, sites forced into one group).
Where that shows nothing, an elastic model: one rule after the other gets slack at a price, everything else
stays, and the least slack with which a plan exists is the smallest change of that kind. What no rule mends
alone is loosened together.
"""

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from ledgersolve.findings import Conflict, Explanation, Subject
from ledgersolve.mip import Clock, Limits
from ledgersolve.site_selection.case import CLOSED, OPEN, Case, Flags, Floats
from ledgersolve.site_selection.closest import closest, figure
from ledgersolve.site_selection.elastic import Loosened, least_unmet, loosen, loosen_all
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.plan import Plan
from ledgersolve.workbook.figures import unit_words

MOST_LISTED = 25
"""Customers listed one by one; the rest is counted."""
STILL = "Even then: "
ANY_ONE = " Any one of these {} changes is enough."
TOGETHER = " No single change is enough: these {} rows belong together."


def explain(case: Case, limits: Limits) -> Explanation[Plan]:
    """Say what stands in the way of every plan; for a case that has none."""
    clock = limits.start()
    conflicts = list(_counted(case))
    if not conflicts:
        conflicts = _loosened(case, clock)
    elif not list(_counted(nearer := _with_nearest(case))) and not _fits(nearer, clock):
        conflicts += [replace(one, words=f"{STILL}{one.words}") for one in _loosened(nearer, clock)]
    plan, words, shown = closest(case, clock)
    return Explanation(tuple(conflicts), plan, words, shown)


def _loosened(case: Case, clock: Clock) -> list[Conflict]:
    """What the elastic model finds, smallest change first."""
    alone = loosen(case, clock)
    parts = alone or loosen_all(case, clock)
    conflicts = [_words(case, part) for part in parts]
    if len(conflicts) > 1 and all(part.enough for part in parts):
        added = (ANY_ONE if alone else TOGETHER).format(len(conflicts))
        conflicts = [replace(one, remedy=f"{one.remedy}{added}") for one in conflicts]
    return sorted(conflicts, key=lambda conflict: conflict.amount)


def _with_nearest(case: Case) -> Case:
    """Give the case in which every customer may be served from its nearest allowed site, however far that is."""
    if case.distance is None:
        return case
    usable = np.isfinite(case.lane_cost) & (case.rule != CLOSED)[:, None]
    nearest = np.where(usable, case.distance, np.inf).min(axis=0, initial=np.inf)
    longest = np.maximum(case.promised(), np.where(np.isfinite(nearest), nearest, 0.0))
    return replace(case, longest_distance=None, customer_longest=np.where(np.isinf(longest), np.nan, longest))


def _fits(case: Case, clock: Clock) -> bool:
    """Whether a plan was found that leaves nothing unmet."""
    found = least_unmet(case, max(clock.left() / 4, 0.5), clock)
    if found is None or found.result.values is None:
        return False
    return float(found.result.objective) <= 1e-6 * max(1.0, float(case.demand.sum()))


def raised(value: float) -> str:
    """An amount that must be enough as it is told: rounded up."""
    return figure(np.ceil(value * 100 - 1e-6) / 100)


def _setting(name: str) -> Subject:
    return Subject("Settings", (name,), "Value")


def _codes(codes: list[str]) -> str:
    return ", ".join(codes[:5]) + (f" and {len(codes) - 5} more" if len(codes) > 5 else "")


# What counting shows


def _counted(case: Case) -> Iterator[Conflict]:
    yield from _forced_sites(case)
    yield from _stranded(case)
    yield from _volume(case)


def _forced_sites(case: Case) -> Iterator[Conflict]:
    forced = np.flatnonzero(case.rule == OPEN)
    for number, name in enumerate(case.group_names):
        both = [case.sites[j] for j in forced if case.group[j] == number]
        if len(both) > 1:
            yield Conflict(
                f"Of group {name} at most one site may open, and {_codes(both)} must be open.",
                "Set the rule of all but one of them to free or closed.", float(len(both) - 1),
                tuple(Subject("Sites", (code,), "Rule") for code in both[1:]),
            )
    if case.most_sites is not None and forced.size > case.most_sites:
        yield Conflict(
            f"{forced.size} sites must be open, and at most {case.most_sites} may be.",
            f"Raise Most sites to {forced.size}, or set the rule of a site to free.",
            float(forced.size - case.most_sites), (_setting("Most sites"),),
        )
    can_open = Lanes.of(replace(case, most_sites=None)).most_choosable()
    if case.fewest_sites and can_open < case.fewest_sites:
        yield Conflict(
            f"At least {case.fewest_sites} sites are to open, and only {can_open} can.",
            f"Lower Fewest sites to {can_open}, or set the rule of a closed site to free.",
            float(case.fewest_sites - can_open), (_setting("Fewest sites"),),
        )


def _stranded(case: Case) -> Iterator[Conflict]:
    """Customers that must be served and have no lane they may be served on."""
    needs = case.needs_service() & ((case.unmet_cost is None) | (case.demand == 0))
    usable = np.isfinite(Lanes.of(case).cost).any(axis=0)
    stranded = np.flatnonzero(needs & ~usable)
    for i in stranded[:MOST_LISTED]:
        yield _stranded_words(case, int(i))
    if stranded.size > MOST_LISTED:
        rest = [case.customers[i] for i in stranded[MOST_LISTED:]]
        yield Conflict(
            f"{len(rest)} more customers have no lane they may be served on: {_codes(rest)}.",
            "See the customers above.", float(len(rest)),
            (Subject("Customers", (rest[0],), "Customer"),),
        )


def _stranded_words(case: Case, i: int) -> Conflict:
    code = case.customers[i]
    listed = np.isfinite(case.lane_cost[:, i])
    promise = float(case.promised()[i])
    within = listed.copy()
    if case.distance is not None and np.isfinite(promise):
        within &= case.distance[:, i] <= promise
    own = Subject("Customers", (code,), "Customer")
    if not listed.any():
        return Conflict(f"Customer {code} has no lane from any site.",
                        "Add a lane to this customer, or its costs.", float(case.demand[i]), (own,))
    if within.any():
        closed = [case.sites[j] for j in np.flatnonzero(within & (case.rule == CLOSED))]
        if closed:
            return Conflict(
                f"Customer {code} could be served from {_codes(closed)} only, set to closed.",
                f"Set the rule of {closed[0]} to free, or add a lane to this customer.",
                float(case.demand[i]), (Subject("Sites", (closed[0],), "Rule"), own),
            )
        return Conflict(
            f"Customer {code} has lanes, but none that may carry its deliveries.",
            "Look at Most in the lanes to this customer and at the groups of their sites.",
            float(case.demand[i]), (own,),
        )
    return _beyond_promise(case, i, listed & (case.rule != CLOSED), promise, own)


def _beyond_promise(case: Case, i: int, listed: Flags, promise: float, own: Subject) -> Conflict:
    code, unit = case.customers[i], case.distance_unit
    title = _setting("Longest distance")
    if not np.isnan(case.customer_longest[i]):
        title = Subject("Customers", (code,), "Longest distance")
    distance = np.full(case.m, np.inf) if case.distance is None else np.where(
        listed, case.distance[:, i], np.inf)
    j = int(np.argmin(distance))
    needed = raised(float(distance[j]))
    nearest = f"the nearest, {case.sites[j]}, is {needed} {unit} away"
    if title.sheet == "Customers":
        remedy = f"Raise its Longest distance from {figure(promise)} to {needed}, or add a site nearer to it."
    else:
        remedy = (f"Give this customer a Longest distance of {needed} in Customers, raise the setting from "
                  f"{figure(promise)} to {needed}, or add a site nearer to it.")
    return Conflict(
        f"Customer {code} has no allowed site within {figure(promise)} {unit}; {nearest}.",
        remedy, float(distance[j] - promise), (title, own),
    )


def _volume(case: Case) -> Iterator[Conflict]:
    """All that can be carried against all that must be."""
    if case.unmet_cost is not None:
        return
    wanted = float(case.demand.sum())
    room = _room(case, case.rule != CLOSED)
    if room < wanted * (1 - 1e-9):
        short = wanted - room
        with_closed = _room(case, np.ones(case.m, dtype=bool))
        closed = [case.sites[j] for j in np.flatnonzero(case.rule == CLOSED)]
        first = Subject("Sites", (case.sites[int(np.argmax(case.capacity))],), "Capacity")
        if closed and with_closed >= wanted * (1 - 1e-9):
            yield Conflict(
                f"Sites set to closed leave {_units(case, short)} without capacity: wanted are "
                f"{figure(wanted)}, the other sites hold {figure(room)}.",
                f"Set the rule of {_codes(closed)} to free, or raise a capacity by {figure(short)}.",
                short, (Subject("Sites", (closed[0],), "Rule"), first),
            )
            return
        limit = case.most_sites is not None and np.isfinite(room)
        words = f"{case.most_sites} sites hold {_units(case, room)} at most" if limit else (
            f"all sites that may open hold {_units(case, room)}")
        yield Conflict(
            f"Capacity is {_units(case, short)} short: wanted are {figure(wanted)}, and {words}.",
            f"{_more_sites(case, wanted)}Raise capacities by {raised(short)} in all, or give Unmet demand cost "
            "a value.",
            short, (_setting("Most sites"), first) if limit else (first,),
        )
    forced_least = float(case.least_volume[case.rule == OPEN].sum())
    if forced_least > wanted * (1 + 1e-9):
        sites = [case.sites[j] for j in np.flatnonzero((case.rule == OPEN) & (case.least_volume > 0))]
        yield Conflict(
            f"Sites that must be open need {_units(case, forced_least)} at least, and all demand is "
            f"{figure(wanted)}.", "Lower a least volume, or set the rule of a site to free.",
            forced_least - wanted, tuple(Subject("Sites", (code,), "Least volume") for code in sites),
        )


def _more_sites(case: Case, wanted: float) -> str:
    """Say how many sites would hold all demand, where their number is what stands in the way."""
    if case.most_sites is None:
        return ""
    for count in range(case.most_sites + 1, case.m + 1):
        if _room(replace(case, most_sites=count), case.rule != CLOSED) >= wanted * (1 - 1e-9):
            return f"Raise Most sites from {case.most_sites} to {count}. Or: "
    return ""


def _units(case: Case, amount: float) -> str:
    """An amount with the unit of demand."""
    return f"{figure(amount)} {unit_words(amount, case.demand_unit)}"


def _room(case: Case, may_open: Flags) -> float:
    """Most that sites can hold at once under groups and the most count."""
    capacity: Floats = np.where(may_open, case.capacity, 0.0)
    alone = capacity[case.group < 0].tolist()
    grouped = [float(capacity[case.group == g].max()) for g in np.unique(case.group[case.group >= 0])]
    best = sorted([*alone, *grouped], reverse=True)
    return float(sum(best[: case.most_sites] if case.most_sites is not None else best))


# What loosening shows


def _words(case: Case, found: Loosened) -> Conflict:
    sites = [case.sites[j] for j in found.where] if found.kind in _OF_SITES else []
    customers = [case.customers[i] for i in found.where] if found.kind == "promise" else []
    units, unsure, count = f"{_said(found)}{_units(case, found.total)}", _unsure(found), round(found.total)
    texts = {
        "capacity": (f"Capacity is {units} short, at {_codes(sites)}.",
                     f"Raise Capacity: {_steps(sites, case.capacity, found, 1)}{unsure}."),
        "least volume": (f"Least volumes ask for {units} more than there is, at {_codes(sites)}.",
                         f"Lower Least volume: {_steps(sites, case.least_volume, found, -1)}{unsure}."),
        "most sites": (f"{_sites(case.most_sites)} cannot serve all customers under the other rules.",
                       f"Raise Most sites from {case.most_sites} to {(case.most_sites or 0) + count}{unsure}."),
        "fewest sites": (f"{_sites(case.fewest_sites)} cannot all be open under the other rules.",
                         f"Lower Fewest sites from {case.fewest_sites} to {(case.fewest_sites or 0) - count}"
                         f"{unsure}."),
        "closed": (f"With {_codes(sites)} closed, not all customers can be served.",
                   f"Set the rule of {_codes(sites)} to free."),
        "open": (f"With {_codes(sites)} open, the other rules cannot hold.",
                 f"Set the rule of {_codes(sites)} to free."),
        "promise": (f"Longest distance cannot be kept for {_codes(customers)} under the other rules: "
                    f"{_said(found)}{figure(found.total)} {case.distance_unit} too far"
                    f"{' in all' if len(customers) > 1 else ''}.",
                    f"Raise Longest distance, in Customers or for all in Settings: "
                    f"{_steps(customers, case.promised(), found, 1)}{unsure}."),
        "share within": (f"{units} too little can be served within "
                         f"{figure(case.share_distance or 0.0)} {case.distance_unit}.",
                         f"Lower Share within distance (%) from {100 * (case.share_within or 0.0):g} to "
                         f"{_share_left(case, found):g}{unsure}, or raise Distance for share."),
        "single source": ("Not every customer can be served whole from one site.",
                          "Let some customers be served from two sites, or raise a capacity."),
        "lane most": ("The most that lanes may carry leaves customers unserved.",
                      "Raise Most in the sheet Lanes, or add lanes."),
    }
    words, remedy = texts[found.kind]
    return Conflict(words, remedy, found.total, _subjects(case, found))


def _sites(count: int | None) -> str:
    return "1 site" if count == 1 else f"{count} sites"


def _steps(codes: list[str], figures: Floats, found: Loosened, sign: int) -> str:
    """Say for each place from what to what its figure changes; rounded so that the change is enough."""
    steps = []
    for code, k, amount in zip(codes[:5], found.where, found.amounts, strict=False):
        now = float(figures[k])
        if sign > 0:
            steps.append(f"{code} from {figure(now)} to {raised(now + float(amount))}")
        else:
            lower = np.floor(max(now - float(amount), 0.0) * 100 + 1e-6) / 100
            steps.append(f"{code} from {figure(now)} to {figure(lower)}")
    return ", ".join(steps) + (f" and {len(codes) - 5} more alike" if len(codes) > 5 else "")


def _unsure(found: Loosened) -> str:
    """Say of a remedy whether less, or more, may be needed."""
    return "" if found.exact else " (less may do)" if found.enough else " at least"


def _share_left(case: Case, found: Loosened) -> float:
    """Percentage within distance that can be kept, rounded down."""
    left = (case.share_within or 0.0) - found.total / max(float(case.demand.sum()), 1e-12)
    return float(np.floor(max(left, 0.0) * 1e4 + 1e-6) / 100)


def _said(found: Loosened) -> str:
    """Say how sure an amount is: nothing where it is the least, or between which figures the least lies."""
    if found.exact:
        return ""
    if not found.enough:
        return "at least "
    return f"between {figure(found.least)} and " if found.least > 1e-6 * found.total else "at most "


_OF_SITES = ("capacity", "least volume", "closed", "open")
_TITLES = {"capacity": "Capacity", "least volume": "Least volume", "closed": "Rule", "open": "Rule"}
_SETTINGS = {
    "most sites": "Most sites", "fewest sites": "Fewest sites", "share within": "Share within distance (%)",
    "single source": "Single sourcing",
}


def _subjects(case: Case, found: Loosened) -> tuple[Subject, ...]:
    if found.kind in _OF_SITES:
        return tuple(Subject("Sites", (case.sites[j],), _TITLES[found.kind]) for j in found.where)
    if found.kind in _SETTINGS:
        return (_setting(_SETTINGS[found.kind]),)
    if found.kind == "promise":
        own = [Subject("Customers", (case.customers[i],), "Longest distance") for i in found.where]
        return (*own, _setting("Longest distance"))
    return (Subject("Lanes", (), "Most"),)
