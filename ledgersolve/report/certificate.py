"""A lower bound a reader can check in a sheet: prices per customer, one gain a site, a few charges, one sum.

For any price v_i a customer's demand (at most its unmet cost) every plan costs at least

    sum_i v_i + sum_j term_j + constants,
    term_j = fixed_j + charge_j - volume_j w_j - gain_j   (at most 0 unless the site must open),
    gain_j = sum_i limit_ij max(0, v_i + p demand_i near_ij - cost_ij - w_j demand_i),

by weak duality of the problem whose assignment rows are relaxed (Cornuejols, Fisher & Nemhauser 1977); the
price w_j of a site's volume makes its knapsack a sum of single terms without loss (the knapsack's own dual):
above 0 it stands for the capacity, below 0 for the least volume, and volume_j is the one of the two. The share
price p stands for the share-within-distance rule, whose units come back among the constants. Charges stand for
rules that tie sites together: counts, groups, capacity for all demand. Any non-negative charges and share
price keep the bound valid; the ones chosen here make it as high as these rules alone allow.
"""

from dataclasses import dataclass, replace

import numpy as np

from ledgersolve.site_selection.bound import share_price
from ledgersolve.site_selection.case import CLOSED, OPEN, Case, Flags, Floats
from ledgersolve.site_selection.lanes import Lanes

SHARE_BACK = "Demand to be served near x price per unit delivered near"
SUPPLY_BACK = "All demand x price per unit of capacity"
"""What constants of the sum stand for."""


@dataclass(frozen=True)
class Certificate:
    """The checkable bound of a case with m sites and n customers.

    Parameters
    ----------
    price
        Shape (n,): money for the customer's whole demand; 0 where nothing is needed.
    usable
        Shape (m, n): lanes that count.
    near
        Shape (m, n): usable lanes whose deliveries count for the share rule; None where it has no price.
    limit
        Shape (m, n): largest share each usable lane carries; None = the whole on every lane.
    share_price
        Money per unit delivered near.
    volume_price, volume
        Shape (m,): money per unit of the site's capacity, below 0 of its least volume; the one that is priced,
        0 where neither is.
    fixed
        Shape (m,): fixed cost with opening cost, less closing cost saved.
    gain, charge, term
        Shape (m,): as in the module's formula; a closed site has 0 everywhere.
    rules
        Constants: (what it stands for, amount), closing costs and charges handed back.
    supply_price, count_charge
        Money per unit of capacity for the row "capacities cover all demand" (0 = not used), and money per
        open site for the count of sites (positive: at most, negative: at least).
    group_charge
        Shape (m,): charge of the site's group.
    """

    price: Floats
    usable: Flags
    near: Flags | None
    limit: Floats | None
    share_price: float
    volume_price: Floats
    volume: Floats
    fixed: Floats
    gain: Floats
    charge: Floats
    term: Floats
    rules: tuple[tuple[str, float], ...]
    supply_price: float
    count_charge: float
    group_charge: Floats

    @property
    def bound(self) -> float:
        """No plan costs less."""
        return float(self.price.sum() + self.term.sum() + sum(amount for _, amount in self.rules))


def certify(case: Case, lanes: Lanes, prices: Floats) -> Certificate:
    """Make the certificate of any prices, shape (n,), money for each customer's whole demand."""
    price = np.where(lanes.needs, np.minimum(prices, lanes.unmet_cost), 0.0)
    usable = np.isfinite(lanes.cost) & lanes.needs & (lanes.rule != CLOSED)[:, None]
    share = share_price(lanes, prices)
    near = lanes.near & usable if lanes.near is not None and share > 0 else None
    limit = lanes.limit if lanes.limit is not None and bool((lanes.limit[usable] < 1).any()) else None
    none = np.zeros(case.m)
    bare = Certificate(price, usable, near, limit, share, none, none, lanes.site_cost, none, none, none, (), 0.0,
                       0.0, none)
    bare = _filled(case, lanes, bare)
    reduced = bare.fixed - bare.volume * bare.volume_price - bare.gain
    supplies = {0.0, _supply_price(case, lanes, reduced)}
    return max((_charged(case, lanes, bare, reduced, supply) for supply in sorted(supplies)), key=lambda c: c.bound)


def _filled(case: Case, lanes: Lanes, bare: Certificate) -> Certificate:
    """Give the certificate with each site's price of volume and gain."""
    volume_price, volume, gain = np.zeros(case.m), np.zeros(case.m), np.zeros(case.m)
    for j in np.flatnonzero(bare.usable.any(axis=1)).tolist():
        own = bare.usable[j]
        surplus, demand = bare.price[own] - lanes.cost[j, own], case.demand[own]
        if bare.near is not None:
            surplus += bare.share_price * demand * bare.near[j, own]
        share = np.ones(demand.size) if bare.limit is None else bare.limit[j, own]
        volume_price[j] = w = _volume_price(surplus * share, demand * share, lanes.capacity[j], lanes.least[j])
        volume[j] = case.capacity[j] if w > 0 else lanes.least[j] if w < 0 else 0.0
        gain[j] = (share * np.maximum(surplus - w * demand, 0.0)).sum()
    return replace(bare, volume_price=volume_price, volume=volume, gain=gain)


