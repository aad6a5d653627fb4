"""Tests of what a fit takes for granted: even spread, normality, independence, the right form.

Weighted fits: residuals, and the columns of the tests of order and form, are times the roots of the weights; Koenker's
and White's test look how the spread of those residuals goes with the columns as they are. statsmodels'
het_breuschpagan, het_white, acorr_breusch_godfrey and linear_reset have the same definitions for unweighted fits with
an intercept. Without one, Koenker's and White's auxiliary regressions still have a constant (theirs are then refused),
Breusch and Godfrey's has none (theirs adds one).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy import special

from bridge.regression import durbinwatson, normality
from bridge.regression.anova import ratio
from bridge.regression.auxiliary import Rows, even_sample, explained, orthonormal, spanned
from bridge.regression.covariance import default_lags
from bridge.regression.kernel import Kernel
from bridge.regression.results import Check
from bridge.regression.spec import Levels, ModelSpec, Observations
from bridge.regression.tails import f_upper
from bridge.regression.threads import over_blocks

MOST_WHITE = 60  # columns of White's auxiliary regression; with more the pruned form serves
MOST_ROWS = 50_000  # above, an even sample of the rows serves for the tests of spread and form

Array = NDArray[np.float64]
NAN = float("nan")


def run(kernel: Kernel, spec: ModelSpec, observations: Observations) -> tuple[Check, ...]:
    """Every test that applies, in the order in which they are told."""
    if kernel.rss == 0 or kernel.residual_sd == 0:
        return ()
    rows = even_sample(kernel.n, MOST_ROWS)
    weight = np.ones(kernel.n) if kernel.weights is None else np.sqrt(kernel.weights)
    residual = kernel.residual * weight
    found = [_spread(kernel, residual, rows), _spread_any_form(kernel, residual, rows), normality.check(residual)]
    order = in_order(spec, observations)
    found.append(_serial(kernel, residual, order, ordered=spec.order is not None))
    if spec.order is not None:
        found.append(_serial_order(kernel, residual, order, spec.lags))
    found.append(_form(kernel, residual, weight, rows))
    if kernel.sums.pure_error is not None:
        found.append(_lack_of_fit(kernel))
    return tuple(found)


def in_order(spec: ModelSpec, observations: Observations) -> Rows:
    """The rows (n,) sorted by the order column, equal ones as they stand; without one, as they stand."""
    if spec.order is None:
        return np.arange(observations.n)
    column = observations.columns[spec.order]
    return np.argsort(column.codes if isinstance(column, Levels) else column, kind="stable")


def _sampled(kernel: Kernel, rows: Rows) -> str:
    return f"judged on {len(rows):,} rows spread evenly" if len(rows) < kernel.n else ""


# --- spread ----------------------------------------------------------------------------------------


def _spread(kernel: Kernel, residual: Array, rows: Rows) -> Check:
    """Breusch & Pagan's test in Koenker's (1981) form: n R2 of the squared residuals on the design's columns."""
    r2, df = explained(kernel.x[rows], residual[rows] ** 2)
    return _lagrange("spread", "Breusch-Pagan, Koenker's form", r2 * len(rows), df, "Koenker 1981", kernel, rows)


def _spread_any_form(kernel: Kernel, residual: Array, rows: Rows) -> Check:
    """White's (1980) test: also squares and products of the columns; with too many, of the fitted values only."""
    slopes = kernel.x[rows][:, int(kernel.intercept) :]
    wide = slopes.shape[1] * (slopes.shape[1] + 3) // 2
    pruned = wide > MOST_WHITE or wide > len(rows) // 3
    if pruned:
        fitted = kernel.fitted[rows] - kernel.fitted[rows].mean()
        columns = np.column_stack([fitted, fitted**2])
        method, source = "White, fitted values and their squares", "White 1980, special form (Wooldridge, textbook)"
    else:
        first, second = np.triu_indices(slopes.shape[1])
        columns = np.column_stack([slopes, slopes[:, first] * slopes[:, second]])
        method, source = "White", "White 1980"
    r2, df = explained(columns, residual[rows] ** 2)
    return _lagrange("spread_any_form", method, r2 * len(rows), df, source, kernel, rows)


def _lagrange(key: str, method: str, statistic: float, df: int, source: str, kernel: Kernel, rows: Rows) -> Check:
    p = float(special.chdtrc(df, statistic)) if df > 0 else NAN
    return Check(key, method, "chi square", statistic, (float(df),), p, NAN, source, _sampled(kernel, rows))


# --- independence ----------------------------------------------------------------------------------


def _serial(kernel: Kernel, residual: Array, order: Rows, ordered: bool) -> Check:
    """Durbin & Watson's d, with the first-order correlation of the residuals as its estimate."""
    e = residual[order]
    d = durbinwatson.statistic(e)
    correlation = float(e[1:] @ e[:-1]) / float(e @ e)
    note = "" if ordered else "in the order of the rows on the sheet; give an order column if there is another"
    if kernel.n > durbinwatson.MOST_EXACT:
        note = f"{note}{'; ' if note else ''}p approximate (beta distribution)"
    p = durbinwatson.p_value(d, kernel, order)
    return Check("serial", "Durbin-Watson", "d", d, (), p, correlation, "Durbin & Watson 1950, 1951", note)


