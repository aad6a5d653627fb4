"""The figures of a fit against statsmodels' OLS and WLS, leave-one-out by refitting, and properties."""

from __future__ import annotations

from decimal import Decimal

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given, settings
from hypothesis import strategies as st

from bridge.regression.core import fit_model
from bridge.regression.spec import CategoryTerm, CrossedTerm, Levels, ModelSpec, NumberTerm, Observations, Shape


def problem(seed: int, n: int = 60) -> Observations:
    rng = np.random.default_rng(seed)
    a, b = np.round(rng.uniform(1, 9, n), 2), np.round(rng.normal(30, 6, n), 1)
    codes = np.concatenate([np.arange(3), rng.integers(0, 3, n - 3)])
    y = np.round(np.exp(0.5 + 0.1 * a + 0.02 * b + 0.2 * codes + 0.2 * rng.standard_normal(n)), 2)
    w = np.round(rng.uniform(0.2, 4, n), 2)
    return Observations({"a": a, "b": b, "c": Levels(codes, ("p", "q", "r")), "y": y, "w": w}, n)


TERMS = (NumberTerm("a", degree=2), NumberTerm("b"), CategoryTerm("c", base="p"))


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("weight", [None, "w"])
@pytest.mark.parametrize("intercept", [True, False])
def test_against_statsmodels(seed, weight, intercept):
    observations = problem(seed)
    terms = TERMS if intercept else TERMS[:2]
    crossed = (CrossedTerm("b", "c"),) if intercept else ()
    result = fit_model(
        ModelSpec("y", terms=terms, crossed=crossed, intercept=intercept, weight=weight, level=0.9), observations
    )
    fit, x, y = result.fit, result.design.matrix, observations.numbers("y")
    weights = observations.numbers("w") if weight else np.ones(len(y))
    theirs = sm.WLS(y, x, weights=weights, hasconst=intercept).fit()
    if not weight:
        theirs = sm.OLS(y, x, hasconst=intercept).fit()
    interval = theirs.conf_int(0.1)
    for mine, other in (
        (fit.coefficients, theirs.params),
        (fit.standard_errors, theirs.bse),
        (fit.t, theirs.tvalues),
        (fit.p, theirs.pvalues),
        (fit.low, interval[:, 0]),
        (fit.high, interval[:, 1]),
        (fit.fitted, theirs.fittedvalues),
        (fit.covariance, theirs.cov_params()),
    ):
        assert mine == pytest.approx(other, rel=1e-8, abs=1e-13)
    assert fit.residual == pytest.approx(theirs.resid, rel=1e-8, abs=1e-11)
    for mine, other in (
        (fit.r_squared, theirs.rsquared),
        (fit.adjusted_r_squared, theirs.rsquared_adj),
        (fit.residual_sd**2, theirs.mse_resid),
        (fit.f, theirs.fvalue),
        (fit.f_p, theirs.f_pvalue),
        (fit.log_likelihood, theirs.llf),
        (fit.aic, theirs.aic),
        (fit.bic, theirs.bic),
        (fit.ss_residual, theirs.ssr),
        (fit.ss_total, theirs.centered_tss if intercept else theirs.uncentered_tss),
    ):
        assert mine == pytest.approx(other, rel=1e-9)
    assert fit.f_df == (theirs.df_model, theirs.df_resid)
    assert fit.n == len(y)
    assert fit.df_interval == fit.df_residual == theirs.df_resid
    assert (fit.digits, fit.robust_f, fit.robust_weights) == (None, None, None)
    assert np.allclose(fit.covariance_factor @ fit.covariance_factor.T, fit.covariance, rtol=1e-12, atol=0)
    assert np.allclose(fit.r_inverse, np.triu(fit.r_inverse))


@pytest.mark.parametrize("weight", [None, "w"])
def test_leave_one_out_by_refitting(weight):
    observations = problem(9, 25)
    result = fit_model(ModelSpec("y", terms=TERMS, weight=weight), observations)
    x, y = result.design.matrix, observations.numbers("y")
    weights = observations.numbers("w") if weight else np.ones(25)
    press = 0.0
    for row in range(25):
        kept = np.arange(25) != row
        b = sm.WLS(y[kept], x[kept], weights=weights[kept]).fit().params
        press += weights[row] * (y[row] - x[row] @ b) ** 2
    assert result.fit.loo_r_squared == pytest.approx(1 - press / result.fit.ss_total, rel=1e-9)


def test_leave_one_out_is_unknown_where_a_row_carries_a_coefficient():
    observations = problem(10, 25)
    codes = np.zeros(25, dtype=int)
    codes[7] = 1
    columns = {**observations.columns, "c": Levels(codes, ("p", "q"))}
    fit = fit_model(ModelSpec("y", terms=TERMS), Observations(columns, 25)).fit
    assert np.isnan(fit.loo_r_squared)
    assert np.isfinite(fit.standard_errors).all()


