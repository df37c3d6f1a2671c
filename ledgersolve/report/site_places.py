"""Where the figures of a site-selection plan stand: sorted deliveries, and the cells they come from."""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from ledgersolve.report import names, style
from ledgersolve.report.inputs import SiteReport
from ledgersolve.report.tables import Figure, Places, places
from ledgersolve.site_selection.case import FREE, Floats, Ints
from ledgersolve.workbook.origins import CellRef

LEDGER_DELIVERIES = 25_000
"""Most deliveries with a line each in the ledger; beyond, each site has one line for all of its deliveries."""


@dataclass(frozen=True)
class SitePlaces:
    """A report with its settled sheet names, and the order in which its tables stand.

    Deliveries stand by site, then by customer, in sheet order.
    """

    report: SiteReport
    names: Mapping[str, str]

    def name(self, wanted: str) -> str:
        """Settled name of a sheet."""
        return self.names.get(wanted, wanted)

    @cached_property
    def order(self) -> Ints:
        """Shape (k,): numbers of the deliveries in table order."""
        plan = self.report.plan
        return np.lexsort((plan.customer, plan.site)).astype(np.int64)

    @cached_property
    def sites(self) -> Ints:
        """Shape (k,): sites of the deliveries in table order."""
        return self.report.plan.site[self.order]

    @cached_property
    def customers(self) -> Ints:
        """Shape (k,): customers of the deliveries in table order."""
        return self.report.plan.customer[self.order]

    @cached_property
    def shares(self) -> Floats:
        """Shape (k,): shares of the deliveries in table order."""
        return self.report.plan.share[self.order]

    @cached_property
    def volumes(self) -> Floats:
        """Shape (k,): units of the deliveries in table order."""
        return self.shares * self.report.case.demand[self.customers]

    @cached_property
    def lane_quantities(self) -> Floats:
        """Shape (k,): what a lane's rate is paid on: units, or shares on whole-demand costs."""
        return self.shares if self.report.case.cost_is_whole else self.volumes

    @cached_property
    def load(self) -> Floats:
        """Shape (m,): units through each site."""
        return np.bincount(self.sites, weights=self.volumes, minlength=self.report.case.m).astype(np.float64)

    @cached_property
    def has_today(self) -> bool:
        """Whether any site is in use today."""
        return bool(self.report.case.today.any())

    @cached_property
    def measured(self) -> bool:
        """Whether distances are shown: some lane of the plan has one."""
        return self.report.case.distance is not None and bool(np.isfinite(self.distances).any())

    @cached_property
    def promised(self) -> bool:
        """Whether some customer may not be served from any distance."""
        return self.measured and bool(np.isfinite(self.report.case.promised()).any())

    @cached_property
    def sites_named(self) -> bool:
        """Whether some site has a name that is not its code."""
        return self.report.case.site_names != self.report.case.sites

    @cached_property
    def customers_named(self) -> bool:
        """Whether some customer has a name that is not its code."""
        return self.report.case.customer_names != self.report.case.customers

    @cached_property
    def straight(self) -> bool:
        """Whether some distance of the plan follows from coordinates."""
        return any(_distance_cell(self, k) is None for k in np.flatnonzero(np.isfinite(self.distances)).tolist())

    @cached_property
    def once(self) -> bool:
        """Whether opening or closing some site costs something."""
        return bool(self.report.case.opening_cost.any() or self.report.case.closing_cost.any())

    @cached_property
    def handled(self) -> bool:
        """Whether handling costs something at some site."""
        return bool(self.report.case.handling_cost.any())

    @cached_property
    def ruled(self) -> bool:
        """Whether some site must be open or closed."""
        return bool((self.report.case.rule != FREE).any())

    @cached_property
    def grouped(self) -> bool:
        """Whether some sites are sizes of one."""
        return bool((self.report.case.group >= 0).any())

    @cached_property
    def distances(self) -> Floats:
        """Shape (k,): distance of each delivery, NaN = not known."""
        distance = self.report.case.distance
        return np.full(self.sites.size, np.nan) if distance is None else distance[self.sites, self.customers]

    @cached_property
    def compact(self) -> bool:
        """Whether there are too many deliveries for a ledger line each: their rates then stand beside them."""
        return self.sites.size > LEDGER_DELIVERIES

    @cached_property
    def deliveries_at(self) -> Places:
        """Places of the table of deliveries."""
        keys = ["site", *(["site name"] if self.sites_named else []), "customer",
                *(["customer name"] if self.customers_named else []), "share", "volume", "cost"]
        keys += ["rate"] if self.compact else []
        keys += ["distance"] if self.measured else []
        keys += ["straight"] if self.straight else []
        keys += ["allowed"] if self.promised else []
        keys += ["most"] if self.report.case.lane_most is not None else []
        return places(self.name(names.PLAN_DELIVERIES), keys, self.sites.size)

    @cached_property
    def sites_at(self) -> Places:
        """Places of the table of sites."""
        keys = ["site", *(["name"] if self.sites_named else []), "open"]
        keys += ["today", "change"] if self.has_today else []
        keys += ["customers", "load", "capacity", "use"]
        keys += ["least"] if self.report.case.least_volume.any() else []
        keys += ["fixed", *(["once"] if self.once else []), "lane", *(["handling"] if self.handled else [])]
        keys += ["cost", "part"]
        keys += ["rule"] if self.ruled else []
        keys += ["group"] if self.grouped else []
        return places(self.name(names.PLAN_SITES), keys, self.report.case.m)

    @cached_property
    def customers_at(self) -> Places:
        """Places of the table of customers."""
        keys = ["customer", *(["name"] if self.customers_named else []), "demand", "delivered", "unmet", "sites"]
        keys += ["main", *(["main name"] if self.sites_named else [])]
        keys += ["single"] if self.report.case.single_source.any() else []
        keys += ["farthest"] if self.measured else []
        keys += ["promise"] if self.promised else []
        compared = self.report.today is not None and self.report.today.solved.plan is not None
        keys += ["today", "moves"] if compared else []
        return places(self.name(names.PLAN_CUSTOMERS), keys, self.report.case.n)

    @cached_property
    def per(self) -> str:
        """What money and demand cover, behind a slash."""
        return f"/{self.report.case.period_covered}"

    @cached_property
    def money_unit(self) -> str:
        """Unit of every amount."""
        return f"{self.report.case.currency}{self.per}"

    @cached_property
    def demand_format(self) -> str:
        """Number format of demands and volumes."""
        return style.figure_format(self.volumes.tolist() + self.report.case.demand[:2000].tolist())

    def demand(self, customer: int) -> Figure:
        """Demand of a customer, from its cell where a formula can use it."""
        case = self.report.case
        ref = self.report.workbook.origins.number("Customers", (case.customers[customer],), "Demand")
        return Figure(float(case.demand[customer]), "" if ref is None else ref.formula)


