"""Every feature of single items against the textbook model, by whichever programme carries it."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.groups import part
from ledgersolve.lot_sizing.programmes import ItemProgrammes, keeps_limits
from tests.lot_oracle import random_items, whole_big_m
from tests.test_lot_sizing_wagner_whitin import cost_of

FEATURES = [
    ("least lot",), ("least lot", "late"), ("least lot", "opening", "receipts", "closing"),
    ("most lot",), ("most lot", "late", "safety"), ("most lot", "allowed"),
    ("multiple",), ("multiple", "least lot"), ("multiple", "most lot", "late"), ("multiple", "most stock"),
    ("most stock",), ("most stock", "late"), ("most stock", "receipts", "opening"),
    ("late", "receipts"), ("late", "safety"), ("late", "safety", "receipts", "least lot"),
    ("most stock", "least lot", "allowed"), ("least lot", "most lot"), ("least lot", "most lot", "late", "opening"),
    ("lost", "least lot"), ("lost", "most stock", "late"), ("lost", "safety", "late", "receipts"),
    ("lost", "multiple", "most lot", "closing"), ("lost", "most lot", "least lot", "most stock", "late", "receipts"),
]


@pytest.mark.parametrize("features", FEATURES, ids="+".join)
def test_exact_items_against_whole_model(features: tuple[str, ...]) -> None:
    """An item that is called exact costs what the textbook model proves, and its schedule costs that much."""
    case = random_items(np.random.default_rng(len("".join(features))), 10, 6, *features)
    programmes = ItemProgrammes(case)
    answer = programmes.best()
    assert programmes.exact.all()
    for i in range(case.n):
        whole = whole_big_m(part(case, np.array([i])).case)
        if whole.status == "infeasible":
            assert np.isinf(answer.cost[i])
        else:
            assert answer.cost[i] == pytest.approx(whole.objective, rel=1e-6, abs=1e-5)
    served = np.flatnonzero(np.isfinite(answer.cost))
    shown = cost_of(part(case, served).case, answer.made[served], answer.lost[served])
    assert shown == pytest.approx(answer.cost[served])
    assert keeps_limits(case, answer)[served].all()


@pytest.mark.parametrize(
    "features",
    [("least lot", "most lot"), ("lost", "least lot"), ("lost", "most stock", "late"), ("lost", "safety")],
    ids="+".join,
)
def test_relaxed_items_are_bounded(features: tuple[str, ...]) -> None:
    """An item that no programme carries is named, and its figure is no more than its least cost.

    Demand in thirds is not a whole number of any step.
    """
    case = random_items(np.random.default_rng(4), 10, 6, *features)
    case = replace(case, demand=case.demand * 4.0 / 3.0)
    programmes = ItemProgrammes(case)
    answer = programmes.best()
    outside = np.flatnonzero(~programmes.exact)
    assert outside.size
    assert programmes.relaxed()
    for i in outside:
        whole = whole_big_m(part(case, np.array([i])).case)
        assert answer.cost[i] <= whole.objective + 1e-5