@pytest.mark.parametrize("weight", [None, "w"])
def test_standardised_coefficients(weight):
    """Coefficients of the columns and the response each divided by their (weighted) standard deviation."""
    observations = problem(11)
    result = fit_model(ModelSpec("y", terms=TERMS, weight=weight), observations)
    x, y = result.design.matrix[:, 1:], observations.numbers("y")
    weights = observations.numbers("w") if weight else np.ones(len(y))

    def scaled(v):
        v = v - np.average(v, axis=0, weights=weights)
        return v / np.sqrt(np.average(v**2, axis=0, weights=weights))

    theirs = sm.WLS(scaled(y), scaled(x), weights=weights).fit().params
    assert np.isnan(result.fit.standardised[0])
    assert result.fit.standardised[1:] == pytest.approx(theirs, rel=1e-9)


def test_vif_is_one_over_one_less_r_squared():
    """Terms of one column: the usual VIF. Terms of several share Fox & Monette's, as a square: (GVIF^(1/(2 df)))^2."""
    observations = problem(12)
    result = fit_model(ModelSpec("y", terms=(NumberTerm("a"), NumberTerm("b"), CategoryTerm("c"))), observations)
    x = result.design.matrix
    for j in (1, 2):
        r_squared = sm.OLS(x[:, j], np.delete(x, j, axis=1), hasconst=True).fit().rsquared
        assert result.fit.vif[j] == pytest.approx(1 / (1 - r_squared), rel=1e-10)
    assert result.fit.vif[3] == result.fit.vif[4] >= 1
    assert np.isnan(result.fit.vif[0])


# --- properties ---------------------------------------------------------------------------------

SEEDS = st.integers(0, 10_000)


def line(observations: Observations, **more):
    return fit_model(ModelSpec("y", terms=(NumberTerm("a"), NumberTerm("b")), **more), observations)


def changed(observations: Observations, **columns) -> Observations:
    return Observations({**observations.columns, **columns}, observations.n)


@settings(max_examples=25, deadline=None)
@given(SEEDS, st.integers(-6, 9))
def test_scaling_a_column_by_a_power_of_ten(seed, power):
    """Exact decimals: the coefficient scales to the last digit and nothing else moves."""
    observations = problem(seed, 20)
    moved = np.array([float(f"{v!r}e{power}") for v in observations.numbers("a").tolist()])
    before, after = line(observations).fit, line(changed(observations, a=moved)).fit
    assert after.coefficients[[0, 2]].tolist() == before.coefficients[[0, 2]].tolist()
    assert after.coefficients[1] == pytest.approx(before.coefficients[1] * 10.0**-power, rel=4e-16)
    assert after.r_squared == before.r_squared
    assert after.residual == pytest.approx(before.residual, rel=1e-14, abs=1e-300)


@settings(max_examples=25, deadline=None)
@given(SEEDS, st.randoms())
def test_the_order_of_rows_does_not_matter(seed, random):
    observations = problem(seed, 20)
    order = list(range(20))
    random.shuffle(order)
    shuffled = {name: observations.numbers(name)[order] for name in ("a", "b", "y")}
    before, after = line(observations), line(Observations(shuffled, 20))
    assert after.fit.coefficients.tolist() == before.fit.coefficients.tolist()
    assert after.fit.standard_errors.tolist() == before.fit.standard_errors.tolist()
    assert after.fit.residual == pytest.approx(before.fit.residual[order], rel=5e-16)
    assert [row.ss for row in after.anova.rows] == [row.ss for row in before.anova.rows]


@settings(max_examples=25, deadline=None)
@given(SEEDS, st.decimals(-(10**6), 10**6, places=2))
def test_shifting_the_response_moves_the_intercept_alone(seed, shift):
    observations = problem(seed, 20)
    moved = np.array([float(Decimal(repr(v)) + shift) for v in observations.numbers("y").tolist()])
    before, after = line(observations).fit, line(changed(observations, y=moved)).fit
    assert after.coefficients[1:].tolist() == before.coefficients[1:].tolist()
    assert after.standard_errors.tolist() == before.standard_errors.tolist()
    assert after.residual == pytest.approx(before.residual, rel=5e-16)
    assert after.ss_total == before.ss_total
    assert after.coefficients[0] == pytest.approx(before.coefficients[0] + float(shift), rel=1e-12, abs=1e-9)


@settings(max_examples=15, deadline=None)
@given(SEEDS, st.integers(2, 50))
def test_weights_in_proportion_give_the_same_fit(seed, factor):
    observations = problem(seed, 20)
    times = changed(observations, w=np.array([float(round(100 * v) * factor) for v in observations.numbers("w")]))
    before, after = line(observations, weight="w").fit, line(times, weight="w").fit
    assert after.coefficients.tolist() == before.coefficients.tolist()
    assert after.standard_errors.tolist() == before.standard_errors.tolist()
    assert after.residual_sd == pytest.approx(before.residual_sd * np.sqrt(100 * factor), rel=1e-14)


def test_a_log_response_is_fitted_on_its_logarithm():
    observations = problem(13)
    log = fit_model(ModelSpec("y", response_shape=Shape.LOG, terms=(NumberTerm("a"),)), observations)
    plain = sm.OLS(np.log(observations.numbers("y")), sm.add_constant(observations.numbers("a"))).fit()
    assert log.fit.coefficients == pytest.approx(plain.params, rel=1e-11)
    assert (log.observed == observations.numbers("y")).all()
