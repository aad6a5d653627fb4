"""From the fitted scale back to the response's own units (Duan 1983 for a log, its analogue for a root)."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from bridge.regression.results import BackTransform

Floats = NDArray[np.float64]


def mean(eta: Floats, back: BackTransform | None) -> Floats:
    """The mean response at `eta` (any shape), original units; `back` None: the response is not transformed."""
    if back is None:
        return eta
    if back.kind == "log":
        return np.asarray(np.exp(eta) * back.smear)
    return np.asarray(eta * eta + 2 * eta * back.shift + back.smear)


def median(eta: Floats, back: BackTransform | None) -> Floats:
    """The median response at `eta`; also carries the ends of an interval for a single case across."""
    if back is None:
        return eta
    return np.asarray(np.exp(eta) if back.kind == "log" else np.maximum(eta, 0.0) ** 2)
