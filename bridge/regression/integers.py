"""Design columns as exact whole numbers, cut into limbs of 20 bits that ordinary matrix products keep exact.

A cell is a whole number times a power of ten (typed decimals) or of two (computed cells: logs, roots, reciprocals);
powers, products, hinges and levels of such cells are whole numbers again. Limbs are signed, at most 2^19 in size, kept
as doubles: a product of two is at most 2^38, so sums over 32,768 rows stay below 2^53 and nothing is rounded. The
idea of slicing so that floating-point products are exact: Ozaki, Ogita, Oishi & Rump (2012), "Error-free
transformations of matrix multiplication".
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from bridge.regression.design import factor_values
from bridge.regression.results import DesignColumn, Factor
from bridge.regression.spec import Observations
from bridge.regression.typed import decimals

Array = NDArray[np.float64]
Integers = NDArray[np.int64]

LIMB = 20
BASE = float(2**LIMB)
ROWS = 8192
LONG = 10_000  # rows; beyond, cells of more than 15 digits are taken as the doubles they are stored as
WIDEST = 240  # bits; columns that would need more are put on a grid of powers of two this far below their largest cell


@dataclass(frozen=True, slots=True)
class Whole:
    """A column of whole numbers with their common scale: value = digits * 10^powers * scale.

    `digits` (n,): doubles that are whole; or, with `powers` (n,) that are not negative, 64-bit integers.
    `bits`: no value reaches 2^bits.
    `rounded`: some cells are outcomes of a computation, good to a double's 53 bits.
    A hinge has its knot, in units of the scale, still to be taken off; `above` (n,) marks the rows beyond it.
    """

    digits: Array | Integers
    powers: Integers | None
    bits: int
    scale: Fraction
    rounded: bool
    knot: int = 0
    above: NDArray[np.bool_] | None = None


# --- whole numbers from doubles -----------------------------------------------------------------


def from_typed(x: Array) -> Whole:
    """The decimals typed, exactly (beyond `WIDEST` bits: on a grid of powers of two)."""
    typed = decimals(x, short_only=x.size > LONG)
    if typed is None:
        return from_computed(x)
    if isinstance(typed.exponent, int):
        digits = typed.digits.astype(np.float64)
        return Whole(digits, None, _bits(digits), _power(10, typed.exponent), not typed.short)
    common = int(typed.exponent[typed.digits != 0].min(initial=400))
    powers = np.where(typed.digits == 0, 0, typed.exponent - common)
    size = np.log2(np.maximum(np.abs(typed.digits), 1)) + powers * np.log2(10.0)
    bits = int(size.max(initial=0.0)) + 2
    if bits > WIDEST:
        return from_computed(x)
    return Whole(typed.digits, powers, bits, _power(10, common), not typed.short)


def from_computed(x: Array) -> Whole:
    """The doubles themselves, exactly (bits further than `WIDEST` below the largest cell are rounded away)."""
    exponent = np.frexp(x[x != 0])[1]
    top = int(exponent.max(initial=-1100))
    common = max(int(exponent.min(initial=1100)) - 53, top - WIDEST) if exponent.size else 0
    digits = np.rint(np.ldexp(x, -common))
    return Whole(digits, None, max(top - common, 0), _power(2, common), True)


def _bits(digits: Array) -> int:
    return int(np.abs(digits).max(initial=0.0)).bit_length()


def _power(base: int, exponent: int) -> Fraction:
    return Fraction(base**exponent) if exponent >= 0 else Fraction(1, base**-exponent)


# --- limbs --------------------------------------------------------------------------------------


def limb_count(bits: int) -> int:
    """Limbs that hold every whole number below 2^bits in size, either sign."""
    return max(1, -(-(bits + 1) // LIMB))


def limbs(whole: Whole, rows: slice) -> Array:
    """The rows asked for as limbs, lowest first, shape (limb_count(bits), k)."""
    count = limb_count(whole.bits)
    if whole.powers is None:
        found = _cut(whole.digits[rows].astype(np.float64, copy=False), count)
    else:
        table = _powers_of_ten(int(whole.powers.max(initial=0)))
        found = multiply(
            _cut_integers(whole.digits[rows].astype(np.int64, copy=False)), table[:, whole.powers[rows]], count
        )
    if whole.above is None:
        return found
    return carried(found - np.array(of_integer(whole.knot, count))[:, None], count) * whole.above[rows]


def multiply(a: Array, b: Array, count: int) -> Array:
    """The product of two columns of limbs, shapes (i, k) and (j, k), in `count` limbs (enough for the result)."""
    if len(a) > len(b):
        a, b = b, a
    product = np.zeros((max(count, len(a) + len(b) - 1), b.shape[1]))
    for i, limb in enumerate(a):
        product[i : i + len(b)] += limb * b
    return carried(product, count)


def carried(values: Array, count: int) -> Array:
    """Limbs of any size below 2^53 brought to at most 2^19 by carrying upwards, in place; the first `count`."""
    for i in range(len(values) - 1):
        carry = np.rint(values[i] * (1 / BASE))
        values[i] -= carry * BASE
        values[i + 1] += carry
    return values[:count]


def of_integer(value: int, count: int | None = None) -> list[float]:
    """One Python integer as limbs, lowest first (`count` of them, the last taking what is left)."""
    found: list[float] = []
    while (value or not found) if count is None else len(found) < count - 1:
        low = ((value + 2 ** (LIMB - 1)) % 2**LIMB) - 2 ** (LIMB - 1)
        found.append(float(low))
        value = (value - low) >> LIMB
    return found if count is None else [*found, float(value)]


def _cut(digits: Array, count: int) -> Array:
    """Whole doubles from the top down: what each limb leaves is exact."""
    found = np.empty((count, digits.size))
    rest = digits * 2.0 ** (-LIMB * (count - 1))
    for i in range(count - 1, 0, -1):
        np.rint(rest, out=found[i])
        rest = (rest - found[i]) * BASE
    found[0] = rest
    return found


def _cut_integers(digits: Integers) -> Array:
    """Integers below 2^58 in three limbs."""
    found = np.empty((3, digits.size))
    half, mask = 1 << (LIMB - 1), (1 << LIMB) - 1
    for i in range(2):
        low = ((digits + half) & mask) - half
        found[i] = low
        digits = (digits - low) >> LIMB
    found[2] = digits
    return found


@lru_cache(maxsize=64)
def _powers_of_ten(highest: int) -> Array:
    count = limb_count((10**highest).bit_length())
    return np.array([of_integer(10**k, count) for k in range(highest + 1)]).T


# --- the design's columns -----------------------------------------------------------------------


class WholeDesign:
    """The columns of a design, the response last, as whole numbers: formed a block of rows at a time.

    `scales` holds each column's unit (column = whole numbers * scale), `computed` its factors of computed
    cells, `starts` where each column's limbs begin among all limbs (`weighted_starts`: of the columns times the
    weights). `weight` is the weights' column, or None.
    """

    def __init__(
        self, columns: Sequence[DesignColumn], observations: Observations, response: Whole, weights: Array | None
    ) -> None:
        self.n = observations.n
        self._factors = [column.factors for column in columns]
        self._whole = {
            factor: _whole_factor(factor, observations) for factors in self._factors for factor in _parts(factors)
        }
        self.response = response
        self.weight = None if weights is None else from_typed(weights)
        bits = [sum(self._whole[f].bits for f in _parts(factors)) for factors in self._factors]
        self.bits = [max(b, 1) for b in bits] + [max(response.bits, 1)]
        self.scales = [self._scale(factors) for factors in self._factors] + [response.scale]
        self.computed = [frozenset(f for f in _parts(factors) if self._whole[f].rounded) for factors in self._factors]
        self.starts = _starts(self.bits)
        extra = self.weight.bits if self.weight else 0
        self.weighted_starts = _starts([b + extra for b in self.bits])

    def _scale(self, factors: tuple[Factor, ...]) -> Fraction:
        scale = Fraction(1)
        for factor in _parts(factors):
            scale *= self._whole[factor].scale
        return scale

    def block(self, rows: slice) -> Array:
        """All limbs of the rows asked for, column after column, the response last: shape (limbs, k)."""
        made: dict[tuple[Factor, ...], Array] = {(): np.ones((1, rows.stop - rows.start))}
        out = np.empty((int(self.starts[-1]), rows.stop - rows.start))
        for j, factors in enumerate(self._factors):
            out[self.starts[j] : self.starts[j + 1]] = self._formed(_parts(factors), rows, made)
        out[self.starts[-2] :] = limbs(self.response, rows)
        return out

    def _formed(self, parts: tuple[Factor, ...], rows: slice, made: dict[tuple[Factor, ...], Array]) -> Array:
        if parts not in made:
            last = limbs(self._whole[parts[-1]], rows)
            if len(parts) == 1:
                made[parts] = last
            else:
                bits = sum(self._whole[f].bits for f in parts)
                made[parts] = multiply(self._formed(parts[:-1], rows, made), last, limb_count(bits))
        return made[parts]

    def weighted(self, block: Array, rows: slice) -> Array:
        """The block's columns times the weights, as limbs; each column begins at `weighted_starts`."""
        if self.weight is None:
            return block
        weight = limbs(self.weight, rows)
        out = np.empty((int(self.weighted_starts[-1]), block.shape[1]))
        for j, bits in enumerate(self.bits):
            column = block[self.starts[j] : self.starts[j + 1]]
            product = multiply(column, weight, limb_count(bits + self.weight.bits))
            out[self.weighted_starts[j] : self.weighted_starts[j + 1]] = product
        return out


