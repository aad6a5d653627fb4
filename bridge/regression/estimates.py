"""Estimates for new cases, with intervals for the mean and for a single case, in the response's own units.

A single case of weight w has variance s^2 / w (s^2 without weights) besides that of the estimate. From a log
response: mean by Duan's smearing factor (1983, "Smearing estimate: a nonparametric retransformation method"), median
by exp alone; from a root: the mean of (eta + e)^2 over the residuals e. The interval for the mean is carried across
like the mean, that for a case like the median (quantiles keep their order).
"""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from bridge.regression import design
from bridge.regression.crossproducts import combinations
from bridge.regression.errors import UnknownLevel
from bridge.regression.integers import WholeDesign, from_typed
from bridge.regression.results import BackTransform, Estimates, Fit, ModelResult
from bridge.regression.spec import BackOn, Levels, Observations, Shape
from bridge.regression.tails import t_quantile

MOST_EXACT = 10_000  # cases
SPARE_BITS = 70  # a double's 53 and room for sums

Array = NDArray[np.float64]


def estimate(result: ModelResult, cases: Observations, weights: Array | None = None) -> Estimates:
    """Estimates for the cases, each figure (k,); `weights` (k,) of the cases, for a weighted model.

    Raises UnknownLevel and OutOfDomain with the column and the index of the case.
    """
    _known_levels(result, cases)
    fit = result.fit
    x = design.matrix(result.design.columns, cases)
    eta = _on_fitted_scale(result, cases, x)
    mean_sd = _lengths(x @ fit.covariance_factor)
    case_sd = np.sqrt(mean_sd**2 + _case_variance(fit, cases.n, weights))
    reach = t_quantile(result.spec.level, fit.df_interval)
    back = result.back if result.spec.back_on is BackOn.ORIGINAL else None
    return Estimates(
        estimate=mean_in_units(eta, back),
        median=median_in_units(eta, back),
        mean_low=mean_in_units(eta - reach * mean_sd, back),
        mean_high=mean_in_units(eta + reach * mean_sd, back),
        case_low=median_in_units(eta - reach * case_sd, back),
        case_high=median_in_units(eta + reach * case_sd, back),
        leverage=_lengths(x @ fit.r_inverse) ** 2,
    )


def back_transform(shape: Shape, residual: Array) -> BackTransform | None:
    """How to come back from a log or a root, from the residuals on the fitted scale; None for other responses."""
    if shape is Shape.LOG:
        return BackTransform("log", float(np.mean(np.exp(residual))), 0.0)
    if shape is Shape.ROOT:
        return BackTransform("root", float(np.mean(residual**2)), float(np.mean(residual)))
    return None


def mean_in_units(eta: Array, back: BackTransform | None) -> Array:
    """The mean response at eta on the fitted scale."""
    if back is None:
        return eta
    if back.kind == "log":
        return np.asarray(np.exp(eta) * back.smear)
    return np.asarray(eta * eta + 2 * eta * back.shift + back.smear)


def median_in_units(eta: Array, back: BackTransform | None) -> Array:
    """The median response at eta on the fitted scale."""
    if back is None:
        return eta
    return np.asarray(np.exp(eta) if back.kind == "log" else np.maximum(eta, 0.0) ** 2)


def _known_levels(result: ModelResult, cases: Observations) -> None:
    for column, known in result.design.levels:
        names = {name for name, _ in known}
        levels: Levels = cases.levels(column)
        strange = ~np.isin(levels.codes, [code for code, name in enumerate(levels.names) if name in names])
        if strange.any():
            index = int(np.argmax(strange))
            raise UnknownLevel(f"{levels.names[levels.codes[index]]} is no level of {column}", column, index)


def _on_fitted_scale(result: ModelResult, cases: Observations, x: Array) -> Array:
    """x'b, (k,): formed exactly for as many cases as people type, because terms may cancel."""
    fit = result.fit
    if cases.n > MOST_EXACT or fit.coefficients_low is None:
        return np.asarray(x @ fit.coefficients)
    whole = WholeDesign(result.design.columns, cases, from_typed(np.zeros(cases.n)), None)
    coefficients = [
        Fraction(high) + Fraction(low)
        for high, low in zip(fit.coefficients.tolist(), fit.coefficients_low.tolist(), strict=True)
    ]
    least = max(fit.residual_sd, float(np.abs(fit.fitted).max()) * 2.0**-53)
    shift = max(whole.bits) + SPARE_BITS - int(np.floor(np.log2(least)))
    factors = [int(b * scale * Fraction(2) ** shift) for b, scale in zip(coefficients, whole.scales[:-1], strict=True)]
    return combinations(whole, np.array([*factors, 0], dtype=object)[:, None], shift)[:, 0]


def _case_variance(fit: Fit, count: int, weights: Array | None) -> Array | float:
    variance = fit.residual_sd**2
    if fit.weights is None:
        return variance
    return np.full(count, np.nan) if weights is None else variance / weights


def _lengths(rows: Array) -> Array:
    return np.asarray(np.sqrt(np.einsum("ij,ij->i", rows, rows)))
