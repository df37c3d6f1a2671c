"""The last gate before a plan is handed out: audit, cost and bound must all agree with what the solver said."""

import math
from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.findings import Audit, Check, CostPart
from ledgersolve.lot_sizing import audit as lots
from ledgersolve.lot_sizing.case import plain_case as lot_case
from ledgersolve.lot_sizing.plan import plan_from_made
from ledgersolve.mip import Solved, Verdict
from ledgersolve.site_selection import audit as sites
from ledgersolve.site_selection.case import plain_case as site_case
from ledgersolve.site_selection.plan import Plan
from ledgersolve.work import AuditError, confirmed

CASE = site_case([20, 30], [[2, 8, 10], [1, 1, 4]])
PLAN = Plan(np.array([False, True]), np.ones(3, dtype=np.int64), np.arange(3), np.ones(3), np.zeros(3))
"""Site S2 serves all three customers: 30 + 1 + 1 + 4 = 36."""


def solved(cost: float = 36.0, bound: float | None = 36.0, plan: Plan = PLAN) -> Solved[Plan]:
    """A result as the solver would give it."""
    return Solved(Verdict.BEST_FOUND, plan, cost, bound)


def told(total: float, ok: bool = True) -> Audit:
    """An audit with this total."""
    check = Check("Capacity", "site S1", "at most 5", "6", 0.0 if ok else 1.0, ok)
    return Audit((CostPart("Lane cost", total),), (check,))


@pytest.mark.parametrize("bound", [36.0, 35.0, -math.inf, None])
def test_a_plan_that_is_as_the_solver_said_is_confirmed(bound: float | None) -> None:
    """The audit comes back, with any bound up to the cost, or without one."""
    found = confirmed(CASE, solved(bound=bound), sites.audit)
    assert found is not None and found.ok
    assert found.total == 36.0


def test_without_a_plan_there_is_nothing_to_confirm() -> None:
    """No plan, no audit: the audit is not even asked."""
    def never(*_: object) -> Audit:
        raise AssertionError("asked without a plan")

    assert confirmed(CASE, Solved(Verdict.NO_PLAN_EXISTS, None, None, None), never) is None


@pytest.mark.parametrize("cost", [35.999, 36.001, 0.0, math.nan, math.inf, -math.inf])
def test_a_wrong_cost_is_not_handed_out(cost: float) -> None:
    """A cost a little too low or too high, or that is no number, stops the plan and names both figures."""
    with pytest.raises(AuditError, match=r"the plan costs 36\.000000 by the audit, .* by the solver"):
        confirmed(CASE, solved(cost=cost, bound=None), sites.audit)


@pytest.mark.parametrize("bound", [36.001, 1e9, math.inf, math.nan])
def test_a_bound_above_the_cost_is_not_handed_out(bound: float) -> None:
    """A bound that claims more than the plan costs, or that is no number, stops the plan."""
    with pytest.raises(AuditError, match=r"the bound .* lies above the plan's cost 36\.000000"):
        confirmed(CASE, solved(bound=bound), sites.audit)


def test_a_broken_rule_is_not_handed_out() -> None:
    """The words name the rule, the row, what was required and what the plan does."""
    with pytest.raises(AuditError) as stopped:
        confirmed(replace(CASE, capacity=np.array([9.0, 2.0])), solved(), sites.audit)
    assert str(stopped.value) == (
        "the plan breaks the rule Capacity on site S2: required at most 2 unit, got 3 unit")


def test_a_broken_rule_comes_before_a_wrong_cost() -> None:
    """Where several things differ, the rule of the workbook is named."""
    with pytest.raises(AuditError, match="breaks the rule Capacity on site S1"):
        confirmed(CASE, solved(cost=1.0, bound=9.0), lambda case, plan: told(36.0, ok=False))


@pytest.mark.parametrize("total", [1e6, -1e6, 0.01])
@pytest.mark.parametrize("sign", [1, -1])
def test_the_slack_is_a_millionth_of_the_cost_and_never_less_than_a_millionth(total: float, sign: int) -> None:
    """Just within the slack passes, just beyond does not; a negative total is measured by its size."""
    slack = 1e-6 * max(1.0, abs(total))

    def confirm(cost: float, bound: float | None = None) -> None:
        confirmed(CASE, solved(cost=cost, bound=bound), lambda case, plan: told(total))

    confirm(total + sign * 0.9 * slack)
    with pytest.raises(AuditError, match="by the solver"):
        confirm(total + sign * 1.1 * slack)
    confirm(total, total + 0.9 * slack)
    with pytest.raises(AuditError, match="lies above"):
        confirm(total, total + 1.1 * slack)


def test_an_audit_without_a_total_is_not_handed_out() -> None:
    """A recomputed cost that is no number confirms nothing."""
    with pytest.raises(AuditError, match="the plan costs nan by the audit"):
        confirmed(CASE, solved(), lambda case, plan: told(math.nan))


def test_lot_plans_pass_the_same_gate() -> None:
    """One setup at 10 and 5 units held a period at 1: 15; a cent off, or 4 units in place of 5, is stopped."""
    case = lot_case([[5, 5]], 10.0, 1.0)
    plan = plan_from_made(case, [[10.0, 0.0]])
    assert confirmed(case, Solved(Verdict.BEST_FOUND, plan, 15.0, 15.0), lots.audit) is not None
    with pytest.raises(AuditError, match=r"costs 15\.000000 by the audit, 15\.010000 by the solver"):
        confirmed(case, Solved(Verdict.BEST_FOUND, plan, 15.01, 15.0), lots.audit)
    short = plan_from_made(case, [[9.0, 0.0]])
    with pytest.raises(AuditError, match="breaks the rule"):
        confirmed(case, Solved(Verdict.BEST_FOUND, short, 14.0, None), lots.audit)
