"""Huber's (1964) M estimate: large residuals pull only in proportion, not by their squares.

psi bends at k = 1.345 times the scale, which gives 95% efficiency for normal errors; the scale is the median absolute
residual over 0.6745, renewed at each step of reweighting, as in statsmodels' RLM with HuberT. The residual standard
deviation that comes back is the one that makes s^2 (X'WX)^-1 the covariance of Huber (1981, chapter 7.6, first form;
statsmodels' H1): K^2 sum(psi^2)/(n - p) / mean(psi')^2 with K = 1 + (p/n) var(psi')/mean(psi')^2.

All steps are taken in the coordinates of the orthonormal basis Q of the least-squares fit, whose reweighted
cross-products stay well conditioned.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cholesky, solve_triangular

from bridge.regression.auxiliary import orthonormal
from bridge.regression.kernel import Kernel, Sums
from bridge.regression.sums import given_all_others, one_after_another
from bridge.regression.threads import over_blocks

BEND = 1.345
NORMAL = 0.6744897501960817  # upper quartile of the standard normal
STEPS = 200
CLOSE = 1e-12
NOTHING = 1e-14  # a scale below this share of the largest response is no scale to judge by

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class _Reached:
    """Coefficients of Q besides the least-squares ones (p,); residuals (n,) times the roots of the weights; scale."""

    coordinates: Array
    residual: Array
    scale: float

    @property
    def weights(self) -> Array:
        """Huber's weights (n,): 1 up to the bend, then falling as 1 over the residual."""
        return np.minimum(1.0, BEND * self.scale / np.maximum(np.abs(self.residual), 1e-300))


def fit(kernel: Kernel) -> Kernel:
    """The resistant fit that begins at a least-squares kernel. Case weights stay; Huber's come on top.

    R^-1, leverage and the condition number are those of the design and stay; coefficients, residuals, sums of squares
    and the residual standard deviation are new. A fit in which more than half of the residuals are zero comes back
    as it is, with weights of one: there is no scale to judge by.
    """
    root = np.ones(kernel.n) if kernel.weights is None else np.sqrt(kernel.weights)
    least = NOTHING * float(np.abs(kernel.y * root).max())
    e = kernel.residual * root
    reached = _Reached(np.zeros(kernel.p), e, _scale(e))
    if reached.scale <= least:
        return replace(kernel, robust_weights=np.ones(kernel.n))
    for _ in range(STEPS):
        reached, moved = _step(kernel, reached)
        if moved <= CLOSE * reached.scale or reached.scale <= least:
            break
    return _kernel(kernel, root, reached)


def _scale(residual: Array) -> float:
    return float(np.median(np.abs(residual))) / NORMAL


def _step(kernel: Kernel, at: _Reached) -> tuple[_Reached, float]:
    """One step of reweighting, and the most that it moves a fitted value."""
    products, right = _reweighted(kernel, at.weights, at.residual)
    move = np.linalg.solve(products, right)
    shift = np.concatenate(over_blocks(kernel.n, lambda rows: orthonormal(kernel, rows) @ move))
    residual = at.residual - shift
    return _Reached(at.coordinates + move, residual, _scale(residual)), float(np.abs(shift).max())


def _reweighted(kernel: Kernel, weights: Array, values: Array) -> tuple[Array, Array]:
    """Q'VQ (p, p) and Q'V values (p,), with V the diagonal of Huber's weights."""

    def work(rows: slice) -> Array:
        q = orthonormal(kernel, rows)
        return np.asarray((q.T * weights[rows]) @ np.column_stack([q, values[rows]]))

    both = np.sum(over_blocks(kernel.n, work), axis=0)
    return both[:, :-1], both[:, -1]


def _kernel(kernel: Kernel, root: Array, reached: _Reached) -> Kernel:
    n, p, e, weights = kernel.n, kernel.p, reached.residual, reached.weights
    psi, free = e * weights, weights == 1
    share = float(free.mean())
    k = 1 + p / n * share * (1 - share) / share**2
    sd = k * float(np.sqrt(psi @ psi / kernel.df_residual)) / share
    coefficients = kernel.coefficients + kernel.r_inverse @ reached.coordinates
    residual = e / root
    sums = _sums(kernel, root, weights, coefficients, residual)
    return replace(
        kernel,
        coefficients=coefficients,
        coefficients_low=np.zeros(p),
        standard_errors=sd * np.sqrt(np.sum(kernel.r_inverse**2, axis=1)),
        residual_sd=sd,
        rss=float(sums.residual),
        tss=float(sums.total),
        fitted=kernel.y - residual,
        residual=residual,
        sums=sums,
        digits=None,
        robust_weights=weights,
    )


def _sums(kernel: Kernel, root: Array, robust: Array, coefficients: Array, residual: Array) -> Sums:
    """Sums of squares with Huber's weights taken as if given: the ANOVA that a resistant fit shows."""
    weights = root**2 * robust
    mean = float(weights @ kernel.y / weights.sum()) if kernel.intercept else 0.0
    y = kernel.y - mean  # an intercept takes up the difference
    products, right = _reweighted(kernel, robust, y * root)
    lower = cholesky(products, lower=True)
    added = solve_triangular(lower, right, lower=True) ** 2
    r_inverse = kernel.r_inverse @ solve_triangular(lower, np.eye(kernel.p), lower=True).T
    return Sums(
        residual=float(weights @ residual**2),
        total=float(weights @ y**2),
        last=given_all_others(kernel.columns, coefficients, r_inverse),
        in_order=one_after_another(kernel.columns, added),
        pure_error=None,
        pure_error_df=0,
    )
