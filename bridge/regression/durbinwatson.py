"""Durbin & Watson's d (1950) and its p value.

To a few hundred rows the p is exact: d is below d0 where a quadratic form in normal variables is negative, integrated
by Imhof's formula (1961). Beyond, the beta distribution with d's exact mean and variance (Durbin & Watson 1951).
The p is two-sided: twice the smaller tail.
"""

from __future__ import annotations

from functools import lru_cache
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy import special

from bridge.regression.auxiliary import Rows, orthonormal
from bridge.regression.kernel import Kernel
from bridge.regression.threads import over_blocks

MOST_EXACT = 300  # rows

Array = NDArray[np.float64]


def statistic(residual: Array) -> float:
    """d = sum of squared successive differences over the sum of squares; NaN where all residuals are zero."""
    total = float(residual @ residual)
    return float(np.sum(np.diff(residual) ** 2)) / total if total > 0 else float("nan")


def p_value(d: float, kernel: Kernel, order: Rows) -> float:
    """Two-sided p of d for residuals of the kernel in the given order of the rows, (n,)."""
    if not np.isfinite(d) or kernel.df_residual < 2:
        return float("nan")
    lower = _exact(d, orthonormal(kernel, order)) if kernel.n <= MOST_EXACT else _beta(d, kernel, order)
    return float(min(1.0, 2 * min(lower, 1 - lower)))


def _exact(d: float, q: Array) -> float:
    """Probability of a smaller d, by Imhof's integral over the eigenvalues of M A M - d M; q (n, p) in order.

    A is the matrix of d's numerator e'A e: the differences of differences, zero beyond both ends.
    """
    n, p = q.shape
    a = np.diff(np.eye(n), axis=0)
    a = a.T @ a
    left = a - q @ (q.T @ a)
    middle = left - (left @ q) @ q.T
    values = np.linalg.eigvalsh((middle + middle.T) / 2)
    # M has p zero eigenvalues whose vectors are the design's: drop the p values nearest to zero.
    kept = values[np.sort(np.argsort(np.abs(values))[p:])] - d
    return _negative(np.asarray(kept))


def _negative(weights: Array) -> float:
    """Probability that sum of weights times squared standard normals is negative (Imhof 1961, at zero)."""
    scaled = weights / np.sqrt(np.mean(weights**2))
    nodes, steps = _gauss()
    total = 0.0
    # The integrand dies off like a product over all weights; u = 1/(1 - v)^2 - 1 brings it smoothly within [0, 1].
    edges = np.linspace(0.0, 1.0, 17)
    for low, high in pairwise(edges):
        v = (low + high) / 2 + (high - low) / 2 * nodes
        u = v * (2 - v) / (1 - v) ** 2
        products = u[:, None] * scaled
        angle = np.arctan(products).sum(axis=1) / 2
        damped = np.exp(-np.log1p(products**2).sum(axis=1) / 4)
        total += float(np.sum(steps * np.sin(angle) * damped / (u * (1 - v) ** 3))) * (high - low)
    return float(np.clip(0.5 - total / np.pi, 0.0, 1.0))


@lru_cache(maxsize=1)
def _gauss() -> tuple[Array, Array]:
    """Gauss and Legendre's 64 nodes and weights."""
    return np.polynomial.legendre.leggauss(64)


def _beta(d: float, kernel: Kernel, order: Rows) -> float:
    """Probability of a smaller d, by a beta distribution on (0, 4) with d's mean and variance."""
    n, df = kernel.n, kernel.df_residual
    qaq, squares = _moments(kernel, order)
    first = 2 * (n - 1) - float(np.trace(qaq))  # trace of M A
    # trace of M A M A = tr A^2 - 2 tr Q'A^2 Q + tr (Q'A Q)^2
    second = 2 * (3 * n - 4) - 2 * squares + float(np.sum(qaq**2))
    mean = first / df
    variance = 2 * (second - first * mean) / (df * (df + 2))
    share = mean / 4
    size = mean * (4 - mean) / variance - 1
    return float(special.betainc(share * size, (1 - share) * size, d / 4))


def _moments(kernel: Kernel, order: Rows) -> tuple[Array, float]:
    """Q'A Q, (p, p), and the sum of squares of A Q, a block of rows at a time."""
    n = kernel.n

    def work(rows: slice) -> tuple[Array, float]:
        first, last = max(rows.start - 1, 0), min(rows.stop + 1, n)
        q = orthonormal(kernel, order[first:last])
        steps = np.zeros((last - first + 1, kernel.p))  # differences; none before the first row, none after the last
        np.subtract(q[1:], q[:-1], out=steps[1:-1])
        own = steps[rows.start - first : rows.stop - first + 1]
        return own[1:].T @ own[1:], float(np.sum((own[1:] - own[:-1]) ** 2))

    parts = over_blocks(n, work)
    return np.sum([part for part, _ in parts], axis=0), sum(total for _, total in parts)
