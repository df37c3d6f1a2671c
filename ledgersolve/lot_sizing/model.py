"""The whole lot-sizing model with every rule of the contract, for the wrapper.

The stock form carries all rules and all costs; a reformulation on top of it (``strong``) makes its linear
relaxation tight: plant location (Krarup & Bilde 1977) or (l,S) inequalities (Barany, Van Roy & Wolsey 1984).
Every big M is a limit from ``tight``, never a made-up number.
"""

from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from ledgersolve.lot_sizing import strong
from ledgersolve.lot_sizing.case import Case, Flags, Floats, Ints
from ledgersolve.lot_sizing.plan import Plan, family_setups
from ledgersolve.lot_sizing.tight import Tight, tight_limits
from ledgersolve.mip import LinearModel

PLANT_LOCATION_SIZE = 60_000
"""Most plant-location variables; above it the (l,S) form is smaller and no weaker in practice."""


class Form(StrEnum):
    """What makes the stock form strong."""

    PLANT_LOCATION = "plant location"
    INEQUALITIES = "(l,S) inequalities"


@dataclass(frozen=True)
class WholeModel:
    """The model and the numbers of its variables.

    ``made``, ``setup``, ``stock``, ``late``, ``lost``, ``multiples`` have shape (N, T), ``family`` (F, T),
    ``used``, ``overtime`` and ``short`` (time beyond all overtime, in elastic models only) (R, T); -1 where
    there is no such variable.
    """

    case: Case
    tight: Tight
    model: LinearModel
    made: Ints
    setup: Ints
    stock: Ints
    late: Ints
    lost: Ints
    multiples: Ints
    family: Ints
    used: Ints
    overtime: Ints
    short: Ints

    def setups(self, values: Floats) -> Flags:
        """Shape (N, T): where the values make something."""
        size = np.maximum(self.tight.most_made.max(axis=1, initial=0.0), 1e-12)[:, None]
        return np.asarray((values[self.setup] > 0.5) & (values[self.made] > 1e-7 * size))

    def quantities(self, values: Floats) -> Floats:
        """Shape (N, T): units made; whole multiples where the item has one."""
        made = np.where(self.setups(values), values[self.made], 0.0)
        whole = self.multiples >= 0
        counts = np.round(values[np.where(whole, self.multiples, 0)])
        return np.where(whole, counts * self.case.lot_multiple[:, None], made)

    def hint(self, plan: Plan) -> Floats:
        """Give the plan as a start, one figure a variable; NaN for what follows from it."""
        values = np.full(self.model.variables, np.nan)
        families = family_setups(self.case, plan.setup)
        used = resources_used(self.case, plan.setup, families)
        with np.errstate(divide="ignore", invalid="ignore"):
            counts = np.round(plan.made / self.case.lot_multiple[:, None])
        for numbers, figures in (
            (self.made, plan.made), (self.setup, plan.setup), (self.stock, plan.stock),
            (self.late, plan.late), (self.lost, plan.lost), (self.multiples, counts),
            (self.family, families), (self.used, used), (self.overtime, plan.overtime),
        ):
            there = numbers >= 0
            values[numbers[there]] = figures[there]
        return values


def resources_used(case: Case, setup: Flags, families: Flags) -> Flags:
    """Shape (R, T): periods in which an item or a family has a setup on the resource."""
    used = np.zeros((len(case.resources), case.t), dtype=bool)
    on, placed = np.flatnonzero(case.item_resource >= 0), np.flatnonzero(case.family_resource >= 0)
    np.logical_or.at(used, case.item_resource[on], setup[on])
    np.logical_or.at(used, case.family_resource[placed], families[placed])
    return used


def choose_form(case: Case, tight: Tight) -> Form:
    """Plant location while it is small enough, else (l,S) inequalities."""
    small = strong.plant_location_size(case, tight) <= PLANT_LOCATION_SIZE
    return Form.PLANT_LOCATION if small else Form.INEQUALITIES


def whole_model(case: Case, form: Form | None = None, *, dear: float | None = None) -> WholeModel:
    """Build the model; ``form`` None chooses by size.

    With ``dear``, time beyond all overtime is there at that price a time unit: then a plan that does not fit
    yet has a place in the model too.
    """
    tight = tight_limits(case)
    model = LinearModel()
    whole = _variables(case, tight, model, dear)
    _balance(whole)
    _stock_limits(whole)
    _lots(whole)
    _families(whole)
    _resources(whole)
    if (form or choose_form(case, tight)) is Form.PLANT_LOCATION:
        strong.add_plant_location(case, tight, model, whole.made, whole.setup, whole.late, whole.lost)
    else:
        strong.add_inequalities(case, tight, model, whole.setup, whole.stock, whole.late, whole.lost)
    return whole


