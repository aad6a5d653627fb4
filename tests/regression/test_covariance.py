"""Covariances: factors, odd cases, many rows; against statsmodels see test_reference_problems.py."""

from __future__ import annotations

import numpy as np
import pytest

from bridge.regression import covariance, resistant
from bridge.regression.spec import Errors
from tests.regression.problems import kernel, rows

ROBUST = (Errors.UNEVEN_SPREAD, Errors.GROUPED, Errors.SERIAL)


def plain(found, errors, groups=None, order=None, lags=3):
    """The covariance from its definition, all rows at once."""
    root = np.ones(found.n) if found.weights is None else np.sqrt(found.weights)
    x, e = found.x * root[:, None], found.residual * root
    bread = np.linalg.inv(x.T @ x)
    n, p = x.shape
    scores = x * e[:, None]
    if errors is Errors.UNEVEN_SPREAD:
        scores = scores / (1 - found.leverage)[:, None]
        middle = scores.T @ scores
    elif errors is Errors.GROUPED:
        sums = np.array([scores[groups == g].sum(axis=0) for g in np.unique(groups)])
        middle = sums.T @ sums * len(sums) / (len(sums) - 1) * (n - 1) / (n - p)
    else:
        scores = scores[order]
        middle = scores.T @ scores
        for lag in range(1, lags + 1):
            part = scores[lag:].T @ scores[:-lag]
            middle += (1 - lag / (lags + 1)) * (part + part.T)
        middle *= n / (n - p)
    return bread @ middle @ bread


@pytest.mark.parametrize("errors", ROBUST)
@pytest.mark.parametrize("weight", [None, "w"])
@pytest.mark.parametrize("n", [40, 13_001])
def test_by_blocks_as_by_definition(errors, weight, n):
    observations = rows(n=n)
    found = kernel(observations, weight=weight)
    assert (found.basis is None) == (n > 10_000)
    groups = observations.numbers("group").astype(int)
    order = np.argsort(observations.numbers("time"))
    made = covariance.make(found, errors, groups, order, 3)
    assert made.covariance == pytest.approx(plain(found, errors, groups, order), rel=1e-9, abs=1e-18)
    assert made.factor @ made.factor.T == pytest.approx(made.covariance, rel=1e-12)


@pytest.mark.parametrize("lags", [0, 1, 38, 39, 500])
def test_any_number_of_lags(lags):
    """More than rows but one count as rows but one; the middle stays non-negative, unlike with other weights."""
    found, order = kernel(rows()), np.arange(40)
    made = covariance.make(found, Errors.SERIAL, order=order, lags=lags)
    assert made.covariance == pytest.approx(plain(found, Errors.SERIAL, None, order, min(lags, 39)), rel=1e-8)
    assert np.linalg.eigvalsh(made.covariance).min() > -1e-16


def test_long_lags_over_many_rows():
    found = kernel(rows(n=12_000))
    made = covariance.make(found, Errors.SERIAL, lags=5_000)
    sums = np.array([np.convolve(column, np.ones(5_001)) for column in (found.x * found.residual[:, None]).T])
    bread = np.linalg.inv(found.x.T @ found.x)
    wanted = bread @ (sums @ sums.T) @ bread / 5_001 * 12_000 / (12_000 - 3)
    assert made.covariance == pytest.approx(wanted, rel=1e-7)


@pytest.mark.parametrize(("n", "lags"), [(100, 4), (1_000, 6), (1_000_000, 30), (3, 1), (2, 1)])
def test_default_lags(n, lags):
    """floor(4 (n/100)^(2/9)) (Newey & West 1994), less than n."""
    assert covariance.default_lags(n) == lags


def test_fewer_groups_than_coefficients():
    """The covariance has lower rank: it still has a factor, and no Wald F is claimed."""
    observations = rows()
    groups = (np.arange(40) >= 20).astype(int)
    made = covariance.make(kernel(observations), Errors.GROUPED, groups)
    assert np.linalg.matrix_rank(made.covariance, tol=1e-12 * np.abs(made.covariance).max()) < 3
    assert made.factor @ made.factor.T == pytest.approx(made.covariance, rel=1e-9)
    assert np.isfinite(made.factor).all()
    assert (made.robust_f, made.robust_f_p, made.df_interval) == (None, None, 1.0)


