"""Case by case: leverage, studentised residuals, Cook's distance, DFFITS, DFBETAS, and the outlier bound.

Belsley, Kuh & Welsch (1980) "Regression Diagnostics" for leverage, external studentisation, DFFITS and DFBETAS;
Cook (1977); Bonferroni's bound on the largest studentised residual (common practice, e.g. Cook & Weisberg 1982).
Weighted fits: of the rows times the roots of their weights.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from bridge.regression.fit import ALONE
from bridge.regression.kernel import Kernel, basis_rows
from bridge.regression.results import Influence
from bridge.regression.tails import t_two_sided

MOST_DFBETAS = 2_000_000  # rows x coefficients kept; above, DFBETAS are not

Array = NDArray[np.float64]


def measure(kernel: Kernel) -> Influence:
    """All measures, each (n,). A row that alone determines a coefficient (leverage 1) has none: NaN."""
    leverage = np.clip(kernel.leverage, 0.0, 1.0)
    left = np.where(1 - leverage < ALONE, np.nan, 1 - leverage)
    residual = kernel.residual if kernel.weights is None else kernel.residual * np.sqrt(kernel.weights)
    internal = _over(residual, kernel.residual_sd * np.sqrt(left))
    external = _external(internal, kernel.df_residual)
    cooks = internal**2 * leverage / (left * kernel.p)
    dffits = external * np.sqrt(leverage / left)
    index, p = _outlier(external, kernel)
    return Influence(leverage, internal, external, cooks, dffits, _dfbetas(kernel, external, left), index, p)


def _over(residual: Array, scale: Array) -> Array:
    """Residuals over their standard deviations; where the fit is exact, zero."""
    with np.errstate(divide="ignore", invalid="ignore"):
        found = residual / scale
    return np.where((scale == 0) & (residual == 0), 0.0, found)


def _external(internal: Array, df: int) -> Array:
    """Each row judged by the residual standard deviation without it; NaN where that leaves no degrees of freedom."""
    if df < 2:
        return np.full_like(internal, np.nan)
    rest = np.clip(df - internal**2, 0.0, None)
    with np.errstate(divide="ignore", invalid="ignore"):
        return internal * np.sqrt((df - 1) / rest)


def _dfbetas(kernel: Kernel, external: Array, left: Array) -> Array | None:
    """How far each coefficient moves without the row, in its standard errors, shape (n, p)."""
    if kernel.n * kernel.p > MOST_DFBETAS:
        return None
    moves = basis_rows(kernel, slice(None)) @ kernel.r_inverse.T
    moves = moves if kernel.weights is None else moves * np.sqrt(kernel.weights)[:, None]
    lengths = np.sqrt(np.sum(kernel.r_inverse**2, axis=1))
    found: Array = moves / lengths * (external / np.sqrt(left))[:, None]
    return found


def _outlier(external: Array, kernel: Kernel) -> tuple[int, float]:
    """The row with the largest |external| and its p, times the number of rows (Bonferroni)."""
    size = np.where(np.isnan(external), -1.0, np.abs(external))
    index = int(np.argmax(size))
    if size[index] < 0:
        return index, float("nan")
    p = float(t_two_sided(size[index], kernel.df_residual - 1))
    return index, min(1.0, p * kernel.n)
