"""Are the residuals normal? Shapiro & Wilk's W to 5,000 rows, Anderson & Darling's A2 beyond.

W and its p by Royston (1995, algorithm AS R94); A2 with mean and spread estimated and its p by D'Agostino & Stephens
(1986). scipy.stats.shapiro is the same algorithm with normal quantiles of 9 digits (AS 111) where these have 15.
Written out here because importing a statistics library costs more than the whole fit of a usual workbook.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy import special

from bridge.regression.results import Check

MOST_SHAPIRO = 5_000

Array = NDArray[np.float64]


def check(residual: Array) -> Check:
    """The test of scaled residuals (n,). Fewer than three rows, or residuals that do not vary, have no p."""
    nan = float("nan")
    n = len(residual)
    if n < 3 or residual.max() - residual.min() <= 1e-300:
        return Check("normality", "Shapiro-Wilk", "W", nan, (), nan, nan, _SHAPIRO, "too little variation to judge")
    if n <= MOST_SHAPIRO:
        w = shapiro_w(residual)
        return Check("normality", "Shapiro-Wilk", "W", w, (), shapiro_p(w, n), nan, _SHAPIRO)
    a2 = anderson_darling(residual)
    return Check("normality", "Anderson-Darling", "A2", a2, (), anderson_p(a2, n), nan, _ANDERSON)


_SHAPIRO = "Shapiro & Wilk 1965; p by Royston 1995"
_ANDERSON = "Anderson & Darling 1954; p by D'Agostino & Stephens 1986"
_FIRST = (0.0, 0.221157, -0.147981, -2.071190, 4.434685, -2.706056)
_SECOND = (0.0, 0.042981, -0.293762, -1.752461, 5.682633, -3.582633)


def shapiro_w(values: Array) -> float:
    """W of values (n,), 3 <= n <= 5,000."""
    n = len(values)
    x = np.sort(values)
    if n == 3:
        a = np.array([-math.sqrt(0.5), 0.0, math.sqrt(0.5)])
    else:
        m = special.ndtri((np.arange(1, n + 1) - 0.375) / (n + 0.25))
        total, u = float(m @ m), 1 / math.sqrt(n)
        a = m.copy()
        last = _poly(_FIRST, u) + m[-1] / math.sqrt(total)
        if n > 5:
            before = _poly(_SECOND, u) + m[-2] / math.sqrt(total)
            scale = (total - 2 * m[-1] ** 2 - 2 * m[-2] ** 2) / (1 - 2 * last**2 - 2 * before**2)
            a[1], a[-2] = -before, before
            a[2:-2] = m[2:-2] / math.sqrt(scale)
        else:
            scale = (total - 2 * m[-1] ** 2) / (1 - 2 * last**2)
            a[1:-1] = m[1:-1] / math.sqrt(scale)
        a[0], a[-1] = -last, last
    centred = x - x.mean()
    spread = float(centred @ centred)
    # 1 - W from its own small difference, so that W near 1 keeps its digits.
    a = a / math.sqrt(float(a @ a))
    scaled = centred / math.sqrt(spread)
    return 1 - float((scaled - a) @ (scaled - a)) * (1 - float((scaled - a) @ (scaled - a)) / 4)


def shapiro_p(w: float, n: int) -> float:
    """Probability of a smaller W under normality."""
    if n == 3:
        return max(6 / math.pi * (math.asin(math.sqrt(w)) - math.asin(math.sqrt(0.75))), 0.0)
    if w >= 1:
        return 1.0
    y, x = math.log(1 - w), math.log(n)
    if n <= 11:
        gamma = -2.273 + 0.459 * n
        if y >= gamma:
            return 1e-99
        y = -math.log(gamma - y)
        mean = _poly((0.5440, -0.39978, 0.025054, -6.714e-4), n)
        sd = math.exp(_poly((1.3822, -0.77857, 0.062767, -0.0020322), n))
    else:
        mean = _poly((-1.5861, -0.31082, -0.083751, 0.0038915), x)
        sd = math.exp(_poly((-0.4803, -0.082676, 0.0030302), x))
    return float(special.ndtr((mean - y) / sd))


def anderson_darling(values: Array) -> float:
    """A2 with mean and standard deviation estimated."""
    n = len(values)
    z = np.sort((values - values.mean()) / values.std(ddof=1))
    weights = 2 * np.arange(1, n + 1) - 1
    return float(-n - np.sum(weights * (special.log_ndtr(z) + special.log_ndtr(-z[::-1]))) / n)


def anderson_p(a2: float, n: int) -> float:
    """Probability of a larger A2 under normality."""
    a = a2 * (1 + 0.75 / n + 2.25 / n**2)
    if a >= 0.6:
        return math.exp(1.2937 - 5.709 * a + 0.0186 * a**2) if a < 13 else 0.0
    if a >= 0.34:
        return math.exp(0.9177 - 4.279 * a - 1.38 * a**2)
    if a >= 0.2:
        return 1 - math.exp(-8.318 + 42.796 * a - 59.938 * a**2)
    return 1 - math.exp(-13.436 + 101.14 * a - 223.73 * a**2)


def _poly(coefficients: tuple[float, ...], x: float) -> float:
    return float(sum(c * x**k for k, c in enumerate(coefficients)))