def _serial_order(kernel: Kernel, residual: Array, order: Rows, asked: int | None) -> Check:
    """Breusch (1978) and Godfrey's (1978) test: n R2 of the residuals on the design and their own lags."""
    lags = asked if asked else max(default_lags(kernel.n), 1)
    source = "Breusch 1978, Godfrey 1978"
    if lags >= kernel.df_residual:
        note = "too few rows for so many lags"
        return Check("serial_order", "Breusch-Godfrey", "chi square", NAN, (float(lags),), NAN, NAN, source, note)
    e = residual[order]
    statistic = kernel.n * _by_own_lags(kernel, e, order, lags) / float(e @ e)
    p = float(special.chdtrc(lags, statistic))
    return Check("serial_order", "Breusch-Godfrey", "chi square", statistic, (float(lags),), p, NAN, source)


def _by_own_lags(kernel: Kernel, e: Array, order: Rows, lags: int) -> float:
    """Sum of squares of the residuals (n,) that the design and their lags explain; zeros before the first row."""
    padded = np.concatenate([np.zeros(lags), e])

    def work(rows: slice) -> Array:
        windows = np.lib.stride_tricks.sliding_window_view(padded[rows.start : rows.stop + lags], lags + 1)
        q = orthonormal(kernel, order[rows])
        return np.asarray(np.hstack([q, windows]).T @ windows)

    products = np.sum(over_blocks(kernel.n, work), axis=0)
    across, own = products[: kernel.p], products[kernel.p :]
    own = own - across.T @ across  # beyond the design; the last is the residual itself
    values, vectors = np.linalg.eigh(own[:-1, :-1])
    known = values > 1e-12 * values[-1]
    beyond = float(np.sum((vectors[:, known].T @ own[:-1, -1]) ** 2 / values[known]))
    return beyond + float(np.sum(across[:, -1] ** 2))


# --- form ------------------------------------------------------------------------------------------


def _form(kernel: Kernel, residual: Array, weight: Array, rows: Rows) -> Check:
    """Ramsey's (1969) RESET: F of the second and third power of the fitted values, added to the design."""
    n, source = len(rows), "Ramsey 1969"
    spread = float(np.ptp(kernel.fitted[rows]))
    if spread == 0:
        return Check("form", "RESET", "F", NAN, (), NAN, NAN, source, "the fitted values do not vary")
    q = orthonormal(kernel, rows)
    if n < kernel.n:
        q = spanned(q)
    # Powers about the middle span the same space beside the intercept and the fitted values.
    middle = float(kernel.fitted[rows].mean()) if kernel.intercept else 0.0
    fitted = (kernel.fitted[rows] - middle) / spread
    e = residual[rows] - q @ (q.T @ residual[rows])
    gain, added = _gain(q, np.column_stack([fitted**2, fitted**3]) * weight[rows][:, None], e)
    rest = n - q.shape[1] - added
    if added == 0 or rest < 1:
        note = "the powers of the fitted values are already in the model" if added == 0 else "too few rows"
        return Check("form", "RESET", "F", NAN, (), NAN, NAN, source, note)
    error = (float(e @ e) - gain) / rest
    f = gain / added / error if error > 0 else math.inf
    df = (float(added), float(rest))
    return Check("form", "RESET", "F", f, df, f_upper(f, df), NAN, source, _sampled(kernel, rows))


def _gain(q: Array, columns: Array, residual: Array) -> tuple[float, int]:
    """Sum of squares of the residual (n,) that columns (n, k) explain beyond q (n, p, orthonormal), and their rank."""
    scaled = columns / np.sqrt(np.sum(columns**2, axis=0))
    rest = scaled - q @ (q.T @ scaled)
    rest -= q @ (q.T @ rest)
    rest = rest[:, np.sqrt(np.sum(rest**2, axis=0)) > 1e-9]
    basis = spanned(rest)
    return float(np.sum((basis.T @ residual) ** 2)), basis.shape[1]


def _lack_of_fit(kernel: Kernel) -> Check:
    """The residual sum less pure error, against pure error (rows with equal predictors)."""
    pure, pure_df = kernel.sums.pure_error, kernel.sums.pure_error_df
    assert pure is not None
    df = kernel.df_residual - pure_df
    if df < 1 or pure_df < 1:
        note = "as many coefficients as different rows"
        return Check("lack_of_fit", "lack of fit", "F", NAN, (), NAN, NAN, "common practice", note)
    f = ratio((kernel.sums.residual - pure) / df, pure / pure_df)  # type: ignore[operator]  # both Decimal or both float
    p = f_upper(f, (df, pure_df))
    return Check("lack_of_fit", "lack of fit against pure error", "F", f, (float(df), float(pure_df)), p, NAN, _LACK)


_LACK = "NIST/SEMATECH e-Handbook 4.4.4.6"
