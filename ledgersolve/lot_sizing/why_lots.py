"""Question 7: why this lot: what it covers, and what it costs to do without it or to make it in two."""

import numpy as np

from ledgersolve.findings import NOT_ANSWERED, Answered, Column
from ledgersolve.lot_sizing.case import Case, Floats
from ledgersolve.lot_sizing.lot_moves import Change, LotMoves
from ledgersolve.lot_sizing.plan import Plan
from ledgersolve.mip import Clock
from ledgersolve.workbook.figures import Rounding, money_words

MOST_LOTS = 200
"""Lots asked about: half of them the easiest to do without at a guess, half the largest by value."""
HARDLY = 0.02
"""Lots of an item hardly matter where each costs at most this share of the item's setups and stock."""
SAME = 1e-6
"""Differences below this share of the plan's cost are rounding."""

Row = tuple[str | float | None, ...]


def money(case: Case, value: float, rounding: Rounding = "nearest") -> str:
    """An amount in words."""
    return money_words(value, case.currency, rounding)


def why_this_lot(case: Case, plan: Plan, clock: Clock) -> Answered:
    """What each lot covers, and what the plan costs without it, or with it made in two setups."""
    moves = LotMoves(case, plan, clock)
    tried: list[tuple[int, int, Change | None, Change | None]] = []
    for item, period in _worth_asking(case, plan):
        if clock.over():
            break
        without, split = moves.without(item, period), moves.split(item, period)
        if clock.over() and (without is None or split is None):
            break  # that no way was found may be for want of time
        tried.append((item, period, without, split))
    tried.sort(key=lambda one: np.inf if one[2] is None else one[2].extra)
    rows = tuple(_row(case, plan, *one) for one in tried)
    columns = (
        Column("Item"), Column("Period"), Column("Lot", "number"), Column("Covers demand of"),
        Column("Setup cost", "money"), Column("Without it, costs more by", "money"), Column("What could change then"),
        Column("In two lots, costs more by", "money"), Column("Second lot in"),
    )
    return Answered("Why this lot?", _words(case, plan, moves.cost, tried), columns, rows)


def _worth_asking(case: Case, plan: Plan) -> list[tuple[int, int]]:
    """Lots to ask about, the easiest to do without and the largest by turns."""
    lots = [(int(k), int(t)) for k, t in zip(*np.nonzero(plan.setup), strict=True)]
    easy = sorted(lots, key=lambda lot: _guess(case, plan, *lot))
    large = sorted(lots, key=lambda lot: -plan.made[lot] * max(float(case.unit_cost[lot]),
                                                               float(case.holding_cost[lot])))
    turns = dict.fromkeys(lot for pair in zip(easy, large, strict=True) for lot in pair)
    return list(turns)[:MOST_LOTS]


def _guess(case: Case, plan: Plan, item: int, period: int) -> float:
    """What handing the lot to the one before it costs with all the time in the world, for the order only."""
    before = np.flatnonzero(plan.setup[item, :period])
    if not before.size:
        return np.inf
    taker = int(before[-1])
    dearer = case.unit_cost[item, taker] - case.unit_cost[item, period] + case.holding_cost[item, taker:period].sum()
    return float(plan.made[item, period] * dearer - case.setup_cost[item, period])


def _row(case: Case, plan: Plan, item: int, period: int, without: Change | None, split: Change | None) -> Row:
    second = "one period only" if split is None and _last(plan, item, period) == period else (
        "no later period can take it" if split is None or split.period is None else case.periods[split.period])
    return (
        case.items[item], case.periods[period], float(plan.made[item, period]), _covers(case, plan, item, period),
        float(case.setup_cost[item, period]), None if without is None else without.extra,
        "no other lot was found to take it over" if without is None else without.free,
        None if split is None else split.extra, second,
    )


def _words(
    case: Case, plan: Plan, cost: float, tried: list[tuple[int, int, Change | None, Change | None]]
) -> str:
    if not tried:
        return f"{NOT_ANSWERED.capitalize()}." if plan.setups else "The plan makes no lot."
    said = [f"{len(tried)} of {plan.setups} lots were tried: without their setup, and in two setups."]
    known = [(way.extra, _lot(case, k, t)) for k, t, way, _ in tried if way is not None]
    better = []
    for k, t, without, split in tried:
        better += _saves(without, cost, f"without {_lot(case, k, t)}")
        better += _saves(split, cost, f"with {_lot(case, k, t)} in two")
    if better:
        most, lot = max(better)
        said.append(f"The plan would cost {money(case, most)} less {lot}: it is not yet the best; give it more time.")
    elif known:
        (least, easy), (most, hard) = known[0], known[-1]
        said.append(f"Of these, the easiest to do without is {easy} ({money(case, max(least, 0.0))} more), the "
                    f"hardest of those that others can take over {hard} ({money(case, most)} more).")
    kept = len(tried) - len(known)
    if kept:
        said.append(f"For {kept} no other lot was found to take them over.")
    hardly = _hardly(case, plan, tried)
    if hardly:
        said.append(f"Lots of {_names(hardly)} hardly matter: none is worth more than {100 * HARDLY:.0f} % of what "
                    "the item's setups and stock cost.")
    elif len(tried) == plan.setups:
        said.append("There is no item whose lots hardly matter.")
    return " ".join(said)


def _saves(change: Change | None, cost: float, what: str) -> list[tuple[float, str]]:
    saves = change is not None and change.extra < -SAME * cost
    return [(-change.extra, what)] if saves and change is not None else []


def _lot(case: Case, item: int, period: int) -> str:
    return f"the lot of {case.items[item]} in {case.periods[period]}"


def _hardly(
    case: Case, plan: Plan, tried: list[tuple[int, int, Change | None, Change | None]]
) -> list[str]:
    """Items all of whose lots were tried: of those that others can take over, one at least, none is worth much."""
    own = (case.setup_cost * plan.setup + case.holding_cost * plan.stock).sum(axis=1)
    most: Floats = np.full(case.n, -np.inf)
    for item, _, without, _ in tried:
        if without is not None:
            most[item] = max(most[item], without.extra)
    whole = np.bincount([item for item, *_ in tried], minlength=case.n) == plan.setup.sum(axis=1)
    return [case.items[k] for k in np.flatnonzero(whole & (most > -np.inf) & (most <= HARDLY * own))]


def _last(plan: Plan, item: int, period: int) -> int:
    """Last period before the item's next lot."""
    later = np.flatnonzero(plan.setup[item, period + 1:])
    return period + int(later[0]) if later.size else plan.made.shape[1] - 1


def _covers(case: Case, plan: Plan, item: int, period: int) -> str:
    """Periods whose demand the lot meets: until the item's next lot."""
    last = _last(plan, item, period)
    first, final = case.periods[period], case.periods[last]
    return first if last == period else f"{first} to {final}"


def _names(codes: list[str]) -> str:
    return ", ".join(codes[:6]) + (f" and {len(codes) - 6} more" if len(codes) > 6 else "")
