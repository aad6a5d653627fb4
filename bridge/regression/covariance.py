"""How the coefficients scatter: ordinary, under uneven spread, within groups, along a series.

Each way is a function from the kernel to the middle matrix M of R^-1 M R^-T, where (X'WX)^-1 = R^-1 R^-T and the
scores are those of the weighted design: rows of Q = sqrt(W) X R^-1 times sqrt(w) e. statsmodels' cov_type HC3,
cluster (with its correction) and HAC (with use_correction) have the same definitions.

For a resistant fit the scores are those of Huber's psi (the residual times its resistant weight), and the sum of
q q' over the rows that psi does not hold back takes the place of Q'Q = I (Huber 1967, "The behavior of maximum
likelihood estimates under nonstandard conditions").
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from bridge.regression.kernel import Kernel, basis_rows
from bridge.regression.spec import Errors
from bridge.regression.tails import f_upper
from bridge.regression.threads import ROWS, over_blocks

Array = NDArray[np.float64]
Codes = NDArray[np.intp]


@dataclass(frozen=True, slots=True)
class CovarianceResult:
    """Covariance (p, p), a factor C with C C' = covariance, the degrees of freedom of t, and Wald's F of all slopes.

    `robust_f` and its p are None for ordinary errors, and where the covariance has too low a rank for it.
    """

    covariance: Array
    factor: Array
    df_interval: float
    robust_f: float | None
    robust_f_p: float | None


def make(
    kernel: Kernel, errors: Errors, groups: Codes | None = None, order: Codes | None = None, lags: int | None = None
) -> CovarianceResult:
    """The covariance asked for. `groups` (n,) codes (grouped); `order` (n,) the rows in order (serial; None: as is).

    Raises ValueError for grouped errors without at least two groups.
    """
    if errors is Errors.ORDINARY:
        factor = kernel.residual_sd * kernel.r_inverse
        return CovarianceResult(factor @ factor.T, factor, float(kernel.df_residual), None, None)
    df = float(kernel.df_residual)
    if errors is Errors.UNEVEN_SPREAD:
        middle = _uneven_spread(kernel)
    elif errors is Errors.GROUPED:
        codes = _codes(groups)
        middle, df = _grouped(kernel, codes), float(codes.max())
    else:
        middle = _serial(kernel, order, default_lags(kernel.n) if lags is None else lags)
    factor = kernel.r_inverse @ _bread(kernel, _root(middle))
    covariance = factor @ factor.T
    f, p = _wald(kernel, covariance, df)
    return CovarianceResult(covariance, factor, df, f, p)


def _codes(groups: Codes | None) -> Codes:
    """Groups as 0, 1, 2, ..., (n,)."""
    codes = None if groups is None else np.unique(groups, return_inverse=True)[1]
    if codes is None or codes.max() == 0:
        raise ValueError("grouped standard errors need at least two groups")
    return codes


def default_lags(n: int) -> int:
    """Newey and West's (1994) rule of thumb for the number of lags: floor(4 (n/100)^(2/9)), less than n."""
    return min(int(4 * (n / 100) ** (2 / 9)), n - 1)


# --- the middle matrix ---------------------------------------------------------------------------


def _uneven_spread(kernel: Kernel) -> Array:
    """HC3 (MacKinnon & White 1985): each squared residual over (1 - leverage)^2. A row of leverage 1 says nothing."""
    left = 1 - kernel.leverage
    alone = left < 1e-10

    def scaled(residual: Array, rows: slice) -> Array:
        return np.where(alone[rows], 0.0, residual / np.where(alone[rows], 1.0, left[rows]))

    def work(rows: slice) -> Array:
        scores = _scores(kernel, rows, scaled)
        return scores.T @ scores

    return np.asarray(np.sum(over_blocks(kernel.n, work), axis=0))


