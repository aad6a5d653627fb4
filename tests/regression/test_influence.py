"""Influence by its meaning: every row left out in turn and the fit made anew; and where it has no value."""

from __future__ import annotations

import numpy as np
import pytest

from bridge.regression import influence
from bridge.regression.spec import CategoryTerm, Levels, NumberTerm, Observations
from tests.regression.problems import TWO, kernel, rows


def without(observations: Observations, row: int) -> Observations:
    kept = np.arange(observations.n) != row
    return Observations({name: column[kept] for name, column in observations.columns.items()}, observations.n - 1)


@pytest.mark.parametrize("weight", [None, "w"])
def test_every_measure_by_refitting(weight):
    observations = rows(n=25, odd=4.0)
    whole = kernel(observations, weight=weight)
    found = influence.measure(whole)
    lengths = np.sqrt(np.sum(whole.r_inverse**2, axis=1))
    root = np.ones(25) if whole.weights is None else np.sqrt(whole.weights)
    for row in range(25):
        less = kernel(without(observations, row), weight=weight)
        move = whole.coefficients - less.coefficients
        assert found.dfbetas[row] == pytest.approx(move / (less.residual_sd * lengths), rel=1e-8)
        shift = float(whole.x[row] @ move) * root[row]
        assert found.dffits[row] == pytest.approx(shift / (less.residual_sd * np.sqrt(found.leverage[row])), rel=1e-8)
        moved = float(np.sum((root * (whole.x @ move)) ** 2))
        assert found.cooks_distance[row] == pytest.approx(moved / (3 * whole.residual_sd**2), rel=1e-8)
        miss = root[row] * (whole.y[row] - whole.x[row] @ less.coefficients)
        spread = less.residual_sd * np.sqrt(1 + root[row] ** 2 * np.sum((whole.x[row] @ less.r_inverse) ** 2))
        assert found.external[row] == pytest.approx(miss / spread, rel=1e-8)


def test_an_exact_fit():
    """No residual, no spread: nothing stands out."""
    a = np.arange(10.0)
    found = influence.measure(kernel(Observations({"a": a, "y": 3 + 2 * a}, 10), terms=(NumberTerm("a"),)))
    for values in (found.internal, found.external, found.cooks_distance, found.dffits, found.dfbetas):
        assert (np.asarray(values) == 0).all()
    assert found.outlier_p == 1.0


def test_an_exact_fit_but_for_one_row():
    """That row is beyond all bounds, and the others have no residual of their own without it."""
    a = np.arange(10.0)
    y = 3 + 2 * a
    y[4] += 5
    found = influence.measure(kernel(Observations({"a": a, "y": y}, 10), terms=(NumberTerm("a"),)))
    assert found.outlier_index == 4
    assert found.external[4] > 1e6
    assert found.outlier_p < 1e-30
    assert np.isfinite(np.delete(found.external, 4)).all()


def test_a_row_that_alone_makes_a_coefficient():
    codes = np.zeros(40, dtype=np.intp)
    codes[7] = 1
    observations = rows(kind=Levels(codes, ("many", "one")))
    found = influence.measure(kernel(observations, terms=(*TWO, CategoryTerm("kind"))))
    assert found.leverage[7] == pytest.approx(1, abs=1e-12)
    for values in (found.internal, found.external, found.cooks_distance, found.dffits, found.dfbetas[:, 0]):
        assert np.isnan(values[7])
        assert np.isfinite(np.delete(values, 7)).all()


def test_one_degree_of_freedom():
    """Internal residuals exist, external ones do not: without a row nothing is left to judge by."""
    observations = Observations({"a": np.array([1.0, 2, 4]), "y": np.array([1.0, 3, 4])}, 3)
    found = influence.measure(kernel(observations, terms=(NumberTerm("a"),)))
    assert np.abs(found.internal) == pytest.approx(1, rel=1e-12)
    assert np.isnan(found.external).all()
    assert np.isnan(found.outlier_p)


def test_too_many_rows_for_dfbetas():
    observations = rows(n=20_000)
    many = kernel(observations)
    assert influence.measure(many).dfbetas is not None
    limit, influence.MOST_DFBETAS = influence.MOST_DFBETAS, 50_000
    try:
        assert influence.measure(many).dfbetas is None
    finally:
        influence.MOST_DFBETAS = limit
