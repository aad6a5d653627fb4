"""What a least-squares solve leaves behind, for everything that is computed from it.

n rows, p columns kept (aliased ones are not among them). The fitted scale is that of the response as shaped.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from bridge.regression.results import DesignColumn

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Kernel:
    """One solved (weighted) least-squares problem.

    `x` (n, p) and `y` (n,) are unweighted, `x_low` (n, p) what rounding `x` to doubles left over, or None.
    `weights` (n,) or None. `coefficients_low` (p,) is the low-order part of the coefficients, or None.
    `r_inverse` (p, p), upper triangular: (X'WX)^-1 = R^-1 R^-T. `rss`, `tss` are weighted sums of squares
    (`tss` about the weighted mean with an intercept, about zero without). `fitted`, `residual` (n,): unweighted.
    `leverage` (n,): hat values of the weighted design. `digits` None: exact path.
    """

    x: Array
    x_low: Array | None
    y: Array
    weights: Array | None
    coefficients: Array
    coefficients_low: Array | None
    r_inverse: Array
    rss: float
    tss: float
    fitted: Array
    residual: Array
    leverage: Array
    df_residual: int
    intercept: bool
    columns: tuple[DesignColumn, ...]
    condition_number: float
    digits: float | None