@dataclass(frozen=True)
class Source:
    """Where a figure comes from: a formula, the cell to name, and a note."""

    figure: Figure
    ref: CellRef | None = None
    note: str = ""


def column_source(at: SitePlaces, sheet: str, code: str, title: str, value: float) -> Source:
    """Figure of an optional column: its cell, a blank one too (a blank counts as 0 like the default)."""
    origins = at.report.workbook.origins
    ref = origins.number(sheet, (code,), title)
    if ref is None and value == 0:
        blank = origins.cell(sheet, (code,), title)
        if blank is not None and (blank.row, blank.column) in origins.tables[sheet].blanks:
            return Source(Figure(value, blank.formula), blank, "(empty: 0)")
    if ref is not None:
        return Source(Figure(value, ref.formula), ref)
    return Source(Figure(value), None, why_constant(at, sheet, code, title))


def why_constant(at: SitePlaces, sheet: str, code: str, title: str) -> str:
    """Say why the rate is a constant: text cell, or default."""
    ref = at.report.workbook.origins.cell(sheet, (code,), title)
    if ref is None:
        return "default: no such column"
    return f"{ref.sheet}, {ref.address}: default, or a number written as text"


def lane_source(at: SitePlaces, delivery: int) -> Source:
    """Rate of a delivery's lane: its own cell, a matrix cell, or distance x cost per unit and distance."""
    j, i = int(at.sites[delivery]), int(at.customers[delivery])
    value = float(at.report.case.lane_cost[j, i])
    ref = lane_cell(at, j, i)
    if ref is not None:
        return Source(Figure(value, ref.formula), ref)
    constant = Source(Figure(value), None, "constant: no number cell gives this rate by itself")
    return _distance_rate(at, delivery, value) or constant


def lane_cell(at: SitePlaces, site: int, customer: int) -> CellRef | None:
    """Cell that holds a lane's cost; a row of Lanes wins over the matrix. None where no cell does."""
    case, origins = at.report.case, at.report.workbook.origins
    key = (case.sites[site], case.customers[customer])
    return origins.number("Lanes", key, "Unit cost") or origins.matrix_number("Lane costs", *key)


def _distance_rate(at: SitePlaces, delivery: int, value: float) -> Source | None:
    """Rate = distance x cost per unit and distance (x demand on whole-demand costs), or None if it is not."""
    report = at.report
    road_cost, distance = report.workbook.road_cost, float(at.distances[delivery])
    ref = report.workbook.origins.setting("Cost per unit and distance")
    if road_cost is None or ref is None or not np.isfinite(distance):
        return None
    formula = f"{at.deliveries_at.cell('distance', delivery)}*{ref.formula}"
    expected, customer = distance * road_cost, int(at.customers[delivery])
    if report.case.cost_is_whole and not np.isclose(expected, value, rtol=1e-9, atol=0.0):
        expected *= float(report.case.demand[customer])
        formula += f"*{at.customers_at.cell('demand', customer)}"
    if not np.isclose(expected, value, rtol=1e-9, atol=1e-12):
        return None
    return Source(Figure(value, formula), ref, "x distance")


def distance_source(at: SitePlaces, delivery: int) -> tuple[Figure, float | None]:
    """Distance of a delivery and, where it comes from coordinates, the straight-line figure behind it."""
    workbook, ref = at.report.workbook, _distance_cell(at, delivery)
    value = float(at.distances[delivery])
    if ref is not None:
        return Figure(value, ref.formula), None
    straight = value / workbook.road_factor
    factor = workbook.origins.setting("Road factor")
    cell = at.deliveries_at.here("straight", delivery)
    return Figure(value, cell if factor is None else f"{cell}*{factor.formula}"), straight


def _distance_cell(at: SitePlaces, delivery: int) -> CellRef | None:
    """Cell that holds a delivery's distance; None where it follows from coordinates."""
    case, origins = at.report.case, at.report.workbook.origins
    key = (case.sites[int(at.sites[delivery])], case.customers[int(at.customers[delivery])])
    return origins.number("Lanes", key, "Distance") or origins.matrix_number("Distances", *key)
