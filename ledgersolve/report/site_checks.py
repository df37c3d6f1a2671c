"""Live checks of a site-selection plan: the rules of the workbook as formulas over the plan's sheets."""

from collections.abc import Iterator

import numpy as np

from ledgersolve.report import style
from ledgersolve.report.checks import LiveCheck, count_check
from ledgersolve.report.ledger import Ledger
from ledgersolve.report.site_details import SERVED_CELLS
from ledgersolve.report.site_places import SitePlaces
from ledgersolve.report.tables import Figure
from ledgersolve.workbook.figures import all_words


def site_checks(at: SitePlaces, ledger: Ledger, tolerance: str) -> list[LiveCheck]:
    """Give the checks; ``tolerance`` is the cell of the tolerance in every formula."""
    return [
        _sum_check(at, ledger),
        *_service_checks(at, tolerance),
        *_delivery_checks(at, tolerance),
        *_volume_checks(at, tolerance),
        *_choice_checks(at),
    ]


def _sum_check(at: SitePlaces, ledger: Ledger) -> LiveCheck:
    lines = f'SUMIF({ledger.column("A")},"line",{ledger.column("I")})'
    off = f"ABS({lines}-{ledger.total})/(1+ABS({ledger.total}))"
    total = at.report.audit.total
    return LiveCheck("Cost adds up", "all lines of the ledger against its total", Figure(total, ledger.total),
                     Figure(total, lines), Figure(0.0, off), style.money_format(at.report.case.currency))


def _service_checks(at: SitePlaces, tolerance: str) -> Iterator[LiveCheck]:
    case, where = at.report.case, at.customers_at
    if case.n * at.sites.size <= SERVED_CELLS:
        off = f"ABS({where.span('delivered')}+{where.span('unmet')}-1)>{tolerance}"
        needed = "" if case.cost_is_whole else f"({where.span('demand')}>0)*"
        met = f"SUMPRODUCT({needed}({off}))"
        yield count_check("Demand", all_words(case.n, "customer"), "delivered and unmet make up all: none off", met)
        if case.single_source.any():
            everyone = style.counted(int(case.single_source.sum()), "customer")
            yield count_check("Single source", everyone, "one site each: none off",
                              f'COUNTIFS({where.span("single")},"yes",{where.span("sites")},">1")')
    if case.unmet_cost is None:
        yield count_check("Unmet demand", all_words(case.n, "customer"), "none", f"SUM({where.span('unmet')})")


def _delivery_checks(at: SitePlaces, tolerance: str) -> Iterator[LiveCheck]:
    case, where, sites = at.report.case, at.deliveries_at, at.sites_at
    everyone = all_words(at.sites.size, "delivery", "deliveries")
    yield count_check("Open site", everyone, "from open sites only: no closed site delivers",
                      f'COUNTIFS({sites.span("open")},"no",{sites.span("customers")},">0")')
    yield count_check("Delivered share", everyone, "none below 0", f'COUNTIF({where.span("share")},"<0")')
    if at.promised:
        beyond = f"{where.span('distance')}>{where.span('allowed')}*(1+{tolerance})"
        yield count_check("Longest distance", everyone, "within what is allowed: none beyond",
                          f"SUMPRODUCT(ISNUMBER({where.span('allowed')})*({beyond}))")
    if case.lane_most is not None:
        beyond = f"{where.span('volume')}>{where.span('most')}*(1+{tolerance})"
        yield count_check("Most on a lane", everyone, "within what the lane carries: none beyond",
                          f"SUMPRODUCT(ISNUMBER({where.span('most')})*({beyond}))")
    if case.share_within is not None and case.share_distance is not None and at.measured and case.demand.sum() > 0:
        yield _share_check(at)


def _share_check(at: SitePlaces) -> LiveCheck:
    case, where, origins = at.report.case, at.deliveries_at, at.report.workbook.origins
    share, reach = origins.setting("Share within distance (%)"), origins.setting("Distance for share")
    assert case.share_within is not None
    assert case.share_distance is not None
    demand = f"SUM({at.customers_at.span('demand')})"
    near = np.isfinite(at.distances) & (at.distances <= case.share_distance * (1 + 1e-9))
    got = float(at.volumes[near].sum()) / float(case.demand.sum())
    required = Figure(case.share_within, f"{share.formula}/100" if share is not None else "")
    if reach is None:
        return LiveCheck("Share within distance", "all demand", required, Figure(got), Figure(0.0), style.PERCENT)
    inside = f"ISNUMBER({where.span('distance')})*({where.span('distance')}<={reach.formula})"
    formula = f"SUMPRODUCT({inside}*{where.span('volume')})/{demand}"
    short = f"MAX(0,{required.formula or case.share_within}-{formula})"
    return LiveCheck("Share within distance", f"all demand, within {case.share_distance:g} {case.distance_unit}",
                     required, Figure(got, formula), Figure(max(0.0, case.share_within - got), short),
                     style.PERCENT)


def _volume_checks(at: SitePlaces, tolerance: str) -> Iterator[LiveCheck]:
    case, where = at.report.case, at.sites_at
    capped = int(np.isfinite(case.capacity).sum())
    if capped:
        yield count_check("Capacity", style.counted(capped, "site with a capacity", "sites with a capacity"),
                          "load within capacity: none above",
                          f'COUNTIF({where.span("use")},">"&(1+{tolerance}))')
    if (case.least_volume > 0).any():
        below = f"{where.span('load')}<{where.span('least')}*(1-{tolerance})"
        yield count_check("Least volume", "open sites with a least volume", "at least that much: none below",
                          f'SUMPRODUCT(({where.span("open")}="yes")*({below}))')


def _choice_checks(at: SitePlaces) -> Iterator[LiveCheck]:
    case, where, origins = at.report.case, at.sites_at, at.report.workbook.origins
    running = int(at.report.plan.open.sum())
    open_ = where.span("open")
    count = f'COUNTIF({open_},"yes")'
    for name, limit, sign in (("Fewest sites", case.fewest_sites, 1), ("Most sites", case.most_sites, -1)):
        if limit is None:
            continue
        ref = origins.setting(name)
        required = Figure(limit, "" if ref is None else ref.formula)
        cell = required.formula
        off = "" if not cell else f"MAX(0,{cell}-{count})" if sign > 0 else f"MAX(0,{count}-{cell})"
        yield LiveCheck(name, "open sites", required, Figure(running, count),
                        Figure(max(0, sign * (limit - running)), off))
    if at.ruled:
        rule = where.span("rule")
        yield count_check("Site rule", "sites with a rule", "open or closed as the rule says: none otherwise",
                          f'COUNTIFS({rule},"open",{open_},"no")+COUNTIFS({rule},"closed",{open_},"yes")')
    if at.grouped:
        group = where.span("group")
        crowded = f'COUNTIFS({group},{group},{open_},"yes")>1'
        yield count_check("Group", "sizes of one site", "at most one of a group open: none more",
                          f'SUMPRODUCT(({open_}="yes")*({group}<>"")*({crowded}))')
