"""The lot-sizing case: frozen arrays, faithful to the workbook's rows."""

from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]


@dataclass(frozen=True)
class Case:
    """One case with N items, T periods, R resources and F families; stock counts at a period's end.

    Parameters
    ----------
    items, item_names, units, periods, resources, families
        Codes (and names, units of measure) in sheet order.
    demand, receipts
        Shape (N, T): units; receipts arrive for use in that period.
    setup_cost, unit_cost, holding_cost
        Shape (N, T): money per setup, per unit made, per unit in stock at the period's end.
    setup_allowed
        Shape (N, T).
    opening_stock, safety_stock, closing_stock, most_stock
        Shape (N,): units; safety = least stock at each period's end, closing = least stock at the last
        period's end (in place of safety there), most = inf where unlimited.
    least_lot, most_lot, lot_multiple
        Shape (N,): units; 0, inf and 0 = none.
    backlog_cost
        Shape (N,): money per unit and period late; NaN = the item may not be late. Already NaN for every
        item when the setting Late deliveries says no.
    lost_cost
        Shape (N,): money per unit of demand never met; NaN = all must be met.
    item_resource, time_per_unit, setup_time
        Shape (N,): number of the resource (-1 none); time units.
    item_family
        Shape (N,): number of the family, -1 none.
    family_cost, family_time, family_resource
        Shape (F,): for each period in which any member is made.
    capacity
        Shape (R, T): time units.
    overtime_limit, overtime_cost, use_cost
        Shape (R,): time units a period; money per time unit; money for each period in which the resource
        is used (any item, or family, with a setup on it).
    today
        Shape (N, T) or None: quantities of today's plan.
    compare_today
        Whether today's plan is to be costed too.
    period_starts
        ISO dates of the periods ("" where none).

    The model: stock[t] - late[t] = stock[t-1] - late[t-1] + receipts[t] + made[t] - demand[t] + lost[t],
    with late[0] = 0, late at the horizon's end 0, lost[t] <= demand[t], stock within its limits.
    A setup is paid and timed in every period in which the item is made, and only then.
    Demand that stays late at the end of the horizon can only be lost, and only at a lost sale cost.
    """

    title: str
    currency: str
    period_unit: str
    items: tuple[str, ...]
    item_names: tuple[str, ...]
    units: tuple[str, ...]
    periods: tuple[str, ...]
    demand: Floats
    receipts: Floats
    setup_cost: Floats
    unit_cost: Floats
    holding_cost: Floats
    setup_allowed: Flags
    opening_stock: Floats
    safety_stock: Floats
    closing_stock: Floats
    most_stock: Floats
    least_lot: Floats
    most_lot: Floats
    lot_multiple: Floats
    backlog_cost: Floats
    lost_cost: Floats
    item_resource: Ints
    time_per_unit: Floats
    setup_time: Floats
    item_family: Ints
    resources: tuple[str, ...] = ()
    capacity: Floats = field(default_factory=lambda: np.zeros((0, 0)))
    overtime_limit: Floats = field(default_factory=lambda: np.zeros(0))
    overtime_cost: Floats = field(default_factory=lambda: np.zeros(0))
    use_cost: Floats = field(default_factory=lambda: np.zeros(0))
    families: tuple[str, ...] = ()
    family_cost: Floats = field(default_factory=lambda: np.zeros(0))
    family_time: Floats = field(default_factory=lambda: np.zeros(0))
    family_resource: Ints = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
    today: Floats | None = None
    compare_today: bool = False
    period_starts: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        if not self.resources and self.capacity.shape != (0, self.t):
            object.__setattr__(self, "capacity", np.zeros((0, self.t)))

    @property
    def n(self) -> int:
        """Number of items."""
        return len(self.items)

    @property
    def t(self) -> int:
        """Number of periods."""
        return len(self.periods)

    def least_stock(self) -> Floats:
        """Shape (N, T): least stock at each period's end."""
        least = np.repeat(self.safety_stock[:, None], self.t, axis=1)
        least[:, -1] = self.closing_stock
        return least


def plain_case(
    demand: ArrayLike, setup_cost: ArrayLike, holding_cost: ArrayLike, **changes: object
) -> Case:
    """Make a case from demand (N, T) and costs (figures that broadcast to (N, T)); the rest at defaults.

    ``changes`` are fields of ``Case`` that replace the defaults; for tests, benches and programs.
    """
    wanted = np.atleast_2d(np.asarray(demand, dtype=np.float64))
    n, t = wanted.shape
    items = tuple(f"I{k + 1}" for k in range(n))
    case = Case(
        title="case", currency="EUR", period_unit="period", items=items, item_names=items,
        units=("unit",) * n, periods=tuple(str(k + 1) for k in range(t)), demand=wanted,
        receipts=np.zeros((n, t)), setup_cost=_spread(setup_cost, n, t), unit_cost=np.zeros((n, t)),
        holding_cost=_spread(holding_cost, n, t), setup_allowed=np.ones((n, t), dtype=bool),
        opening_stock=np.zeros(n), safety_stock=np.zeros(n), closing_stock=np.zeros(n),
        most_stock=np.full(n, np.inf), least_lot=np.zeros(n), most_lot=np.full(n, np.inf),
        lot_multiple=np.zeros(n), backlog_cost=np.full(n, np.nan), lost_cost=np.full(n, np.nan),
        item_resource=np.full(n, -1, dtype=np.int64), time_per_unit=np.zeros(n), setup_time=np.zeros(n),
        item_family=np.full(n, -1, dtype=np.int64), period_starts=("",) * t,
    )
    return replace(case, **changes)  # type: ignore[arg-type]


def _spread(figure: ArrayLike, n: int, t: int) -> Floats:
    given = np.asarray(figure, dtype=np.float64)
    if given.ndim == 1 and given.shape == (n,) and n != t:
        given = given[:, None]
    return np.array(np.broadcast_to(given, (n, t)))
