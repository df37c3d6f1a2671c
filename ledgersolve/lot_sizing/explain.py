"""Why no plan exists: what cannot hold together by item, resource and period, and the closest plan.

Three looks: items that no amount of time could serve (their own rules stand in the way); running totals of
the time that must have been spent on a resource by some period, which anyone can check; and the plan with
the least time missing, by resource and period.
"""

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from ledgersolve.findings import Answered, Column, Conflict, Explanation, Subject
from ledgersolve.lot_sizing.case import Case, Floats
from ledgersolve.lot_sizing.elastic import (
    Slack,
    item_slack,
    mended,
    short_of_time,
    shortfall,
    stranded,
    with_time,
    without_ties,
)
from ledgersolve.lot_sizing.groups import part
from ledgersolve.lot_sizing.missing_time import figure, missing_time
from ledgersolve.lot_sizing.plan import Plan, plan_from_made
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.mip import Clock, Limits

MOST_LOTS = 400
"""Lots of the closest plan that are shown."""
MOST_LISTED = 40
"""Conflicts listed; the smallest ones come first."""
TRIED_REMEDIES = 12
"""Items for which each rule is tried for whether lifting it alone would help."""
SHORTFALL_SHARE, CHEAP_SHARE = 0.5, 0.5
"""Shares of the time left for the least shortfall, and then for the cheapest plan that has it; what they leave is for
the capacity that would be enough."""


def explain(case: Case, limits: Limits) -> Explanation[Plan]:
    """Say what stands in the way of every plan; for a case that has none.

    Conflicts come smallest change first. The closest plan keeps every rule apart from the time that the
    conflicts name; demand that cannot be met counts as lost in it.
    """
    clock = limits.start()
    slacks = stranded(case, clock)
    conflicts = [words for rank, item in enumerate(slacks)
                 for words in _item_conflicts(case, item, slacks[item], clock, rank < TRIED_REMEDIES)]
    possible = mended(case, slacks)
    plan, short = _closest(case, possible, slacks, clock)
    if case.resources:
        conflicts += missing_time(possible, plan, short, clock)
    conflicts.sort(key=lambda conflict: conflict.amount)
    words = _closest_words(case, plan, short, slacks)
    shown = () if plan is None else (closest_lots(case, plan, short),)
    return Explanation(tuple(conflicts[:MOST_LISTED]), plan, words, shown)


def closest_lots(case: Case, plan: Plan, short: Floats) -> Answered:
    """List the lots of the closest plan, with what is missing where and whom it leaves short."""
    rows: list[tuple[str | float | None, ...]] = []
    for t in range(case.t):
        lacking = [case.resources[r] for r in np.flatnonzero(short[:, t] > 0)] if short.size else []
        for k in np.flatnonzero(plan.setup[:, t] | (plan.lost[:, t] > 0)).tolist():
            notes = []
            if case.item_resource[k] >= 0 and case.resources[int(case.item_resource[k])] in lacking:
                notes.append(f"{case.resources[int(case.item_resource[k])]} lacks time")
            if plan.lost[k, t] > 0:
                notes.append(f"{figure(float(plan.lost[k, t]))} of demand unmet")
            rows.append((case.periods[t], case.items[k], float(plan.made[k, t]), "; ".join(notes)))
    more = f" The first {MOST_LOTS} of {len(rows)} rows are shown." if len(rows) > MOST_LOTS else ""
    columns = (Column("Period"), Column("Item"), Column("Lot", "number"), Column("What is not kept"))
    return Answered("The plan that comes closest", f"It keeps every rule apart from what the last column says.{more}",
                    columns, tuple(rows[:MOST_LOTS]))


# ------------------------------------------------------------------ items


def _item_conflicts(
    case: Case, item: int, slack: Slack, clock: Clock, try_remedies: bool
) -> Iterator[Conflict]:
    code = case.items[item]
    helps = _what_helps(case, item, clock) if try_remedies else []
    names = [name for name, _ in helps]
    lift = f" Lifting {' or '.join(names)} would be enough." if names else ""
    cells = tuple(subject for _, subject in helps)
    if slack.unmet.any():
        yield _unmet(case, item, slack, lift, cells)
    for name, amount, way in (
        ("Safety stock", slack.safety, "low"), ("Closing stock", slack.closing, "low"),
        ("Most stock", slack.room, "high"),
    ):
        if amount > 0:
            change = f"{'Raise' if way == 'high' else 'Lower'} {name} of {code} by {figure(amount)}"
            own = Subject("Items", (code,), name)
            others = tuple(cell for cell in cells if cell != own)
            yield Conflict(
                f"{name} of item {code} cannot be kept: at best stock comes out {figure(amount)} too {way}.",
                f"{change}.{lift if others else ''}", amount, (own, *others),
            )


