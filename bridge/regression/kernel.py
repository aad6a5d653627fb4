"""The numbers of one least-squares fit, from which every other figure follows.

Both halves of the numeric core meet here: `leastsquares.py` makes a Kernel (exactly, or by blocks for many rows),
the covariances, tests and influence measures read it.

Shapes: n rows, p columns kept. W = diag(weights), the unit matrix where `weights` is None.
"""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal

import numpy as np
from numpy.typing import NDArray

from bridge.regression.results import DesignColumn

Array = NDArray[np.float64]
Number = Decimal | float  # Decimal from the exact path (28 digits and more), float from the blocked one


@dataclass(frozen=True, slots=True)
class SourceSum:
    """A source of variation (a term, or one column of a number term) with its degrees of freedom and its sum."""

    source: str
    df: int
    ss: Number


@dataclass(frozen=True, slots=True)
class Sums:
    """Weighted sums of squares: of the residuals, of the response (about its mean with an intercept, else about zero).

    `last`: each term given all others; `in_order`: each term given those before it, powers and bends one by one.
    `pure_error` and `pure_error_df` are None and 0 where no two rows agree in all predictors.
    """

    residual: Number
    total: Number
    last: tuple[SourceSum, ...]
    in_order: tuple[SourceSum, ...]
    pure_error: Number | None
    pure_error_df: int

    @property
    def regression(self) -> Number:
        """What the terms explain: total less residual."""
        return self.total - self.residual  # type: ignore[operator]  # both Decimal or both float


@dataclass(frozen=True, slots=True)
class Kernel:
    """One weighted least-squares fit of y (fitted scale) on the columns kept.

    `x` (n, p) and `y` (n,) unweighted, as the nearest doubles; `weights` (n,) or None.
    `coefficients` + `coefficients_low` (p,): the second is what the first lacks by being rounded to a double; it
    matters where the terms of a row nearly cancel.
    `r_inverse` (p, p) upper triangular: (X'WX)^-1 = R^-1 R^-T.
    `standard_errors` (p,): the ordinary ones, s * length of the rows of R^-1.
    `fitted`, `residual` (n,): unweighted, y - fitted. `leverage` (n,): of the weighted design, w x'(X'WX)^-1 x.
    `column_ss` (p,): weighted sum of squares of each column, about its mean with an intercept, else about zero.
    `basis` (n, p): X R^-1 row by row, unweighted, accurate however nearly the columns depend on each other (its
    weighted columns are orthonormal); None in the blocked path, where `basis_rows` forms it a block at a time.
    `condition_number`: of the weighted columns scaled to length 1, intercept included.
    `digits`: what the worst coefficient is good for; None: exact path, every figure is the double nearest to the truth.
    `robust_weights` (n,): Huber's, resistant fits only.
    """

    columns: tuple[DesignColumn, ...]
    intercept: bool
    x: Array
    y: Array
    weights: Array | None
    coefficients: Array
    coefficients_low: Array
    r_inverse: Array
    standard_errors: Array
    column_ss: Array
    rss: float
    tss: float
    residual_sd: float
    df_residual: int
    fitted: Array
    residual: Array
    leverage: Array
    basis: Array | None
    sums: Sums
    condition_number: float
    digits: float | None
    robust_weights: Array | None = None

    @property
    def n(self) -> int:
        """Rows."""
        return int(self.x.shape[0])

    @property
    def p(self) -> int:
        """Columns kept."""
        return int(self.x.shape[1])


def basis_rows(kernel: Kernel, rows: slice | NDArray[np.intp]) -> Array:
    """The rows of X R^-1 asked for, unweighted, shape (k, p). Use blocks of a few thousand rows for many rows."""
    if kernel.basis is not None:
        return kernel.basis[rows]
    return kernel.x[rows] @ kernel.r_inverse