def _charged(case: Case, lanes: Lanes, bare: Certificate, reduced: Floats, supply: float) -> Certificate:
    """Complete a certificate with this supply price and the best charges for counts and groups beside it."""
    every = np.where(np.isfinite(case.capacity), case.capacity, 0.0)
    balance = reduced - supply * every
    count = _count_charge(lanes, balance)
    group = _group_charge(lanes, balance + count)
    closed = lanes.rule == CLOSED
    charge = np.where(closed, 0.0, group + count - supply * every)
    full = reduced + charge
    term = np.where(closed, 0.0, np.where(lanes.rule == OPEN, full, np.minimum(full, 0.0)))
    rules = _rules(case, lanes, bare, supply, count, group)
    return replace(bare, charge=charge, term=term, rules=rules, supply_price=supply, count_charge=count,
                   group_charge=group)


def _volume_price(surplus: Floats, demand: Floats, capacity: float, least: float) -> float:
    """Best price of a unit of volume: surplus per unit of the delivery that the site's volumes stop at.

    That is the first one that no longer fits whole, or below 0 the last one that the least volume asks for.
    """
    carried = demand > 0
    ratio, units = surplus[carried] / demand[carried], demand[carried]
    order = np.argsort(-ratio)
    filled, worth = np.cumsum(units[order]), int((ratio > 0).sum())
    beyond = int(np.searchsorted(filled, capacity * (1 + 1e-12), side="right"))
    if beyond < worth:
        return float(ratio[order[beyond]])
    asked = int(np.searchsorted(filled, least * (1 - 1e-12), side="left"))
    return min(0.0, float(ratio[order[min(asked, order.size - 1)]])) if least > 0 and order.size else 0.0


def _supply_price(case: Case, lanes: Lanes, reduced: Floats) -> float:
    """Price at which the best sites' capacities just cover all demand (a knapsack's own dual)."""
    needed = float(case.demand[lanes.needs].sum())
    if not np.isfinite(case.capacity).all() or np.isfinite(lanes.unmet_cost).any() or needed <= 0:
        return 0.0
    needed -= float(case.capacity[lanes.rule == OPEN].sum())
    free = (lanes.rule != OPEN) & (lanes.rule != CLOSED) & (case.capacity > 0)
    ratio = reduced[free] / case.capacity[free]
    order = np.argsort(ratio)
    covered = np.cumsum(case.capacity[free][order])
    place = int(np.searchsorted(covered, needed * (1 - 1e-12), side="left"))
    return max(0.0, float(ratio[order[place]])) if needed > 0 and place < order.size else 0.0


def _group_charge(lanes: Lanes, balance: Floats) -> Floats:
    """Charge of each group: what makes all but its best site not worth opening."""
    charge = np.zeros(balance.size)
    for number in np.unique(lanes.group[lanes.group >= 0]).tolist():
        members = np.flatnonzero((lanes.group == number) & (lanes.rule != CLOSED))
        if members.size > 1 and not (lanes.rule[members] == OPEN).any():
            charge[members] = max(0.0, -float(np.partition(balance[members], 1)[1]))
    return charge


def _best_of_groups(lanes: Lanes, balance: Floats) -> Floats:
    """Balances of the sites that may open: one for each group, its best."""
    free = (lanes.rule != OPEN) & (lanes.rule != CLOSED)
    groups = [balance[free & (lanes.group == number)].min() for number in np.unique(lanes.group[free]) if number >= 0]
    return np.concatenate([balance[free & (lanes.group < 0)], np.array(groups, dtype=np.float64)])


def fewest_sites(lanes: Lanes) -> int:
    """Least number of open sites: at least one where some demand must be met."""
    return max(lanes.fewest, int((lanes.needs & np.isinf(lanes.unmet_cost)).any()))


def _count_charge(lanes: Lanes, balance: Floats) -> float:
    """Charge per open site at which the allowed number of sites is worth opening."""
    forced = int((lanes.rule == OPEN).sum())
    ranked = np.sort(_best_of_groups(lanes, balance))
    most, fewest = lanes.most - forced, fewest_sites(lanes) - forced
    if 0 <= most < ranked.size and ranked[most] < 0:
        return float(-ranked[most])
    if 0 < fewest <= ranked.size and ranked[fewest - 1] > 0:
        return float(-ranked[fewest - 1])
    return 0.0


def _rules(case: Case, lanes: Lanes, bare: Certificate, supply: float, count: float,
           group: Floats) -> tuple[tuple[str, float], ...]:
    rows = []
    if bare.near is not None:
        rows.append((SHARE_BACK, bare.share_price * lanes.near_least))
    if lanes.offset:
        rows.append(("Closing costs of all sites in use today (a site kept open gives its own back)", lanes.offset))
    if supply:
        rows.append((SUPPLY_BACK, supply * float(case.demand[lanes.needs].sum())))
    if count > 0:
        rows.append(("Charge per site x most sites, handed back", -count * lanes.most))
    if count < 0:
        rows.append(("Charge per site x fewest sites", -count * fewest_sites(lanes)))
    if group.any():
        total = sum(float(group[lanes.group == number].max()) for number in np.unique(lanes.group[lanes.group >= 0]))
        rows.append(("Charges of groups, handed back", -total))
    return tuple(rows)
