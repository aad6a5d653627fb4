"""Least squares for many rows: two passes over blocks of rows, with a bound for the digits it is good for.

The columns are shifted to about their means, then factorised twice by Cholesky's method ("CholeskyQR2": Yamamoto,
Nakatsukasa, Yanagisawa & Fukaya 2015), which gives what a Householder factorisation gives while the columns are not
nearly dependent; where they are, nothing is returned and the exact path takes over. The second pass also refines the
coefficients from the residuals and leaves the leverages, so that the orthonormal matrix is never formed. The bound
takes rounding errors of different rows as independent (Higham & Mary 2019, "A new approach to probabilistic rounding
error analysis"), with a factor to spare.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from bridge.regression import design, replicates, sums
from bridge.regression.kernel import Kernel, Sums
from bridge.regression.results import DesignColumn
from bridge.regression.spec import ModelSpec, Observations
from bridge.regression.threads import over_blocks

UNIT = 2.0**-53
SAFETY = 4.0
NEARLY_DEPENDENT = 1e-5  # sine of the angle between a column and those before it
ORTHONORMAL = 1e-11  # how far the first factorisation may leave the columns from it: leverages keep those digits

Array = NDArray[np.float64]
Values = TypeVar("Values", Array, NDArray[np.intp])


@dataclass(frozen=True, slots=True)
class _Shifted:
    """The problem about its shifts: x (n, p) as it is, `shift` (p,) and `y_shift`; `root` (n,) of the weights."""

    columns: tuple[DesignColumn, ...]
    x: Array
    y: Array
    weights: Array | None
    root: Array | None
    shift: Array
    y_shift: float

    def block(self, rows: slice) -> Array:
        """Shifted, weighted rows with the response as last column."""
        both = np.empty((rows.stop - rows.start, len(self.columns) + 1), order="F")
        np.subtract(self.x[rows], self.shift, out=both[:, :-1])
        np.subtract(self.y[rows], self.y_shift, out=both[:, -1])
        if self.root is not None:
            both *= self.root[rows, None]
        return both


@dataclass(frozen=True, slots=True)
class _Solved:
    """About the shifts: coefficients and what they lack, R^-1, weighted residuals' sum, total; leverage, residual."""

    coefficients: Array
    low: Array
    r_inverse: Array
    rss: float
    tss: float
    leverage: Array
    residual: Array
    condition: float  # about the shifts


def fit(
    spec: ModelSpec,
    observations: Observations,
    columns: tuple[DesignColumn, ...],
    y: Array,
    weights: Array | None,
) -> Kernel | None:
    """The fit on all `columns`, or None where they are too nearly dependent for doubles.

    `y` (n,) on the fitted scale, `weights` (n,) or None.
    """
    problem = _shifted(spec, observations, columns, y, weights)
    products = _cross_products(problem, observations)
    factor = _factor(products[:-1, :-1]) if np.isfinite(products).all() else None
    if factor is None:
        return None
    solved = _solve(problem, products, factor, spec.intercept)
    return None if solved is None else _kernel(spec, observations, problem, products, solved)


def _shifted(
    spec: ModelSpec, observations: Observations, columns: tuple[DesignColumn, ...], y: Array, weights: Array | None
) -> _Shifted:
    """About the means of a sample of the rows: only nearness matters."""
    x = np.empty((observations.n, len(columns)), order="F")
    root = None if weights is None else np.sqrt(weights)
    if not spec.intercept:
        return _Shifted(columns, x, y, weights, root, np.zeros(len(columns)), 0.0)
    shift = design.matrix(columns, observations, _sample(np.arange(observations.n))).mean(axis=0)
    shift[0] = 0.0
    return _Shifted(columns, x, y, weights, root, shift, float(_sample(y).mean()))


def _cross_products(problem: _Shifted, observations: Observations) -> Array:
    """First pass: fills x, and sums the products of the shifted columns and response, (p + 1, p + 1)."""

    def work(rows: slice) -> Array:
        with np.errstate(over="ignore", invalid="ignore"):  # looked for in the sums
            design.matrix(problem.columns, observations, rows, out=problem.x[rows])
            both = problem.block(rows)
            return np.asarray(both.T @ both)

    with np.errstate(invalid="ignore"):
        return _total(over_blocks(observations.n, work))


