"""Auxiliary regressions of the tests: how much of a series other columns explain."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import qr

INDEPENDENT = 1e-9  # a pivot below this, relative to the largest, belongs to a column that adds nothing

Array = NDArray[np.float64]


def spanned(columns: Array) -> Array:
    """An orthonormal basis (n, rank) of columns (n, k), each scaled to length 1 first; zero columns add nothing."""
    lengths = np.sqrt(np.sum(columns**2, axis=0))
    kept = columns[:, lengths > 0] / lengths[lengths > 0]
    if kept.shape[1] == 0:
        return np.empty((len(columns), 0))
    q, r, _ = qr(kept, mode="economic", pivoting=True, check_finite=False)
    size = np.abs(np.diag(r))
    found: Array = q[:, size > INDEPENDENT * size[0]]
    return found


def explained(columns: Array, series: Array) -> tuple[float, int]:
    """R2 about its mean of a series (n,) on columns (n, k) and a constant, and the columns' rank besides that."""
    centred = columns - columns.mean(axis=0)
    # What is left of a constant column after centring is rounding, not variation.
    centred = centred[:, np.sqrt(np.sum(centred**2, axis=0)) > 1e-12 * np.sqrt(np.sum(columns**2, axis=0))]
    q = spanned(centred)
    rest = series - series.mean()
    total = float(rest @ rest)
    if total == 0:
        return 0.0, q.shape[1]
    return float(np.sum((q.T @ rest) ** 2)) / total, q.shape[1]
