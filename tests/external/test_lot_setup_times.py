"""The cases of Trigeiro, Thomas & McClain (1989) with setup times, by their published or recomputed values."""

import pytest

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.mip import Limits, Verdict
from tests.bench.lot_cases import Published, data_folder, trigeiro_set

if not (data_folder() / "lot_sizing_setup_times").is_dir():
    pytest.skip("the benchmark data are not beside the project", allow_module_level=True)

SET = {entry.name: entry for entry in trigeiro_set()}


def answered(entry: Published, seconds: float) -> tuple[float | None, Verdict]:
    """Solve; what must hold whatever comes: audit, no bound above the published value, no cost below it."""
    answer = solve(entry.case, Limits(seconds))
    assert answer.bound is not None
    assert answer.bound <= entry.upper * (1 + 1e-6)
    if answer.plan is not None:
        assert audit(entry.case, answer.plan).ok
        assert answer.cost >= entry.lower * (1 - 1e-6)
    return answer.cost, answer.verdict


@pytest.mark.parametrize("name", ["tr6-15", "tr24-30", "F9", "G56", "X11119A", "X12127D"])
def test_no_bound_above_a_published_value(name: str) -> None:
    """A few seconds of six cases: bounds stay below the values of index.csv, costs above."""
    answered(SET[name], 3.0)


@pytest.mark.long
@pytest.mark.timeout(3000)
def test_the_set_in_a_minute_each() -> None:
    """All twenty cases: mean distance to the listed values at most 1 %, and tr6-15 proven (37721)."""
    distances = []
    for entry in SET.values():
        cost, verdict = answered(entry, 60.0)
        assert cost is not None
        distances.append(cost / entry.upper - 1.0)
        if entry.name == "tr6-15":
            assert verdict is Verdict.PROVEN_BEST
    assert sum(distances) / len(distances) <= 0.01
