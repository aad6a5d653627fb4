"""Reading a straight line backwards: which x gave this y, with the interval of Fieller (1954)."""

from __future__ import annotations

import math

from bridge.regression.results import InverseEstimate, ModelResult
from bridge.regression.spec import NumberTerm, Shape
from bridge.regression.tails import t_quantile


def serves(result: ModelResult) -> bool:
    """Whether the model is a straight line in one predictor, neither of them transformed."""
    spec = result.spec
    term = spec.terms[0] if len(spec.terms) == 1 else None
    plain = isinstance(term, NumberTerm) and term.shape is Shape.AS_IS and term.degree == 1 and not term.bends
    return plain and spec.response_shape is Shape.AS_IS and len(result.design.columns) == 1 + int(spec.intercept)


def estimate(result: ModelResult, y: float, level: float | None = None, weight: float = 1.0) -> InverseEstimate:
    """The x at which the line reads y, and the x that a single reading y of that weight is compatible with.

    All x with (y - a - b x)^2 <= t^2 (s^2 / weight + var(a + b x)). Where the slope may be zero at this level that set
    is unbounded and both ends are None. `level` None: the model's. Raises ValueError for other models.
    """
    if not serves(result):
        raise ValueError("only a straight line in one predictor can be read backwards")
    fit = result.fit
    a, b = (float(fit.coefficients[0]), float(fit.coefficients[-1])) if result.spec.intercept else (
        0.0,
        float(fit.coefficients[0]),
    )  # fmt: skip
    v = fit.covariance
    vaa, vab, vbb = (
        (float(v[0, 0]), float(v[0, 1]), float(v[1, 1])) if result.spec.intercept else (0.0, 0.0, float(v[0, 0]))
    )
    if b == 0:
        return InverseEstimate(math.nan, None, None)
    t2 = t_quantile(result.spec.level if level is None else level, fit.df_interval) ** 2
    x = (y - a) / b
    # With d the distance from x: (b d)^2 <= t2 (s2 + vaa + 2 (x + d) vab + (x + d)^2 vbb), which loses no digits.
    own = fit.residual_sd**2 / weight + vaa + 2 * x * vab + x * x * vbb
    square, half = b * b - t2 * vbb, t2 * (vab + x * vbb)
    root = half * half + square * t2 * own
    if square <= 0 or root < 0:
        return InverseEstimate(x, None, None)
    return InverseEstimate(x, x + (half - math.sqrt(root)) / square, x + (half + math.sqrt(root)) / square)