def _factor(products: Array) -> tuple[Array, float] | None:
    """R^-1 of X'WX = R'R and the condition number of the scaled columns; None: nearly dependent."""
    lengths = np.sqrt(np.diag(products))
    if not lengths.all():
        return None
    try:
        scaled = np.linalg.cholesky(products / np.outer(lengths, lengths)).T
    except np.linalg.LinAlgError:
        return None
    if np.diag(scaled).min() < NEARLY_DEPENDENT:
        return None
    inverse = np.triu(np.linalg.inv(scaled))
    return inverse / lengths[:, None], float(np.linalg.norm(scaled, 2) * np.linalg.norm(inverse, 2))


def _solve(problem: _Shifted, products: Array, factor: tuple[Array, float], intercept: bool) -> _Solved | None:
    """Second pass: leverages, residuals, and the second factorisation with which coefficients are refined."""
    first, condition = factor
    start = first @ (first.T @ products[:-1, -1])
    to_basis = np.block([[first, -start[:, None]], [np.zeros(len(start)), np.ones(1)]])
    n = len(problem.y)
    leverage, residual = np.empty(n), np.empty(n)

    def work(rows: slice) -> Array:
        both = to_basis.T @ problem.block(rows).T
        residual[rows] = both[-1]
        leverage[rows] = np.einsum("ij,ij->j", both[:-1], both[:-1])
        return np.asarray(both @ both.T)

    again = _total(over_blocks(n, work))
    if np.abs(again[:-1, :-1] - np.eye(len(start))).max() > ORTHONORMAL:
        return None
    second = _factor(again[:-1, :-1])
    assert second is not None
    r_inverse = first @ second[0]
    change = r_inverse @ (second[0].T @ again[:-1, -1])
    coefficients = start + change
    tss = products[-1, -1] - (products[0, -1] ** 2 / products[0, 0] if intercept else 0.0)
    explained = second[0].T @ again[:-1, -1]
    if problem.root is not None:
        residual /= problem.root
    if np.abs(problem.block(slice(0, 1000))[:, :-1] @ change).max() > 1e-15 * np.sqrt(again[-1, -1] / n):
        _take_off(problem, change, residual)
    return _Solved(
        coefficients,
        (start - coefficients) + change,
        r_inverse,
        float(again[-1, -1] - explained @ explained),
        float(tss),
        leverage,
        residual,
        condition,
    )


def _take_off(problem: _Shifted, change: Array, residual: Array) -> None:
    def work(rows: slice) -> None:
        residual[rows] -= (problem.x[rows] - problem.shift) @ change

    over_blocks(len(residual), work)


def _total(products: list[Array]) -> Array:
    """The blocks' sums added up with what each addition rounds away (Knuth's two-sum)."""
    total = np.zeros_like(products[0])
    lost = np.zeros_like(total)
    for product in products:
        new = total + product
        part = new - total
        lost += (total - (new - part)) + (product - part)
        total = new
    return np.asarray(total + lost)


# --- back from the shifts -----------------------------------------------------------------------


