"""The fitted line of a model with a single number predictor, with its bands, as points to draw."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

from bridge.regression.results import Estimates, Factor, ModelResult
from bridge.sheets import back

POINTS = 61

Floats = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Trace:
    """Values of the predictor, (k,), the bends among them, and the estimates there."""

    x: Floats
    estimates: Estimates


def trace(result: ModelResult, column: str) -> Trace | None:
    """The line over the data's reach of `column`, the only predictor; None where the reach is not known."""
    reach = next((one for one in result.ranges if one.column == column), None)
    if reach is None or not reach.low < reach.high:
        return None
    knots = [
        f.knot
        for c in result.design.columns
        for f in c.factors
        if f.kind == "hinge" and reach.low < f.knot < reach.high
    ]
    x = np.unique([*np.linspace(reach.low, reach.high, POINTS), *knots])
    return Trace(x, _estimates(result, {column: x}, {}))


def one(result: ModelResult, numbers: Mapping[str, float], levels: Mapping[str, str]) -> Estimates:
    """Estimates for a single case, arrays of length 1."""
    return _estimates(result, {name: np.array([value]) for name, value in numbers.items()}, levels)


def _factor(factor: Factor, x: Mapping[str, Floats], levels: Mapping[str, str]) -> Floats:
    if factor.kind == "level":
        return np.array([float(levels[factor.column] == factor.level)])
    values = x[factor.column]
    if factor.kind == "hinge":
        return np.maximum(values - factor.knot, 0.0)
    if factor.kind == "power":
        return np.asarray(values**factor.exponent)
    return np.asarray({"log": np.log, "root": np.sqrt, "reciprocal": np.reciprocal}[factor.kind](values))


def _estimates(result: ModelResult, x: Mapping[str, Floats], levels: Mapping[str, str]) -> Estimates:
    fit = result.fit
    size = max((len(v) for v in x.values()), default=1)
    X = np.column_stack(
        [np.prod([np.ones(size), *(_factor(f, x, levels) for f in c.factors)], axis=0) for c in result.design.columns]
    )
    eta = X @ fit.coefficients
    q = stdtrit(fit.df_interval, 0.5 + result.spec.level / 2)
    se = np.sqrt(((X @ fit.covariance_factor) ** 2).sum(axis=1))
    lev = ((X @ fit.r_inverse) ** 2).sum(axis=1)
    case = np.sqrt(se**2 + fit.residual_sd**2) if fit.weights is None else np.full_like(se, np.nan)
    return Estimates(
        back.mean(eta, result.back),
        back.median(eta, result.back),
        back.mean(eta - q * se, result.back),
        back.mean(eta + q * se, result.back),
        back.median(eta - q * case, result.back),
        back.median(eta + q * case, result.back),
        lev,
    )
