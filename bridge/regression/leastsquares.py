"""One door to a least-squares fit: exact to 10,000 rows; beyond, by blocks, unless the digits would not do.

Exact means: of the decimals as typed. Beyond 10,000 rows a column with cells of more than 15 digits is taken as the
doubles it is stored as; logarithms, roots and reciprocals are taken as the doubles a spreadsheet has for them.
Everything else in the numeric core reads the Kernel that comes out.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from bridge.regression import blocked, design, exact_fit
from bridge.regression.errors import ConstantResponse, OutOfDomain, TooFewRows
from bridge.regression.kernel import Kernel
from bridge.regression.results import Alias, DesignColumn
from bridge.regression.spec import ModelSpec, Observations
from bridge.regression.threads import one_blas_thread

EXACT_ROWS = 10_000
LEAST_DIGITS = 13

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Solved:
    """The kernel of the columns kept, the columns left out, and the layout of all columns asked for."""

    kernel: Kernel
    aliased: tuple[Alias, ...]
    layout: design.Layout


def ingredients(spec: ModelSpec, observations: Observations) -> tuple[design.Layout, Array, Array | None]:
    """The layout, the response on the fitted scale and the weights, once all have been found fit to be used.

    Raises RegressionError for everything that can be known before fitting.
    """
    layout = design.layout(spec, observations)
    if observations.n < 2:
        raise TooFewRows(observations.n, len(layout.columns))
    y = design.response(spec, observations)
    weights = design.weights(spec, observations)
    if not y.any() or (spec.intercept and (y == y[0]).all()):
        raise ConstantResponse(f"{spec.response} is {float(y[0])!r} in every row", spec.response)
    design.check_domain(layout.columns, observations)
    return layout, y, weights


def solve(spec: ModelSpec, observations: Observations) -> Solved:
    """Fit by (weighted) least squares. Raises RegressionError."""
    layout, y, weights = ingredients(spec, observations)
    quick = None
    with one_blas_thread():
        if observations.n > EXACT_ROWS:
            quick = blocked.fit(spec, observations, layout.columns, y, weights)
            if quick is not None and quick.digits is not None and quick.digits >= LEAST_DIGITS:
                return Solved(quick, (), layout)
        with np.errstate(over="ignore"):  # looked for in the next line
            x = design.matrix(layout.columns, observations) if quick is None else quick.x
        _check_finite(x, layout.columns)
        return Solved(*exact_fit.fit(spec, observations, layout, x, y, weights), layout)


def _check_finite(x: Array, columns: tuple[DesignColumn, ...]) -> None:
    for j, column in enumerate(columns):
        if not (np.isfinite(x[:, j].max()) and np.isfinite(x[:, j].min())):
            index = int(np.argmin(np.isfinite(x[:, j])))
            raise OutOfDomain(f"{column.label} is too large a number", column.factors[0].column, index)
