"""Reading a line backwards: Fieller's interval by its meaning, and where it has no ends."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bridge.regression import inverse
from bridge.regression.core import fit_model
from bridge.regression.estimates import estimate
from bridge.regression.spec import Errors, ModelSpec, NumberTerm, Observations, Shape
from tests.reference import load
from tests.regression.problems import TWO, rows

LINE = ModelSpec("y", terms=(NumberTerm("a"),))


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 10_000), level=st.sampled_from([0.8, 0.95, 0.99]), intercept=st.booleans())
def test_the_ends_are_where_the_case_interval_reaches_y(seed, level, intercept):
    """Both ways of asking agree: y is an end of the case interval at each end of x."""
    result = fit_model(replace(LINE, level=level, intercept=intercept), rows(seed))
    y = float(np.quantile(result.observed, 0.3))
    found = inverse.estimate(result, y)
    assert found.low is not None
    assert found.high is not None
    assert found.low < found.x < found.high
    at = estimate(result, Observations({"a": np.array([found.low, found.x, found.high])}, 3))
    assert at.case_high[0] == pytest.approx(y, rel=1e-9)
    assert at.estimate[1] == pytest.approx(y, rel=1e-12)
    assert at.case_low[2] == pytest.approx(y, rel=1e-9)


def test_weighted_readings():
    """A reading of weight 4 is known twice as well as one of weight 1."""
    observations = rows(n=2_000)
    result = fit_model(replace(LINE, weight="w"), observations)
    y = float(np.median(result.observed))
    one, four = inverse.estimate(result, y, weight=1.0), inverse.estimate(result, y, weight=4.0)
    assert (one.high - one.low) / (four.high - four.low) == pytest.approx(2, abs=0.02)
    at = estimate(result, Observations({"a": np.array([four.low])}, 1), weights=np.array([4.0]))
    assert at.case_high[0] == pytest.approx(y, rel=1e-9)


@pytest.mark.parametrize("level", [0.5, 0.9, 0.95, 0.999])
def test_bounded_exactly_where_the_slope_is_clear(level):
    """Fieller (1954): the set is an interval only if the slope differs from zero at the level."""
    for seed in range(12):
        rng = np.random.default_rng(seed)
        a = rng.uniform(0, 10, 12)
        y = 5 + 0.25 * a + rng.standard_normal(12)
        result = fit_model(replace(LINE, level=level), Observations({"a": a, "y": y}, 12))
        found = inverse.estimate(result, 6.0)
        assert (found.low is not None) == (found.high is not None) == (result.fit.p[1] < 1 - level)


def test_a_line_that_fits_well():
    """Load cell: with a slope this clear the interval is the estimate and t s / b sqrt(1 + 1/n + ...), to 1e-6."""
    result = fit_model(load("load_cell").fits[0].spec, load("load_cell").fits[0].observations)
    x = result.design.matrix[:, 1]
    found = inverse.estimate(result, 1.239722)
    b = result.fit.coefficients[1]
    spread = np.sqrt(1 + 1 / 40 + (found.x - x.mean()) ** 2 / np.sum((x - x.mean()) ** 2))
    half = 2.0243941639 * result.fit.residual_sd / b * spread  # t(0.975, 38)
    assert (found.high - found.low) / 2 == pytest.approx(half, rel=1e-5)
    assert (found.high + found.low) / 2 == pytest.approx(found.x, rel=1e-5)


def test_which_models_serve():
    assert inverse.serves(fit_model(LINE, rows()))
    for other in (
        replace(LINE, terms=TWO),
        replace(LINE, terms=(NumberTerm("a", degree=2),)),
        replace(LINE, terms=(NumberTerm("a", bends=(5.0,)),)),
        replace(LINE, response_shape=Shape.LOG),
    ):
        result = fit_model(other, rows())
        assert not inverse.serves(result)
        with pytest.raises(ValueError, match="straight line"):
            inverse.estimate(result, 20.0)


def test_a_flat_line():
    a = np.array([1.0, 2, 3, 4])
    result = fit_model(LINE, Observations({"a": a, "y": np.array([1.0, 2, 2, 1])}, 4))
    found = inverse.estimate(result, 1.7)
    assert found.low is None
    assert found.high is None


def test_robust_covariances_serve():
    result = fit_model(replace(LINE, errors=Errors.UNEVEN_SPREAD), rows())
    found = inverse.estimate(result, 30.0)
    at = estimate(result, Observations({"a": np.array([found.low, found.high])}, 2))
    assert (at.case_high[0], at.case_low[1]) == pytest.approx((30.0, 30.0), rel=1e-9)