def _starts(bits: Sequence[int]) -> NDArray[np.intp]:
    return np.concatenate([[0], np.cumsum([limb_count(b) for b in bits])])


def _parts(factors: tuple[Factor, ...]) -> tuple[Factor, ...]:
    """Powers taken apart into repeated factors, so that x^k is formed from x^(k-1)."""
    parts: list[Factor] = []
    for factor in factors:
        if factor.kind == "power" and factor.exponent > 1:
            parts += [Factor(factor.column, "power")] * factor.exponent
        else:
            parts.append(factor)
    return tuple(parts)


def _whole_factor(factor: Factor, observations: Observations) -> Whole:
    if factor.kind == "level":
        return Whole(factor_values(factor, observations), None, 1, Fraction(1), False)
    if factor.kind == "power":
        return from_typed(observations.numbers(factor.column))
    if factor.kind == "hinge":
        return _hinge(observations.numbers(factor.column), factor.knot)
    return from_computed(factor_values(factor, observations))


def _hinge(x: Array, knot: float) -> Whole:
    """max(x - knot, 0) of the decimals typed: both over their common scale, subtracted limb by limb."""
    typed = from_typed(np.append(x, knot))
    power = 0 if typed.powers is None else int(typed.powers[-1])
    return replace(
        typed,
        digits=typed.digits[:-1],
        powers=None if typed.powers is None else typed.powers[:-1],
        bits=typed.bits + 1,
        knot=int(typed.digits[-1]) * 10**power,
        above=x > knot,
    )
