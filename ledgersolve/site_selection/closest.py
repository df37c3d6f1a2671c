"""The plan that comes closest where none exists: least demand unmet, or least of all rules bent; and its tables."""

import numpy as np

from ledgersolve.findings import Answered, Column
from ledgersolve.mip import Clock
from ledgersolve.site_selection.case import OPEN, Case, Floats
from ledgersolve.site_selection.deliveries import tidy
from ledgersolve.site_selection.elastic import Bent, least_bent, least_unmet
from ledgersolve.site_selection.plan import Plan
from ledgersolve.workbook.figures import unit_words

MOST_SHOWN = 200
"""Customers shown with what the closest plan leaves unmet."""
MOST_NAMED = 3


def figure(value: float) -> str:
    """A quantity in words: at most two decimals, thousands apart."""
    return f"{value:,.2f}".rstrip("0").rstrip(".")


def closest(case: Case, clock: Clock) -> tuple[Plan | None, str, tuple[Answered, ...]]:
    """Give the closest plan, what it leaves open in words, and its tables.

    First the plan that leaves the least demand unmet and keeps every other rule; where the other rules clash
    among themselves, the plan that bends them least.
    """
    found = least_unmet(case, max(clock.left() / 2, 1.0), clock) or least_bent(case, max(clock.left(), 1.0), clock)
    if found is None or found.result.values is None:
        return None, "", ()
    built, values = found.built, found.result.values
    unmet = np.zeros(case.n)
    unmet[built.unmet] = values[built.u]
    plan = tidy(found.lanes, built.read_open(values), built.site, built.customer, values[built.x], unmet)
    left = plan.unmet * case.demand
    left[left <= 1e-9 * max(1.0, float(case.demand.sum()))] = 0.0
    said = [_unmet_words(case, left)] if left.any() else []
    said += [f"bends rules: {'; '.join(_bent_words(case, found))}"] if found.loosened else []
    return plan, " and ".join(said), _tables(case, plan, left, found)


def _unmet_words(case: Case, left: Floats) -> str:
    short = [case.customers[i] for i in np.flatnonzero(left)]
    codes = ", ".join(short[:5]) + (f" and {len(short) - 5} more" if len(short) > 5 else "")
    total = float(left.sum())
    return f"leaves {figure(total)} {unit_words(total, case.demand_unit)} unmet at {codes}"


def _bent_words(case: Case, found: Bent) -> list[str]:
    """Say of each rule by how much the plan bends it."""
    words = []
    for part in found.loosened:
        names = case.customers if part.kind == "promise" else case.sites
        places = [f"{figure(float(amount))} at {names[k]}"
                  for k, amount in zip(part.where[:MOST_NAMED], part.amounts[:MOST_NAMED], strict=False)]
        more = f" and {part.where.size - MOST_NAMED} more" if part.where.size > MOST_NAMED else ""
        named, codes = ", ".join(places) + more, ", ".join(case.sites[k] for k in part.where[:MOST_NAMED]) + more
        words.append({
            "capacity": f"capacity exceeded by {named}", "least volume": f"least volume missed by {named}",
            "most sites": f"{figure(part.total)} more than Most sites",
            "fewest sites": f"{figure(part.total)} fewer than Fewest sites", "closed": f"closed sites open: {codes}",
            "open": f"sites that must be open closed: {codes}", "promise": f"too far by {named}",
            "share within": f"{figure(part.total)} too little within distance",
            "single source": "customers served from more than one site", "lane most": "lanes above their Most",
        }[part.kind])
    return words


def _tables(case: Case, plan: Plan, left: Floats, found: Bent) -> tuple[Answered, ...]:
    """List the sites of the closest plan with what they deliver, and the customers that it leaves short."""
    volume = np.bincount(plan.site, weights=plan.share * case.demand[plan.customer], minlength=case.m)
    served = np.bincount(plan.site[plan.share > 0], minlength=case.m)
    sites = tuple(
        (_named(case.sites[j], case.site_names[j]), float(volume[j]), float(served[j]),
         "over its capacity" if volume[j] > case.capacity[j] * (1 + 1e-6) else
         "full" if volume[j] >= 0.999 * case.capacity[j] else "")
        for j in np.flatnonzero(plan.open & ((volume > 0) | (case.rule == OPEN))).tolist()
    )
    but = "the rules that it bends" if found.loosened else "the demand listed below it"
    tables = [Answered("The plan that comes closest", f"It keeps every rule, apart from {but}.",
                       (Column("Open site"), Column("Delivers", "number"), Column("Customers served", "number"),
                        Column("Note")), sites)]
    short = [i for i in np.argsort(-left, kind="stable").tolist() if left[i] > 0]
    if short:
        more = f" The first {MOST_SHOWN} of {len(short)} are shown." if len(short) > MOST_SHOWN else ""
        rows = tuple((_named(case.customers[i], case.customer_names[i]), float(left[i]), float(case.demand[i]), "")
                     for i in short[:MOST_SHOWN])
        tables.append(Answered("Demand that it leaves unmet", f"By customer, the largest first.{more}",
                               (Column("Customer"), Column("Unmet", "number"), Column("Demand", "number"),
                                Column("Note")), rows))
    return tuple(tables)


def _named(code: str, name: str) -> str:
    return code if name == code else f"{code}, {name}"
