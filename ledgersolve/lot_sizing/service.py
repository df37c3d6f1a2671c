"""Question 9, the part about service: what is late or lost, of which items, when, and what that costs."""

from collections.abc import Iterator

import numpy as np

from ledgersolve.findings import Answered, Column
from ledgersolve.lot_sizing.case import Case, Floats
from ledgersolve.lot_sizing.plan import Plan
from ledgersolve.lot_sizing.why_lots import Row, money

MOST_LISTED = 100
TINY = 1e-9


def late_and_lost(case: Case, plan: Plan) -> Answered:
    """List every stretch of periods in which an item is late, and every loss, the dearest first."""
    question = "What is late or lost, and for whom?"
    rows = sorted([*_late(case, plan), *_lost(case, plan)], key=lambda row: -float(str(row[7])))
    columns = (
        Column("Item"), Column("Name"), Column("What"), Column("From"), Column("To"), Column("Units", "number"),
        Column("Part of the item's demand", "percent"), Column("Cost", "money"),
    )
    may = np.isfinite(case.backlog_cost).any() or np.isfinite(case.lost_cost).any()
    if not rows:
        words = "Nothing is late and nothing is lost."
        return Answered(question, words if may else f"{words} The workbook allows neither.", columns)
    words = " ".join(_told(case, name, [row for row in rows if row[2] == name]) for name in ("late", "lost")).strip()
    if len(rows) > MOST_LISTED:
        words += f" The {MOST_LISTED} dearest of {len(rows)} cases are listed."
    return Answered(question, words, columns, tuple(rows[:MOST_LISTED]), headline=True)


def _told(case: Case, name: str, rows: list[Row]) -> str:
    if not rows:
        return f"Nothing is {name}."
    items = list(dict.fromkeys(str(row[0]) for row in rows))
    cost = sum(float(str(row[7])) for row in rows)
    codes = ", ".join(items[:5]) + (f" and {len(items) - 5} more" if len(items) > 5 else "")
    count = "1 item" if len(items) == 1 else f"{len(items)} items"
    return f"Demand is {name} for {count} ({codes}), at a cost of {money(case, cost)}."


def _late(case: Case, plan: Plan) -> Iterator[Row]:
    """Stretches of periods at whose ends an item is late; units: the most at one time."""
    for k, t, end in _stretches(plan.late):
        amounts = plan.late[k, t:end]
        yield _row(case, k, "late", (t, end - 1), float(amounts.max()), float(case.backlog_cost[k] * amounts.sum()))


def _lost(case: Case, plan: Plan) -> Iterator[Row]:
    """Stretches of periods whose demand is lost, in part or in whole; units: all of them."""
    for k, t, end in _stretches(plan.lost):
        units = float(plan.lost[k, t:end].sum())
        yield _row(case, k, "lost", (t, end - 1), units, float(case.lost_cost[k] * units))


def _stretches(amounts: Floats) -> Iterator[tuple[int, int, int]]:
    """Item, first period and the period after the last one of each run of amounts above nothing."""
    for k in np.flatnonzero(amounts.max(axis=1, initial=0.0) > TINY).tolist():
        on = np.concatenate([[False], amounts[k] > TINY, [False]]).astype(np.int8)
        steps = np.diff(on)
        for t, end in zip(np.flatnonzero(steps > 0), np.flatnonzero(steps < 0), strict=True):
            yield k, int(t), int(end)


def _row(case: Case, k: int, what: str, span: tuple[int, int], units: float, cost: float) -> Row:
    demand = float(case.demand[k].sum())
    return (case.items[k], case.item_names[k], what, case.periods[span[0]], case.periods[span[1]], units,
            units / demand if demand > 0 else None, cost)
