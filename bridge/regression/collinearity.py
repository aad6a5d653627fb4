"""How far the predictors overlap: generalised variance inflation, condition indexes, variance shares.

Fox & Monette (1992) for terms of several columns; Belsley, Kuh & Welsch (1980) for condition indexes and shares
(columns scaled to length 1, intercept included, not centred). Without an intercept variance inflation is about zero,
not about the means. Weighted fits: of the rows times the roots of their weights.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import solve_triangular

from bridge.regression.kernel import Kernel
from bridge.regression.results import Collinearity, TermVif

Array = NDArray[np.float64]


def measure(kernel: Kernel) -> Collinearity:
    """Everything from R: no further pass over the rows."""
    r = solve_triangular(kernel.r_inverse, np.eye(kernel.p))
    indexes, shares = _decomposition(kernel, r)
    return Collinearity(_term_vifs(kernel, r), indexes, shares)


def _decomposition(kernel: Kernel, r: Array) -> tuple[Array, Array]:
    """Condition indexes (p,), largest last, and the share of each coefficient's variance tied to each, (p, p).

    The singular values of R, its columns scaled to length 1, and those of its inverse: each is taken from the side on
    which it is among the large ones, where rounding does not reach it.
    """
    lengths = np.sqrt(np.sum(r**2, axis=0))
    _, values, right = np.linalg.svd(r / lengths)
    left, inverse_values, _ = np.linalg.svd(kernel.r_inverse * lengths[:, None])
    middle = np.sqrt(values[0] / inverse_values[0])
    small = 1 / inverse_values[::-1] < middle
    values = np.where(small, 1 / inverse_values[::-1], values)
    right = np.where(small[:, None], left.T[::-1], right)
    parts = (right / values[:, None]) ** 2
    return values[0] / values, parts / parts.sum(axis=0)


def _term_vifs(kernel: Kernel, r: Array) -> tuple[TermVif, ...]:
    """GVIF = det(correlations within the term) x det(their block of the inverse of all correlations).

    Both determinants are squares of products down the diagonal of a triangle: that of the term's own columns in the
    coordinates of Q (without the intercept's), and that of their rows of R^-1.
    """
    places: dict[str, list[int]] = {}
    for j, column in enumerate(kernel.columns):
        if column.factors:
            places.setdefault(column.term, []).append(j)
    found = []
    for term, at in places.items():
        log = max(_volume(r[int(kernel.intercept) :, at]) + _volume(kernel.r_inverse[at].T), 0.0)
        found.append(TermVif(term, len(at), math.exp(min(2 * log, 700.0)), math.exp(log / len(at))))
    return tuple(found)


def _volume(columns: Array) -> float:
    """The logarithm of the volume that the columns span."""
    return float(np.sum(np.log(np.abs(np.diag(np.linalg.qr(columns, mode="r"))))))