def _variables(case: Case, tight: Tight, model: LinearModel, dear: float | None) -> WholeModel:
    n, t = case.n, case.t
    possible = tight.most_made > 0
    made = model.add_variables(n * t, upper=tight.most_made.ravel(), cost=case.unit_cost.ravel())
    setup = model.add_variables(n * t, upper=possible.ravel(), cost=case.setup_cost.ravel(), whole=True)
    least = case.least_stock()
    stock = model.add_variables(
        n * t, lower=least.ravel(), upper=np.maximum(np.repeat(case.most_stock, t), least.ravel()),
        cost=case.holding_cost.ravel(),
    )
    ends = np.arange(t) == t - 1
    late_at_most = np.where(ends, 0.0, np.inf)[None, :]
    late = _some(model, np.isfinite(case.backlog_cost), case.backlog_cost, late_at_most)
    lost = _some(model, np.isfinite(case.lost_cost), case.lost_cost, strong.most_lost(case, tight))
    counts = np.full((n, t), np.inf)
    multiples = _some(model, case.lot_multiple > 0, np.zeros(n), counts, whole=True)
    runs = _family_matters(case)
    family = _some(model, runs, case.family_cost, np.ones((len(case.families), t)), whole=True)
    used = _some(model, case.use_cost > 0, case.use_cost, np.ones((len(case.resources), t)), whole=True)
    over = np.repeat(case.overtime_limit[:, None], t, axis=1)
    overtime = _some(model, case.overtime_limit > 0, case.overtime_cost, over)
    endless = np.full(over.shape, np.inf)
    elastic = np.full(len(case.resources), dear is not None)
    short = _some(model, elastic, np.full(len(case.resources), dear or 0.0), endless)
    made, setup, stock = made.reshape(n, t), setup.reshape(n, t), stock.reshape(n, t)
    return WholeModel(
        case, tight, model, made, setup, stock, late, lost, multiples, family, used, overtime, short
    )


def _some(model: LinearModel, chosen: Flags, price: Floats, upper: Floats, *, whole: bool = False) -> Ints:
    """Variables for the chosen rows only, numbered in an array that holds -1 elsewhere."""
    shape = (chosen.size, upper.shape[1])
    numbers = np.full(shape, -1, dtype=np.int64)
    rows = np.flatnonzero(chosen)
    limits = np.broadcast_to(upper, shape)[rows]
    added = model.add_variables(
        limits.size, upper=limits.ravel(), cost=np.repeat(price[rows], shape[1]), whole=whole
    )
    numbers[rows] = added.reshape(limits.shape)
    return numbers


def _family_matters(case: Case) -> Flags:
    """Whether a family's setup costs money, takes time or makes a resource used."""
    placed = case.family_resource >= 0
    rented = np.zeros(len(case.families), dtype=bool)
    rented[placed] = case.use_cost[case.family_resource[placed]] > 0
    return np.asarray((case.family_cost > 0) | ((case.family_time > 0) & placed) | rented)


def _stock_limits(whole: WholeModel) -> None:
    """Rows for what the bounds of the variables leave out: that no plan exists is the solver's to find."""
    case = whole.case
    crossed = case.least_stock() > case.most_stock[:, None]
    too_much = whole.stock[crossed]
    room = np.repeat(case.most_stock[:, None], case.t, axis=1)[crossed]
    whole.model.add_rows(too_much.size, np.arange(too_much.size), too_much, 1.0, upper=room)
    due = np.flatnonzero(np.isfinite(case.backlog_cost) & (whole.tight.must > 0))
    whole.model.add_rows(due.size, np.arange(due.size), whole.made[due, 0], 1.0, lower=whole.tight.must[due])