def _grouped(kernel: Kernel, codes: Codes) -> Array:
    """CR1 (Liang & Zeger 1986) with the factor G/(G-1) (n-1)/(n-p) for few groups."""
    count = int(codes.max()) + 1
    sums = np.zeros((count, kernel.p))
    for start in range(0, kernel.n, 65_536):
        rows = slice(start, start + 65_536)
        np.add.at(sums, codes[rows], _scores(kernel, rows))
    small = count / (count - 1) * (kernel.n - 1) / kernel.df_residual
    return np.asarray(small * (sums.T @ sums))


def _serial(kernel: Kernel, order: Codes | None, lags: int) -> Array:
    """Newey and West (1987), Bartlett's weights, times n/(n-p).

    The weights 1 - j/(L+1) are those of a moving sum of L + 1 rows with itself: the middle is the mean square of the
    moving sums of the scores, zeros before the first row and after the last. Never more lags than rows but one.
    """
    n, lags = kernel.n, min(lags, kernel.n - 1)
    place = np.arange(n) if order is None else order

    def work(ends: slice) -> Array:
        first, last = max(ends.start - lags, 0), min(ends.stop, n)
        running = np.zeros((last - first + 1, kernel.p))
        np.cumsum(_scores(kernel, place[first:last]), axis=0, out=running[1:])
        end = np.arange(ends.start, ends.stop)
        sums = running[np.minimum(end + 1, n) - first] - running[np.maximum(end - lags, 0) - first]
        return np.asarray(sums.T @ sums)

    middle = np.sum(over_blocks(n + lags, work, max(ROWS, 2 * lags)), axis=0)
    return np.asarray(middle * (n / kernel.df_residual / (lags + 1)))


def _scores(kernel: Kernel, rows: slice | Codes, change: Callable[[Array, slice], Array] | None = None) -> Array:
    """Rows of Q (weighted, orthonormal columns) times the weighted residual, shape (k, p)."""
    residual = kernel.residual[rows] if change is None else change(kernel.residual[rows], rows)  # type: ignore[arg-type]
    weighted = residual if kernel.weights is None else residual * kernel.weights[rows]
    if kernel.robust_weights is not None:
        weighted = weighted * kernel.robust_weights[rows]
    return basis_rows(kernel, rows) * weighted[:, None]


def _bread(kernel: Kernel, root: Array) -> Array:
    """A^-1 root, where A is the sum of q q' over the rows whose residuals count in full; root itself where all do."""
    if kernel.robust_weights is None or bool((kernel.robust_weights == 1).all()):
        return root
    free = kernel.robust_weights == 1

    def work(rows: slice) -> Array:
        weight = free[rows] if kernel.weights is None else free[rows] * kernel.weights[rows]
        q = basis_rows(kernel, rows)
        return np.asarray((q.T * weight) @ q)

    inner = np.sum(over_blocks(kernel.n, work), axis=0)
    return np.asarray(np.linalg.lstsq(inner, root, rcond=None)[0])


def _root(middle: Array) -> Array:
    """L with L L' = middle, also where it has no full rank (rounding below zero is taken as zero)."""
    try:
        return np.asarray(np.linalg.cholesky(middle))
    except np.linalg.LinAlgError:
        values, vectors = np.linalg.eigh(middle)
        return np.asarray(vectors * np.sqrt(np.clip(values, 0.0, None)))


def _wald(kernel: Kernel, covariance: Array, df: float) -> tuple[float | None, float | None]:
    """Wald's F that all slopes are zero, on (slopes, df)."""
    slopes = slice(int(kernel.intercept), kernel.p)
    count = kernel.p - int(kernel.intercept)
    block = covariance[slopes, slopes]
    scale = np.sqrt(np.diag(block))
    if count == 0 or df < count or not (scale > 0).all():
        return None, None
    values, vectors = np.linalg.eigh(block / np.outer(scale, scale))
    if values[0] < 1e-13 * values[-1]:
        return None, None
    turned = vectors.T @ (kernel.coefficients[slopes] / scale)
    f = float(np.sum(turned**2 / values)) / count
    return f, f_upper(f, (count, df))
