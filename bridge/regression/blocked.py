"""Least squares for many rows: two passes over blocks of rows, with a bound for the digits it is good for.

Columns of typed decimals are taken as whole multiples of their last place, all are shifted to about their means, and
then factorised twice by Cholesky's method ("CholeskyQR2": Yamamoto, Nakatsukasa, Yanagisawa & Fukaya 2015). That gives
what a Householder factorisation gives while the columns are not nearly dependent; where they are, nothing is returned
and the exact path takes over. The second pass also refines the coefficients from the residuals and leaves the
leverages, so that the orthonormal matrix is never kept. The bound takes rounding errors of different rows as
independent (Higham & Mary 2019, "A new approach to probabilistic rounding error analysis"), with a factor to spare.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from bridge.regression import design, replicates, sums
from bridge.regression.kernel import Kernel, Sums
from bridge.regression.results import DesignColumn
from bridge.regression.spec import ModelSpec, Observations
from bridge.regression.threads import each_block, over_blocks
from bridge.regression.typed import common_places

UNIT = 2.0**-53
SAFETY = 8.0
NEARLY_DEPENDENT = 1e-5  # sine of the angle between a column and those before it
ORTHONORMAL = 1e-11  # how far the first factorisation may leave the columns from it: leverages keep those digits
SAMPLE = 1000

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class _Problem:
    """x (n, p) and y (n,) as they are; `root` (n,) of the weights.

    All columns, y last, are worked on as value x unit - shift, (p + 1,) each; `decimal` marks those whose values x
    unit are whole in every row, and are taken as whole.
    """

    columns: tuple[DesignColumn, ...]
    intercept: bool
    x: Array
    y: Array
    weights: Array | None
    root: Array | None
    unit: Array
    decimal: NDArray[np.bool_]
    shift: Array

    def values(self, rows: slice) -> Array:
        """Values x unit, typed decimals as whole numbers."""
        both = np.empty((rows.stop - rows.start, len(self.unit)), order="F")
        np.multiply(self.x[rows], self.unit[:-1], out=both[:, :-1])
        np.multiply(self.y[rows], self.unit[-1], out=both[:, -1])
        for j in np.flatnonzero(self.decimal):
            np.rint(both[:, j], out=both[:, j])
        return both

    def block(self, rows: slice) -> Array:
        """Shifted and weighted rows, y last."""
        return self.moved(self.values(rows), rows)

    def moved(self, values: Array, rows: slice) -> Array:
        """The same from values x unit, in place."""
        values -= self.shift
        if self.root is not None:
            values *= self.root[rows, None]
        return values

    def not_decimal(self, values: Array, rows: slice) -> NDArray[np.bool_]:
        """Which columns taken as decimals are not, in these rows."""
        cells = [*self.x[rows].T, self.y[rows]]
        wrong = np.zeros(len(cells), dtype=bool)
        for j in np.flatnonzero(self.decimal):
            wrong[j] = (values[:, j] / self.unit[j] != cells[j]).any()
        return wrong


@dataclass(frozen=True, slots=True)
class _Solved:
    """In units and about the shifts: coefficients and what they lack, R^-1, sums; leverage (n,), residual (n,)."""

    coefficients: Array
    low: Array
    r_inverse: Array
    rss: float
    tss: float
    leverage: Array
    residual: Array
    condition: float


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
    problem, products = _prepared(spec, observations, columns, y, weights)
    factor = _factor(products[:-1, :-1]) if np.isfinite(products).all() else None
    if factor is None:
        return None
    solved = _solve(problem, products, factor)
    return None if solved is None else _kernel(spec, observations, problem, products, solved)


# --- first pass ---------------------------------------------------------------------------------


def _prepared(
    spec: ModelSpec, observations: Observations, columns: tuple[DesignColumn, ...], y: Array, weights: Array | None
) -> tuple[_Problem, Array]:
    """The problem in units and about shifts judged from a sample, with its cross-products."""
    x = np.empty((observations.n, len(columns)), order="F")
    rows = np.arange(0, observations.n, max(1, observations.n // SAMPLE))
    sample = np.column_stack((design.matrix(columns, observations, rows), y[rows]))
    places = [common_places(column) for column in sample.T]
    unit = np.array([1.0 if k is None else 10.0**k for k in places])
    decimal = np.array([k is not None for k in places])
    shift = np.zeros(len(unit))
    if spec.intercept:  # only nearness to the means matters
        shift = (sample * unit).mean(axis=0)
        shift[decimal] = np.rint(shift[decimal])
        shift[0] = 0.0
    root = None if weights is None else np.sqrt(weights)
    problem = _Problem(columns, spec.intercept, x, y, weights, root, unit, decimal, shift)
    products, wrong = _cross_products(problem, observations)
    if not wrong.any():
        return problem, products
    back = np.where(wrong, unit, 1.0)
    problem = replace(problem, unit=unit / back, shift=shift / back, decimal=decimal & ~wrong)
    return problem, _cross_products(problem, observations)[0]


def _cross_products(problem: _Problem, observations: Observations) -> tuple[Array, NDArray[np.bool_]]:
    """Fills x; sums the products of the columns, y last, (p + 1, p + 1), and marks those that are not decimal."""
    wrong = np.zeros(len(problem.unit), dtype=bool)

    def work(rows: slice) -> Array:
        with np.errstate(over="ignore", invalid="ignore"):  # looked for in the sums
            design.matrix(problem.columns, observations, rows, out=problem.x[rows])
            values = problem.values(rows)
            wrong[problem.not_decimal(values, rows)] = True
            both = problem.moved(values, rows)
            return np.asarray(both.T @ both)

    with np.errstate(invalid="ignore"):
        return _total(each_block(observations.n, work)), wrong


def _total(products: Iterable[Array]) -> Array:
    """The blocks' sums added up with what each addition rounds away (Knuth's two-sum)."""
    total: Array = np.zeros(())
    lost: Array = np.zeros(())
    for product in products:
        new = total + product
        part = new - total
        lost = lost + ((total - (new - part)) + (product - part))
        total = new
    return np.asarray(total + lost)


# --- second pass --------------------------------------------------------------------------------


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


def _solve(problem: _Problem, products: Array, factor: tuple[Array, float]) -> _Solved | None:
    """Leverages, residuals, and the second factorisation with which coefficients are refined."""
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

    again = _total(each_block(n, work))
    if np.abs(again[:-1, :-1] - np.eye(len(start))).max() > ORTHONORMAL:
        return None
    second = _factor(again[:-1, :-1])
    assert second is not None
    explained = second[0].T @ again[:-1, -1]
    r_inverse = first @ second[0]
    change = r_inverse @ explained
    if problem.root is not None:
        residual /= problem.root
    rss = float(again[-1, -1] - explained @ explained)
    if np.abs(problem.block(slice(0, SAMPLE))[:, :-1] @ change).max() > 1e-15 * np.sqrt(rss / n):
        _take_off(problem, change, residual)
    coefficients = start + change
    tss = products[-1, -1] - (products[0, -1] ** 2 / products[0, 0] if problem.intercept else 0.0)
    low = (start - coefficients) + change
    return _Solved(coefficients, low, r_inverse, rss, float(tss), leverage, residual, condition)


def _take_off(problem: _Problem, change: Array, residual: Array) -> None:
    def work(rows: slice) -> None:
        residual[rows] -= (problem.values(rows) - problem.shift)[:, :-1] @ change

    over_blocks(len(residual), work)


# --- back in the columns' own terms -------------------------------------------------------------


def _kernel(spec: ModelSpec, observations: Observations, problem: _Problem, products: Array, solved: _Solved) -> Kernel:
    (n, p), unit, y_unit = problem.x.shape, problem.unit[:-1], problem.unit[-1]
    coefficients, low = _in_own_terms(problem, solved)
    r_inverse = solved.r_inverse * unit[:, None]
    if problem.intercept:
        r_inverse[0] -= problem.shift[:-1] @ solved.r_inverse
    about_mean, lengths = _column_squares(problem, products)
    rss, tss = solved.rss / y_unit**2, solved.tss / y_unit**2
    slopes = np.linalg.norm(r_inverse, axis=1)
    sd = float(np.sqrt(rss / (n - p)))
    residual = solved.residual / y_unit
    in_order = (np.linalg.solve(solved.r_inverse, solved.coefficients) / y_unit) ** 2
    scaled = r_inverse * lengths[:, None]
    groups = replicates.find(spec, observations)
    return Kernel(
        columns=problem.columns,
        intercept=problem.intercept,
        x=problem.x,
        y=problem.y,
        weights=problem.weights,
        coefficients=coefficients,
        coefficients_low=low,
        r_inverse=r_inverse,
        standard_errors=sd * slopes,
        column_ss=about_mean,
        rss=rss,
        tss=tss,
        residual_sd=sd,
        df_residual=n - p,
        fitted=problem.y - residual,
        residual=residual,
        leverage=np.minimum(solved.leverage, 1.0),
        basis=None,
        sums=Sums(
            residual=rss,
            total=tss,
            last=sums.given_all_others(problem.columns, coefficients, r_inverse),
            in_order=sums.one_after_another(problem.columns, in_order),
            pure_error=replicates.pure_error_in_doubles(groups, problem.y, problem.weights) if groups else None,
            pure_error_df=groups.df if groups else 0,
        ),
        condition_number=float(np.linalg.norm(scaled, 2) * np.linalg.norm(np.linalg.inv(scaled), 2)),
        digits=_digits(problem, solved, coefficients, slopes, lengths),
    )


def _in_own_terms(problem: _Problem, solved: _Solved) -> tuple[Array, Array]:
    """The coefficients as high and low parts; units and the intercept's cancellation are done in fractions."""
    exact = [Fraction(b) + Fraction(c) for b, c in zip(solved.coefficients.tolist(), solved.low.tolist(), strict=True)]
    *units, y_unit = map(Fraction, problem.unit.tolist())
    *shifts, y_shift = map(Fraction, problem.shift.tolist())
    if problem.intercept:
        exact[0] += y_shift - sum((b * m for b, m in zip(exact, shifts, strict=True)), Fraction(0))
    own = [b * unit / y_unit for b, unit in zip(exact, units, strict=True)]
    high = [float(b) for b in own]
    return np.array(high), np.array([float(b - Fraction(h)) for b, h in zip(own, high, strict=True)])


