"""Which models are contained in which, found from what their columns span, and the partial F of what comes on top.

Where the larger model's standard errors are not the ordinary ones, F is Wald's, from its covariance: with the ordinary
covariance the two are the same number.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import solve_triangular

from bridge.regression.auxiliary import Rows, even_sample, spanned
from bridge.regression.results import Design, ModelResult, Nested
from bridge.regression.spec import Errors, FitBy
from bridge.regression.tails import f_upper
from bridge.regression.threads import over_blocks

Array = NDArray[np.float64]

SPANNED = 1e-9  # a column's distance from another model's columns, over its length, below which it is among them


def compare(results: Mapping[str, ModelResult]) -> tuple[Nested, ...]:
    """Every pair in which the smaller model's columns are combinations of the larger's, in the order of the models.

    Both must be least squares fits of the same response (and shape, and weights) on the same rows.
    """
    found = []
    for small, a in results.items():
        for large, b in results.items():
            if small != large and _comparable(a, b) and _spans(a, b):
                found.append(_partial_f(small, a, large, b))
    return tuple(found)


def _comparable(a: ModelResult, b: ModelResult) -> bool:
    same = a.spec.response == b.spec.response and a.spec.response_shape is b.spec.response_shape
    plain = a.spec.fit_by is b.spec.fit_by is FitBy.LEAST_SQUARES
    larger = b.fit.df_residual < a.fit.df_residual
    if not (same and plain and larger and a.fit.n == b.fit.n):
        return False
    weights = (a.fit.weights is None) == (b.fit.weights is None)
    if weights and a.fit.weights is not None and b.fit.weights is not None:
        weights = np.array_equal(a.fit.weights, b.fit.weights)
    return weights and np.array_equal(a.observed, b.observed)


def _spans(a: ModelResult, b: ModelResult) -> bool:
    """Whether b's columns span a's: judged on a few rows first, which shows most pairs apart."""
    few = even_sample(a.fit.n, 20 * len(b.design.columns))
    return _spans_on(a, b, few) and (len(few) == a.fit.n or _spans_on(a, b, np.arange(a.fit.n)))


def _spans_on(a: ModelResult, b: ModelResult, rows: Rows) -> bool:
    theirs = b.design.matrix[rows]
    others = _not_among(a.design, b.design, rows)
    if not others:
        return True
    weight = np.ones(len(rows)) if b.fit.weights is None else np.sqrt(b.fit.weights[rows])
    q = spanned(theirs * weight[:, None], 0.0)
    x = a.design.matrix[rows][:, others] * weight[:, None]
    rest = x - q @ (q.T @ x)
    rest -= q @ (q.T @ rest)
    return bool((np.linalg.norm(rest, axis=0) <= SPANNED * np.linalg.norm(x, axis=0)).all())


def _not_among(a: Design, b: Design, rows: Rows) -> list[int]:
    """The columns of a that do not stand in b as they are."""
    known = {column.label: j for j, column in enumerate(b.columns)}

    def same(j: int) -> bool:
        at = known.get(a.columns[j].label)
        return at is not None and bool(np.array_equal(a.matrix[rows, j], b.matrix[rows, at]))

    return [j for j in range(len(a.columns)) if not same(j)]


def _partial_f(small: str, a: ModelResult, large: str, b: ModelResult) -> Nested:
    df, rest = a.fit.df_residual - b.fit.df_residual, b.fit.df_residual
    if b.spec.errors is not Errors.ORDINARY:
        f = _wald(a, b, df)
        return Nested(small, large, f, df, int(b.fit.df_interval), f_upper(f, (df, b.fit.df_interval)), robust=True)
    gained = max(a.fit.ss_residual - b.fit.ss_residual, 0.0) / df
    error = b.fit.ss_residual / rest
    f = gained / error if error > 0 else (float("inf") if gained > 0 else float("nan"))
    return Nested(small, large, f, df, rest, f_upper(f, (df, rest)))


def _wald(a: ModelResult, b: ModelResult, df: int) -> float:
    """Wald's F that b's coefficients in the directions beyond a's columns are zero; NaN where its rank is too low."""
    fit, size = b.fit, len(b.fit.coefficients)
    r = solve_triangular(fit.r_inverse, np.eye(size))
    spanned_by_a = np.sum(over_blocks(fit.n, lambda rows: _products(a, b, rows)), axis=0)
    turned, _ = np.linalg.qr(spanned_by_a / np.sqrt(np.sum(spanned_by_a**2, axis=0)), mode="complete")
    beyond = turned[:, size - df :]
    root = beyond.T @ r @ fit.covariance_factor
    left, values, _ = np.linalg.svd(root)
    if fit.df_interval < df or values[-1] <= 1e-7 * values[0]:
        return float("nan")
    moved = left.T @ (beyond.T @ (r @ fit.coefficients))
    return float(np.sum((moved / values) ** 2)) / df


def _products(a: ModelResult, b: ModelResult, rows: slice) -> Array:
    """a's columns in the coordinates of b's orthonormal basis, the rows' part."""
    q = b.design.matrix[rows] @ b.fit.r_inverse
    weighted = q if b.fit.weights is None else q * b.fit.weights[rows, None]
    return np.asarray(weighted.T @ a.design.matrix[rows])