def test_one_group_is_refused():
    with pytest.raises(ValueError, match="two groups"):
        covariance.make(kernel(rows()), Errors.GROUPED, np.zeros(40, dtype=int))
    with pytest.raises(ValueError, match="two groups"):
        covariance.make(kernel(rows()), Errors.GROUPED)


def test_a_row_that_alone_makes_a_coefficient():
    """Leverage 1: its residual is 0 whatever happens, and says nothing about the spread."""
    from bridge.regression.spec import CategoryTerm, Levels, NumberTerm

    codes = np.zeros(40, dtype=np.intp)
    codes[7] = 1
    observations = rows(kind=Levels(codes, ("many", "one")))
    found = kernel(observations, terms=(NumberTerm("a"), CategoryTerm("kind")))
    made = covariance.make(found, Errors.UNEVEN_SPREAD)
    assert np.isfinite(made.covariance).all()
    without = [i for i in range(40) if i != 7]
    smaller = kernel(
        type(observations)({k: v[without] for k, v in observations.columns.items() if k != "kind"}, 39),
        terms=(NumberTerm("a"),),
    )
    wanted = covariance.make(smaller, Errors.UNEVEN_SPREAD).covariance
    assert made.covariance[:2, :2] == pytest.approx(wanted, rel=1e-9)


def test_groups_by_any_numbers_and_order():
    found = kernel(rows())
    groups = np.repeat([7, -3, 100, 2], 10)
    once = covariance.make(found, Errors.GROUPED, groups)
    again = covariance.make(found, Errors.GROUPED, np.repeat([0, 1, 2, 3], 10))
    assert (once.covariance == again.covariance).all() or once.covariance == pytest.approx(again.covariance, rel=1e-13)


@pytest.mark.parametrize("errors", ROBUST)
@pytest.mark.parametrize("weight", [None, "w"])
def test_resistant_fits_have_scores_of_their_own(errors, weight):
    """Huber (1967): A^-1 B A^-1, A over the rows that psi does not hold back, B of psi's scores."""
    observations = rows(odd=9.0)
    found = resistant.fit(kernel(observations, weight=weight))
    assert (found.robust_weights < 1).any()
    root = np.ones(found.n) if found.weights is None else np.sqrt(found.weights)
    x, psi = found.x * root[:, None], found.residual * root * found.robust_weights
    bread = np.linalg.inv((x.T * (found.robust_weights == 1)) @ x)
    groups, order = observations.numbers("group").astype(int), np.argsort(observations.numbers("time"))
    if errors is Errors.UNEVEN_SPREAD:
        scores = x * (psi / (1 - found.leverage))[:, None]
        middle = scores.T @ scores
    elif errors is Errors.GROUPED:
        sums = np.array([(x * psi[:, None])[groups == g].sum(axis=0) for g in range(10)])
        middle = sums.T @ sums * 10 / 9 * 39 / 37
    else:
        scores = (x * psi[:, None])[order]
        part = scores[1:].T @ scores[:-1]
        middle = (scores.T @ scores + (part + part.T) / 2) * 40 / 37
    made = covariance.make(found, errors, groups, order, 1)
    assert made.covariance == pytest.approx(bread @ middle @ bread, rel=1e-9)


def test_robust_f_of_one_slope_is_t_squared():
    from bridge.regression.spec import NumberTerm

    found = kernel(rows(), terms=(NumberTerm("a"),))
    for errors in ROBUST:
        made = covariance.make(found, errors, np.repeat(np.arange(10), 4), None, 2)
        t = found.coefficients[1] / np.sqrt(made.covariance[1, 1])
        assert made.robust_f == pytest.approx(t * t, rel=1e-12)
