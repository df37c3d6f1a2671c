"""The stream of a lot-sizing run: what it calls a bound is one, at every step."""

import pytest

from ledgersolve.lot_sizing.solve import solve
from ledgersolve.mip import Limits, Progress
from tests.bench.lot_cases import Recipe, generated


@pytest.mark.parametrize("seed", [3, 4])
def test_no_bound_of_the_stream_lies_above_the_plan(seed) -> None:
    """The bound of a case whose families are held is none of the whole case, and is not told as one."""
    told: list[Progress] = []
    solved = solve(generated(Recipe(12, 10, families=4, use_cost=300.0), seed), Limits(6.0, progress=told.append))
    assert solved.cost is not None
    bounds = [step.bound for step in told if step.bound is not None]
    assert bounds and max(bounds) <= solved.cost * (1 + 1e-9)
    assert max(stage.bound for stage in solved.stages if stage.bound is not None) <= solved.cost * (1 + 1e-9)
