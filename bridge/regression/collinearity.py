"""How far the predictors overlap: generalised variance inflation, condition indexes, variance shares.

Fox & Monette (1992) for terms of several columns; Belsley, Kuh & Welsch (1980) for condition indexes and shares
(columns scaled to length 1, intercept included, not centred).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import solve_triangular

from bridge.regression.kernel import Kernel
from bridge.regression.results import Collinearity, TermVif

Array = NDArray[np.float64]


def measure(kernel: Kernel) -> Collinearity:
    """Everything from R and the columns' sums of squares; no further pass over wide data than the terms' own."""
    indexes, shares = _decomposition(kernel)
    return Collinearity(_term_vifs(kernel), indexes, shares)


def _decomposition(kernel: Kernel) -> tuple[Array, Array]:
    """Condition indexes (p,), largest last, and the share of each coefficient's variance tied to each, (p, p)."""
    r = solve_triangular(kernel.r_inverse, np.eye(kernel.p))
    scaled = r / np.sqrt(np.sum(r**2, axis=0))
    _, values, right = np.linalg.svd(scaled)
    parts = (right / values[:, None]) ** 2
    return values[0] / values, parts / parts.sum(axis=0)


def _term_vifs(kernel: Kernel) -> tuple[TermVif, ...]:
    """GVIF = det(correlations within the term) x det(their block of the inverse of all correlations)."""
    inverse = kernel.r_inverse @ kernel.r_inverse.T
    places: dict[str, list[int]] = {}
    for j, column in enumerate(kernel.columns):
        if column.factors:
            places.setdefault(column.term, []).append(j)
    found = []
    for term, at in places.items():
        lengths = np.sqrt(kernel.column_ss[at])
        block = inverse[np.ix_(at, at)] * np.outer(lengths, lengths)
        within = _correlations(kernel, at, lengths) if len(at) > 1 else np.ones((1, 1))
        gvif = max(float(np.linalg.det(within) * np.linalg.det(block)), 1.0)
        found.append(TermVif(term, len(at), gvif, gvif ** (1 / (2 * len(at)))))
    return tuple(found)


def _correlations(kernel: Kernel, at: list[int], lengths: Array) -> Array:
    """Cross-products of a few columns, about their means with an intercept, over their lengths."""
    x = kernel.x[:, at]
    weights = np.ones(kernel.n) if kernel.weights is None else kernel.weights
    if kernel.intercept:
        x = x - weights @ x / weights.sum()
    return (x.T * weights) @ x / np.outer(lengths, lengths)
