"""Auxiliary regressions of the tests: how much of a series other columns explain; the rows that they are judged on."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import qr

from bridge.regression.kernel import Kernel, basis_rows

INDEPENDENT = 1e-9  # a pivot below this, relative to the largest, belongs to a column that adds nothing

BLOCK = 2048  # rows factorised at a time
SEED = 20_260_102

Array = NDArray[np.float64]
Rows = NDArray[np.intp]


def orthonormal(kernel: Kernel, rows: slice | Rows) -> Array:
    """The rows asked for of Q = sqrt(W) X R^-1, shape (k, p). Use blocks of a few thousand rows for many rows."""
    q = basis_rows(kernel, rows)
    return q if kernel.weights is None else q * np.sqrt(kernel.weights[rows])[:, None]


def even_sample(n: int, most: int) -> Rows:
    """At most so many of n rows, in order: one from each stretch of equal length, at a fixed random place in it.

    A fixed stride would meet what repeats along the rows always at the same point.
    """
    if n <= most:
        return np.arange(n)
    edges = np.arange(most + 1) * n // most
    found: Rows = edges[:-1] + np.random.Generator(np.random.PCG64(SEED)).integers(0, np.diff(edges))
    return found


def spanned(columns: Array, least: float = INDEPENDENT) -> Array:
    """An orthonormal basis (n, rank) of columns (n, k), each scaled to length 1 first; zero columns add nothing.

    `least`: the pivot, relative to the largest, at which a column still adds something.
    """
    lengths = np.sqrt(np.sum(columns**2, axis=0))
    kept = columns[:, lengths > 0] / lengths[lengths > 0]
    if kept.shape[1] == 0:
        return np.empty((len(columns), 0))
    q, r, _ = qr(kept, mode="economic", pivoting=True, check_finite=False)
    size = np.abs(np.diag(r))
    found: Array = q[:, size > least * size[0]]
    return found


def explained(columns: Array, series: Array) -> tuple[float, int]:
    """R2 about its mean of a series (n,) on columns (n, k) and a constant, and the columns' rank besides that."""
    centred = columns - columns.mean(axis=0)
    # What is left of a constant column after centring is rounding, not variation.
    centred = centred[:, np.sqrt(np.sum(centred**2, axis=0)) > 1e-12 * np.sqrt(np.sum(columns**2, axis=0))]
    rest = series - series.mean()
    triangle = _triangle(np.column_stack([centred / np.sqrt(np.sum(centred**2, axis=0)), rest]))
    q = spanned(triangle[:, :-1])
    total = float(rest @ rest)
    if total == 0:
        return 0.0, q.shape[1]
    return float(np.sum((q.T @ triangle[:, -1]) ** 2)) / total, q.shape[1]


def _triangle(columns: Array) -> Array:
    """Fewer rows with the same cross-products, from orthogonal factors block by block."""
    while len(columns) > 2 * max(BLOCK, columns.shape[1]):
        step = max(BLOCK, 2 * columns.shape[1])
        parts = [columns[start : start + step] for start in range(0, len(columns), step)]
        columns = np.vstack([np.linalg.qr(part, mode="r") for part in parts])
    return columns
