"""Which power of the response suits the predictors: the profile likelihood of Box & Cox (1964).

The response is taken over its geometric mean. With an intercept that changes nothing; without one the power would
otherwise depend on the response's unit (Schlesselman 1971, "Power families: a note on the Box and Cox transformation").
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from bridge.regression.auxiliary import even_sample, orthonormal
from bridge.regression.kernel import Kernel
from bridge.regression.results import BoxCox

FARTHEST = 3.0  # powers beyond this are not looked at
MOST_ROWS = 20_000  # above, an even sample of the rows serves: this is advice
DROP = 1.920729410347062  # half of chi square's upper 5% point on 1 degree of freedom
_PLAIN = ((1.0, "as is"), (0.0, "log"), (0.5, "root"), (-1.0, "reciprocal"))

Array = NDArray[np.float64]


def profile(kernel: Kernel, observed: Array) -> BoxCox | None:
    """The best power of `observed` (n,) on the fit's columns, its 95% interval, and the plain power nearest within it.

    None where a response is not positive, does not vary, or the fit is exact. The interval is cut at -3 and 3.
    """
    if observed.min() <= 0 or observed.min() == observed.max() or kernel.rss == 0:
        return None
    likelihood = _likelihood(kernel, observed)
    powers = np.linspace(-FARTHEST, FARTHEST, 25)
    values = np.array([likelihood(power) for power in powers])
    if not np.isfinite(values).all():
        return None
    at = int(np.argmax(values))
    best = _highest(likelihood, powers[max(at - 1, 0)], powers[min(at + 1, len(powers) - 1)])
    level = likelihood(best) - DROP
    low = _crossing(likelihood, level, best, -FARTHEST)
    high = _crossing(likelihood, level, best, FARTHEST)
    within = [(abs(power - best), name) for power, name in _PLAIN if low <= power <= high]
    return BoxCox(best, low, high, min(within)[1] if within else "")


def _likelihood(kernel: Kernel, observed: Array) -> Callable[[float], float]:
    """The profile log likelihood, up to a constant, as a function of the power."""
    rows = even_sample(kernel.n, MOST_ROWS)
    weight = np.ones(len(rows)) if kernel.weights is None else np.sqrt(kernel.weights[rows])
    q = orthonormal(kernel, rows)
    if len(rows) < kernel.n:
        q, _ = np.linalg.qr(q)
    log_y = np.log(observed[rows])
    log_y = log_y - log_y.mean()  # over the geometric mean, so that residual sums compare

    def value(power: float) -> float:
        z = (log_y if power == 0 else np.expm1(power * log_y) / power) * weight
        with np.errstate(divide="ignore"):
            return float(-len(rows) / 2 * np.log(np.sum((z - q @ (q.T @ z)) ** 2)))

    return value


def _highest(f: Callable[[float], float], low: float, high: float) -> float:
    """The maximum between two points, by golden sections."""
    ratio = (np.sqrt(5) - 1) / 2
    a, b = high - ratio * (high - low), low + ratio * (high - low)
    fa, fb = f(a), f(b)
    while high - low > 1e-7:
        if fa >= fb:
            high, b, fb = b, a, fa
            a = high - ratio * (high - low)
            fa = f(a)
        else:
            low, a, fa = a, b, fb
            b = low + ratio * (high - low)
            fb = f(b)
    return float((low + high) / 2)


def _crossing(f: Callable[[float], float], level: float, inside: float, end: float) -> float:
    """Where f comes down to `level` between a point above it and `end` (which is returned if it never does)."""
    if f(end) > level:
        return end
    outside = end
    while abs(outside - inside) > 1e-7:
        middle = (inside + outside) / 2
        inside, outside = (middle, outside) if f(middle) > level else (inside, middle)
    return float((inside + outside) / 2)
