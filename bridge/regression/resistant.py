"""Huber's (1964) M estimate: large residuals pull only in proportion, not by their squares.

psi bends at k = 1.345 times the scale, which gives 95% efficiency for normal errors; the scale is the median absolute
residual over 0.6745, renewed at each step of reweighting, as in statsmodels' RLM with HuberT. The residual standard
deviation that comes back is the one that makes s^2 (X'WX)^-1 the covariance of Huber (1981, chapter 7.6, first form):
K^2 sum(psi^2)/(n - p) / mean(psi')^2 with K = 1 + (p/n) var(psi')/mean(psi')^2.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import qr, solve_triangular

from bridge.regression.kernel import Kernel, Sums
from bridge.regression.sums import given_all_others, one_after_another

BEND = 1.345
NORMAL = 0.6744897501960817  # upper quartile of the standard normal
STEPS = 200
CLOSE = 1e-12

Array = NDArray[np.float64]


def fit(kernel: Kernel) -> Kernel:
    """The resistant fit that begins at a least-squares kernel. Case weights stay; Huber's come on top.

    R^-1, leverage and the condition number are those of the design and stay; coefficients, residuals, sums of squares
    and the residual standard deviation are new. A fit in which more than half of the residuals are zero comes back
    as it is, with weights of one: there is no scale to judge by.
    """
    root = np.ones(kernel.n) if kernel.weights is None else np.sqrt(kernel.weights)
    x, y = kernel.x * root[:, None], kernel.y * root
    b, e = kernel.coefficients, kernel.residual * root
    weights = np.ones(kernel.n)
    scale = _scale(e)
    if scale <= 1e-14 * float(np.abs(y).max()):
        return replace(kernel, robust_weights=weights)
    for _ in range(STEPS):
        weights = np.minimum(1.0, BEND * scale / np.maximum(np.abs(e), 1e-300))
        new = _weighted(x, y, weights)
        moved = float(np.abs(x @ (new - b)).max())
        b, e = new, y - x @ new
        scale = _scale(e)
        if moved <= CLOSE * scale:
            break
    weights = np.minimum(1.0, BEND * scale / np.maximum(np.abs(e), 1e-300))
    return _kernel(kernel, root, b, e, scale, weights)


def _scale(residual: Array) -> float:
    return float(np.median(np.abs(residual))) / NORMAL


def _weighted(x: Array, y: Array, weights: Array) -> Array:
    root = np.sqrt(weights)
    scaled = x * root[:, None]
    lengths = np.sqrt(np.sum(scaled**2, axis=0))
    q, r = qr(scaled / lengths, mode="economic", check_finite=False)
    found: Array = solve_triangular(r, q.T @ (y * root)) / lengths
    return found


def _kernel(kernel: Kernel, root: Array, b: Array, e: Array, scale: float, weights: Array) -> Kernel:
    n, p = kernel.n, kernel.p
    psi, flat = e * weights, (np.abs(e) <= BEND * scale).astype(float)
    share = float(flat.mean())
    k = 1 + p / n * float(flat.var()) / share**2
    sd = k * float(np.sqrt(psi @ psi / kernel.df_residual)) / share
    sums = _sums(kernel, root**2 * weights, b, e / root)
    lengths = np.sqrt(np.sum(kernel.r_inverse**2, axis=1))
    residual = e / root
    return replace(
        kernel,
        coefficients=b,
        coefficients_low=np.zeros(p),
        standard_errors=sd * lengths,
        residual_sd=sd,
        rss=float(sums.residual),
        tss=float(sums.total),
        fitted=kernel.y - residual,
        residual=residual,
        sums=sums,
        digits=None,
        robust_weights=weights,
    )


def _sums(kernel: Kernel, weights: Array, b: Array, residual: Array) -> Sums:
    """Sums of squares with Huber's weights taken as if given: the ANOVA that a resistant fit shows."""
    root = np.sqrt(weights)
    mean = float(weights @ kernel.y / weights.sum()) if kernel.intercept else 0.0
    total = float(weights @ (kernel.y - mean) ** 2)
    x = kernel.x * root[:, None]
    lengths = np.sqrt(np.sum(x**2, axis=0))
    q, r = qr(x / lengths, mode="economic", check_finite=False)
    r_inverse = solve_triangular(r, np.eye(kernel.p)) / lengths[:, None]
    added = (q.T @ (kernel.y * root)) ** 2
    last = given_all_others(kernel.columns, b, r_inverse)
    in_order = one_after_another(kernel.columns, added)
    return Sums(float(weights @ residual**2), total, last, in_order, None, 0)
