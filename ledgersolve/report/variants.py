"""Variants side by side with the workbook's own case."""

from ledgersolve.mip import Verdict
from ledgersolve.mip.run import Solved
from ledgersolve.report import names, style
from ledgersolve.report.inputs import VariantResult
from ledgersolve.report.site_places import SitePlaces
from ledgersolve.report.tables import TITLE_ROW, Column, detail_sheet
from ledgersolve.site_selection.case import Variant
from ledgersolve.site_selection.plan import Plan
from ledgersolve.workbook.sheets import Area, Chart, ResultSheet, Scalar, Series

OWN = "As in the workbook"
NO_FIGURE = {Verdict.NO_PLAN_EXISTS: "no plan exists", Verdict.NONE_FOUND: "none found in time"}


def plan_variants(at: SitePlaces) -> ResultSheet | None:
    """Give the sheet of variants; None where the workbook has none."""
    report = at.report
    if not report.variants:
        return None
    case, currency = report.case, report.case.currency
    solved = _solved(at)
    money = style.number(style.money_format(currency))
    base = report.audit.total
    columns = [
        Column("variant", "Variant", [OWN, *[result.variant.name for result in report.variants]],
               style.WRAPPED_CELL, 24),
        Column("change", "What it changes",
               ["nothing", *[changed(result.variant, case.distance_unit) for result in report.variants]],
               style.WRAPPED_CELL, 28),
        Column("verdict", "Verdict", [s.verdict.value for s in solved], style.WRAPPED_CELL, 14),
        Column("cost", f"Cost ({at.money_unit})", [_cost(s) for s in solved], money, 16),
        Column("against", f"Difference to the first row ({at.money_unit})",
               [None if s.cost is None else s.cost - base for s in solved],
               style.number(f"+{money.number_format};-{money.number_format};0"), 16,
               [f"D{row}-D${TITLE_ROW + 2}" if s.cost is not None else ""
                for row, s in enumerate(solved, start=TITLE_ROW + 2)]),
        Column("still", f"Could still be saved, at most ({at.money_unit})", [_still(s) for s in solved], money, 16),
        Column("count", "Open sites (number)", [_count(s) for s in solved], style.number(style.WHOLE), 11),
        Column("open", "Open sites", [_open(at, s) for s in solved], style.WRAPPED_CELL, 30),
        Column("differs", "Sites, against the first row",
               ["nothing", *[_difference(at, result) for result in report.variants]], style.WRAPPED_CELL, 26),
    ]
    sheet = detail_sheet(at.name(names.PLAN_VARIANTS), "Variants", "Each variant was solved for itself; it changes "
                                                                   "only what its row in your sheet Variants "
                                                                   "names. No figure stands where there is no "
                                                                   "plan.", columns, style.MOSS)
    _chart(sheet, at, len(solved))
    return sheet


def _solved(at: SitePlaces) -> list[Solved[Plan]]:
    """The own case first, then the variants."""
    return [at.report.solved, *[result.solved for result in at.report.variants]]


def changed(variant: Variant, distance_unit: str) -> str:
    """Say in words what a variant changes."""
    words = [f"{label} x {factor:g}" for label, factor in (
        ("demand", variant.demand_factor), ("lane costs", variant.lane_cost_factor),
        ("fixed costs", variant.fixed_cost_factor)) if factor != 1.0]
    words += [f"{label} {count}" for label, count in (
        ("at least sites:", variant.fewest_sites), ("at most sites:", variant.most_sites)) if count is not None]
    if variant.longest_distance is not None:
        words.append(f"longest distance {variant.longest_distance:g} {distance_unit}")
    words += [f"{label} {', '.join(codes)}" for label, codes in (("open:", variant.open), ("closed:", variant.closed))
              if codes]
    return "; ".join(words) or "nothing"


def _cost(solved: Solved[Plan]) -> Scalar:
    return NO_FIGURE[solved.verdict] if solved.cost is None else solved.cost


def _still(solved: Solved[Plan]) -> Scalar:
    if solved.cost is None:
        return None
    return "not known" if solved.bound is None else max(0.0, solved.cost - solved.bound)


def _count(solved: Solved[Plan]) -> Scalar:
    return None if solved.plan is None else int(solved.plan.open.sum())


def _open(at: SitePlaces, solved: Solved[Plan]) -> str:
    return "" if solved.plan is None else ", ".join(solved.plan.open_codes(at.report.case.sites))


def _difference(at: SitePlaces, result: VariantResult) -> str:
    if result.solved.plan is None:
        return ""
    own, other, sites = at.report.plan.open, result.solved.plan.open, at.report.case.sites
    words = [f"{label} {', '.join(codes)}" for label, codes in (
        ("also", [s for s, a, b in zip(sites, own, other, strict=True) if b and not a]),
        ("without", [s for s, a, b in zip(sites, own, other, strict=True) if a and not b])) if codes]
    return "; ".join(words) or "the same sites"


def _chart(sheet: ResultSheet, at: SitePlaces, count: int) -> None:
    series = Series("Cost", Area(sheet.name, TITLE_ROW + 1, 0, TITLE_ROW + count, 0),
                    Area(sheet.name, TITLE_ROW + 1, 3, TITLE_ROW + count, 3), style.PETROL)
    sheet.charts.append(Chart("bar", "Cost of each variant", (series,), TITLE_ROW + count + 2, 0, 760,
                              60 + 28 * min(count, 20), y_title=at.money_unit, number_format="#,##0", legend="",
                              from_zero=min((s.cost or 0.0) for s in _solved(at)) >= 0,
                              description="Bars of the cost of each variant in the table above"))
