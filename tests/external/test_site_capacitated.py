"""OR-Library's capacitated cases against their published values (file capopt, Beasley 1988)."""

import pytest

from ledgersolve.mip import Limits, Verdict
from ledgersolve.site_selection.solve import solve
from tests.site_benchmarks import Published, parameters

PRINTED = 0.01
"""The list prints three decimals, sometimes cut and sometimes rounded."""


@pytest.mark.parametrize("entry", parameters("orlib_capacitated"))
def test_the_published_optimum_is_proven(entry: Published) -> None:
    """Cost as published to the last digit printed, a proof to 0.01 %, and a bound that does not pass it."""
    found = solve(entry.case(), Limits(seconds=250))
    assert found.verdict is Verdict.PROVEN_BEST
    assert found.cost == pytest.approx(entry.value, abs=PRINTED)
    assert found.bound is not None
    assert found.bound <= entry.value + PRINTED
