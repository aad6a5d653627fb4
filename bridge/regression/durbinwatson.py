"""Durbin & Watson's d (1950) and its p value.

To a few hundred rows the p is exact: d is below d0 where a quadratic form in normal variables is negative, integrated
by Imhof's formula (1961). Beyond, the beta distribution with d's exact mean and variance (Durbin & Watson 1951).
The p is two-sided: twice the smaller tail.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy import special

MOST_EXACT = 300

Array = NDArray[np.float64]


def statistic(residual: Array) -> float:
    """d = sum of squared successive differences over the sum of squares; NaN where all residuals are zero."""
    total = float(residual @ residual)
    return float(np.sum(np.diff(residual) ** 2)) / total if total > 0 else float("nan")


def p_value(d: float, q: Array) -> float:
    """Two-sided p of d; `q` (n, p) is an orthonormal basis of the design in the order of the rows."""
    n, p = q.shape
    if not np.isfinite(d) or n - p < 2:
        return float("nan")
    lower = _exact(d, q) if n <= MOST_EXACT else _beta(d, q)
    return float(min(1.0, 2 * min(lower, 1 - lower)))


def _differences(x: Array) -> Array:
    """A x, with A the matrix of d's numerator (e'A e)."""
    steps = np.diff(x, axis=0)
    zero = np.zeros((1, x.shape[1]))
    found: Array = np.vstack([zero, steps]) - np.vstack([steps, zero])
    return found


def _exact(d: float, q: Array) -> float:
    """Probability of a smaller d, by Imhof's integral over the eigenvalues of M A M - d M."""
    n, p = q.shape
    a = _differences(np.eye(n))
    left = a - q @ (q.T @ a)
    middle = left - (left @ q) @ q.T
    values = np.linalg.eigvalsh((middle + middle.T) / 2)
    # M has p zero eigenvalues whose vectors are the design's: drop the p values nearest to zero.
    kept = values[np.sort(np.argsort(np.abs(values))[p:])] - d
    return _negative(np.asarray(kept))


def _negative(weights: Array) -> float:
    """Probability that sum of weights times squared standard normals is negative (Imhof 1961, at zero)."""
    scaled = weights / np.sqrt(np.mean(weights**2))
    nodes, steps = np.polynomial.legendre.leggauss(64)
    total = 0.0
    # The integrand dies off like a product over all weights; u = v / (1 - v) brings the rest within [0, 1].
    edges = np.linspace(0.0, 1.0, 17)
    for low, high in pairwise(edges):
        v = (low + high) / 2 + (high - low) / 2 * nodes
        u = v / (1 - v)
        products = u[:, None] * scaled
        angle = np.arctan(products).sum(axis=1) / 2
        damped = np.exp(-np.log1p(products**2).sum(axis=1) / 4)
        total += float(np.sum(steps * np.sin(angle) * damped / (u * (1 - v) ** 2))) * (high - low) / 2
    return float(np.clip(0.5 - total / np.pi, 0.0, 1.0))


def _beta(d: float, q: Array) -> float:
    """Probability of a smaller d, by a beta distribution on (0, 4) with d's mean and variance."""
    n, p = q.shape
    aq = _differences(q)
    qaq = q.T @ aq
    first = 2 * (n - 1) - float(np.trace(qaq))  # trace of M A
    # trace of M A M A = tr A^2 - 2 tr Q'A^2 Q + tr (Q'A Q)^2
    second = 2 * (3 * n - 4) - 2 * float(np.sum(aq**2)) + float(np.sum(qaq**2))
    df = n - p
    mean = first / df
    variance = 2 * (second - first * mean) / (df * (df + 2))
    share = mean / 4
    size = mean * (4 - mean) / variance - 1
    return float(special.betainc(share * size, (1 - share) * size, d / 4))
