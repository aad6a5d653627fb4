"""Estimates for new cases: against statsmodels' predictions, and the way back from logs and roots."""

from __future__ import annotations

from dataclasses import replace
from decimal import Decimal
from fractions import Fraction

import numpy as np
import pytest
import statsmodels.api as sm

from bridge.regression import design
from bridge.regression.core import fit_model
from bridge.regression.errors import OutOfDomain, UnknownLevel
from bridge.regression.estimates import estimate
from bridge.regression.spec import (
    BackOn,
    CategoryTerm,
    CrossedTerm,
    Errors,
    Levels,
    ModelSpec,
    NumberTerm,
    Observations,
    Shape,
)
from tests.reference import load


def data(seed: int, n: int = 50) -> Observations:
    rng = np.random.default_rng(seed)
    a, codes = np.round(rng.uniform(1, 9, n), 2), np.concatenate([np.arange(2), rng.integers(0, 2, n - 2)])
    y = np.round(np.exp(0.3 + 0.2 * a + 0.3 * codes + 0.2 * rng.standard_normal(n)), 2)
    w = np.round(rng.uniform(0.2, 4, n), 2)
    return Observations({"a": a, "c": Levels(codes, ("p", "q")), "y": y, "w": w}, n)


CASES = Observations({"a": np.array([0.5, 4.0, 12.25]), "c": Levels(np.array([1, 0, 1]), ("p", "q"))}, 3)
SPEC = ModelSpec("y", terms=(NumberTerm("a", degree=2), CategoryTerm("c")), crossed=(CrossedTerm("a", "c"),), level=0.9)


@pytest.mark.parametrize("weight", [None, "w"])
@pytest.mark.parametrize("errors", [Errors.ORDINARY, Errors.UNEVEN_SPREAD])
def test_against_statsmodels_predictions(weight, errors):
    """Ordinary and HC3: mean and case intervals; a case's own variance is s^2 / w."""
    observations = data(1)
    result = fit_model(replace(SPEC, weight=weight, errors=errors), observations)
    case_weights = np.array([0.5, 1.0, 2.0]) if weight else None
    found = estimate(result, CASES, case_weights)
    weights = observations.numbers("w") if weight else np.ones(50)
    fitted = sm.WLS(observations.numbers("y"), result.design.matrix, weights=weights).fit(
        **({"cov_type": "HC3", "use_t": True} if errors is Errors.UNEVEN_SPREAD else {})
    )
    x = design.matrix(result.design.columns, CASES)
    theirs = fitted.get_prediction(x, weights=case_weights if weight else 1.0).summary_frame(alpha=0.1)
    for mine, other in (
        (found.estimate, "mean"),
        (found.median, "mean"),
        (found.mean_low, "mean_ci_lower"),
        (found.mean_high, "mean_ci_upper"),
        (found.case_low, "obs_ci_lower"),
        (found.case_high, "obs_ci_upper"),
    ):
        assert mine == pytest.approx(theirs[other].to_numpy(), rel=1e-9)
    inverse = np.linalg.inv(result.design.matrix.T @ (result.design.matrix * weights[:, None]))
    assert found.leverage == pytest.approx(np.einsum("ij,jk,ik->i", x, inverse, x), rel=1e-9)


def test_a_weighted_model_without_weights_for_the_cases_has_no_case_interval():
    found = estimate(fit_model(replace(SPEC, weight="w"), data(1)), CASES)
    assert np.isnan(found.case_low).all()
    assert np.isnan(found.case_high).all()
    assert np.isfinite(found.mean_low).all()


def test_duan_smearing_from_a_log():
    """Duan 1983: the mean is exp(eta) times the mean of the exponentiated residuals."""
    observations = data(2)
    spec = replace(SPEC, response_shape=Shape.LOG)
    result = fit_model(spec, observations)
    found, fitted_scale = estimate(result, CASES), estimate(_on_fitted_scale(result), CASES)
    smear = np.mean(np.exp(result.fit.residual))
    assert result.back is not None
    assert result.back.smear == pytest.approx(smear, rel=1e-15)
    assert found.estimate == pytest.approx(np.exp(fitted_scale.estimate) * smear, rel=1e-14)
    assert found.median == pytest.approx(np.exp(fitted_scale.estimate), rel=1e-14)
    assert found.mean_high == pytest.approx(np.exp(fitted_scale.mean_high) * smear, rel=1e-14)
    assert found.case_low == pytest.approx(np.exp(fitted_scale.case_low), rel=1e-14)


def _on_fitted_scale(result):
    return replace(result, spec=replace(result.spec, back_on=BackOn.FITTED))


@pytest.mark.parametrize("intercept", [True, False])
def test_from_a_root(intercept):
    """The mean of (eta + e)^2 over the residuals, the same for every way of writing it."""
    observations = data(3)
    spec = ModelSpec("y", response_shape=Shape.ROOT, terms=(NumberTerm("a"),), intercept=intercept)
    result = fit_model(spec, observations)
    found, eta = estimate(result, CASES), estimate(_on_fitted_scale(result), CASES).estimate
    assert found.estimate == pytest.approx([np.mean((v + result.fit.residual) ** 2) for v in eta], rel=1e-13)
    assert found.median == pytest.approx(eta**2, rel=1e-14)


def test_a_negative_root_has_median_zero():
    columns = {"a": np.arange(1.0, 11.0), "y": np.arange(1.0, 11.0) ** 2 + 0.5}
    spec = ModelSpec("y", response_shape=Shape.ROOT, terms=(NumberTerm("a"),))
    result = fit_model(spec, Observations(columns, 10))
    found = estimate(result, Observations({"a": np.array([-5.0])}, 1))
    assert found.median.tolist() == [0.0]


def test_cancelling_terms_do_not_cost_digits():
    """Filip at degree 10, between its data: the double nearest to the exact polynomial, where doubles lose 5 digits."""
    case = load("filip").fits[0]
    result = fit_model(case.spec, case.observations)
    x = [-8.5, -6.123456, -3.25]
    found = estimate(result, Observations({"x": np.array(x)}, 3))
    exact = [Fraction(Decimal(text)) for text in case.exact["coefficients"].values()]
    for value, point in zip(found.estimate.tolist(), x, strict=True):
        true = sum(b * Fraction(repr(point)) ** k for k, b in enumerate(exact))
        assert value == pytest.approx(float(true), rel=1e-14)


def test_unknown_levels_and_impossible_numbers_name_the_case():
    result = fit_model(SPEC, data(1))
    strange = Observations({**CASES.columns, "c": Levels(np.array([1, 0, 2]), ("p", "q", "r"))}, 3)
    with pytest.raises(UnknownLevel) as error:
        estimate(result, strange)
    assert (error.value.column, error.value.index) == ("c", 2)
    log = fit_model(ModelSpec("y", terms=(NumberTerm("a", shape=Shape.LOG),)), data(1))
    with pytest.raises(OutOfDomain) as domain:
        estimate(log, Observations({"a": np.array([1.0, 0.0])}, 2))
    assert (domain.value.column, domain.value.index) == ("a", 1)


def test_levels_may_be_listed_in_any_order():
    result = fit_model(SPEC, data(1))
    turned = Observations({**CASES.columns, "c": Levels(np.array([0, 1, 0]), ("q", "p"))}, 3)
    assert estimate(result, turned).estimate.tolist() == estimate(result, CASES).estimate.tolist()