def _kernel(spec: ModelSpec, observations: Observations, problem: _Shifted, products: Array, solved: _Solved) -> Kernel:
    n, p = problem.x.shape
    columns, weights = problem.columns, problem.weights
    coefficients, low = _unshifted(problem, solved, spec.intercept)
    r_inverse = solved.r_inverse.copy()
    r_inverse[0] -= problem.shift @ solved.r_inverse
    squares = about_mean = np.diag(products)[:-1].copy()
    if spec.intercept:
        about_mean = squares - products[0, :-1] ** 2 / products[0, 0]
        squares = squares + 2 * problem.shift * products[0, :-1] + problem.shift**2 * products[0, 0]
    lengths = np.sqrt(squares)
    scaled = r_inverse * lengths[:, None]
    slopes = np.linalg.norm(r_inverse, axis=1)
    sd = np.sqrt(solved.rss / (n - p))
    groups = replicates.find(spec, observations)
    return Kernel(
        columns=columns,
        intercept=spec.intercept,
        x=problem.x,
        y=problem.y,
        weights=weights,
        coefficients=coefficients,
        coefficients_low=low,
        r_inverse=r_inverse,
        standard_errors=sd * slopes,
        column_ss=about_mean,
        rss=solved.rss,
        tss=solved.tss,
        residual_sd=float(sd),
        df_residual=n - p,
        fitted=problem.y - solved.residual,
        residual=solved.residual,
        leverage=np.minimum(solved.leverage, 1.0),
        basis=None,
        sums=Sums(
            residual=solved.rss,
            total=solved.tss,
            last=sums.given_all_others(columns, coefficients, r_inverse),
            in_order=sums.one_after_another(columns, np.linalg.solve(solved.r_inverse, solved.coefficients) ** 2),
            pure_error=replicates.pure_error_in_doubles(groups, problem.y, weights) if groups else None,
            pure_error_df=groups.df if groups else 0,
        ),
        condition_number=float(np.linalg.norm(scaled, 2) * np.linalg.norm(np.linalg.inv(scaled), 2)),
        digits=_digits(problem, solved, coefficients, slopes, lengths),
    )


def _unshifted(problem: _Shifted, solved: _Solved, intercept: bool) -> tuple[Array, Array]:
    """The coefficients as high and low parts; the intercept's cancellation is done in fractions."""
    exact = [Fraction(b) + Fraction(c) for b, c in zip(solved.coefficients.tolist(), solved.low.tolist(), strict=True)]
    if intercept:
        moved = (b * Fraction(m) for b, m in zip(exact, problem.shift.tolist(), strict=True))
        exact[0] += Fraction(problem.y_shift) - sum(moved, Fraction(0))
    high = [float(b) for b in exact]
    return np.array(high), np.array([float(b - Fraction(h)) for b, h in zip(exact, high, strict=True)])


def _digits(problem: _Shifted, solved: _Solved, coefficients: Array, slopes: Array, lengths: Array) -> float:
    """What the worst coefficient or standard error is good for.

    Each row's rounding error is about a unit of the sum of its terms' sizes; a coefficient gathers them by its row
    of R^-1, and the columns' rounding against the residuals by two. A column far from zero for its spread has its
    own decimals rounded coarsely. The standard errors have the errors of the factorisation besides.
    """
    n = len(problem.y)
    weight = 1.0 if problem.root is None else problem.root**2
    share = np.array([_share(column) for column in problem.x.T])
    squares = (coefficients * lengths) ** 2 @ share + np.sum(weight * problem.y**2) * _share(problem.y)
    squares += solved.rss * np.sum((slopes * lengths)[share > 0] ** 2) / n
    own = np.array([_coarse(column, shift) for column, shift in zip(problem.x.T, problem.shift, strict=True)])
    error = slopes * np.sqrt(squares + solved.tss / n) + np.abs(coefficients) * own
    if problem.shift.any():
        error[0] += np.abs(coefficients * problem.shift) @ own
    with np.errstate(divide="ignore", invalid="ignore"):
        worst = np.max(error / np.abs(coefficients))
    return float(min(-np.log10(SAFETY * UNIT * max(worst, solved.condition, own.max(), 1.0)), 15.0))


def _share(column: Array) -> float:
    """The squared share of the values' rounding that is left when rows average it: none of whole numbers'.

    Equal values are rounded alike, so what counts is how many different ones there are, judged by the pairs that
    meet in a sample.
    """
    sample = _sample(column)
    if (sample == np.rint(sample)).all():
        return 0.0
    size, different = len(sample), len(np.unique(sample))
    if 2 * different <= size:
        return 1.0
    return 1.0 / min(len(column), size**2 / (2 * (size - different) + 1))


def _coarse(column: Array, shift: float) -> float:
    """The values' rounding by their spread, in units of the last place: none for whole numbers."""
    sample = _sample(column)
    spread = float(np.sqrt(np.mean((sample - shift) ** 2)))
    return float(np.sqrt(np.mean(sample**2) * _share(column))) / spread if spread else 0.0


def _sample(column: Values) -> Values:
    return column[:: max(1, len(column) // 1000)]
