"""The whole strong model, in both forms, against a textbook model in another solver, feature by feature."""

from dataclasses import replace

import numpy as np
import pytest

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.model import Form, choose_form, whole_model
from ledgersolve.lot_sizing.plan import plan_from_made
from ledgersolve.lot_sizing.tight import tight_limits
from tests.lot_textbook import FEATURES, random_case, textbook_cost

TOLERANCE = 1e-5


def agree(case: Case, form: Form) -> None:
    """The model finds the textbook cost, or finds, like it, that no plan exists; its plan passes the audit."""
    wanted = textbook_cost(case)
    whole = whole_model(case, form)
    result = whole.model.solve(60.0)
    if wanted is None:
        assert result.status == "infeasible"
        return
    assert result.status == "optimal"
    assert result.objective == pytest.approx(wanted, rel=TOLERANCE, abs=TOLERANCE)
    checked = audit(case, plan_from_made(case, whole.quantities(result.values)))
    assert checked.ok, checked.broken()
    assert checked.total == pytest.approx(wanted, rel=TOLERANCE, abs=TOLERANCE)


@pytest.mark.parametrize("form", Form)
@pytest.mark.parametrize("feature", FEATURES)
def test_each_feature_alone(feature: str, form: Form) -> None:
    """With one feature (and what it needs) at a time, the model costs what the textbook model costs."""
    needs = {"setup time", "second resource", "overtime", "use cost", "family on resource"}
    features = {feature} | ({"resource"} if feature in needs else set())
    features |= {"family", "setup time"} if feature == "family on resource" else set()
    for seed in range(4):
        rng = np.random.default_rng([seed, FEATURES.index(feature)])
        agree(random_case(rng, int(rng.integers(1, 4)), 5, frozenset(features)), form)


@pytest.mark.parametrize("form", Form)
@pytest.mark.parametrize("seed", range(40))
def test_features_mixed(seed: int, form: Form) -> None:
    """With features thrown together, also where no plan exists, both models agree."""
    rng = np.random.default_rng([77, seed])
    features = frozenset(name for name in FEATURES if rng.random() < 0.45)
    agree(random_case(rng, int(rng.integers(1, 4)), int(rng.integers(1, 7)), features), form)


@pytest.mark.slow
@pytest.mark.parametrize("form", Form)
@pytest.mark.parametrize("seed", range(4))
def test_middle_sized(seed: int, form: Form) -> None:
    """Six items over ten periods with many features agree with the textbook model."""
    rng = np.random.default_rng([5, seed])
    features = frozenset(name for name in FEATURES if rng.random() < 0.5) | {"resource"}
    agree(random_case(rng, 6, 10, features), form)


@pytest.mark.parametrize("form", Form)
def test_the_relaxation_of_an_item_alone_has_no_gap(form: Form) -> None:
    """Without capacity both forms give the whole cost already in the linear relaxation (LS-01: 864)."""
    case = plain_case(
        [69, 29, 36, 61, 61, 26, 34, 67, 45, 67, 79, 56],
        [85, 102, 102, 101, 98, 114, 105, 86, 119, 110, 98, 114], 1.0,
    )
    model = whole_model(case, form).model
    model._whole = [np.zeros_like(flags) for flags in model._whole]
    assert model.solve(10.0).objective == pytest.approx(864.0)


def test_the_form_is_chosen_by_size() -> None:
    """Few items take plant location, many items over many periods the smaller (l,S) form."""
    few, many = np.ones((5, 20)), np.ones((60, 60))
    for demand, form in ((few, Form.PLANT_LOCATION), (many, Form.INEQUALITIES)):
        case = plain_case(demand, 1.0, 1.0)
        assert choose_form(case, tight_limits(case)) is form


@pytest.mark.parametrize("seed", range(10))
def test_a_plan_as_hint_fits_the_model(seed: int) -> None:
    """The start made of a plan keeps every bound of the model's variables and every whole number."""
    rng = np.random.default_rng([31, seed])
    case = random_case(rng, 3, 5, frozenset({"resource", "family", "use cost", "multiple", "backlog", "lost"}))
    case = replace(case, capacity=case.capacity * 3)
    whole = whole_model(case)
    values = whole.model.solve(20.0).values
    hint = whole.hint(plan_from_made(case, whole.quantities(values)))
    lower, upper, _, integer = whole.model.columns()
    known = np.isfinite(hint)
    assert (hint[known] >= lower[known] - 1e-9).all() and (hint[known] <= upper[known] + 1e-9).all()
    assert (hint[known & integer] == np.round(hint[known & integer])).all()


def test_no_made_up_big_m() -> None:
    """Every limit on what is made comes from need, stock, lots or time; by hand for one item."""
    case = plain_case(
        [[10, 20, 30]], 5.0, 1.0, opening_stock=np.array([4.0]), most_stock=np.array([25.0]),
        resources=("M",), capacity=np.array([[50.0, 100.0, 22.0]]), overtime_limit=np.array([4.0]),
        overtime_cost=np.ones(1), use_cost=np.zeros(1), item_resource=np.zeros(1, dtype=np.int64),
        time_per_unit=np.array([2.0]), setup_time=np.array([6.0]),
    )
    assert tight_limits(case).most_made[0] == pytest.approx([24.0, 45.0, 10.0])
    assert tight_limits(replace(case, least_lot=np.array([12.0]))).most_made[0, 2] == 0.0
