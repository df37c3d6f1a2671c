"""The best allowed set of sites for given values, against trying all sets."""

import itertools

import numpy as np
import pytest

from ledgersolve.site_selection.selection import Selection

NONE = np.zeros(0, dtype=np.int64)


def random_selection(random: np.random.Generator) -> tuple[Selection, np.ndarray]:
    """Six sites with random rules, groups, counts, and values with ties."""
    m = 6
    state = random.choice([0, 0, 0, 0, 1, -1], m)
    group = random.integers(-1, 2, m) if random.random() < 0.5 else np.full(m, -1)
    low, high = sorted(random.integers(0, m + 1, 2).tolist())
    return (
        Selection(state == 1, state == -1, group.astype(np.int64), int(low), int(high)),
        random.integers(-4, 5, m).astype(float),
    )


def allowed(selection: Selection, chosen: np.ndarray) -> bool:
    """Whether a set keeps all rules, written out."""
    groups = [g for g in selection.group[chosen].tolist() if g >= 0]
    return (
        bool(chosen[selection.forced].all()) and not chosen[selection.shut].any()
        and len(set(groups)) == len(groups) and selection.fewest <= chosen.sum() <= selection.most
    )


def least(selection: Selection, value: np.ndarray, site: int | None = None, state: bool = True) -> float:
    """Least sum over all allowed sets, by trying them; of those with ``site`` in this ``state`` if given."""
    sets = (np.array(c) for c in itertools.product([False, True], repeat=value.size))
    sums = [
        float(value[chosen].sum()) for chosen in sets
        if allowed(selection, chosen) and (site is None or chosen[site] == state)
    ]
    return min(sums, default=np.inf)


@pytest.mark.parametrize("seed", range(150))
def test_pick_is_the_best_allowed_set(seed: int) -> None:
    """Value and set agree with trying every set, whatever rules, groups and counts are combined."""
    selection, value = random_selection(np.random.default_rng(seed))
    expected = least(selection, value)
    found, picked = selection.pick(value)
    assert found == expected
    if np.isfinite(expected):
        assert allowed(selection, picked)
        assert float(value[picked].sum()) == expected


@pytest.mark.parametrize("seed", range(150))
def test_flips_never_promise_too_much(seed: int) -> None:
    """What a flip is said to cost at least is never more than what it costs."""
    selection, value = random_selection(np.random.default_rng(seed))
    found, picked = selection.pick(value)
    if not np.isfinite(found):
        return
    rise = selection.flips(value, picked)
    for site in np.flatnonzero(np.isfinite(rise)):
        assert found + rise[site] <= least(selection, value, int(site), not picked[site]) + 1e-12
    free = ~selection.forced & ~selection.shut
    assert not np.isfinite(rise[~free]).any()


def test_flips_are_exact_without_groups() -> None:
    """Without groups the cost of a flip is exact where a count does not bind on both sides."""
    value = np.array([-5.0, -1.0, 2.0, 4.0])
    free = np.zeros(4, dtype=bool)
    selection = Selection(free, free, np.full(4, -1), 0, 4)
    _, picked = selection.pick(value)
    assert selection.flips(value, picked).tolist() == [5.0, 1.0, 2.0, 4.0]


def test_fixing_a_site_open_shuts_its_group_mates() -> None:
    """Of the sizes of one site at most one opens."""
    free = np.zeros(3, dtype=bool)
    fixed = Selection(free, free, np.array([0, 0, -1]), 0, 3).fix(np.array([1]), NONE)
    assert fixed.forced.tolist() == [False, True, False]
    assert fixed.shut.tolist() == [True, False, False]
