"""Tail areas and quantiles of t and F (scipy.special: a tenth of the import of scipy.stats)."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

Array = NDArray[np.float64]


def t_two_sided(t: ArrayLike, df: float) -> Array:
    """Probability that |T| exceeds |t|; NaN stays NaN."""
    return np.asarray(2 * special.stdtr(df, -np.abs(t)))


def t_quantile(level: float, df: float) -> float:
    """The t that |T| stays under with probability `level`."""
    return float(special.stdtrit(df, (1 + level) / 2))


def f_upper(f: float, df: tuple[float, float]) -> float:
    """Probability that F on `df` exceeds f; NaN where f is NaN or a count of degrees of freedom is 0."""
    if np.isnan(f) or min(df) <= 0:
        return float("nan")
    return float(special.fdtrc(df[0], df[1], f)) if np.isfinite(f) else 0.0
