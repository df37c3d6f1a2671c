"""The ledger of a lot-sizing plan: setups, production, stock, late and lost demand, resources, families."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ledgersolve.lot_sizing.case import Flags, Floats
from ledgersolve.report import names, style
from ledgersolve.report.ledger import Group, Ledger, Line, Part, group_of_lines, write_ledger
from ledgersolve.report.lot_places import Block, LotPlaces
from ledgersolve.report.period_tables import settled
from ledgersolve.report.site_places import Source
from ledgersolve.report.tables import Figure

SETUP, MAKING, HOLDING, LATE, LOST, OVERTIME, FAMILY, USE = (
    "Setup cost", "Production cost", "Holding cost", "Backlog cost", "Lost sale cost", "Overtime cost",
    "Family setup cost", "Resource use cost",
)


@dataclass(frozen=True)
class _Kind:
    """A cost of items: rates by item and period, quantities by item and period, and how a sheet counts them."""

    part: str
    title: str
    rate: Floats
    quantity: Floats
    block: Block
    counted: bool = False

    def over(self, item: int) -> Figure:
        """Quantity over all periods."""
        value = float(np.count_nonzero(self.quantity[item]) if self.counted else self.quantity[item].sum())
        return Figure(value, f'COUNTIF({self.block.line(item)},">0")' if self.counted else self.block.total(item))

    def at(self, item: int, period: int) -> Figure:
        """Quantity in one period."""
        cell = self.block.cell(item, period)
        value = float(self.quantity[item, period])
        return Figure(float(value > 0), f'COUNTIF({cell},">0")') if self.counted else Figure(value, cell)


def lot_ledger(at: LotPlaces) -> Ledger:
    """Write the ledger of the plan; parts carry the audit's names."""
    case, plan = at.report.case, at.report.plan
    every = np.ones((case.n, case.t))
    kinds = [
        _Kind(SETUP, "Setup cost", case.setup_cost, plan.made, at.made, counted=True),
        _Kind(MAKING, "Unit cost", case.unit_cost, plan.made, at.made),
        _Kind(HOLDING, "Holding cost", case.holding_cost, settled(plan.stock), at.stock),
    ]
    if at.may_wait:
        kinds.append(_Kind(LATE, "Backlog cost", _finite(case.backlog_cost) * every, settled(plan.late), at.late))
    if at.may_lose:
        kinds.append(_Kind(LOST, "Lost sale cost", _finite(case.lost_cost) * every, settled(plan.lost), at.lost))
    parts = [_item_part(at, kind) for kind in kinds]
    parts += [_resource_part(at, OVERTIME, "Overtime cost"), _family_part(at), _resource_part(at, USE, "Use cost")]
    return write_ledger(at.name(names.LEDGER), parts, case.currency, "", "Item or resource", "What")


def _finite(rates: Floats) -> Floats:
    return np.where(np.isfinite(rates), rates, 0.0)[:, None]


def _item_part(at: LotPlaces, kind: _Kind) -> Part:
    case = at.report.case
    per = {SETUP: "per setup", HOLDING: f"per {case.period_unit}", LATE: f"per {case.period_unit}"}.get(kind.part, "")
    unit = "setups" if kind.counted else ""
    lines: list[Line] = []
    for i in range(case.n):
        priced = bool(kind.rate[i].any()) or at.report.workbook.origins.number(
            "Items", (case.items[i],), kind.title) is not None
        if priced:
            lines += _item_lines(at, kind, i)
    return Part(kind.part, unit, f"{case.currency} {per}".strip(), at.quantity_format, [group_of_lines(lines)])


def _item_lines(at: LotPlaces, kind: _Kind, i: int) -> list[Line]:
    """One line an item; one line a period where the item's rate has figures of its own in some periods."""
    case = at.report.case
    own = _own_periods(at, kind, i)
    what = case.item_names[i] if case.item_names[i] != case.items[i] else ""
    unit = "setups" if kind.counted else case.units[i]
    if kind.part in (HOLDING, LATE):
        unit = f"{unit} x {case.period_unit}"
    rate_unit = "" if kind.counted else f"{case.currency} per {unit}"
    if not own.any():
        source = _rate(at, kind, i, 0)
        return [Line((kind.part, i, -1), case.items[i], what, kind.over(i), source.figure, source.ref, source.note,
                     unit, rate_unit)]
    lines = []
    for t in range(case.t):
        if kind.part in (SETUP, MAKING) and not kind.quantity[i, t] > 0:
            continue
        source = _rate(at, kind, i, t)
        words = f"{what}, {case.period_unit} {case.periods[t]}".removeprefix(", ")
        lines.append(Line((kind.part, i, t), case.items[i], words, kind.at(i, t), source.figure, source.ref,
                          source.note, unit, rate_unit))
    return lines


