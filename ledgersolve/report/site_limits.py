"""What holds a site-selection plan back, in the words of the first page."""

import numpy as np

from ledgersolve.findings import Answered
from ledgersolve.report import style
from ledgersolve.report.site_places import SitePlaces
from ledgersolve.site_selection.case import CLOSED, OPEN, Case, Flags

FULL = 0.9995
"""Part of a limit from which it counts as reached."""
MOST_NAMED = 4


def site_limits(at: SitePlaces) -> list[str]:
    """Rules at their limit, each with what a looser one would save where that was asked ahead."""
    case, plan = at.report.case, at.report.plan
    points = [*_volumes(at), *_counts(at)]
    for state, word in ((OPEN, "Open by rule"), (CLOSED, "Closed by rule")):
        if (case.rule == state).any():
            points.append(f"{word}: {site_words(at, case.rule == state)}.")
    barred = barred_lanes(case)
    if barred.any():
        only = np.flatnonzero(barred[plan.open].any(axis=0) & (plan.unmet > 0))
        short = f", among them {_customers(at, only)} that miss deliveries" if only.size else ""
        points.append(f"The longest distance allowed rules out {style.counted(int(barred.sum()), 'lane')}{short}"
                      f"{_worth(at, 'the longest distances promised')}.")
    if case.share_within is not None and case.share_distance is not None:
        rule = f"{100 * case.share_within:.0f} % of demand within {case.share_distance:g} {case.distance_unit}"
        points.append(f"At least {style.percent_words(case.share_within)} of the demand is kept within "
                      f"{style.quantity_words(case.share_distance)} {case.distance_unit}{_worth(at, rule)}.")
    return points or ["No capacity, count or distance rule holds the plan back: costs alone decide."]


def site_words(at: SitePlaces, which: Flags, most: int = 8) -> str:
    """Sites in a sentence."""
    case = at.report.case
    chosen = np.flatnonzero(which).tolist()
    return style.listed([style.short(case.sites[j], case.site_names[j]) for j in chosen], most)


def barred_lanes(case: Case) -> Flags:
    """Shape (m, n): lanes that have a cost and that the longest distance allowed rules out."""
    if case.distance is None:
        return np.zeros((case.m, case.n), dtype=bool)
    with np.errstate(invalid="ignore"):
        barred: Flags = (case.distance > case.promised() * (1 + 1e-9)) & np.isfinite(case.lane_cost)
    return barred


def _volumes(at: SitePlaces) -> list[str]:
    """Capacities, least volumes and limits of lanes that the plan reaches."""
    case, plan, points = at.report.case, at.report.plan, []
    full = plan.open & np.isfinite(case.capacity) & (at.load >= FULL * case.capacity)
    if full.any():
        points.append(f"Full to capacity: {site_words(at, full)}.")
    least = plan.open & (case.least_volume > 0) & (at.load <= case.least_volume / FULL)
    if least.any():
        points.append(f"Held up to the least volume: {site_words(at, least)}{_worth(at, 'least volumes')}.")
    if case.lane_most is not None:
        most = case.lane_most[at.sites, at.customers]
        reached = np.flatnonzero(np.isfinite(most) & (at.volumes >= FULL * most)).tolist()
        lanes = [f"{style.short(case.sites[at.sites[k]], case.site_names[at.sites[k]])} to "
                 f"{style.short(case.customers[at.customers[k]], case.customer_names[at.customers[k]])}"
                 for k in reached]
        if lanes:
            points.append(f"Lanes that carry the most they may: {style.listed(lanes, MOST_NAMED)}"
                          f"{_worth(at, 'the most that lanes carry')}.")
    return points


def _counts(at: SitePlaces) -> list[str]:
    case, running, points = at.report.case, int(at.report.plan.open.sum()), []
    if case.most_sites is not None and running == case.most_sites:
        points.append(f"The most sites allowed ({case.most_sites}) are open"
                      f"{_worth(at, f'{case.most_sites} sites at most')}.")
    if case.fewest_sites is not None and running == case.fewest_sites:
        points.append(f"No fewer sites are allowed than the {case.fewest_sites} that are open"
                      f"{_worth(at, f'{case.fewest_sites} sites at least')}.")
    return points


def _customers(at: SitePlaces, which: np.ndarray) -> str:
    case = at.report.case
    return style.listed([style.short(case.customers[i], case.customer_names[i]) for i in which.tolist()], MOST_NAMED)


def _worth(at: SitePlaces, rule: str) -> str:
    """What loosening the rule saves, where the answers ahead say so for certain; "" where they do not."""
    for answer in at.report.answers:
        for row in answer.rows:
            if row[0] == rule and _asked_looser(answer):
                loosened, least, most = row[1:4]
                if isinstance(least, float) and least == most == 0.0:
                    return f"; a looser rule ({loosened}) would save nothing"
                if isinstance(least, float) and least > 0:
                    saved = style.money_words(least, at.report.case.currency, "nearest" if least == most else "down")
                    return f"; a looser rule ({loosened}) would save {saved}{'' if least == most else ' or more'}"
    return ""


def _asked_looser(answer: Answered) -> bool:
    """Whether the answer's table says what looser rules save: rule, loosened to, least and most saved."""
    return len(answer.columns) >= 4 and answer.columns[1].title == "Loosened to"