def _column_squares(problem: _Problem, products: Array) -> tuple[Array, Array]:
    """Sums of squares about the mean (about zero without intercept), and lengths, (p,) each."""
    squares = about_mean = np.diag(products)[:-1]
    shift = problem.shift[:-1]
    if problem.intercept:
        about_mean = squares - products[0, :-1] ** 2 / products[0, 0]
        squares = squares + 2 * shift * products[0, :-1] + shift**2 * products[0, 0]
    unit = problem.unit[:-1]
    return about_mean / unit**2, np.sqrt(squares) / unit


# --- how good it is -----------------------------------------------------------------------------


def _digits(problem: _Problem, solved: _Solved, coefficients: Array, slopes: Array, lengths: Array) -> float:
    """What the worst coefficient or standard error is good for.

    Each row's rounding error is about a unit of the sum of its terms' sizes; a coefficient gathers them by its row
    of R^-1, and the columns' rounding against the residuals by two. A column far from zero for its spread has its
    own decimals rounded coarsely. The standard errors have the errors of the factorisation besides.
    """
    n, y_unit = len(problem.y), problem.unit[-1]
    weight = 1.0 if problem.root is None else problem.root**2
    both = [*problem.x.T, problem.y]
    share = np.array([0.0 if whole else _share(column) for whole, column in zip(problem.decimal, both, strict=True)])
    squares = (coefficients * lengths) ** 2 @ share[:-1] + np.sum(weight * problem.y**2) * share[-1]
    squares += solved.rss / y_unit**2 * np.sum((slopes * lengths)[share[:-1] > 0] ** 2) / n
    means = problem.shift / problem.unit
    own = np.array([_coarse(column, m, s) for column, m, s in zip(both[:-1], means, share, strict=False)])
    error = slopes * np.sqrt(squares + solved.tss / y_unit**2 / n) + np.abs(coefficients) * own
    if problem.intercept:
        error[0] += np.abs(coefficients * means[:-1]) @ own
    with np.errstate(divide="ignore", invalid="ignore"):
        worst = np.max(error / np.abs(coefficients))
    return float(min(-np.log10(SAFETY * UNIT * max(worst, solved.condition, own.max(), 1.0)), 15.0))


def _share(column: Array) -> float:
    """The squared share of the values' rounding that is left when rows average it.

    Equal values are rounded alike, so what counts is how many different ones there are, judged by the pairs that
    meet in a sample.
    """
    sample = column[:: max(1, len(column) // SAMPLE)]
    size, different = len(sample), len(np.unique(sample))
    if 2 * different <= size:
        return 1.0
    return 1.0 / min(len(column), size**2 / (2 * (size - different) + 1))


def _coarse(column: Array, mean: float, share: float) -> float:
    """The values' rounding by their spread, in units of the last place."""
    sample = column[:: max(1, len(column) // SAMPLE)]
    spread = float(np.sqrt(np.mean((sample - mean) ** 2)))
    return float(np.sqrt(np.mean(sample**2) * share)) / spread if spread else 0.0
