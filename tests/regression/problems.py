"""Small problems for the tests of single figures."""

from __future__ import annotations

import numpy as np

from bridge.regression.kernel import Kernel
from bridge.regression.leastsquares import solve
from bridge.regression.spec import Levels, ModelSpec, NumberTerm, Observations

TWO = (NumberTerm("a"), NumberTerm("b"))


def rows(seed: int = 0, n: int = 40, odd: float = 0.0, **columns: np.ndarray | Levels) -> Observations:
    """y on a and b, two decimals, with weights w, a time and ten groups; some responses off by `odd`."""
    rng = np.random.default_rng(seed)
    a, b = np.round(rng.uniform(0, 10, n), 2), np.round(rng.normal(5, 2, n), 2)
    noise = rng.standard_normal(n) * (0.3 + a / 10)
    noise[: max(n // 15, 1)] += odd
    made = {
        "a": a,
        "b": b,
        "y": np.round(20 + 2 * a - b + noise, 2),
        "w": np.round(rng.uniform(0.2, 3, n), 2),
        "time": rng.permutation(n).astype(float),
        "group": np.concatenate([np.arange(10), rng.integers(0, 10, n - 10)]).astype(float),
    }
    return Observations(made | columns, n)


def kernel(observations: Observations, **changes: object) -> Kernel:
    """The least-squares kernel of y on a and b."""
    return solve(ModelSpec("y", **({"terms": TWO} | changes)), observations).kernel
