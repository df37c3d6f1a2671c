"""Single-source cases against their published values.

Holmberg, Ronnqvist and Yuan (1999), optima as listed in the OR-Datasets collection; OR-Library files with the optima
of Guastaroba and Speranza (2014), which have two decimals.
"""

import pytest

from ledgersolve.mip import Limits, Verdict
from ledgersolve.site_selection.solve import solve
from tests.site_benchmarks import Published, parameters

PRINTED = 0.02
LONG_HOLMBERG = ("p30", "p31")
LONG_ORLIB = ("capb-5000", "capb-6000", "capb-7000", "capa-8000")


@pytest.mark.parametrize("entry", parameters("holmberg_single_source", slow=LONG_HOLMBERG))
def test_holmberg_is_proven(entry: Published) -> None:
    """All figures are whole: the published optimum exactly, and a proof."""
    found = solve(entry.case(), Limits(seconds=200))
    assert found.verdict is Verdict.PROVEN_BEST
    assert found.cost == pytest.approx(entry.value, abs=1e-3)
    assert found.bound is not None
    assert found.bound <= entry.value + 1e-3


@pytest.mark.parametrize("entry", parameters("orlib_single_source", slow=LONG_ORLIB))
def test_orlib_plans_are_within_the_proven_gap(entry: Published) -> None:
    """A proof to 0.01 %, hence a cost within that of the published optimum, and a bound that does not pass it."""
    found = solve(entry.case(), Limits(seconds=200))
    assert found.verdict is Verdict.PROVEN_BEST
    assert found.cost is not None
    assert found.bound is not None
    assert entry.value - PRINTED <= found.cost <= entry.value * (1 + 1.001e-4)
    assert found.bound <= entry.value + PRINTED
