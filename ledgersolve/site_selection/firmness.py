"""Question 5: how firm the plan is when demand, lane rates or fixed costs turn out otherwise."""

from ledgersolve.findings import Answered, Column
from ledgersolve.site_selection.asker import Asker, money
from ledgersolve.site_selection.case import Case, Variant

STEPS = tuple(range(-50, 0, 5)), tuple(range(5, 55, 5))
"""Changes tried, in percent, downwards and upwards."""
SAME = 1e-4
"""The sites stay best where keeping them costs at most this much more than the best known plan (0.01 %)."""
DEMAND_OFF = (-20, -10, 10, 20)

LEVERS = ("demand", "lane rates", "fixed costs")


def how_firm(asker: Asker) -> Answered:
    """Range of each lever over which the same sites stay best, in steps of five percent."""
    rows: list[tuple[str | float | None, ...]] = []
    told = []
    for lever in LEVERS:
        low, low_sure = _reach(asker, lever, tuple(reversed(STEPS[0])))
        high, high_sure = _reach(asker, lever, STEPS[1])
        sure = "checked by solving" if low_sure and high_sure else "as far as the time allowed"
        rows.append((lever.capitalize(), low / 100, high / 100, sure))
        told.append(f"{lever} from {low:+d} % to {high:+d} %")
    words = "The same sites stay best, one figure changed at a time, for " + ", ".join(told) + "."
    columns = (Column("What changes"), Column("Same sites best from", "percent"), Column("to", "percent"),
               Column("How sure"))
    return Answered("How firm is the choice of sites?", words, columns, tuple(rows), headline=True)


def demand_off(asker: Asker) -> Answered:
    """What following this plan's sites costs against the best when demand is off."""
    rows: list[tuple[str | float | None, ...]] = []
    worst = 0.0
    for percent in DEMAND_OFF:
        case = changed(asker.case, "demand", percent)
        kept, best = asker.kept(case), asker.ask(case)
        if kept.impossible:
            rows.append((percent / 100, None, best.high, None, "these sites cannot carry it"))
            continue
        if kept.high is None or best.high is None or best.low is None:
            rows.append((percent / 100, kept.high, best.high, None, "not answered in the time given"))
            continue
        regret = max(0.0, kept.high - best.low)
        worst = max(worst, regret)
        exact = "exact" if best.exact and kept.exact else "at most"
        rows.append((percent / 100, kept.high, best.high, regret, exact))
    words = f"Keeping these sites when demand is off costs up to {money(asker.case, worst)} more than the best."
    if any(row[3] is None for row in rows):
        words += " Not every case has a figure; see the last column."
    columns = (Column("Demand", "percent"), Column("With these sites", "money"),
               Column("With the best sites", "money"), Column("Regret", "money"), Column("How sure"))
    return Answered("What if demand is off?", words, columns, tuple(rows), headline=True)


def changed(case: Case, lever: str, percent: int) -> Case:
    """Give the case with one lever moved by so many percent."""
    factor = 1.0 + percent / 100
    variant = Variant(
        case.title, demand_factor=factor if lever == "demand" else 1.0,
        lane_cost_factor=factor if lever == "lane rates" else 1.0,
        fixed_cost_factor=factor if lever == "fixed costs" else 1.0,
    )
    return case.under(variant)


def _reach(asker: Asker, lever: str, steps: tuple[int, ...]) -> tuple[int, bool]:
    """Last step at which the sites are still best, by bisection.

    For rates and fixed costs the steps at which they are best form one range: their cost is linear in the
    lever, the best cost concave.
    """
    kept, lost = -1, len(steps)
    sure = True
    while lost - kept > 1:
        middle = (kept + lost) // 2
        best = _still_best(asker, changed(asker.case, lever, steps[middle]))
        if best is None:
            sure = False
        if best:
            kept = middle
        else:
            lost = middle
    return (steps[kept] if kept >= 0 else 0), sure


def _still_best(asker: Asker, case: Case) -> bool | None:
    """Whether the plan's sites are best for a changed case; None where the time did not allow to tell."""
    answer = asker.ask(case)
    if answer.plan is not None and bool((answer.plan.open == asker.base.open).all()) and answer.exact:
        return True
    kept = asker.kept(case)
    if kept.impossible or answer.impossible:
        return False
    if kept.high is None or answer.low is None or answer.high is None:
        return None
    if kept.high <= answer.low * (1 + SAME):
        return True
    return False if kept.low is not None and kept.low > answer.high * (1 + SAME) else None