def _unmet(case: Case, item: int, slack: Slack, lift: str, cells: tuple[Subject, ...]) -> Conflict:
    """Name the last period in which demand is short, with running totals up to it."""
    code, last = case.items[item], int(np.flatnonzero(slack.unmet)[-1])
    total, period = float(slack.unmet.sum()), f"{case.period_unit} {case.periods[last]}"
    need = float(case.demand[item, : last + 1].sum() + case.least_stock()[item, last])
    return Conflict(
        f"Item {code} is {figure(total)} short by {period}: {figure(need)} are needed up to then, "
        f"{figure(need - total)} can be there at most.",
        f"Have {figure(total)} more of {code} by {period} (opening stock, receipts), or ask for less.{lift}",
        total, (Subject("Demand", (code, case.periods[last]), ""), *cells),
    )


def _what_helps(case: Case, item: int, clock: Clock) -> list[tuple[str, Subject]]:
    """Rules of the item that would leave no shortage if they were lifted one at a time."""
    own, code = part(without_ties(case), np.array([item])).case, case.items[item]
    lifted: list[tuple[str, str, dict[str, object]]] = []
    if not own.setup_allowed.all():
        lifted.append(("Setup allowed", "Period costs", {"setup_allowed": np.ones((1, own.t), dtype=bool)}))
    for name, field, none, active in (
        ("Most lot", "most_lot", np.inf, np.isfinite(own.most_lot[0])),
        ("Least lot", "least_lot", 0.0, own.least_lot[0] > 0),
        ("Lot multiple", "lot_multiple", 0.0, own.lot_multiple[0] > 0),
        ("Most stock", "most_stock", np.inf, np.isfinite(own.most_stock[0])),
    ):
        if active:
            lifted.append((name, "Items", {field: np.full(1, none)}))
    helps = []
    for name, sheet, changes in lifted:
        slack = item_slack(replace(own, **changes), min(2.0, clock.left()))  # type: ignore[arg-type]
        if slack is not None and slack.total == 0:
            key = (code,) if sheet == "Items" else (code, case.periods[int(np.argmin(own.setup_allowed[0]))])
            helps.append((name, Subject(sheet, key, name)))
    return helps


# ------------------------------------------------------------------ the closest plan


def _closest(
    case: Case, possible: Case, slacks: dict[int, Slack], clock: Clock
) -> tuple[Plan | None, Floats]:
    """Plan with the least shortfall of time, as cheap as time allows; unmet demand stands as lost in it."""
    none = np.zeros(case.capacity.shape)
    seconds = max(0.5, SHORTFALL_SHARE * clock.left())
    limits = Limits(seconds, clock.limits.gap, clock.limits.cancelled)
    least = solve(short_of_time(possible), limits).plan if case.resources else None
    if case.resources and least is None:
        return None, none
    short = none if least is None else shortfall(possible, least.made)
    given = with_time(possible, short)
    cheap = solve(given, replace(clock.limits, seconds=max(0.5, CHEAP_SHARE * clock.left())), least).plan
    plan = cheap or least
    if plan is None:
        return None, none
    done = plan_from_made(possible, plan.made)
    lost = done.lost.copy()
    for item, slack in slacks.items():
        lost[item] += np.minimum(slack.unmet, case.demand[item])
    return replace(done, lost=lost), shortfall(possible, plan.made)


def _closest_words(case: Case, plan: Plan | None, short: Floats, slacks: dict[int, Slack]) -> str:
    if plan is None:
        return ""
    parts = []
    if short.any():
        names = [case.resources[r] for r in np.flatnonzero(short.any(axis=1))]
        count = int(np.count_nonzero(short))
        cells = "1 period" if count == 1 else f"{count} periods"
        parts.append(f"needs {figure(float(short.sum()))} more time units in {cells} ({', '.join(names[:5])})")
    unmet = sum(float(slack.unmet.sum()) for slack in slacks.values())
    if unmet > 0:
        parts.append(f"leaves {figure(unmet)} of demand unmet")
    if any(slack.safety + slack.closing + slack.room > 0 for slack in slacks.values()):
        parts.append("breaks limits of stock as listed")
    return " and ".join(parts)
