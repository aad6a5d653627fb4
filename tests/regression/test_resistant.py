"""Huber's fit: what it resists, where it stops, many rows; against statsmodels see test_reference_problems.py."""

from __future__ import annotations

import numpy as np
import pytest

from bridge.regression import resistant
from bridge.regression.core import fit_model
from bridge.regression.spec import FitBy, ModelSpec, NumberTerm, Observations
from tests.regression.problems import TWO, kernel, rows


@pytest.mark.parametrize("weight", [None, "w"])
@pytest.mark.parametrize("n", [40, 15_000])
def test_the_estimating_equations_hold(weight, n):
    """X' sqrt(W) psi(r / s) = 0 with s the median absolute residual over 0.6745, at every size."""
    found = resistant.fit(kernel(rows(n=n, odd=12.0), weight=weight))
    root = np.ones(n) if found.weights is None else np.sqrt(found.weights)
    e = (found.y - found.x @ found.coefficients) * root
    scale = np.median(np.abs(e)) / 0.6744897501960817
    psi = np.clip(e / scale, -1.345, 1.345)
    sizes = np.abs(found.x * (root * np.abs(psi))[:, None]).sum(axis=0)
    assert (np.abs((found.x * root[:, None]).T @ psi) < 1e-9 * sizes).all()
    assert found.robust_weights == pytest.approx(np.minimum(1, 1.345 * scale / np.abs(e)), rel=1e-9)


def test_odd_rows_hardly_pull():
    """Two rows of forty off by 1000: least squares is lost, the resistant fit is not."""
    clean, spoilt = rows(n=40), rows(n=40, odd=1000.0)
    truth = kernel(clean).coefficients
    errors = kernel(clean).standard_errors
    plain, found = kernel(spoilt), resistant.fit(kernel(spoilt))
    assert np.abs((plain.coefficients - truth) / errors).max() > 10
    assert np.abs((found.coefficients - truth) / errors).max() < 2
    assert np.argsort(found.robust_weights)[:2].tolist() in ([0, 1], [1, 0])


def test_more_than_half_on_a_line():
    """There is no scale to judge by: the line through the many, and nothing that is not a number."""
    a = np.arange(20.0)
    y = 1 + 2 * a
    y[[2, 9, 15]] += np.array([5.0, -7, 4])
    result = fit_model(
        ModelSpec("y", terms=(NumberTerm("a"),), fit_by=FitBy.RESISTANT), Observations({"a": a, "y": y}, 20)
    )
    assert result.fit.coefficients == pytest.approx([1, 2], abs=1e-6)
    assert np.isfinite(result.fit.standard_errors).all()
    assert (result.fit.robust_weights[[2, 9, 15]] < 1e-6).all()


def test_an_exact_fit_stays():
    a = np.arange(9.0)
    exact = kernel(Observations({"a": a, "y": 1 + 2 * a}, 9), terms=(NumberTerm("a"),))
    found = resistant.fit(exact)
    assert (found.robust_weights == 1).all()
    assert (found.coefficients == exact.coefficients).all()


def test_sums_of_squares_add_up():
    """Total = added in order + residual, with Huber's weights as given; added last by refitting with them."""
    found = resistant.fit(kernel(rows(odd=8.0), terms=(*TWO, NumberTerm("time"))))
    parts = sum(one.ss for one in found.sums.in_order)
    assert parts + found.sums.residual == pytest.approx(found.sums.total, rel=1e-9)
    root = np.sqrt(found.robust_weights)
    x, y = found.x * root[:, None], found.y * root
    full = y - x @ np.linalg.lstsq(x, y, rcond=None)[0]
    for at, one in enumerate(found.sums.last, start=1):
        less = np.delete(x, at, axis=1)
        rest = y - less @ np.linalg.lstsq(less, y, rcond=None)[0]
        assert one.ss == pytest.approx(rest @ rest - full @ full, rel=1e-8)


def test_the_same_rows_give_the_same_fit():
    once, again = (resistant.fit(kernel(rows(n=15_000, odd=5.0))) for _ in range(2))
    assert (once.coefficients == again.coefficients).all()
    assert (once.robust_weights == again.robust_weights).all()