def _balance(whole: WholeModel) -> None:
    """Balance: stock - late = stock before - late before + receipts + made - demand + lost."""
    case = whole.case
    cells = np.arange(case.n * case.t).reshape(case.n, case.t)
    rest = case.receipts - case.demand
    rest[:, :1] += case.opening_stock[:, None]
    rows, variables, signs = [], [], []
    for numbers, sign in ((whole.stock, 1.0), (whole.late, -1.0), (whole.made, -1.0), (whole.lost, -1.0)):
        there = numbers >= 0
        rows.append(cells[there])
        variables.append(numbers[there])
        signs.append(np.full(rows[-1].size, sign))
    for numbers, sign in ((whole.stock, -1.0), (whole.late, 1.0)):
        there = numbers[:, :-1] >= 0
        rows.append(cells[:, 1:][there])
        variables.append(numbers[:, :-1][there])
        signs.append(np.full(rows[-1].size, sign))
    whole.model.add_rows(
        cells.size, np.concatenate(rows), np.concatenate(variables), np.concatenate(signs),
        lower=rest.ravel(), upper=rest.ravel(),
    )


def _lots(whole: WholeModel) -> None:
    """Nothing made without a setup; least lots; whole multiples."""
    case, tight, model = whole.case, whole.tight, whole.model
    at = np.nonzero(tight.most_made > 0)
    k = np.arange(at[0].size)
    made, setup = whole.made[at], whole.setup[at]
    model.add_rows(
        k.size, np.tile(k, 2), np.concatenate([made, setup]),
        np.concatenate([np.ones(k.size), -tight.most_made[at]]), upper=0.0,
    )
    least = tight.least_lot[at[0]]
    low = np.flatnonzero(least > 0)
    rows = np.arange(low.size)
    model.add_rows(
        low.size, np.tile(rows, 2), np.concatenate([made[low], setup[low]]),
        np.concatenate([np.ones(low.size), -least[low]]), lower=0.0,
    )
    at = np.nonzero(whole.multiples >= 0)
    rows = np.arange(at[0].size)
    model.add_rows(
        rows.size, np.tile(rows, 2), np.concatenate([whole.made[at], whole.multiples[at]]),
        np.concatenate([np.ones(rows.size), -case.lot_multiple[at[0]]]), lower=0.0, upper=0.0,
    )


def _families(whole: WholeModel) -> None:
    """A family has its setup when a member is made."""
    case = whole.case
    members = np.flatnonzero(case.item_family >= 0)
    _not_above(whole.model, whole.setup[members], whole.family[case.item_family[members]])


def _resources(whole: WholeModel) -> None:
    """Time on every resource, and its use where use costs money."""
    case, model = whole.case, whole.model
    on, placed = np.flatnonzero(case.item_resource >= 0), np.flatnonzero(case.family_resource >= 0)
    _not_above(model, whole.setup[on], whole.used[case.item_resource[on]])
    _not_above(model, whole.family[placed], whole.used[case.family_resource[placed]])
    cells = np.arange(len(case.resources) * case.t).reshape(-1, case.t)
    blocks = [
        (cells[case.item_resource[on]], whole.made[on], case.time_per_unit[on, None]),
        (cells[case.item_resource[on]], whole.setup[on], case.setup_time[on, None]),
        (cells[case.family_resource[placed]], whole.family[placed], case.family_time[placed, None]),
        (cells, whole.overtime, -np.ones((len(case.resources), 1))),
        (cells, whole.short, -np.ones((len(case.resources), 1))),
    ]
    limited = np.isfinite(case.capacity)
    rented = (whole.used >= 0) & limited
    blocks.append((cells, np.where(rented, whole.used, -1), -np.where(limited, case.capacity, 0.0)))
    rows, variables, times = [], [], []
    for row, numbers, time in blocks:
        there = (numbers >= 0) & limited.ravel()[row] & (np.broadcast_to(time, numbers.shape) != 0)
        rows.append(row[there])
        variables.append(numbers[there])
        times.append(np.broadcast_to(time, numbers.shape)[there])
    model.add_rows(
        cells.size, np.concatenate(rows), np.concatenate(variables), np.concatenate(times),
        upper=np.where(rented, 0.0, case.capacity).ravel(),
    )


def _not_above(model: LinearModel, lower: Ints, higher: Ints) -> None:
    """Add rows: each ``lower`` variable is at most its ``higher`` one, where both exist."""
    there = (lower >= 0) & (higher >= 0)
    rows = np.arange(int(there.sum()))
    model.add_rows(
        rows.size, np.tile(rows, 2), np.concatenate([lower[there], higher[there]]),
        np.repeat([1.0, -1.0], rows.size), upper=0.0,
    )