def _own_periods(at: LotPlaces, kind: _Kind, i: int) -> Flags:
    """Shape (T,): periods with a figure of their own in Period costs."""
    case, origins = at.report.case, at.report.workbook.origins
    own: Flags = np.asarray(kind.rate[i] != kind.rate[i, 0])
    table = origins.tables.get("Period costs")
    if table is not None and kind.title in table.columns:
        for t, period in enumerate(case.periods):
            ref = origins.cell("Period costs", (case.items[i], period), kind.title)
            own[t] |= ref is not None and (ref.row, ref.column) not in table.blanks
    return own


def _rate(at: LotPlaces, kind: _Kind, i: int, t: int) -> Source:
    """Rate of an item in a period: Period costs, Items, or the yearly rate on the unit's value."""
    case, origins = at.report.case, at.report.workbook.origins
    value, code = float(kind.rate[i, t]), case.items[i]
    ref = origins.number("Period costs", (code, case.periods[t]), kind.title)
    ref = ref or origins.number("Items", (code,), kind.title)
    if ref is not None:
        return Source(Figure(value, ref.formula), ref)
    if kind.part == HOLDING:
        worth, yearly = origins.number("Items", (code,), "Unit value"), origins.setting("Yearly holding rate (%)")
        year = origins.setting("Periods a year")
        if worth is not None and yearly is not None and year is not None and value:
            formula = f"{worth.formula}*{yearly.formula}/100/{year.formula}"
            return Source(Figure(value, formula), worth, "x yearly rate")
    return _constant(at, "Items", (code,), kind.title, value)


def _constant(at: LotPlaces, sheet: str, key: tuple[str, ...], title: str, value: float) -> Source:
    """Rate without a usable cell; a blank cell is pointed at, since it counts 0 as the default does."""
    origins = at.report.workbook.origins
    ref = origins.cell(sheet, key, title)
    if ref is not None and value == 0 and (ref.row, ref.column) in origins.tables[sheet].blanks:
        return Source(Figure(value, ref.formula), ref, "(empty: 0)")
    words = "default: no such column" if ref is None else f"{ref.sheet}, {ref.address}: a number written as text"
    return Source(Figure(value), None, words)


def _resource_part(at: LotPlaces, part: str, title: str) -> Part:
    case = at.report.case
    overtime = part == OVERTIME
    costs = case.overtime_cost if overtime else case.use_cost
    block = at.load_block("overtime" if overtime else "in use")
    amounts = settled(at.report.plan.overtime).sum(axis=1) if overtime else at.used.sum(axis=1)
    unit = "time units" if overtime else f"{case.period_unit}s in use"
    rate = "per time unit" if overtime else f"per {case.period_unit} in use"
    group = _listed(at, part, "Resources", title, case.resources, costs, amounts, block.total)
    return Part(part, unit, f"{case.currency} {rate}", at.time_format if overtime else style.WHOLE, [group])


def _family_part(at: LotPlaces) -> Part:
    case = at.report.case
    group = _listed(at, FAMILY, "Families", "Setup cost", case.families, case.family_cost,
                    at.family_runs.sum(axis=1), at.load_block("families").total)
    return Part(FAMILY, "family setups", f"{case.currency} per family setup", style.WHOLE, [group])


def _listed(at: LotPlaces, part: str, sheet: str, title: str, codes: tuple[str, ...], costs: Floats, amounts: Floats,
            cell: Callable[[int], str]) -> Group:
    lines = []
    for k, code in enumerate(codes):
        ref = at.report.workbook.origins.number(sheet, (code,), title)
        value = float(costs[k])
        if ref is None and value == 0:
            continue
        source = _constant(at, sheet, (code,), title, value)
        if ref is not None:
            source = Source(Figure(value, ref.formula), ref)
        lines.append(Line((part, k, -1), code, "", Figure(float(amounts[k]), cell(k)), source.figure, source.ref,
                          source.note))
    return group_of_lines(lines)
