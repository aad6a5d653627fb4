"""The exact path: integer cross-products solved in decimal arithmetic of as many digits as the problem needs.

X'WX = L D L' is eliminated in the order of the columns (the response last), so that the sums of squares in order, the
aliased columns' dependence and R^-1 = L^-T D^-1/2 all come from the one elimination. Digits are raised until at least
`GUARD` of them remain after what the condition number takes; every figure is then rounded once, to a double.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from decimal import MAX_EMAX, MIN_EMIN, Context, Decimal, localcontext
from fractions import Fraction
from math import ceil, log10

import numpy as np
from numpy.typing import NDArray

from bridge.regression.errors import NothingToFit
from bridge.regression.rank import independent
from bridge.regression.results import Factor

Array = NDArray[np.float64]
Objects = NDArray[np.object_]

FIRST_DIGITS = 60
GUARD = 40
NOTHING = Decimal("1e-25")  # a scaled coefficient below this is a 0 that rounding has touched
ROUNDING = 4 * 2.0**-53
MINOR = 1e-6  # a column's share of a relation that does not count


@dataclass(frozen=True, slots=True)
class Problem:
    """Least squares as exact cross-products (m + 1, m + 1), the response last, in the columns' own units.

    Entry (i, j) x scale_i x scale_j x weight_scale is the true sum. `computed`: what each column holds of computed
    cells, by name. `intercept`: the first column is 1 in every row.
    """

    cross_products: Objects
    scales: Sequence[Fraction]
    weight_scale: Fraction
    computed: Sequence[frozenset[Factor]]
    intercept: bool


@dataclass(frozen=True, slots=True)
class Dependence:
    """Column `index` = sum of coefficient x column; not `exact`: to within the rounding of computed cells."""

    index: int
    on: tuple[tuple[int, float], ...]
    exact: bool


@dataclass(frozen=True, slots=True)
class Solution:
    """Arrays of Decimals in true units; p columns kept (indices `kept`).

    `variances` (p,): the diagonal of (X'WX)^-1. `column_ss` (p,): each column's sum of squares, about its mean with
    an intercept. `in_order` (p,): what each column adds to the sum explained.
    `total`: about the mean with an intercept, else about zero. `digits`: the precision it was found in.
    """

    kept: tuple[int, ...]
    dependences: tuple[Dependence, ...]
    coefficients: Objects
    r_inverse: Objects
    variances: Objects
    column_ss: Objects
    in_order: Objects
    rss: Decimal
    total: Decimal
    condition_number: float
    digits: int


@dataclass(frozen=True, slots=True)
class _Elimination:
    """L D L' of the columns kept: D, all rows of factors (those of L first), L^-T; what is left of the response."""

    pivots: Objects
    factors: Objects
    inverse: Objects
    rest: Decimal
    total: Decimal


def working(digits: int) -> Context:
    """A decimal context of so many digits without limits on exponents."""
    return Context(prec=digits, Emax=MAX_EMAX, Emin=MIN_EMIN)


def as_decimal(value: Fraction) -> Decimal:
    """A fraction in the digits of the current context."""
    return Decimal(value.numerator) / Decimal(value.denominator)


def solve(problem: Problem) -> Solution:
    """The least-squares solution on the independent columns.

    Columns that depend on earlier ones are left out: exactly, or, where computed cells are involved, to within those
    cells' rounding. Raises NothingToFit where none is left.
    """
    kept, fits_exactly = independent(problem.cross_products)
    if not kept:
        raise NothingToFit("every column is 0 in every row")
    close: list[Dependence] = []
    while True:
        done, scaled_inverse, condition, digits = _eliminated(problem, kept, fits_exactly)
        nearest = _within_rounding(problem, kept, scaled_inverse)
        if nearest is None:
            break
        with localcontext(working(digits)):
            close.append(_dependence(problem, kept[:nearest], -done.inverse[:nearest, nearest], kept[nearest], False))
        kept.remove(kept[nearest])
        fits_exactly = independent(_part(problem, kept))[1]
    with localcontext(working(digits)):
        return _in_units(problem, kept, done, close, fits_exactly, condition, digits)


def _part(problem: Problem, kept: list[int], others: Sequence[int] = ()) -> Objects:
    order = [*kept, *others, len(problem.cross_products) - 1]
    return np.asarray(problem.cross_products[np.ix_(order, order)])


def _left_out(problem: Problem, kept: list[int]) -> list[int]:
    return [j for j in range(len(problem.scales) - 1) if j not in kept]


# --- elimination --------------------------------------------------------------------------------


def _eliminated(problem: Problem, kept: list[int], fits_exactly: bool) -> tuple[_Elimination, Array, float, int]:
    """The elimination in enough digits, R^-1 of the columns scaled to length 1, its condition number, the digits."""
    matrix = _part(problem, kept, _left_out(problem, kept))
    digits = FIRST_DIGITS
    while True:
        with localcontext(working(digits)):
            done = _eliminate(matrix, len(kept))
            if not done.pivots.all() or (done.rest <= 0 and not fits_exactly):
                digits *= 2
                continue
            scaled_inverse, condition = _scaled(matrix, done)
            lost = 2 * log10(condition)
            if not fits_exactly:
                lost += float((Decimal(matrix[-1, -1]) / done.rest).log10())
            if digits - lost >= GUARD:
                return done, scaled_inverse, condition, digits
            digits = ceil(lost) + GUARD + 5


def _eliminate(matrix: Objects, p: int) -> _Elimination:
    """Of the leading p columns. A pivot that the digits cannot tell from 0 is left at 0, and all after it."""
    size = len(matrix)
    left = np.array([[+Decimal(value) for value in row] for row in matrix], dtype=object)
    factors = np.full((size, p), Decimal(0), dtype=object)
    pivots = np.full(p, Decimal(0), dtype=object)
    total = left[-1, -1]
    for k in range(p):
        if left[k, k] <= 0:
            break
        pivots[k] = left[k, k]
        factors[k, k] = Decimal(1)
        factors[k + 1 :, k] = left[k, k + 1 :] * (1 / pivots[k])
        for i in (*range(k + 1, p), size - 1):
            left[i, i:] -= factors[i, k] * left[k, i:]
        if k == 0:
            total = left[-1, -1]
    return _Elimination(pivots, factors, _inverse_transposed(factors, p), left[-1, -1], total)


def _inverse_transposed(factors: Objects, p: int) -> Objects:
    inverse = np.full((p, p), Decimal(0), dtype=object)
    np.fill_diagonal(inverse, Decimal(1))
    for k in range(p - 1):
        inverse[: k + 1, k + 1 :] -= np.multiply.outer(inverse[: k + 1, k], factors[k + 1 : p, k])
    return inverse


def _scaled(matrix: Objects, done: _Elimination) -> tuple[Array, float]:
    """R^-1 of the columns scaled to length 1, and their condition number."""
    p = len(done.pivots)
    lengths = np.array([Decimal(matrix[j, j]).sqrt() for j in range(p)], dtype=object)
    roots = np.array([pivot.sqrt() for pivot in done.pivots], dtype=object)
    scaled_inverse = (done.inverse * lengths[:, None] / roots).astype(np.float64)
    scaled = (done.factors[:p] * roots / lengths[:, None]).astype(np.float64)
    return scaled_inverse, float(np.linalg.norm(scaled, 2) * np.linalg.norm(scaled_inverse, 2))


# --- dependence ---------------------------------------------------------------------------------


def _within_rounding(problem: Problem, kept: list[int], scaled_inverse: Array) -> int | None:
    """The first column (position among those kept) no farther from those before it than computed cells are rounded.

    Column k is sum_j R_jk^-1 / R_kk^-1 x_j away from the others, at the distance 1 / R_kk^-1. Only relations are judged
    whose columns are rounded independently: a x b and b move together when b does.
    """
    noisy = [bool(problem.computed[j]) for j in kept]
    if not any(noisy):
        return None
    noise = ROUNDING * np.sqrt(np.sum(scaled_inverse[noisy] ** 2, axis=0))
    for k in np.flatnonzero(noise >= 1).tolist():
        shares = np.abs(scaled_inverse[:, k])
        sources = [problem.computed[kept[j]] for j in np.flatnonzero(shares > MINOR * shares.max())]
        if sum(map(len, sources)) == len(frozenset().union(*sources)):
            return int(k)
    return None


def _dependence(problem: Problem, on: list[int], factors: Objects, index: int, exact: bool) -> Dependence:
    """From factors in whole-number units to true ones, without those that are 0."""
    length = [Decimal(problem.cross_products[j, j]).sqrt() for j in range(len(problem.scales))]
    found = [
        (j, float(factor * as_decimal(problem.scales[index] / problem.scales[j])))
        for j, factor in zip(on, factors, strict=True)
        if abs(factor) * length[j] > (NOTHING if exact else Decimal("1e-9")) * length[index]
    ]
    return Dependence(index, tuple(found), exact)


# --- true units ---------------------------------------------------------------------------------


def _in_units(
    problem: Problem,
    kept: list[int],
    done: _Elimination,
    close: list[Dependence],
    fits_exactly: bool,
    condition: float,
    digits: int,
) -> Solution:
    p = len(kept)
    unit = as_decimal(problem.scales[-1])
    weight = as_decimal(problem.weight_scale)
    scales = np.array([as_decimal(problem.scales[j]) for j in kept], dtype=object)
    along = done.factors[-1]  # the response's factors: coefficients on the columns freed of those before them
    roots = np.array([(pivot * weight).sqrt() for pivot in done.pivots], dtype=object)
    r_inverse = done.inverse / roots / scales[:, None]
    coefficients = done.inverse.dot(along) * unit / scales
    rss = Decimal(0) if fits_exactly else done.rest * unit * unit * weight
    gone = [one.index for one in close]
    exact = [
        _dependence(problem, kept, done.inverse.dot(done.factors[p + row]), j, True)
        for row, j in enumerate(_left_out(problem, kept))
        if j not in gone
    ]
    spread = done.factors[:p] * done.factors[:p] * done.pivots
    total = done.total if problem.intercept else Decimal(problem.cross_products[-1, -1])
    return Solution(
        tuple(kept),
        tuple(sorted([*exact, *close], key=lambda one: one.index)),
        _without_noise(problem, kept, coefficients, unit / scales),
        r_inverse,
        np.asarray((r_inverse * r_inverse).sum(axis=1)),
        spread[:, int(problem.intercept) :].sum(axis=1) * scales * scales * weight,
        along * along * done.pivots * unit * unit * weight,
        rss,
        total * unit * unit * weight,
        condition,
        digits,
    )


def _without_noise(problem: Problem, kept: list[int], coefficients: Objects, units: Objects) -> Objects:
    """Coefficients whose share of the response is beyond all digits are 0."""
    lengths = np.array([Decimal(problem.cross_products[j, j]).sqrt() for j in kept], dtype=object)
    shares = [abs(share) for share in coefficients / units * lengths]
    least = max(shares) * NOTHING
    return np.array([b if s > least else Decimal(0) for b, s in zip(coefficients, shares, strict=True)], dtype=object)
