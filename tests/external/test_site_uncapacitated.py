"""Uncapacitated cases and medians of public collections against their published values."""

import pytest

from ledgersolve.mip import Limits, Solved, Verdict
from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.bound import price_bound
from ledgersolve.site_selection.plan import Plan
from ledgersolve.site_selection.solve import solve
from tests.site_benchmarks import Published, parameters

HARD = ("332Gap", "1032Gap", "2032Gap", "331Gap", "1031Gap", "2031Gap", "333Gap", "1033Gap", "2033Gap", "ga250",
        "gs250", "MR1", "123Unif", "1023Unif")
"""Classes known to be hard: long runs, see the benches."""


def holds(entry: Published, seconds: float) -> Solved[Plan]:
    """Solve, and check what must hold whatever the end: audit, cost not below and bound not above the value."""
    case = entry.case()
    solved = solve(case, Limits(seconds=seconds))
    assert solved.plan is not None and solved.cost is not None and solved.bound is not None
    assert audit(case, solved.plan).ok
    slack = 1e-8 * entry.value + 6e-4  # published with three decimals at most
    assert solved.bound <= entry.value + slack
    if entry.value_is == "optimal":
        assert solved.cost >= entry.value - slack
    if solved.prices is not None:
        assert price_bound(case, solved.prices) <= entry.value + slack
    assert solved.cost <= entry.value * 1.01
    return solved


@pytest.mark.parametrize("entry", parameters("orlib_uncapacitated"))
def test_or_library_uncapacitated(entry: Published) -> None:
    """The published optimum, proven (Beasley 1990, file uncapopt)."""
    solved = holds(entry, 60.0)
    assert solved.verdict is Verdict.PROVEN_BEST
    assert solved.cost == pytest.approx(entry.value, rel=1e-6)


@pytest.mark.parametrize("entry", parameters("orlib_pmedian"))
def test_or_library_medians(entry: Published) -> None:
    """With fewest = most = p and no fixed cost the engine is exact on medians (Beasley 1985, file pmedopt)."""
    solved = holds(entry, 60.0)
    assert solved.verdict is Verdict.PROVEN_BEST
    assert solved.cost == pytest.approx(entry.value, rel=1e-9)
    assert solved.plan is not None
    assert int(solved.plan.open.sum()) == int(entry.case().most_sites or 0)


@pytest.mark.parametrize("entry", parameters("ufllib_uncapacitated", leave_out=HARD))
def test_ufllib_easy_classes(entry: Published) -> None:
    """Values of UflLib, proven, on all classes but the ones known to be hard."""
    solved = holds(entry, 120.0)
    assert solved.verdict is Verdict.PROVEN_BEST
    assert solved.cost == pytest.approx(entry.value, rel=1e-6)


@pytest.mark.long
@pytest.mark.parametrize("entry", [p for p in parameters("ufllib_uncapacitated") if p.id and p.id.startswith(HARD)])
def test_ufllib_hard_classes(entry: Published) -> None:
    """On the hard classes of UflLib the plan is within 1 % of the value, and the bound never passes it."""
    holds(entry, 60.0)


@pytest.mark.parametrize("entry", parameters("ufllib_uncapacitated"))
def test_a_run_that_is_cut_short_is_honest(entry: Published) -> None:
    """After a fraction of a second on any instance the bound is not above the published value."""
    case = entry.case()
    solved = solve(case, Limits(seconds=0.3))
    if solved.bound is not None:
        assert solved.bound <= entry.value * (1 + 1e-8) + 6e-4
    if solved.plan is not None:
        assert audit(case, solved.plan).ok
