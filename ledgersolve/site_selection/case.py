"""The site-selection case: frozen arrays, faithful to the workbook's rows."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

FREE, OPEN, CLOSED = 0, 1, -1
"""Values of ``Case.rule``."""


@dataclass(frozen=True)
class Variant:
    """One row of the sheet Variants; None = as in the workbook's own case."""

    name: str
    demand_factor: float = 1.0
    lane_cost_factor: float = 1.0
    fixed_cost_factor: float = 1.0
    fewest_sites: int | None = None
    most_sites: int | None = None
    longest_distance: float | None = None
    open: tuple[str, ...] = ()
    closed: tuple[str, ...] = ()


@dataclass(frozen=True)
class Case:
    """One case with m sites and n customers; money in the workbook's currency, per period covered.

    Parameters
    ----------
    sites, site_names, customers, customer_names
        Codes and names in sheet order (the name is the code where none is given).
    fixed_cost, capacity, least_volume, handling_cost
        Shape (m,): money; units (inf = unlimited); units if open; money per unit.
    rule
        Shape (m,): FREE, OPEN or CLOSED.
    today
        Shape (m,): in use today.
    opening_cost, closing_cost
        Shape (m,): once if opened and not in use today; once if in use today and not open.
    group
        Shape (m,): number of the group of which at most one opens, -1 = none.
    group_names
        Names of the groups.
    demand
        Shape (n,): units, non-negative.
    single_source
        Shape (n,): served whole by one site.
    customer_longest
        Shape (n,): the customer's own service promise, NaN = the setting holds.
    lane_cost
        Shape (m, n): money per unit, or for the customer's whole demand where ``cost_is_whole``;
        inf = no such lane (not listed, not allowed). Handling is not included. float64.
    distance
        Shape (m, n) or None: distance units; NaN = not known.
    lane_most
        Shape (m, n) or None: most units on the lane (inf = unlimited).
    longest_distance
        Service promise for every customer without its own, or None.
    share_within, share_distance
        At least this fraction (0 to 1) of all demand is served within this distance, or None.
    unmet_cost
        Money per unit of unmet demand; None = all demand must be met.
    fewest_sites, most_sites
        Counts, or None.
    compare_today
        Whether today's network is to be costed too.
    latitude, longitude
        Shape (m,) / (n,) pairs for sites and customers, decimal degrees, NaN = not given; None = no column.

    A customer with demand 0 needs no delivery when costs are per unit; on whole-demand costs it is still
    served, and that cost counts.
    """

    title: str
    currency: str
    demand_unit: str
    period_covered: str
    distance_unit: str
    sites: tuple[str, ...]
    site_names: tuple[str, ...]
    customers: tuple[str, ...]
    customer_names: tuple[str, ...]
    fixed_cost: Floats
    capacity: Floats
    least_volume: Floats
    handling_cost: Floats
    rule: Ints
    today: Flags
    opening_cost: Floats
    closing_cost: Floats
    group: Ints
    group_names: tuple[str, ...]
    demand: Floats
    single_source: Flags
    customer_longest: Floats
    lane_cost: Floats
    cost_is_whole: bool = False
    distance: Floats | None = None
    lane_most: Floats | None = None
    longest_distance: float | None = None
    share_within: float | None = None
    share_distance: float | None = None
    unmet_cost: float | None = None
    fewest_sites: int | None = None
    most_sites: int | None = None
    compare_today: bool = False
    site_latitude: Floats | None = None
    site_longitude: Floats | None = None
    customer_latitude: Floats | None = None
    customer_longitude: Floats | None = None
    variants: tuple[Variant, ...] = field(default=())

    @property
    def m(self) -> int:
        """Number of sites."""
        return len(self.sites)

    @property
    def n(self) -> int:
        """Number of customers."""
        return len(self.customers)

    def promised(self) -> Floats:
        """Shape (n,): the longest distance each customer may be served from; inf = no promise."""
        general = np.inf if self.longest_distance is None else self.longest_distance
        return np.where(np.isnan(self.customer_longest), general, self.customer_longest)

    def needs_service(self) -> Flags:
        """Shape (n,): customers that must be served (all, or those with demand on per-unit costs)."""
        return np.ones(self.n, dtype=bool) if self.cost_is_whole else self.demand > 0

    def under(self, variant: Variant) -> "Case":
        """Give the case changed by what the variant names, and by nothing else.

        Whole-demand lane costs grow with the demand factor; a rule in the variant replaces the sheet's.
        """
        lane_factor = variant.lane_cost_factor * (variant.demand_factor if self.cost_is_whole else 1.0)
        rule = self.rule.copy()
        rule[self.numbers(variant.open)] = OPEN
        rule[self.numbers(variant.closed)] = CLOSED
        return replace(
            self,
            title=variant.name,
            demand=self.demand * variant.demand_factor,
            lane_cost=self.lane_cost if lane_factor == 1.0 else self.lane_cost * lane_factor,
            fixed_cost=self.fixed_cost * variant.fixed_cost_factor,
            fewest_sites=self.fewest_sites if variant.fewest_sites is None else variant.fewest_sites,
            most_sites=self.most_sites if variant.most_sites is None else variant.most_sites,
            longest_distance=(
                self.longest_distance if variant.longest_distance is None else variant.longest_distance
            ),
            rule=rule,
            variants=(),
        )

    def as_today(self) -> "Case":
        """Give the case in which exactly the sites in use today are open; without counts and groups."""
        return replace(
            self,
            rule=np.where(self.today, OPEN, CLOSED).astype(np.int64),
            fewest_sites=None,
            most_sites=None,
            group=np.full(self.m, -1, dtype=np.int64),
            variants=(),
        )

    def numbers(self, codes: Iterable[str]) -> Ints:
        """Site numbers of site codes."""
        place = {code: number for number, code in enumerate(self.sites)}
        return np.array([place[code] for code in codes], dtype=np.int64)


def plain_case(
    fixed_cost: Sequence[float] | Floats, lane_cost: Sequence[Sequence[float]] | Floats,
    demand: Sequence[float] | Floats | None = None, **changes: object,
) -> Case:
    """Make a case from three arrays, everything else at its default; for tests, benches and programs.

    ``changes`` are fields of ``Case`` that replace the defaults.
    """
    fixed = np.asarray(fixed_cost, dtype=np.float64)
    costs = np.asarray(lane_cost, dtype=np.float64)
    m, n = costs.shape
    sites = tuple(f"S{j + 1}" for j in range(m))
    customers = tuple(f"C{i + 1}" for i in range(n))
    case = Case(
        title="case", currency="EUR", demand_unit="unit", period_covered="year", distance_unit="km",
        sites=sites, site_names=sites, customers=customers, customer_names=customers,
        fixed_cost=fixed, capacity=np.full(m, np.inf), least_volume=np.zeros(m), handling_cost=np.zeros(m),
        rule=np.zeros(m, dtype=np.int64), today=np.zeros(m, dtype=bool), opening_cost=np.zeros(m),
        closing_cost=np.zeros(m), group=np.full(m, -1, dtype=np.int64), group_names=(),
        demand=np.ones(n) if demand is None else np.asarray(demand, dtype=np.float64),
        single_source=np.zeros(n, dtype=bool), customer_longest=np.full(n, np.nan), lane_cost=costs,
    )
    return replace(case, **changes)  # type: ignore[arg-type]
