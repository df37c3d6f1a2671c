"""Judgement beyond types: inputs that are allowed and yet look like slips. All of it is notices.

Few and telling: each names its cell, why it looks odd and what to do.
"""

import numpy as np
from numpy.typing import NDArray

from ledgersolve.contract.columns import quoted, shown
from ledgersolve.contract.faults import Fault, Faults
from ledgersolve.contract.lists import CheckedList
from ledgersolve.contract.setting_values import SettingValues
from ledgersolve.workbook.currencies import MINOR_UNITS
from ledgersolve.workbook.text import unit_in

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

FAR_OFF = 100.0
"""A cost so many times (or so small a part of) what its neighbours cost looks like a slip of the decimal sign."""

ENOUGH = 5
"""So many figures are needed before one of them can look odd."""


def odd_figures(faults: Faults, table: CheckedList, titles: tuple[str, ...]) -> None:
    """Notices for figures a hundred times, or a hundredth of, the middle one of their column."""
    for title in titles:
        figures = table.numbers(title)
        positive = figures[figures > 0]
        if len(positive) < ENOUGH:
            continue
        middle = float(np.median(positive))
        odd = np.flatnonzero((figures >= FAR_OFF * middle) | ((figures > 0) & (figures <= middle / FAR_OFF)))
        rows = odd.tolist()

        def describe(i: int, rows: list[int] = rows, figures: Floats = figures,
                     middle: float = middle) -> Fault:
            return Fault("figure far off",
                         f"{shown(figures[rows[i]])}, where the middle one is {shown(middle)}",
                         "figures of one size", "Check the decimal sign and the unit.")

        faults.many(table.sheet, [table.place(row, title) for row in rows], title, describe,
                    severity="notice")


def odd_costs(costs: Floats) -> Flags:
    """Lanes that cost a hundred times (or a hundredth of) the middle one of their site and of their customer.

    A dear site and a far customer make their common lane dear twice over, so the lane must also be that far
    from what both together suggest. ``costs`` has shape (m, n) with NaN where a lane has no cost of its own.
    """
    known = ~np.isnan(costs) & (costs > 0)
    if known.sum() < ENOUGH:
        return np.zeros(costs.shape, dtype=bool)
    logs = np.where(known, np.log(np.where(known, costs, 1.0)), np.nan)
    limit = np.log(FAR_OFF)
    by_site, by_customer = _middles(logs, 1)[:, None], _middles(logs, 0)[None, :]
    suggested = by_site + by_customer - np.nanmedian(logs)
    with np.errstate(invalid="ignore"):
        return np.asarray(known & (np.abs(logs - by_site) >= limit) & (np.abs(logs - by_customer) >= limit)
                          & (np.abs(logs - suggested) >= limit))


def _middles(logs: Floats, axis: int) -> Floats:
    """Medians along an axis, NaN where fewer than three figures stand."""
    count = (~np.isnan(logs)).sum(axis=axis)
    ordered = np.sort(logs, axis=axis)
    half = np.maximum(count - 1, 0) // 2
    middle = np.take_along_axis(ordered, np.expand_dims(half, axis), axis=axis).squeeze(axis)
    return np.where(count >= 3, middle, np.nan)


def other_currencies(faults: Faults, values: SettingValues, tables: list[CheckedList]) -> None:
    """Notices for titles that name another currency than Settings does."""
    currency = values.text("Currency")
    for table in tables:
        for column, heading in table.headings.items():
            named = {word for word in unit_in(heading).upper().replace("/", " ").split()
                     if word in MINOR_UNITS}
            if currency and named and currency not in named:
                faults.notice(table.sheet, (table.title_row, column), "", "another currency",
                              f"the title {quoted(heading)}", f"money in {currency}, as Settings says",
                              "The figures were taken as they are; convert them, or correct the title.")


def looks_like_fraction(faults: Faults, values: SettingValues, name: str, high: float, hint: str) -> None:
    """A notice for a percentage so small that it looks like a fraction."""
    value = values.number(name)
    if name in values.given and value is not None and 0 < value <= high:
        faults.notice(values.sheet, values.place(name), name, "percent or fraction",
                      f"{shown(value)} %", hint,
                      f"Type {shown(round(value * 100, 6))} if the value is a fraction.")
