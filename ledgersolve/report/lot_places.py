"""Where the figures of a lot-sizing plan stand: items and periods in sheet order, the same on every sheet."""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from ledgersolve.lot_sizing.case import Floats
from ledgersolve.lot_sizing.plan import family_setups, resource_need
from ledgersolve.report import names, style
from ledgersolve.report.inputs import LotReport
from ledgersolve.report.tables import FIRST_ROW, Figure, quoted
from ledgersolve.workbook.cells import column_letters
from ledgersolve.workbook.origins import CellRef

CODE, NAME, UNIT, SUM = range(4)
FIRST_PERIOD = 4
"""Column (from 0) of the first period on every sheet of periods."""


@dataclass(frozen=True)
class Block:
    """A table of codes x periods on one sheet: its first data row (from 0) and size, for formulas."""

    sheet: str
    first_row: int
    rows: int
    periods: int

    def letter(self, period: int) -> str:
        """Letters of a period's column."""
        return column_letters(FIRST_PERIOD + period + 1)

    def here(self, row: int, period: int) -> str:
        """Cell of a row and period, for a formula on the same sheet."""
        return f"{self.letter(period)}{self.first_row + row + 1}"

    def cell(self, row: int, period: int) -> str:
        """Cell of a row and period, for a formula on another sheet."""
        return f"{quoted(self.sheet)}!${self.letter(period)}${self.first_row + row + 1}"

    def total(self, row: int) -> str:
        """Cell of a row's sum over all periods."""
        return f"{quoted(self.sheet)}!$D${self.first_row + row + 1}"

    def line(self, row: int) -> str:
        """All periods of a row, for a formula on another sheet."""
        place = self.first_row + row + 1
        return f"{quoted(self.sheet)}!${self.letter(0)}${place}:${self.letter(self.periods - 1)}${place}"

    def column(self, period: int) -> str:
        """All rows of a period, for a formula on another sheet."""
        return self._span(self.letter(period), self.letter(period))

    def whole(self) -> str:
        """All rows and periods, for a formula on another sheet."""
        return self._span(self.letter(0), self.letter(self.periods - 1))

    def before_last(self) -> str:
        """All rows, all periods but the last one."""
        return self._span(self.letter(0), self.letter(self.periods - 2))

    def side(self, number: int) -> str:
        """All rows of a column to the right of the periods (``number`` from 0)."""
        letter = self.letter(self.periods + number)
        return self._span(letter, letter)

    def sums(self) -> str:
        """All rows of the column of sums."""
        return self._span("D", "D")

    def codes(self) -> str:
        """All rows of the column of codes."""
        return self._span("A", "A")

    def _span(self, first: str, last: str) -> str:
        top, bottom = self.first_row + 1, self.first_row + max(1, self.rows)
        return f"{quoted(self.sheet)}!${first}${top}:${last}${bottom}"


@dataclass(frozen=True)
class LotPlaces:
    """A report with its settled sheet names, and where its tables stand."""

    report: LotReport
    names: Mapping[str, str]

    def name(self, wanted: str) -> str:
        """Settled name of a sheet."""
        return self.names.get(wanted, wanted)

    @cached_property
    def money_unit(self) -> str:
        """Unit of every amount."""
        return self.report.case.currency

    @cached_property
    def may_wait(self) -> bool:
        """Whether some item may be late."""
        return bool(np.isfinite(self.report.case.backlog_cost).any())

    @cached_property
    def may_lose(self) -> bool:
        """Whether some demand may be lost."""
        return bool(np.isfinite(self.report.case.lost_cost).any())

    def _items(self, wanted: str) -> Block:
        case = self.report.case
        return Block(self.name(wanted), FIRST_ROW, case.n, case.t)

    @cached_property
    def made(self) -> Block:
        """Units made."""
        return self._items(names.PLAN_LOTS)

    @cached_property
    def stock(self) -> Block:
        """Stock at the end of each period."""
        return self._items(names.PLAN_STOCK)

    @cached_property
    def late(self) -> Block:
        """Units late at the end of each period."""
        return self._items(names.PLAN_LATE)

    @cached_property
    def lost(self) -> Block:
        """Demand of each period that is never met."""
        return self._items(names.PLAN_LOST)

    @cached_property
    def may_overrun(self) -> bool:
        """Whether some resource may work overtime."""
        return bool((self.report.case.overtime_limit > 0).any())

    @cached_property
    def available(self) -> Floats:
        """Shape (R, T): time that can be had: capacity with all overtime that is allowed."""
        return self.report.case.capacity + self.report.case.overtime_limit[:, None]

    def load_block(self, key: str) -> Block:
        """Block on the load sheet: load, capacity, overtime, available, part, in use, families.

        Where no overtime is allowed, the time available is the capacity.
        """
        case = self.report.case
        if key == "available" and not self.may_overrun:
            key = "capacity"
        keys = ["load", "capacity", "overtime", *(["available"] if self.may_overrun else []), "part", "in use",
                "families"]
        first = FIRST_ROW + 1 + keys.index(key) * (len(case.resources) + 4)
        rows = len(case.families if key == "families" else case.resources)
        return Block(self.name(names.PLAN_LOAD), first, rows, case.t)

    @cached_property
    def has_load(self) -> bool:
        """Whether there is a load sheet."""
        return bool(self.report.case.resources or self.report.case.families)

    @cached_property
    def need(self) -> Floats:
        """Shape (R, T): time needed."""
        return resource_need(self.report.case, self.report.plan.made)

    @cached_property
    def family_runs(self) -> Floats:
        """Shape (F, T): 1 where the family has a setup."""
        return family_setups(self.report.case, self.report.plan.setup).astype(np.float64)

    @cached_property
    def used(self) -> Floats:
        """Shape (R, T): 1 where the resource is used."""
        case = self.report.case
        used = np.zeros((len(case.resources), case.t))
        for item in np.flatnonzero(case.item_resource >= 0).tolist():
            used[case.item_resource[item]] += self.report.plan.setup[item]
        for family in np.flatnonzero(case.family_resource >= 0).tolist():
            used[case.family_resource[family]] += self.family_runs[family]
        return np.minimum(used, 1.0)

    @cached_property
    def quantity_format(self) -> str:
        """Number format of quantities."""
        plan, case = self.report.plan, self.report.case
        sample = np.concatenate([plan.made.ravel()[:4000], plan.stock.ravel()[:4000], case.demand.ravel()[:4000]])
        return style.figure_format(sample.tolist())

    @cached_property
    def time_format(self) -> str:
        """Number format of time on resources."""
        return style.figure_format(self.need.ravel()[:4000].tolist())

    def demand_cell(self, item: int, period: int) -> CellRef | None:
        """Cell of a demand (a blank one too: it counts 0), if a formula can use it."""
        origins, case = self.report.workbook.origins, self.report.case
        ref = origins.matrix_cell("Demand", case.items[item], case.periods[period])
        if ref is None:
            return None
        return None if (ref.row, ref.column) in origins.matrices["Demand"].not_numbers else ref

    def figure(self, sheet: str, key: tuple[str, ...], title: str, value: float) -> Figure:
        """Figure of a list sheet's cell, a constant where a formula cannot use it."""
        ref = self.report.workbook.origins.number(sheet, key, title)
        return Figure(value, "" if ref is None else ref.formula)
