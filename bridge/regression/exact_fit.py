"""A Kernel by the exact path: whole numbers, exact cross-products, decimal solution, every figure rounded once."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal, localcontext
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from bridge.regression import exact, replicates, sums
from bridge.regression.crossproducts import combinations, cross_products
from bridge.regression.design import Layout
from bridge.regression.errors import TooFewRows
from bridge.regression.integers import WholeDesign, from_computed, from_typed
from bridge.regression.kernel import Kernel, Sums
from bridge.regression.results import Alias, DesignColumn
from bridge.regression.spec import ModelSpec, Observations, Shape
from bridge.regression.threads import over_blocks

SPARE_BITS = 70  # a double's 53 and room for sums
ROWS_WITH_BASIS = 10_000
TAME = 1e4  # below this condition number, doubles give leverages to 12 digits

Array = NDArray[np.float64]
Objects = NDArray[np.object_]


@dataclass(frozen=True, slots=True)
class _Case:
    """What the figures are made from."""

    whole: WholeDesign
    solution: exact.Solution
    columns: tuple[DesignColumn, ...]
    x: Array
    y: Array
    weights: Array | None


def fit(
    spec: ModelSpec, observations: Observations, layout: Layout, x: Array, y: Array, weights: Array | None
) -> tuple[Kernel, tuple[Alias, ...]]:
    """The fit on the independent columns, and the columns left out.

    `x` (n, m), `y` (n,), `weights` (n,) or None: the design's values in doubles. Raises TooFewRows, NothingToFit.
    """
    response = from_typed(y) if spec.response_shape is Shape.AS_IS else from_computed(y)
    whole = WholeDesign(layout.columns, observations, response, weights)
    weight_scale = whole.weight.scale if whole.weight else Fraction(1)
    solution = exact.solve(
        exact.Problem(cross_products(whole), whole.scales, weight_scale, whole.computed, spec.intercept)
    )
    kept = list(solution.kept)
    if observations.n <= len(kept):
        raise TooFewRows(observations.n, len(layout.columns))
    columns = tuple(layout.columns[j] for j in kept)
    case = _Case(whole, solution, columns, x if len(kept) == x.shape[1] else x[:, kept], y, weights)
    with localcontext(exact.working(solution.digits)):
        return _kernel(case, spec, observations), _aliases(solution, layout)


def _aliases(solution: exact.Solution, layout: Layout) -> tuple[Alias, ...]:
    labels = [column.label for column in layout.columns]
    return tuple(
        Alias(labels[one.index], tuple((labels[j], factor) for j, factor in one.on), one.exact)
        for one in solution.dependences
    )


def _kernel(case: _Case, spec: ModelSpec, observations: Observations) -> Kernel:
    solution = case.solution
    df = observations.n - len(case.columns)
    variance = solution.rss / df
    coefficients = solution.coefficients.astype(np.float64)
    residual = _residual(case)
    basis = _basis(case)
    r_inverse = solution.r_inverse.astype(np.float64)
    return Kernel(
        columns=case.columns,
        intercept=spec.intercept,
        x=case.x,
        y=case.y,
        weights=case.weights,
        coefficients=coefficients,
        coefficients_low=np.array(
            [float(b - Decimal(high)) for b, high in zip(solution.coefficients, coefficients.tolist(), strict=True)]
        ),
        r_inverse=r_inverse,
        standard_errors=np.array([float((variance * v).sqrt()) for v in solution.variances]),
        column_ss=solution.column_ss.astype(np.float64),
        rss=float(solution.rss),
        tss=float(solution.total),
        residual_sd=float(variance.sqrt()),
        df_residual=df,
        fitted=case.y - residual,
        residual=residual,
        leverage=_leverage(case, basis, r_inverse),
        basis=basis,
        sums=_sums(case, spec, observations),
        condition_number=solution.condition_number,
        digits=None,
    )


def _sums(case: _Case, spec: ModelSpec, observations: Observations) -> Sums:
    solution, whole = case.solution, case.whole
    groups = replicates.find(spec, observations)
    return Sums(
        residual=solution.rss,
        total=solution.total,
        last=sums.given_all_others(case.columns, solution.coefficients, solution.r_inverse),
        in_order=sums.one_after_another(case.columns, solution.in_order),
        pure_error=replicates.pure_error(groups, whole.response, whole.weight) if groups else None,
        pure_error_df=groups.df if groups else 0,
    )


# --- row by row ---------------------------------------------------------------------------------


def _residual(case: _Case) -> Array:
    """Response less fitted, (n,), to the last digit however nearly the terms cancel."""
    whole, solution = case.whole, case.solution
    if not solution.rss:
        return np.zeros(whole.n)
    unit = exact.as_decimal(whole.scales[-1])
    heaviest = Decimal(1 if case.weights is None else float(case.weights.max()))
    typical = (solution.rss / whole.n / heaviest).sqrt() / unit
    shift = max(0, max(whole.bits) + SPARE_BITS - _exponent(typical))
    factors = _factors(whole, solution.kept, [-b / unit for b in solution.coefficients], shift)
    factors[-1] = 1 << shift
    return _times(combinations(whole, factors[:, None], shift), whole.scales[-1])[:, 0]


def _basis(case: _Case) -> Array | None:
    """X R^-1, (n, p), formed exactly; None for many rows whose columns are not nearly dependent."""
    whole, solution = case.whole, case.solution
    if whole.n > ROWS_WITH_BASIS and solution.condition_number < TAME:
        return None
    shift = max(whole.bits) + SPARE_BITS + whole.n.bit_length() // 2
    columns = [_factors(whole, solution.kept, column, shift) for column in solution.r_inverse.T]
    return combinations(whole, np.array(columns, dtype=object).T, shift)


def _leverage(case: _Case, basis: Array | None, r_inverse: Array) -> Array:
    if basis is None:
        found: Array = np.concatenate(over_blocks(case.whole.n, lambda rows: _lengths(case.x[rows] @ r_inverse)))
    else:
        found = _lengths(basis)
    own: Array = np.minimum(found if case.weights is None else found * case.weights, 1.0)
    return own


def _lengths(rows: Array) -> Array:
    found: Array = np.einsum("ij,ij->i", rows, rows)
    return found


def _factors(whole: WholeDesign, kept: tuple[int, ...], values: list[Decimal] | Objects, shift: int) -> Objects:
    """What each column of whole numbers is multiplied by, times 2^shift: Python integers, shape (m + 1,)."""
    factors = np.full(len(whole.scales), 0, dtype=object)
    for j, value in zip(kept, values, strict=True):
        factors[j] = int(value * exact.as_decimal(whole.scales[j] * 2**shift))
    return factors


def _exponent(value: Decimal) -> int:
    return int((value.ln() / Decimal(2).ln()).to_integral_value())


def _times(values: Array, scale: Fraction) -> Array:
    """Rounded once where numerator and denominator are doubles."""
    return values * float(scale.numerator) / float(scale.denominator)
